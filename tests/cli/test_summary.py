"""What `simkit check` says, from antennas made here: bent strips of unequal length."""

from __future__ import annotations

from dataclasses import replace
from types import SimpleNamespace

import numpy as np
import pytest

from simkit.cli import antenna_text, summary
from simkit.geometry import build_wires, plan_mesh
from simkit.study.model import Antenna, CutFeed, EndFeed, FrequencyBand, Metal, Strip

EAST = Strip("east", ((0.001, 0.0), (0.061, 0.0), (0.061, 0.04)), 0.003)
WEST = Strip("west", ((-0.001, 0.0), (-0.071, 0.0)), 0.003)
ANTENNA = Antenna(
    strips=(EAST, WEST),
    metal=Metal("brass", 1.5e7, 0.00015),
    feed=EndFeed("west", "start", "east", "start"),
    reference_ohm=50.0,
    frequency=FrequencyBand(3e8, 3e9, 271),
)


def test_strips_table_gives_width_developed_length_and_path() -> None:
    line = antenna_text.strips_table(ANTENNA.strips).splitlines()[2]
    assert line.split() == [
        "east",
        "3",
        "mm",
        "100",
        "mm",
        "(1,",
        "0)",
        "(61,",
        "0)",
        "(61,",
        "40)",
    ]


def test_long_paths_are_shortened_in_the_middle() -> None:
    curve = Strip("bow", tuple((x, x**2) for x in np.linspace(0, 0.05, 41)), 0.003)
    text = antenna_text.strips_table([curve])
    assert "... 37 more ... (50, 2.5)" in text


def test_end_feed_names_both_ends_and_their_distance() -> None:
    text = antenna_text.feed_text(ANTENNA)
    assert text == "between west.start and east.start, 2 mm apart; reflections refer to 50 ohm"


def test_cut_feed_names_place_and_gap() -> None:
    text = antenna_text.feed_text(replace(ANTENNA, feed=CutFeed("west", 0.012, 0.0005)))
    assert text.startswith("a cut 0.5 mm wide across west, 12 mm along its centre line")


@pytest.mark.parametrize(
    ("metal", "text"),
    [
        (Metal("brass", 1.5e7, 0.00015), "brass, 0.15 mm, 1.5e+07 S/m"),
        (Metal("perfect conductor", None, 0.0), "perfect conductor"),
        (Metal("perfect conductor", None, 0.0002), "perfect conductor, 0.2 mm"),
    ],
    ids=["brass", "foil", "sheet"],
)
def test_metal(metal: Metal, text: str) -> None:
    assert antenna_text.metal_text(replace(ANTENNA, metal=metal)) == text


def test_wires_are_counted_with_radius_unknowns_and_expected_error() -> None:
    plan = plan_mesh([ANTENNA])
    wires = build_wires(ANTENNA, plan)
    text = summary.wires_text(wires, plan)
    assert f"{wires.segments} segments (unknowns)" in text
    assert f"radius {wires.radius_m * 1e3:.3g} mm" in text
    assert plan.why in text
    assert "one wire on the centre line of each strip" in text
    assert f"{wires.relative_error * 100:.2g} % of mode frequencies" in text


def test_rails_are_counted() -> None:
    grid = replace(ANTENNA, model="grid")
    plan = plan_mesh([grid])
    assert "3 rails along each strip" in summary.wires_text(build_wires(grid, plan), plan)


def test_doubts_are_shown() -> None:
    plan = plan_mesh([ANTENNA])
    wires = replace(build_wires(ANTENNA, plan), doubts=("legs of 2 widths",))
    assert summary.wires_text(wires, plan).splitlines()[-1] == "Doubtful      legs of 2 widths"


def test_problems_are_counted_and_cut_short() -> None:
    text = summary.problems_text([f"case {n}: crosses itself" for n in range(13)], 20, 20)
    assert text.startswith("Cases         13 of 20 cannot be built")
    assert "case 9:" in text
    assert "case 10:" not in text
    assert text.endswith("... and 3 more")
    assert summary.problems_text([], 7, 7) == "Cases         7: all can be built"
    some = summary.problems_text([], 1500, 3000)
    assert some == "Cases         1500 looked at, out of 3000: all can be built"


@pytest.mark.parametrize(("cases", "looked_at"), [(1, 1), (2000, 2000), (2001, 1001), (9000, 1800)])
def test_a_large_sweep_is_looked_at_in_steps(cases: int, looked_at: int) -> None:
    study = SimpleNamespace(case_count=cases)
    places = summary.looked_at(study)  # type: ignore[arg-type]
    assert len(places) == looked_at
    assert places[0] == 0
