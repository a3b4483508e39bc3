"""Checks of numbers whose messages all read alike."""

from __future__ import annotations

import math

import numpy as np
from numpy.typing import ArrayLike, NDArray

from simkit.errors import FeedlineError

__all__ = [
    "ComplexArray",
    "FeedlineError",
    "FloatArray",
    "frequencies",
    "not_negative",
    "positive",
    "quantity",
]

FloatArray = NDArray[np.float64]
ComplexArray = NDArray[np.complex128]


_SCALES = {"m": (1e3, "mm"), "Hz": (1e-6, "MHz"), "s": (1e12, "ps"), "H": (1e9, "nH")}
_SCALES["F"] = (1e12, "pF")


def quantity(value: float, unit: str, digits: int = 4) -> str:
    """Return a number as people in the trade say it: millimetres, megahertz, nanohenry ..."""
    factor, name = _SCALES.get(unit, (1.0, unit))
    return f"{value * factor:.{digits}g} {name}".rstrip()


def positive(name: str, value: float, unit: str) -> None:
    """Refuse a value that is not finite and above 0."""
    if not (math.isfinite(value) and value > 0):
        raise FeedlineError(f"{name} is {quantity(value, unit)}: it must be finite and more than 0")


def not_negative(name: str, value: float, unit: str) -> None:
    """Refuse a value that is not finite or below 0."""
    if not (math.isfinite(value) and value >= 0):
        raise FeedlineError(f"{name} is {quantity(value, unit)}: it must be finite, 0 or more")


def frequencies(frequency_hz: ArrayLike) -> FloatArray:
    """Return frequencies as a one-dimensional array, all finite and above 0."""
    found = np.atleast_1d(np.asarray(frequency_hz, dtype=np.float64))
    if found.ndim != 1 or not found.size:
        raise FeedlineError(f"frequencies have the shape {found.shape}: give one row of them")
    if not (np.isfinite(found).all() and (found > 0).all()):
        raise FeedlineError(
            f"frequencies reach from {quantity(float(found.min()), 'Hz')} to "
            f"{quantity(float(found.max()), 'Hz')}: all must be finite and more than 0"
        )
    return found
