"""Units of a condition: those of the study file, and decibels, which are units of their own."""

from __future__ import annotations

from simkit.study.units import UNITS, describe, find_unit, usual_unit

DECIBEL = ("dB", "dBi")


def unit_names() -> list[str]:
    """Every unit a value may carry."""
    return [*UNITS, *DECIBEL]


def dimension(unit: str) -> object:
    """What must be equal for two quantities to be compared."""
    if unit in DECIBEL:
        return unit
    return find_unit("1" if unit == "%" else unit).dimension


def in_words(unit: str) -> str:
    """A unit by what it measures: ``a length``, ``in dB``."""
    if unit in DECIBEL:
        return f"in {unit}"
    if unit == "%":
        return "a pure number"
    return describe(find_unit(unit).dimension)


def example(unit: str) -> str:
    """A value one could write in that unit's place."""
    if unit in DECIBEL:
        return f"10 {unit}"
    usual = usual_unit(find_unit(unit).dimension)
    if usual == "1":
        return "4 or 90 %"
    return {"MHz": "868 MHz", "mm": "76 mm"}.get(usual, f"3 {usual}")
