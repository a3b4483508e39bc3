"""Impedances of lines against lines_strips.toml: the plane solution, and the closed forms."""

from __future__ import annotations

import pytest

from simkit.feedline.closed_forms import (
    coplanar_strips_air_ohm,
    strip_over_plate_ohm,
    two_strips_narrow_ohm,
    two_strips_wheeler_ohm,
    two_strips_wide_ohm,
)
from simkit.feedline.lines import CoplanarStrips, StripOverPlate, TwoStrips

S = 1.7e-3


@pytest.mark.published("lines_strips", "facing")
def test_the_table_of_wheeler_is_his_formulas(row):
    formula = two_strips_narrow_ohm if row["ratio"] <= 0.5 else two_strips_wide_ohm
    # The last digit given.
    assert float(formula(row["ratio"])) == pytest.approx(row["wheeler_ohm"], abs=0.006)
    assert float(two_strips_wheeler_ohm(row["ratio"])) == pytest.approx(
        row["wheeler_ohm"], abs=0.006
    )


@pytest.mark.published("lines_strips", "facing")
def test_two_strips_in_air(row):
    line = TwoStrips(row["ratio"] * S, S)
    # The last digit given, and 5e-5 of the solution's own.
    assert line.impedance_ohm == pytest.approx(row["impedance_ohm"], rel=7e-5)
    # What is promised of lines against published formulas.
    assert line.impedance_ohm == pytest.approx(row["wheeler_ohm"], rel=0.01)


@pytest.mark.published("lines_strips", "sheet")
def test_two_strips_on_a_sheet(row):
    line = TwoStrips(row["ratio"] * S, S, permittivity=row["permittivity"])
    # The formula is stated to 0.2 % in permittivity, 0.1 % in impedance.
    assert line.impedance_ohm == pytest.approx(row["impedance_ohm"], rel=1.5e-3)
    assert line.static.permittivity.real == pytest.approx(row["effective"], rel=2e-3)


@pytest.mark.published("lines_strips", "sheet")
def test_the_table_of_sheets_is_the_formula_twice(row):
    found = 2 * float(strip_over_plate_ohm(2 * row["ratio"], row["permittivity"]))
    assert found == pytest.approx(row["impedance_ohm"], rel=5e-4)  # digits given


@pytest.mark.published("lines_strips", "sheet")
def test_a_strip_over_a_plate_is_half_a_pair(row):
    pair = TwoStrips(row["ratio"] * S, S, 0.1e-3, row["permittivity"], overhang_m=S)
    half = StripOverPlate(row["ratio"] * S, S / 2, 0.1e-3, row["permittivity"], overhang_m=S)
    assert half.impedance_ohm == pytest.approx(pair.impedance_ohm / 2, rel=1e-12)


@pytest.mark.published("lines_strips", "coplanar")
def test_coplanar_strips(row):
    assert float(coplanar_strips_air_ohm(row["ratio"])) == pytest.approx(
        row["impedance_ohm"], abs=0.006
    )
    line = CoplanarStrips(3e-3, row["ratio"] * 3e-3)
    assert line.impedance_ohm == pytest.approx(row["impedance_ohm"], rel=1e-4)
