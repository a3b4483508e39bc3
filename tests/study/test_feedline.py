"""Tables [[feedline]]: what they resolve to, how they are named and swept, what is refused."""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import asdict, replace

import pytest

from simkit.feedline.strip_line import SOLVED_RATIOS
from simkit.study import Study
from simkit.study.feedline_text import feedline_of_text, feedline_text
from simkit.study.model import (
    CoaxialLine,
    DataSheetLine,
    ExtensionItem,
    LineItem,
    PartItem,
    StripLine,
    StubItem,
    TappedItem,
    TransformerItem,
)
from simkit.study.resolve_feedline import WIDTH_RATIOS

Loader = Callable[..., Study]
Complaints = Callable[..., list[str]]

FIRST_LINE = 35

PAIR = """
[[feedline]]
kind = "line"
name = "pair"
length = "gap * 7"
line = "two-strips"
width = "6 mm"
separation = "gap"
"""

ALL = (
    PAIR
    + """
[[feedline]]
kind = "stub"
length = "20 mm"
like = "pair"
end = "open"
connection = "series"
[[feedline]]
kind = "tapped-line"
from_antenna = "31 mm"
beyond = "12 mm"
line = "strip-over-plate"
width = "5 mm"
height = "2 mm"
permittivity = 2.7
loss_tangent = 0.01
overhang = "1 mm"
material = "brass"
thickness = "0.1 mm"
[[feedline]]
kind = "line"
length = "1 cm"
line = "coplanar-strips"
width = "4 mm"
gap = "1 mm"
other_width = "9 mm"
sheet = "1.6 mm"
permittivity = 4.3
conductivity = "1e7 S/m"
[[feedline]]
kind = "stub"
length = "9 mm"
line = "coaxial"
inner = "0.5 mm"
outer = "1.7 mm"
permittivity = 2.1
[[feedline]]
kind = "line"
length = "2 m"
line = "uniform"
impedance = "75 ohm"
velocity_factor = 0.66
attenuation = "20 dB/m/100"
at = "0.9 GHz"
[[feedline]]
kind = "inductor"
value = "3.3 nH"
q = 40
connection = "series"
[[feedline]]
kind = "capacitor"
value = "1.8 pF"
connection = "shunt"
[[feedline]]
kind = "resistor"
value = "10 ohm"
connection = "series"
[[feedline]]
kind = "transformer"
ratio = 4
loss = "0.3 dB"
nominal = "75 ohm"
[[feedline]]
kind = "port-extension"
length = "30 mm"
permittivity = 2.25
[[feedline]]
kind = "port-extension"
delay = "-40 ps"
"""
)

COPPER = {"thickness_m": 0.035e-3, "conductivity_s_per_m": 5.8e7}


def test_every_kind_resolves_to_plain_values_in_si(load: Loader) -> None:
    pair = StripLine("two-strips", 6e-3, 3e-3, **COPPER)  # the study's own metal
    items = load(added=ALL).nominal().feedline
    assert items[:5] == (
        LineItem("pair", pair, 3e-3 * 7),
        StubItem("stub", pair, 20e-3, "open", "series"),
        TappedItem(
            "tapped-line",
            StripLine("strip-over-plate", 5e-3, 2e-3, None, 0.0, 2.7, 0.01, 1e-3, 0.1e-3, 1.5e7),
            31e-3,
            12e-3,
            "short",
        ),
        LineItem(
            "line",
            StripLine("coplanar-strips", 4e-3, 1e-3, 9e-3, 1.6e-3, 4.3, 0.0, None, 0.035e-3, 1e7),
            10e-3,
        ),
        # a coaxial line is not cut from the study's sheet
        StubItem("stub2", CoaxialLine(0.5e-3, 1.7e-3, 2.1), 9e-3, "short", "shunt"),
    )
    cable = DataSheetLine(75.0, 0.66, pytest.approx(0.2, rel=1e-12), 0.9e9)  # type: ignore[arg-type]
    assert items[5] == LineItem("line2", cable, 2.0)
    assert items[6:10] == (
        PartItem("inductor", "inductor", 3.3e-9, "series", 40.0),
        PartItem("capacitor", "capacitor", 1.8e-12, "shunt", math.inf),
        PartItem("resistor", "resistor", 10.0, "series", math.inf),
        TransformerItem("transformer", 4.0, 0.3, 75.0),
    )
    # 30 mm filled with 2.25 are 45 mm of air
    assert items[10] == ExtensionItem("port-extension", pytest.approx(45e-3 / 299_792_458))  # type: ignore[arg-type]
    assert items[11] == ExtensionItem("port-extension2", -40e-12)
    assert len(items) == 12


def test_without_items_there_is_no_feed_line(load: Loader) -> None:
    assert load().nominal().feedline == ()


