"""What `simkit check` says of strips, joints, sheet, carrier and surroundings."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from simkit.cli import antenna_text
from simkit.cli.output import length_text
from simkit.crosssection import mixed_permittivity
from simkit.geometry import chains_of
from simkit.geometry.dressing import dressing_of
from simkit.study.model import (
    Antenna,
    Cable,
    Carrier,
    CutFeed,
    EndFeed,
    FrequencyBand,
    Ground,
    Metal,
    Placement,
    Strip,
)

EAST = Strip("east", ((0.001, 0.0), (0.061, 0.0)), 0.004)
WEST = Strip("west", ((-0.001, 0.0), (-0.071, 0.0)), 0.004)
TAIL = Strip("tail", ((0.061, 0.0), (0.061, -0.02)), 0.004)
STUB = Strip("stub", ((0.03, 0.025), (0.03, 0.0)), 0.003)
ANTENNA = Antenna(
    strips=(EAST, WEST, TAIL, STUB),
    metal=Metal("brass", 1.5e7, 0.00015),
    feed=EndFeed("west", "start", "east", "start"),
    reference_ohm=50.0,
    frequency=FrequencyBand(3e8, 3e9, 271),
)
CARRIER = Carrier(2.85, 0.01, 0.0024, infill=0.4, overhang_m=0.002, material="ASA")


def test_joints_say_which_end_meets_or_ends_on_what() -> None:
    assert antenna_text.joints_lines(ANTENNA) == [
        "east.end and tail.start meet at (61, 0) mm",
        "stub.end ends on east at (30, 0) mm",
    ]


def test_fed_ends_and_free_ends_are_no_joints() -> None:
    assert antenna_text.joints_lines(replace(ANTENNA, strips=(EAST, WEST))) == []


def test_three_ends_at_a_place_are_one_joint() -> None:
    more = Strip("more", ((0.061, 0.02), (0.061, 0.0)), 0.004)
    lines = antenna_text.joints_lines(replace(ANTENNA, strips=(EAST, WEST, TAIL, more)))
    assert lines == ["east.end, tail.start and more.end meet at (61, 0) mm"]


def test_a_branch_on_a_loop_of_several_strips_names_the_right_one() -> None:
    corners = [(0.0, 0.0), (0.05, 0.0), (0.05, 0.03), (0.0, 0.03)]
    sides = [
        Strip(name, (corners[k], corners[(k + 1) % 4]), 0.003)
        for k, name in enumerate(["south", "east", "north", "west"])
    ]
    stub = Strip("stub", ((0.02, 0.03), (0.02, 0.06)), 0.003)
    antenna = replace(ANTENNA, strips=(*sides, stub), feed=CutFeed("south", 0.02, 0.0003))
    lines = antenna_text.joints_lines(antenna)
    assert lines[-1] == "stub.start ends on north at (20, 30) mm"
    assert len(lines) == 5


@pytest.mark.parametrize(
    ("widths_mm", "text"),
    [
        ((), "4 mm"),
        ((4.0, 9.0), "4, 9 mm"),
        ((6.0, 9.0, 4.0), "6, 9, 4 mm"),
        ((6.0, 2.0, 11.5, 6.0), "6, 2, 11.5, 6 mm"),
    ],
    ids=["one", "taper", "bulge", "waist and bulge"],
)
def test_widths(widths_mm: tuple[float, ...], text: str) -> None:
    points = tuple((0.01 * k, 0.0) for k in range(max(len(widths_mm), 2)))
    widths = tuple(w * 1e-3 for w in widths_mm)
    assert antenna_text.width_text(Strip("a", points, max(widths, default=0.004), widths)) == text


def test_sheet_gives_area_length_and_box() -> None:
    text = antenna_text.sheet_text((EAST, WEST))
    assert text == (
        "5.2 cm2 of metal, 130 mm of strip; it fits 132 mm by 4 mm, from (-71, -2) to (61, 2) mm"
    )


def test_foil_thickness_keeps_its_digits() -> None:
    foil = replace(ANTENNA, metal=Metal("copper", 5.8e7, 35e-6))
    assert antenna_text.metal_text(foil) == "copper, 0.035 mm, 5.8e+07 S/m"


def test_carrier_gives_plastic_mixture_shape_and_effect() -> None:
    antenna = replace(ANTENNA, strips=(EAST, WEST), carrier=CARRIER)
    lines = antenna_text.carrier_text(antenna).splitlines()
    assert lines[0] == "ASA: permittivity 2.85, loss tangent 0.01 of the solid plastic"
    mixed = mixed_permittivity(CARRIER.permittivity, 0.4).real
    assert lines[1] == (
        f"infill 0.4: permittivity {mixed:.4g} (Maxwell Garnett, the plastic as host)"
    )
    assert "2.4 mm thick, under the strips; beyond the edges 2 mm" in lines[2]
    kappa = dressing_of(antenna).kappa(0.004)
    assert f"width 4 mm: kappa {kappa.real:.4f} (loss {-kappa.imag:.3g})" in lines[3]
    assert f"static radius {np.exp(kappa.real):.3f} times" in lines[3]
    tip = chains_of(antenna)[0].start_tip_m
    assert tip > 0
    assert f"open ends 4 mm wide: {length_text(tip)} taken off" in lines[4]


@pytest.mark.parametrize(
    ("changes", "words"),
    [
        ({"side": "both"}, "2.4 mm thick on either side of the strips"),
        ({"side": "embedded", "depth_m": 0.0007}, "the strips 0.7 mm under its top"),
        ({"offset_m": 0.001}, "strips 1 mm off its middle"),
        ({"skin_m": 0.0003}, "between skins of 0.3 mm"),
        ({"mixing": "bruggeman"}, "(Bruggeman)"),
    ],
)
def test_carrier_words(changes: dict[str, object], words: str) -> None:
    carrier = replace(CARRIER, **changes)  # type: ignore[arg-type]
    assert words in "\n".join(antenna_text.carrier_lines(carrier))


def test_placement_and_ground() -> None:
    upright = Placement(((1.0, 0.0, 0.0), (0.0, 0.0, -1.0), (0.0, 1.0, 0.0)), (0.0, 0.0, 0.3))
    earth = Ground("earth", 13.0, 0.005)
    text = "\n".join(antenna_text.placed_parts(replace(ANTENNA, placement=upright, ground=earth)))
    assert "y along (0, 0, 1), its normal along (0, -1, 0)" in text
    assert "shifted by (0, 0, 300) mm" in text
    assert "from z = 280 mm to 325 mm" in text
    assert "earth below z = 0: permittivity 13, 0.005 S/m" in text
    plane = antenna_text.placed_parts(replace(ANTENNA, ground=Ground("plane")))
    assert plane == ["Ground        perfect plane at z = 0"]
    assert antenna_text.placed_parts(ANTENNA) == []


def test_the_cable_says_where_it_runs_and_how_thick_it_is_taken() -> None:
    points = ((-0.001, 0.0, 0.0), (-0.001, 0.0, 0.04), (-0.001, 0.05, 0.04))
    thin = Cable("west", "start", points, 0.0015)
    antenna = replace(ANTENNA, strips=(EAST, WEST), metal=Metal("perfect", None, 0.0), cable=thin)
    first, second = antenna_text.cable_text(antenna, thin).splitlines()
    assert first == (
        "90 mm of braid 1.5 mm thick, joined to west.start, through (-1, 0, 0) (-1, 0, 40) "
        "(-1, 50, 40) mm (x, y and along the normal)"
    )
    assert "the model's wires are 2 mm thick" in second
    # ln(2/1.5) over ln(4 * 90/1.5) - 1.
    assert second.endswith("is up to 6% too high")
    cut = replace(antenna, feed=CutFeed("west", 0.01, 0.001))
    assert "joined to the side of the cut towards west.start" in antenna_text.cable_text(cut, thin)
    assert "Cable  " in antenna_text.antenna_text(antenna)
    assert "Cable  " not in antenna_text.antenna_text(ANTENNA)
