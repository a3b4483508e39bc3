"""Units a study file may use, as a fixed table, and the dimensions they carry.

The table is closed on purpose: a general unit parser also accepts ``3 Mm`` or ``nan mm``, and a
slip of the shift key must not become a length of three thousand kilometres. The tests compare every
factor with the one pint knows.
"""

from __future__ import annotations

import difflib
import math
import re
from dataclasses import dataclass
from fractions import Fraction

Dimension = tuple[Fraction, Fraction, Fraction, Fraction]
"""Exponents of metre, kilogram, second and ampere. Angles are pure numbers."""


def _dimension(metre: int = 0, kilogram: int = 0, second: int = 0, ampere: int = 0) -> Dimension:
    return (Fraction(metre), Fraction(kilogram), Fraction(second), Fraction(ampere))


PURE = _dimension()
LENGTH = _dimension(metre=1)
MASS = _dimension(kilogram=1)
TIME = _dimension(second=1)
FREQUENCY = _dimension(second=-1)
POWER = _dimension(2, 1, -3)
VOLTAGE = _dimension(2, 1, -3, -1)
RESISTANCE = _dimension(2, 1, -3, -2)
CONDUCTANCE = _dimension(-2, -1, 3, 2)
CONDUCTIVITY = _dimension(-3, -1, 3, 2)
CAPACITANCE = _dimension(-2, -1, 4, 2)
INDUCTANCE = _dimension(2, 1, -2, -2)
ATTENUATION = _dimension(metre=-1)


@dataclass(frozen=True)
class Unit:
    """One unit: a quantity of `factor` times the SI unit of `dimension`."""

    factor: Fraction
    dimension: Dimension


@dataclass(frozen=True)
class _Known:
    """How a dimension is called, its SI unit, and the unit to print when nobody wrote one."""

    words: str
    si: str
    example: str


_KNOWN: dict[Dimension, _Known] = {
    PURE: _Known("a pure number", "1", "1"),
    LENGTH: _Known("a length", "m", "mm"),
    MASS: _Known("a mass", "kg", "g"),
    TIME: _Known("a time", "s", "ns"),
    FREQUENCY: _Known("a frequency", "Hz", "MHz"),
    POWER: _Known("a power", "W", "mW"),
    VOLTAGE: _Known("a voltage", "V", "V"),
    RESISTANCE: _Known("a resistance", "ohm", "ohm"),
    CONDUCTANCE: _Known("a conductance", "S", "S"),
    CONDUCTIVITY: _Known("a conductivity", "S/m", "S/m"),
    CAPACITANCE: _Known("a capacitance", "F", "pF"),
    INDUCTANCE: _Known("an inductance", "H", "nH"),
    ATTENUATION: _Known("an attenuation per length", "dB/m", "dB/m"),
}

_BASE_PART = re.compile(r"(m|kg|s|A)(-?\d+|\^\(-?\d+/\d+\)|)(?: |$)")
_BASE = re.compile(f"(?:{_BASE_PART.pattern})+")

_PREFIXES = {"p": -12, "n": -9, "u": -6, "µ": -6, "μ": -6, "m": -3, "c": -2}
_PREFIXES |= {"k": 3, "M": 6, "G": 9, "T": 12}


def _prefixed(symbol: str, dimension: Dimension, prefixes: str) -> dict[str, Unit]:
    names = [symbol, *(prefix + symbol for prefix in prefixes)]
    powers = [0, *(_PREFIXES[prefix] for prefix in prefixes)]
    return {
        name: Unit(Fraction(10) ** power, dimension)
        for name, power in zip(names, powers, strict=True)
    }


UNITS: dict[str, Unit] = {
    **_prefixed("m", LENGTH, "nuµμmck"),
    "in": Unit(Fraction("0.0254"), LENGTH),
    "mil": Unit(Fraction("0.0000254"), LENGTH),
    "ft": Unit(Fraction("0.3048"), LENGTH),
    "g": Unit(Fraction("0.001"), MASS),
    "mg": Unit(Fraction("0.000001"), MASS),
    "kg": Unit(Fraction(1), MASS),
    **_prefixed("s", TIME, "pnuµμm"),
    **_prefixed("Hz", FREQUENCY, "kMGT"),
    **_prefixed("W", POWER, "nuµμmk"),
    **_prefixed("V", VOLTAGE, "uµμmk"),
    **_prefixed("ohm", RESISTANCE, "mkM"),
    **_prefixed("Ω", RESISTANCE, "mkM"),  # the Greek capital omega
    **_prefixed("\u2126", RESISTANCE, "mkM"),  # the ohm sign, which looks the same
    **_prefixed("S", CONDUCTANCE, "uµμmkM"),
    **_prefixed("F", CAPACITANCE, "pnuµμm"),
    **_prefixed("H", INDUCTANCE, "pnuµμm"),
    "rad": Unit(Fraction(1), PURE),
    "deg": Unit(Fraction(math.pi) / 180, PURE),
    "dB": Unit(Fraction(1), PURE),
}
"""Unit symbol to unit. Products and quotients are written out: ``S/m``, ``m/s``.

Decibels are kept as the number of them: keys that take a loss count in decibels.
"""


