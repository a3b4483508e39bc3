"""When `simkit check` speaks of balance."""

from __future__ import annotations

from dataclasses import replace

import pytest

from simkit.cli.balance_text import balance_parts, is_symmetric
from simkit.study.model import (
    Antenna,
    Cable,
    CoaxialLine,
    CutFeed,
    DataSheetLine,
    EndFeed,
    FrequencyBand,
    Ground,
    LineItem,
    Metal,
    Strip,
    StripLine,
    TransformerItem,
)

EAST = Strip("east", ((0.001, 0.0), (0.061, 0.0), (0.061, 0.02)), 0.004)
WEST = Strip("west", ((-0.001, 0.0), (-0.061, 0.0), (-0.061, 0.02)), 0.004)
COAX = LineItem("coax", CoaxialLine(0.0009, 0.003, 2.1), 0.4)
SHEET = LineItem("cable", DataSheetLine(50.0, 0.7), 0.4)
PAIR = LineItem("pair", StripLine("two-strips", 0.006, 0.003), 0.04)
PLATE = LineItem("plate", StripLine("strip-over-plate", 0.006, 0.003), 0.04)
BALUN = TransformerItem("balun", 1.0, 0.2, 50.0)
ANTENNA = Antenna(
    strips=(EAST, WEST),
    metal=Metal("perfect", None, 0.0),
    feed=EndFeed("west", "start", "east", "start"),
    reference_ohm=50.0,
    frequency=FrequencyBand(3e8, 3e9, 271),
    feedline=(COAX,),
)
TURNED = replace(WEST, path_m=((-0.001, 0.0), (-0.061, 0.0), (-0.061, -0.02)))
SHORT = replace(WEST, path_m=((-0.001, 0.0), (-0.051, 0.0)))
CABLE = Cable("west", "start", ((-0.001, 0.0, 0.0), (-0.001, 0.0, 0.1)), 0.003)


@pytest.mark.parametrize(
    ("line", "word"),
    [(COAX, "The coaxial line has"), (SHEET, "its data sheet, most"), (PLATE, "The strip over a")],
)
def test_a_symmetric_antenna_on_an_unbalanced_line_gets_advice(line, word) -> None:
    (part,) = balance_parts(replace(ANTENNA, feedline=(PAIR, line)))
    assert part.startswith("Balance")
    assert word in part
    assert "[cable]" in part


@pytest.mark.parametrize(
    "changes",
    [
        {"feedline": ()},
        {"feedline": (PAIR,)},
        {"feedline": (BALUN, COAX)},
        {"cable": CABLE},
        {"strips": (EAST, SHORT)},
    ],
)
def test_others_do_not(changes) -> None:
    assert balance_parts(replace(ANTENNA, **changes)) == []


def test_symmetric_is_what_is_its_own_image_mirrored_or_turned() -> None:
    assert is_symmetric(ANTENNA)
    assert is_symmetric(replace(ANTENNA, strips=(EAST, TURNED)))
    assert not is_symmetric(replace(ANTENNA, strips=(EAST, SHORT)))
    cut = replace(ANTENNA, strips=(Strip("s", ((0.0, 0.0), (0.09, 0.12)), 0.004),))
    assert is_symmetric(replace(cut, feed=CutFeed("s", 0.075, 0.001)))
    assert not is_symmetric(replace(cut, feed=CutFeed("s", 0.06, 0.001)))


def test_a_feed_on_the_plane_has_its_own_earthy_side() -> None:
    on_plane = replace(ANTENNA, ground=Ground("plane"))
    assert not is_symmetric(on_plane)
