"""Reasons that name the line of the study they are about."""

from __future__ import annotations

from dataclasses import replace
from pathlib import Path

import pytest

from simkit.cli.study_lines import lines_named, with_line
from simkit.errors import GeometryError
from simkit.study import Study, load_study
from simkit.study.model import Placement

TEXT = """\
title = "Two arms"

[[strip]]
name = "east"
path = [["1 mm", "0 mm"], ["61 mm", "0 mm"]]
width = "3 mm"

[[strip]]
name = "west"
path = [["-1 mm", "0 mm"], ["-81 mm", "0 mm"]]
width = "3 mm"

[feed]
from = "west.start"
to = "east.start"

[frequency]
start = "500 MHz"
stop = "2 GHz"
points = 31
"""
EAST, WEST, FEED = 3, 8, 13

# x to y, y to z, z to x; then 5 mm along x and 300 mm up.
PLACEMENT = Placement(((0.0, 0.0, 1.0), (1.0, 0.0, 0.0), (0.0, 1.0, 0.0)), (0.005, 0.0, 0.3))


@pytest.fixture
def study(tmp_path: Path) -> Study:
    path = tmp_path / "arms.toml"
    path.write_text(TEXT, "utf-8")
    return load_study(path)


@pytest.mark.parametrize(
    ("reason", "line"),
    [
        ("strip 'west' crosses itself", WEST),
        ("the end of strip 'east' at (61, 0) mm stops short of strip 'west'", EAST),
        ("strips 'west' and 'east' overlap near (0, 0) mm", WEST),
        ("feed: the two strip ends meet at (70, 0) mm", FEED),
        ("the corner at (-78, 2) mm turns back", WEST),
        ("the corner at (5e+01, -2.5) mm turns back", EAST),
        ("wires come within 0.1 mm of each other at (-70, 0.5, 0) mm", WEST),
    ],
)
def test_a_reason_ends_with_the_line_it_is_about(study: Study, reason: str, line: int) -> None:
    assert with_line(reason, study, study.nominal()) == f"{reason} (arms.toml:{line})"


def test_places_in_space_are_led_back_to_the_drawing(study: Study) -> None:
    antenna = replace(study.nominal(), placement=PLACEMENT)
    # (-70, 0) in the drawing: x of the drawing points along y.
    reason = "metal at (5, -70, 300) mm is under ground"
    assert with_line(reason, study, antenna).endswith(f"(arms.toml:{WEST})")
    reason = "metal at (5, 50, 300) mm is under ground"
    assert with_line(reason, study, antenna).endswith(f"(arms.toml:{EAST})")


@pytest.mark.parametrize(
    "reason",
    ["", "the frequency sweep did not settle", "arms.toml:5: strip.east.path: is too long"],
)
def test_other_reasons_stay_as_they_are(study: Study, reason: str) -> None:
    assert with_line(reason, study, study.nominal()) == reason


def test_without_study_or_antenna_nothing_is_guessed(study: Study) -> None:
    assert with_line("strip 'west' crosses itself", None) == "strip 'west' crosses itself"
    assert with_line("the corner at (1, 2) mm", study) == "the corner at (1, 2) mm"


def test_errors_that_leave_get_their_line(study: Study) -> None:
    words = rf"strip 'east' is a patch \(arms\.toml:{EAST}\)"
    with pytest.raises(GeometryError, match=words), lines_named(study):
        raise GeometryError("strip 'east' is a patch")


def test_reasons_about_the_cable_lead_to_its_table(tmp_path) -> None:
    text = (
        'title = "t"\n[[strip]]\nname = "a"\npath = [["0 mm", "0 mm"], ["90 mm", "0 mm"]]\n'
        'width = "4 mm"\n[feed]\nstrip = "a"\nat = "30 mm"\n[frequency]\nstart = "1 GHz"\n'
        'stop = "2 GHz"\npoints = 11\n[cable]\nat = "a.start"\nlength = "70 mm"\n'
        'diameter = "2 mm"\n'
    )
    (tmp_path / "lead.toml").write_text(text)
    study = load_study(tmp_path / "lead.toml")
    for reason in (
        "cable: it runs into strip 'a' at (1, 2, 0) mm",
        "the study has a [cable], which",
    ):
        assert with_line(reason, study) == f"{reason} (lead.toml:13)"
    assert with_line("at 300 MHz (a cable mode) the balance is off", study).endswith("is off")