def test_a_resolved_feed_line_survives_as_text(load: Loader) -> None:
    items = load(added=ALL).nominal().feedline
    again = feedline_of_text(feedline_text(items))
    assert again == items
    assert [type(item) for item in again] == [type(item) for item in items]
    assert feedline_of_text(feedline_text(())) == ()
    with pytest.raises(ValueError, match="this is no feed line"):
        feedline_of_text('["pair"]')


def test_strips_of_a_study_without_metal_have_no_loss(load: Loader) -> None:
    metal = ('[metal]\nmaterial  = "copper"\nthickness = "0.035 mm"', "")
    (item,) = load(metal, added=PAIR).nominal().feedline
    assert item.line == StripLine("two-strips", 6e-3, 3e-3)  # type: ignore[union-attr]


def test_dimensions_are_swept_by_name_and_followed_by_items_that_are_alike(load: Loader) -> None:
    sweep = """
[sweep]
feedline.pair.width = ["5 mm", "7 mm"]
"feedline.tapped-line.beyond" = { from = "10 mm", to = "14 mm", count = 3 }
gap = ["2 mm", "3 mm"]
"""
    study = load(added=ALL + sweep)
    assert study.case_count == 12
    assert study.case(3).values == {
        "feedline.pair.width": 5e-3,
        "feedline.tapped-line.beyond": 12e-3,
        "gap": 3e-3,
    }
    items = study.case(10).antenna.feedline  # type: ignore[union-attr]
    assert items[0].line.width_m == 7e-3  # type: ignore[union-attr]
    assert items[1].line == items[0].line  # type: ignore[union-attr]
    assert items[2].beyond_m == 14e-3  # type: ignore[union-attr]
    assert items[0].line.distance_m == 2e-3  # type: ignore[union-attr]
    assert study.line_of("feedline.pair.width") == FIRST_LINE + 5
    assert study.line_of("feedline.stub2.inner") is not None
    assert study.display_unit("feedline.line2.attenuation") == "dB/m"


def test_a_case_whose_feed_line_breaks_a_limit_is_refused_alone(load: Loader) -> None:
    sweep = '[sweep]\nfeedline.pair.length = ["21 mm", "-1 mm"]\n'
    study = load(added=PAIR + sweep)
    assert study.case(0).antenna is not None
    assert study.case(1).antenna is None
    assert "feedline.pair.length" in study.case(1).refused
    assert "(here -1 mm): must be at least 0 mm; a line is 0 mm long or more" in (
        study.case(1).refused
    )


@pytest.mark.parametrize(
    ("old", "new", "line", "sentence"),
    [
        ('"line"', '"lien"', 1, 'do you mean "line"?'),
        ('kind = "line"\n', "", 0, "is missing; choose one of"),
        ('"two-strips"', '"two-strip"', 4, 'do you mean "two-strips"?'),
        ('line = "two-strips"\n', "", 0, 'is missing; say what the line is made of, one of "two-'),
        ('"6 mm"', '"6 mm"\nheigth = "3 mm"', 6, "is not a key of a feed-line item of kind"),
        ('"gap * 7"', '"-42 mm"', 3, "must be at least 0 mm; a line is 0 mm long or more"),
        ('"6 mm"', '"600 mm"', 5, "good for widths from 0.03 mm to 300 mm at this distance"),
        ('"6 mm"', '"0 mm"', 5, "must be above 0 mm"),
        ('separation = "gap"\n', "", 0, "is missing; write how far the strips are apart"),
        ('"pair"', '"the pair"', 2, "a name is a letter"),
        ('"6 mm"', '"6 ohm"', 5, "a length is needed, but this is a resistance"),
        (
            '"6 mm"',
            '"6 mm"\nmaterial = "brass"\nconductivity = "1e7 S/m"',
            7,
            "give either `material` or `conductivity`, not both",
        ),
        ('"6 mm"', '"6 mm"\nmaterial = "bras"', 6, 'do you mean "brass"?'),
        ('"6 mm"', '"6 mm"\nthickness = "7 mm"', 6, "metal thicker than the strip is wide (6 mm)"),
        ('"6 mm"', '"6 mm"\npermittivity = 0.5', 6, "must be at least 1"),
        ('"6 mm"', '"6 mm"\nloss_tangent = 0.01', 6, "which needs `permittivity` too"),
        ('"6 mm"', '"6 mm"\nlike = "pair"', 4, '= "two-strips": an item with `like` takes this'),
    ],
)
def test_what_a_line_may_not_be(
    complaints: Complaints, old: str, new: str, line: int, sentence: str
) -> None:
    assert old in PAIR
    found = complaints(added=PAIR.replace(old, new, 1))
    fitting = [text for text in found if sentence in text]
    assert len(fitting) == 1, found
    assert fitting[0].startswith(f"weir.toml:{FIRST_LINE + line}: feedline")


def item(text: str) -> str:
    return f"[[feedline]]\n{text}\n"