def find_unit(text: str) -> Unit:
    """Return the unit written as `text`.

    Parameters
    ----------
    text : str
        Symbols of `UNITS` joined by ``/`` and ``*``, as ``S/m``; ``1`` for a pure number; or what
        `si_unit` returns for a dimension without a name, as ``m2 s-1``.

    Raises
    ------
    KeyError
        If a symbol is not in the table.
    """
    if text == "1":
        return Unit(Fraction(1), PURE)
    if _BASE.fullmatch(text) and text not in UNITS:
        return Unit(Fraction(1), _base_dimension(text))
    factor, dimension, divide = Fraction(1), PURE, False
    for part in text.replace("*", " * ").replace("/", " / ").split():
        if part in "*/":
            divide = part == "/"
            continue
        unit = UNITS[part]
        factor = factor / unit.factor if divide else factor * unit.factor
        dimension = combine(dimension, unit.dimension, -1 if divide else 1)
    return Unit(factor, dimension)


def _base_dimension(text: str) -> Dimension:
    powers = dict.fromkeys(("m", "kg", "s", "A"), Fraction(0))
    for symbol, power in _BASE_PART.findall(text):
        powers[symbol] = Fraction(power.strip("^()") or 1)
    return (powers["m"], powers["kg"], powers["s"], powers["A"])


def combine(first: Dimension, second: Dimension, sign: int = 1) -> Dimension:
    """Return the dimension of a product, or with `sign` -1 of a quotient."""
    a, b = first, second
    return (a[0] + sign * b[0], a[1] + sign * b[1], a[2] + sign * b[2], a[3] + sign * b[3])


def raised(dimension: Dimension, power: Fraction) -> Dimension:
    """Return the dimension of a quantity raised to `power`."""
    return (
        dimension[0] * power,
        dimension[1] * power,
        dimension[2] * power,
        dimension[3] * power,
    )


def si_unit(dimension: Dimension) -> str:
    """Return the SI unit of a dimension as text, ``1`` for a pure number."""
    known = _KNOWN.get(dimension)
    if known is not None:
        return known.si
    symbols = zip(("m", "kg", "s", "A"), dimension, strict=True)
    parts = [s if power == 1 else f"{s}{_power_text(power)}" for s, power in symbols if power]
    return " ".join(parts)


def _power_text(power: Fraction) -> str:
    return str(power) if power.denominator == 1 else f"^({power})"


def usual_unit(dimension: Dimension) -> str:
    """Return the unit in which a workshop would write such a quantity, as ``mm`` for a length."""
    known = _KNOWN.get(dimension)
    return known.example if known is not None else si_unit(dimension)


def describe(dimension: Dimension) -> str:
    """Return a dimension in words: ``a length``, or ``a quantity in m2``."""
    known = _KNOWN.get(dimension)
    return known.words if known is not None else f"a quantity in {si_unit(dimension)}"


def from_si(value_si: float, unit: str) -> float:
    """Return a value given in SI in `unit`, for printing.

    Units outside the table (``m2``) are SI already and leave the value as it is.
    """
    try:
        return float(value_si / float(find_unit(unit).factor))
    except KeyError:
        return value_si


def as_text(value_si: float, unit: str, digits: int = 6) -> str:
    """Return a value given in SI as text in `unit`: ``76 mm``; no unit for a pure number."""
    number = f"{from_si(value_si, unit):.{digits}g}"
    return number if unit == "1" else f"{number} {unit}"


def nearest(word: str, known: list[str] | tuple[str, ...]) -> str | None:
    """Return the known word most like `word`, or None if none is near."""
    lower = {name.lower(): name for name in reversed(known)}
    match = difflib.get_close_matches(word.lower(), list(lower), n=1, cutoff=0.6)
    return lower[match[0]] if match else None
