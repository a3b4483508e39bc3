"""Units: factors against pint, text in both directions, suggestions."""

from __future__ import annotations

from fractions import Fraction

import pint
import pytest

from simkit.study import units
from simkit.study.units import LENGTH, PURE, UNITS


@pytest.fixture(scope="module")
def registry() -> pint.UnitRegistry:
    return pint.UnitRegistry()


@pytest.mark.parametrize("symbol", sorted(set(UNITS) - {"dB"}))
def test_factor_and_dimension_agree_with_pint(symbol: str, registry: pint.UnitRegistry) -> None:
    # pint knows no ohm sign, and takes a mil for an angle
    unit = registry.Unit(symbol.replace("\u2126", "\u03a9") if symbol != "mil" else "thou")
    base = (1.0 * unit).to_base_units()
    # both are a few roundings of the same decimal number
    assert float(UNITS[symbol].factor) == pytest.approx(base.magnitude, rel=1e-14)
    powers = [
        Fraction(unit.dimensionality.get(name, 0))
        for name in ("[length]", "[mass]", "[time]", "[current]")
    ]
    assert list(UNITS[symbol].dimension) == powers


def test_decibels_stay_a_number_of_them() -> None:
    assert units.find_unit("dB") == units.Unit(Fraction(1), PURE)
    assert units.find_unit("dB/cm").factor == 100
    assert units.find_unit("dB/m").dimension == units.ATTENUATION


@pytest.mark.parametrize("symbol", ["Mm", "Pm", "nan", "dBi", "", "A", "mHz"])
def test_what_a_general_parser_would_take_is_no_unit_here(symbol: str) -> None:
    assert symbol not in UNITS


def test_chains_of_units_multiply_and_divide_from_left_to_right() -> None:
    assert units.find_unit("kS/cm").factor == 100_000
    assert units.find_unit("kS/cm").dimension == units.CONDUCTIVITY
    assert units.find_unit("mm/s*s").dimension == LENGTH
    assert units.find_unit("1").dimension == PURE


@pytest.mark.parametrize("powers", [(2, 0, 0, 0), (1, 0, -2, 0), (3, 1, -2, -2), (0, 0, 0, 1)])
def test_si_text_of_a_nameless_dimension_is_read_back(powers: tuple[int, ...]) -> None:
    a, b, c, d = (Fraction(power) for power in powers)
    found = units.find_unit(units.si_unit((a, b, c, d)))
    assert found == units.Unit(Fraction(1), (a, b, c, d))


def test_si_text_of_a_root_is_read_back() -> None:
    root = units.raised(LENGTH, Fraction(1, 2))
    assert units.si_unit(root) == "m^(1/2)"
    assert units.find_unit("m^(1/2)").dimension == root


@pytest.mark.parametrize(
    ("value", "unit", "shown"),
    [
        (0.076, "mm", "76 mm"),
        (8.68e8, "MHz", "868 MHz"),
        (3.0, "1", "3"),
        (1.5e7, "S/m", "1.5e+07 S/m"),
    ],
)
def test_numbers_are_shown_in_the_unit_asked_for(value: float, unit: str, shown: str) -> None:
    assert units.as_text(value, unit) == shown


def test_an_unknown_unit_is_a_key_error() -> None:
    with pytest.raises(KeyError, match="furlong"):
        units.find_unit("furlong")


@pytest.mark.parametrize(
    ("word", "near"), [("widht", "width"), ("Widths", "width"), ("qqq", None), ("", None)]
)
def test_nearest_known_word(word: str, near: str | None) -> None:
    assert units.nearest(word, ["name", "path", "width"]) == near
