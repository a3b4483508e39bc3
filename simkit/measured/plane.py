"""Moving the reference plane of a measured sweep, and referring several files to one plane."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
from scipy.constants import c as light_speed

from simkit.errors import MeasurementError
from simkit.measured.measurement import Measurement

LONGEST_DELAY_S = 1e-6
"""200 m of cable; beyond it a unit is wrong."""


def delay_of_s(length_m: float, relative_permittivity: float = 1.0) -> float:
    """One-way delay of a length of line filled with a dielectric, s.

    Raises
    ------
    MeasurementError
        If the permittivity is below 1.
    """
    if not (np.isfinite(relative_permittivity) and relative_permittivity >= 1):
        raise MeasurementError(
            f"a dielectric of relative permittivity {relative_permittivity:g} does not exist; "
            "air has 1, solid polyethylene 2.26, PTFE 2.1"
        )
    return float(length_m * np.sqrt(relative_permittivity) / light_speed)


def extended(measurement: Measurement, delay_s: float) -> Measurement:
    """Move the reference plane towards the antenna by a one-way delay: a port extension.

    Parameters
    ----------
    measurement : Measurement
    delay_s : float
        Positive towards the antenna; negative takes an extension back that was too long.

    Raises
    ------
    MeasurementError
        If the delay is not a finite one below a microsecond.
    """
    if not (np.isfinite(delay_s) and abs(delay_s) <= LONGEST_DELAY_S):
        raise MeasurementError(
            f"{measurement.path}: a port extension by {delay_s:g} s is beyond "
            f"{LONGEST_DELAY_S:g} s, 200 m of cable; give it in ps or ns"
        )
    if not delay_s:
        return measurement
    turn = np.exp(4j * np.pi * measurement.frequency_hz * delay_s)
    note = (
        f"reference plane moved by {delay_s * 1e12:+.4g} ps one way "
        f"({delay_s * light_speed * 1e3:+.4g} mm of air)"
    )
    return replace(
        measurement,
        reflection=measurement.reflection * turn,
        notes=(*measurement.notes, note),
    )
