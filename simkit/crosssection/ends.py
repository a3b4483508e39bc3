"""What the carrier does to an open end of a strip.

In a wire model of a strip on its carrier (radius exp(kappa) w/4) every charge lowers its potential
by the same amount, up to the last point. At a real end it is not so: the bound charge spreads over
a width or so along the plastic, so that the last charges see half of it missing, the more so where
the plastic itself ends with the strip; and plastic beyond the end adds some. What is left over is a
charge that belongs to the end, and acts as a length to take off the wire or to add to it.

The length is found by electrostatics in space (`end_charge`): the strip on its block of plastic
against a hollow tube of the model's radius. For bare strips this gives 0.049 w, for any length. The
engine's wire, with its closed ends, wants 0.075 w taken off for the same strip, so it holds
0.026 w, or 0.104 radii, more than the tube; as its radius grows with exp(kappa), so does that.
The sum is the correction:

    taken off each open end, on top of 0.075 w = table + 0.026 w (exp(kappa) - 1)

Evidence. Strip 150 x 6 mm, carrier 3 mm thick, permittivity 2.7, ends flush, against a time-domain
solution of the fields good to 0.2 %. Errors of the first and the third mode without correction,
with the table alone, and with the sum: sides flush -0.24, -0.18; -0.21, -0.15; -0.15, -0.09 %. With
an overhang of 3 mm only the error of the uncorrected model is known, -0.45 %; it becomes -0.07 with
the table alone and +0.06 % with the sum. That is one strip and two carriers: ends with plastic
beyond them have not been held against a field solution, and the share with exp(kappa) rests on
dimensions (the engine's end knows no other length than its radius and its segments), which the two
cases allow but do not prove.
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import lru_cache
from importlib.resources import files

import numpy as np
from scipy.interpolate import RegularGridInterpolator
from scipy.optimize import brentq

from simkit.crosssection.carrier_kappa import kappa
from simkit.crosssection.panels import FloatArray
from simkit.crosssection.section import CrossSection, Layer, single_strip

ENGINE_EXCESS = 0.026
"""What the engine's wire of radius w/4 holds at an open end more than a hollow tube, in widths."""

TABLE_ERROR = 0.015
"""Error inside the limits, in widths: what the field solution above leaves open.

The table itself is good to 0.003 and its interpolation to 0.003.
"""

MOST_PERMITTIVITY = 1e3
"""Searched for the uniform carrier that stands for another; metal all but in name."""

_HALF = 0.5
"""Overhang, in widths, at which half of its effect is reached; makes the table's steps alike."""


@dataclass(frozen=True)
class EndCorrection:
    """Length to take off one open end of a line model, beyond what a bare strip loses.

    Attributes
    ----------
    shortening_m : float
        Negative: the wire is to be longer.
    error_m : float
        How far it may be off.
    doubts : tuple of str
        Which limits the cross-section breaks, in words; empty inside all of them.
    """

    shortening_m: float
    error_m: float
    doubts: tuple[str, ...]


def end_correction(section: CrossSection, end_overhang_m: float) -> EndCorrection:
    """Correct an open end for its carrier.

    Parameters
    ----------
    section : CrossSection
        One strip. The loss plays no part.
    end_overhang_m : float
        Carrier beyond the strip's end, 0 or more.

    Returns
    -------
    EndCorrection

    Raises
    ------
    ValueError
        If there are several strips or the end overhang is negative.

    Notes
    -----
    Holds for one strip on or under a carrier up to 2 widths thick, with overhangs and end
    overhangs up to 2 widths, of permittivity up to 4.4, on strips at least 5 widths long. Layers
    and thick metal count as the uniform carrier under thin metal of the same outline and kappa,
    uneven overhangs as their mean. Beyond the limits the nearest value inside is returned, with
    an error of at least half of it; plastic on both sides of the strip is not in the table, and
    the error is then all of it.
    """
    if not end_overhang_m >= 0:
        raise ValueError(f"end overhang is {end_overhang_m * 1e3:g} mm: it must be 0 or more")
    kappa_strip = kappa(section).real
    width_m = section.strips[0].width_m
    sizes = (
        section.thickness_m / width_m,
        max((section.right_m - section.left_m) / width_m - 1, 0.0) / 2,
        end_overhang_m / width_m,
    )
    if len(section.layers) == 1 and not _embedded(section):
        # Uniform already; metal of some thickness changes the end by less than the table's error.
        permittivity = complex(section.layers[0].permittivity).real
    else:
        permittivity = _uniform_permittivity(sizes[0], sizes[1], kappa_strip)
    from_table = _table_value(*sizes, permittivity)
    shortening = from_table + ENGINE_EXCESS * (np.exp(kappa_strip) - 1)
    doubts = _doubts(section, sizes, permittivity)
    error = TABLE_ERROR
    if doubts:
        error += abs(shortening) * (1.0 if _embedded(section) else 0.5)
    return EndCorrection(float(shortening * width_m), float(error * width_m), doubts)


