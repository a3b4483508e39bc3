"""Textbook matches against networks_pozar.toml."""

from __future__ import annotations

import pytest

from simkit.feedline.parts import reactive_part
from simkit.feedline.solutions import l_solutions, quarter_solutions, stub_solutions

HALF_DIGIT = 0.00065
"""Half of the last digit printed, and a little: the book takes one distance off a chart."""


@pytest.mark.published("networks_pozar", "stub")
def test_single_stub(row):
    found = stub_solutions(
        complex(*row["load_ohm"]),
        row["line_ohm"],
        connection=row["connection"],
        ends=(row["end"],),
    )
    assert [s.distance for s in found] == pytest.approx(row["distance"], abs=HALF_DIGIT)
    assert [s.length for s in found] == pytest.approx(row["length"], abs=HALF_DIGIT)


@pytest.mark.published("networks_pozar", "l_section")
def test_l_section(row):
    r0, f = row["reference_ohm"], row["frequency_hz"]
    found = l_solutions(complex(*row["load_ohm"]), r0)
    assert [s.first for s in found] == ["shunt", "shunt"]
    assert [s.susceptance_s * r0 for s in found] == pytest.approx(row["b"], abs=0.005)
    assert [s.reactance_ohm / r0 for s in found] == pytest.approx(row["x"], abs=0.005)
    parts = [
        reactive_part(value, f, connection)
        for s in found
        for value, connection in ((s.susceptance_s, "shunt"), (s.reactance_ohm, "series"))
    ]
    values = {(n, kind): value for n, (kind, value) in enumerate(parts)}
    # The book computes the parts from b and x rounded to two places: 0.5 %.
    assert values[0, "C"] * 1e12 == pytest.approx(row["capacitor_pf"][0], rel=0.005)
    assert values[1, "L"] * 1e9 == pytest.approx(row["inductor_nh"][0], rel=0.005)
    assert values[2, "L"] * 1e9 == pytest.approx(row["inductor_nh"][1], rel=0.005)
    assert values[3, "C"] * 1e12 == pytest.approx(row["capacitor_pf"][1], rel=0.005)


@pytest.mark.published("networks_pozar", "quarter")
def test_quarter_wave(row):
    found = quarter_solutions(row["load_ohm"], row["reference_ohm"], row["reference_ohm"])
    assert found[0].distance == 0
    assert found[0].impedance_ohm == pytest.approx(row["impedance_ohm"], abs=0.005)