@pytest.mark.parametrize(
    ("text", "sentence"),
    [
        ('kind = "stub"\nlength = "2 mm"\nlike = "pai"', 'has this name; do you mean "pair"?'),
        ('kind = "stub"\nlength = "2 mm"\nlike = "stub"', "these items lead round in a circle"),
        ('kind = "line"\nname = "pair"\nlength = "1 mm"\nlike = "pair"', "names must differ"),
        ('kind = "capacitor"\nvalue = "3 pF"', 'is missing; write "shunt" (across the line) or'),
        ('kind = "inductor"\nvalue = "0 nH"\nconnection = "shunt"', "must be above 0 nH"),
        ('kind = "inductor"\nvalue = "1 nH"\nconnection = "shunt"\nq = -3', "must be above 0"),
        ('kind = "resistor"\nvalue = "1 ohm"\nconnection = "shnt"', 'do you mean "shunt"?'),
        ('kind = "resistor"\nvalue = "1 nH"\nconnection = "shunt"', "a resistance is needed"),
        ('kind = "transformer"', "the antenna's impedance over the connector's"),
        ('kind = "transformer"\nratio = -1', "must be above 0"),
        ('kind = "port-extension"', "delay and length are both missing"),
        ('kind = "port-extension"\ndelay = "1 ns"\nlength = "1 mm"', "are both given"),
        ('kind = "port-extension"\ndelay = "1 ms"', "that is 200 m of cable"),
        ('kind = "line"\nlength = "1 m"\nline = "uniform"\nimpedance = "0 ohm"', "above 0 ohm"),
        (
            'kind = "line"\nlength = "1 m"\nline = "uniform"\nimpedance = "50 ohm"\n'
            "velocity_factor = 66",
            "must be at most 1; it is the speed on the line over that of light",
        ),
        (
            'kind = "line"\nlength = "1 m"\nline = "uniform"\nimpedance = "50 ohm"\n'
            'attenuation = "0.3 dB/m"',
            "needs the frequency it holds at",
        ),
        (
            'kind = "line"\nlength = "1 m"\nline = "coaxial"\ninner = "2 mm"\nouter = "1 mm"',
            "does not fit in an outer one of 1 mm",
        ),
        (
            'kind = "line"\nlength = "1 m"\nline = "coplanar-strips"\nwidth = "2 mm"\n'
            'gap = "1 mm"\npermittivity = 3',
            "needs how thick the sheet under the strips is",
        ),
    ],
)
def test_what_other_items_may_not_be(complaints: Complaints, text: str, sentence: str) -> None:
    found = complaints(added=PAIR + item(text))
    assert sum(sentence in line for line in found) == 1, found
    assert all(int(line.split(":")[1]) > FIRST_LINE + 6 for line in found)


def test_the_metal_of_a_line_needs_a_thickness(complaints: Complaints) -> None:
    metal = ('[metal]\nmaterial  = "copper"\nthickness = "0.035 mm"', "")
    lossy = PAIR.replace('"6 mm"', '"6 mm"\nmaterial = "brass"')
    (found,) = complaints(metal, added=lossy)
    assert found.startswith("weir.toml:33: feedline.pair.thickness: the loss of a line's metal")


def test_all_problems_of_all_items_come_at_once(complaints: Complaints) -> None:
    added = PAIR.replace('"gap * 7"', '"-1 mm"') + item('kind = "stub"\nlength = "-2 mm"')
    found = complaints(added=added + item('kind = "stump"'))
    assert [line.split(": ")[1].partition(" ")[0] for line in found] == [
        "feedline.pair.length",
        "feedline.stub.line",
        "feedline.stub.length",
        "feedline.item.kind",
    ]


def test_too_many_items_are_refused(complaints: Complaints) -> None:
    found = complaints(added=item('kind = "transformer"\nratio = 2') * 51)
    assert found[0].endswith("is one of 51 items; at most 50 are allowed")


@pytest.mark.parametrize(
    ("key", "sentence"),
    [
        ("feedline.stub.width", "cannot be swept: this item takes it from feedline.pair.width"),
        ("feedline.pair.other_width", "cannot be swept: the study does not give it"),
        ("feedline.pair.widht", "do you mean `feedline.pair.width`?"),
    ],
)
def test_what_cannot_be_swept(complaints: Complaints, key: str, sentence: str) -> None:
    stub = item('kind = "stub"\nlength = "2 mm"\nlike = "pair"')
    (found,) = complaints(added=f'{PAIR}{stub}[sweep]\n{key} = ["1 mm", "2 mm"]\n')
    assert sentence in found


def test_width_limits_are_those_the_lines_were_checked_within() -> None:
    assert WIDTH_RATIOS == SOLVED_RATIOS


def test_equal_feed_lines_are_equal_values(load: Loader) -> None:
    one, two = load(added=ALL).nominal(), load(added=ALL).nominal()
    assert one == two
    assert hash(one) == hash(two)
    assert replace(one, feedline=()) == load().nominal()
    assert asdict(one)["feedline"][0]["line"]["width_m"] == 6e-3
