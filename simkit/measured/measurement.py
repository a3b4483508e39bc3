"""A measured one-port sweep: frequencies, complex reflection, and what was noticed about it."""

from __future__ import annotations

from dataclasses import dataclass, replace
from pathlib import Path

import numpy as np
from numpy.typing import NDArray

from simkit.errors import MeasurementError

FloatArray = NDArray[np.float64]
ComplexArray = NDArray[np.complex128]


@dataclass(frozen=True, eq=False)
class Measurement:
    """One measured sweep.

    Attributes
    ----------
    path : Path
    frequency_hz : (F,) float array
        Ascending, hertz.
    reflection : (F,) complex array
        At the reference plane of the measurement.
    reference_ohm : float
        Resistance the reflection refers to.
    notes : tuple of str
        What a user should know before trusting the data, one sentence each.
    comments : tuple of str
        Comment lines of the file.
    """

    path: Path
    frequency_hz: FloatArray
    reflection: ComplexArray
    reference_ohm: float
    notes: tuple[str, ...] = ()
    comments: tuple[str, ...] = ()

    def renormalised(self, reference_ohm: float) -> Measurement:
        """Return the same measurement for another reference resistance, with a note.

        Raises
        ------
        MeasurementError
            If the reference is not a positive number, or a value has no counterpart.
        """
        if not (np.isfinite(reference_ohm) and reference_ohm > 0):
            raise MeasurementError(
                f"{self.path}: cannot refer the reflection to {reference_ohm} ohm; "
                "give a positive resistance"
            )
        if np.isclose(reference_ohm, self.reference_ohm, rtol=1e-9):
            return self
        step = (self.reference_ohm - reference_ohm) / (self.reference_ohm + reference_ohm)
        # |reflection| > 1 may hit the pole of the mapping; that is reported by name.
        with np.errstate(divide="ignore", invalid="ignore", over="ignore"):
            moved = (self.reflection + step) / (1 + step * self.reflection)
        if not np.isfinite(moved).all():
            raise MeasurementError(
                f"{self.path}: the reflection cannot be referred to {reference_ohm:g} ohm, because "
                "it corresponds to a negative resistance of just that size; calibrate and measure "
                "again"
            )
        note = (
            f"measured with reference {self.reference_ohm:g} ohm, "
            f"converted to the {reference_ohm:g} ohm of the study"
        )
        return replace(
            self, reflection=moved, reference_ohm=reference_ohm, notes=(*self.notes, note)
        )