def _embedded(section: CrossSection) -> bool:
    slack_m = 1e-6 * section.thickness_m
    return slack_m < section.depth_m < section.thickness_m - slack_m


def _doubts(
    section: CrossSection, sizes: tuple[float, float, float], permittivity: float
) -> tuple[str, ...]:
    thickness, overhang, end_overhang = sizes
    table = _table()
    found = []
    if _embedded(section):
        found.append("plastic on both sides of the strip")
    for name, value, limit in (
        ("carrier thickness", thickness, table.thickness[-1]),
        ("overhang", overhang, table.overhang[-1]),
        ("end overhang", end_overhang, table.overhang[-1]),
    ):
        if value > limit * (1 + 1e-9):
            found.append(f"{name} of {value:.3g} strip widths, beyond {limit:g}")
    if permittivity > table.permittivity[-1] * (1 + 1e-6):
        found.append(f"permittivity of {permittivity:.3g}, beyond {table.permittivity[-1]:g}")
    return tuple(found)


def _uniform_permittivity(thickness: float, overhang: float, kappa_strip: float) -> float:
    """Permittivity of the uniform carrier on one side with the same kappa."""

    def excess(log_permittivity: float) -> float:
        permittivity = float(np.exp(log_permittivity))
        return (
            kappa(single_strip(1.0, [Layer(thickness, permittivity)], overhang)).real - kappa_strip
        )

    if kappa_strip <= 0:
        return 1.0
    largest = np.log(MOST_PERMITTIVITY)
    if excess(largest) < 0:
        return MOST_PERMITTIVITY
    return float(np.exp(brentq(excess, 0.0, largest, xtol=1e-4)))


@dataclass(frozen=True)
class _Table:
    thickness: FloatArray
    overhang: FloatArray
    permittivity: FloatArray
    value: RegularGridInterpolator


@lru_cache(maxsize=1)
def _table() -> _Table:
    """Read the table; the permittivity 1, at which it is zero, is added."""
    text = files("simkit.crosssection").joinpath("end_table.txt").read_text("utf-8")
    rows = np.loadtxt(text.splitlines())
    thickness, overhang, end_overhang = (np.unique(rows[:, column]) for column in range(3))
    permittivity = np.array([1.0, 1.5, 2.7, 4.4])
    values = rows[:, 3:].reshape(len(thickness), len(overhang), len(end_overhang), -1)
    values = np.concatenate([np.zeros((*values.shape[:3], 1)), values], axis=3)
    axes = (np.log2(thickness), _bent(overhang), _bent(end_overhang), np.log(permittivity))
    return _Table(
        thickness,
        overhang,
        permittivity,
        RegularGridInterpolator(axes, values, method="cubic"),
    )


def _bent(overhang: FloatArray) -> FloatArray:
    return np.asarray(overhang / (overhang + _HALF))


def _table_value(
    thickness: float, overhang: float, end_overhang: float, permittivity: float
) -> float:
    """Added shortening in widths, held at the table's limits, in proportion below the thinnest."""
    table = _table()
    low, high = table.thickness[0], table.thickness[-1]
    point = [
        np.log2(np.clip(thickness, low, high)),
        *(_bent(np.minimum([overhang, end_overhang], table.overhang[-1]))),
        np.log(min(permittivity, float(table.permittivity[-1]))),
    ]
    return float(table.value(point)[0] * min(thickness / low, 1.0))
