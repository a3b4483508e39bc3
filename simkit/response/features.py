"""What a one-port sweep shows: dips, resonances, conductance peaks, Q from the impedance.

Every curve is interpolated through the bounded quantity w = (Z - Rn) / (Z + Rn). A passive antenna
keeps |w| below 1 where its reactance passes zero and where it jumps from plus to minus infinity, so
one smooth curve carries both kinds of crossing. The functions are meant for simulated, noise-free
sweeps; measured ones go through `simkit.measured.dips` first.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from functools import partial
from typing import Literal

import numpy as np
from numpy.typing import ArrayLike, NDArray
from scipy.interpolate import CubicSpline
from scipy.optimize import brentq, minimize_scalar
from scipy.signal import find_peaks

from simkit.response.near import NEIGHBOURS, Near

FloatArray = NDArray[np.float64]
ComplexArray = NDArray[np.complex128]

MIN_DIP_PROMINENCE = 2e-3
"""Least rise of |reflection| on both sides of a dip.

The adaptive sweep keeps |reflection| within 1e-3, so a ripple of its error can reach twice that;
where nearly everything is reflected it is 0.02 dB, below what a bench analyser resolves.
"""

MIN_PEAK_PROMINENCE = 0.01
"""Least rise of a conductance peak over its surroundings, as a part of the peak itself.

Ten times the relative error of the swept current, so that it cannot be fit error.
"""

LARGEST_RESISTANCE_OHM = 1e5
"""Above this a crossing is a pole of a lossless reactance, not a resonance.

Parallel resonances of strip and wire antennas stay below some ten kiloohm.
"""

RETURN_LOSS_BAND_DB = 10.0
VSWR_BAND = 2.0


@dataclass(frozen=True)
class Dip:
    """A minimum of |reflection|.

    Attributes
    ----------
    frequency_hz : float
    return_loss_db : float
        Positive, at the minimum.
    bandwidth_hz : float
        Width of the band around the minimum with at least 10 dB return loss; NaN if the dip is
        shallower or the sweep ends inside the band.
    vswr2_bandwidth_hz : float
        The same for a VSWR of at most 2 (9.54 dB).
    """

    frequency_hz: float
    return_loss_db: float
    bandwidth_hz: float
    vswr2_bandwidth_hz: float


@dataclass(frozen=True)
class Resonance:
    """A zero of the reactance: `series` where it rises, `parallel` where it falls."""

    frequency_hz: float
    kind: Literal["series", "parallel"]
    resistance_ohm: float


@dataclass(frozen=True)
class ConductancePeak:
    """A maximum of Re(1/Z); `resistance_ohm` is 1/G there."""

    frequency_hz: float
    resistance_ohm: float


def reflection(impedance_ohm: ArrayLike, reference_ohm: float) -> ComplexArray:
    """Return (Z - R) / (Z + R) for a real positive reference resistance.

    Parameters
    ----------
    impedance_ohm : array_like of complex, any shape
        Ohm. An infinite impedance reflects 1.
    reference_ohm : float
        Ohm, finite and positive.

    Returns
    -------
    ndarray of complex, same shape

    Raises
    ------
    ValueError
        If the reference is not a positive finite number.
    """
    if not (np.isfinite(reference_ohm) and reference_ohm > 0):
        raise ValueError(f"reference_ohm must be finite and positive, not {reference_ohm}")
    impedance = np.asarray(impedance_ohm, dtype=np.complex128)
    # Z = -R and Z = infinity are handled by name; numpy need not warn of them.
    with np.errstate(divide="ignore", invalid="ignore", over="ignore"):
        ratio = (impedance - reference_ohm) / (impedance + reference_ohm)
    return np.asarray(np.where(np.isinf(impedance), 1.0 + 0j, ratio), dtype=np.complex128)


def return_loss_db(reflection_coefficient: ArrayLike) -> FloatArray:
    """Return -20 log10 |reflection| in dB: positive for a passive load, infinite at a match."""
    magnitude = np.abs(np.asarray(reflection_coefficient))
    with np.errstate(divide="ignore"):
        return np.asarray(-20.0 * np.log10(magnitude), dtype=np.float64)


def find_dips(
    frequency_hz: ArrayLike,
    reflection: ArrayLike,
    min_prominence: float = MIN_DIP_PROMINENCE,
) -> list[Dip]:
    """Find the minima of |reflection| of a smooth curve, lowest frequency first.

    A minimum counts if |reflection| rises by `min_prominence` on both sides before it falls lower
    still; the ends of the sweep are never dips. Places and depths come from a polynomial through
    the complex reflection around them, so they are finer than the step of the sweep.

    Parameters
    ----------
    frequency_hz : (F,) array_like of float
        Ascending, Hz.
    reflection : (F,) array_like of complex
    min_prominence : float, optional
        In units of |reflection|.

    Returns
    -------
    list of Dip

    Raises
    ------
    ValueError
        If the arrays do not fit together, are not finite, or the frequencies do not ascend.
    """
    frequency, gamma = _checked(frequency_hz, reflection, "reflection")
    if len(frequency) < 4:
        return []
    places, _ = find_peaks(-np.abs(gamma), prominence=min_prominence)
    return [_dip(frequency, gamma, int(place)) for place in places]


def find_resonances(frequency_hz: ArrayLike, impedance_ohm: ArrayLike) -> list[Resonance]:
    """Find the zeros of the reactance, lowest frequency first.

    A reactance that jumps through infinity between two samples changes sign as well; on the bounded
    curve such a place is a parallel resonance with its true resistance, and if that exceeds
    `LARGEST_RESISTANCE_OHM` (a lossless pole) it is left out.

    Parameters
    ----------
    frequency_hz : (F,) array_like of float
        Ascending, Hz.
    impedance_ohm : (F,) array_like of complex

    Returns
    -------
    list of Resonance

    Raises
    ------
    ValueError
        As for `find_dips`.
    """
    frequency, impedance = _checked(frequency_hz, impedance_ohm, "impedance_ohm")
    if len(frequency) < 4:
        return []
    curve = _BoundedCurve(frequency, impedance)
    reactance_like = curve.samples.imag
    found = []
    for left in _sign_changes(reactance_like):
        near = Near(frequency, curve.samples, left)
        at = float(brentq(near.imag, *frequency[left : left + 2]))
        resistance = float(curve.impedance(near(at)).real)
        rises = reactance_like[left + 1] > reactance_like[left]
        kind: Literal["series", "parallel"] = "series" if rises else "parallel"
        if abs(resistance) <= LARGEST_RESISTANCE_OHM:
            found.append(Resonance(at, kind, resistance))
    return found


def conductance_peaks(
    frequency_hz: ArrayLike,
    impedance_ohm: ArrayLike,
    min_prominence: float = MIN_PEAK_PROMINENCE,
) -> list[ConductancePeak]:
    """Find the maxima of Re(1/Z), lowest frequency first.

    Parameters
    ----------
    frequency_hz : (F,) array_like of float
        Ascending, Hz.
    impedance_ohm : (F,) array_like of complex
    min_prominence : float, optional
        Least rise over the surroundings, as a part of the peak's height.

    Returns
    -------
    list of ConductancePeak

    Raises
    ------
    ValueError
        As for `find_dips`.
    """
    frequency, impedance = _checked(frequency_hz, impedance_ohm, "impedance_ohm")
    if len(frequency) < 4:
        return []
    curve = _BoundedCurve(frequency, impedance)
    conductance = (1 / impedance).real
    places, properties = find_peaks(conductance, prominence=0.0)
    found = []
    for place, prominence in zip(places, properties["prominences"], strict=True):
        if prominence < min_prominence * conductance[place]:
            continue
        near = Near(frequency, curve.samples, int(place))
        against = partial(_against_conductance, curve, near)
        at = _lowest(against, partial(_falling_conductance, near), frequency, int(place))
        found.append(ConductancePeak(at, 1.0 / curve.admittance(near(at)).real))
    return found


def impedance_q(frequency_hz: ArrayLike, impedance_ohm: ArrayLike) -> FloatArray:
    """Quality factor from the impedance and its slope, as if tuned by one lossless reactance.

    Parameters
    ----------
    frequency_hz : (F,) array_like of float
        Ascending, Hz, at least four.
    impedance_ohm : (F,) array_like of complex

    Returns
    -------
    (F,) ndarray of float
        NaN where the resistance is not positive.

    Raises
    ------
    ValueError
        As for `find_dips`, or if there are fewer than four points.

    Notes
    -----
    Q = (w / 2R) sqrt(R'^2 + (X' + |X|/w)^2), w the angular frequency, primes d/dw. It stands for
    the bandwidth while one resonance rules the band; between two close ones it can be far too low.

    References
    ----------
    A. D. Yaghjian, S. R. Best, "Impedance, bandwidth, and Q of antennas", IEEE Trans. Antennas
    Propag. 53(4), 2005.
    """
    frequency, impedance = _checked(frequency_hz, impedance_ohm, "impedance_ohm")
    if len(frequency) < 4:
        raise ValueError(f"impedance_q needs at least 4 frequencies, got {len(frequency)}")
    slope = _BoundedCurve(frequency, impedance).impedance_slope()
    resistance, reactance = impedance.real, impedance.imag
    size = np.hypot(slope.real, slope.imag + np.abs(reactance) / frequency)
    q = np.full(frequency.shape, np.nan)
    np.divide(frequency * size, 2.0 * resistance, out=q, where=resistance > 0)
    return q


def impedance_q_at(at_hz: float, frequency_hz: FloatArray, impedance_ohm: ComplexArray) -> float:
    """`impedance_q` at one frequency of a curve, from the samples around it."""
    place = max(int(np.searchsorted(frequency_hz, at_hz, side="right")) - 1, 0)
    norm = float(abs(impedance_ohm[place])) or 1.0
    first = max(0, place - NEIGHBOURS)
    around = slice(first, place + NEIGHBOURS)
    near = Near(frequency_hz[around], reflection(impedance_ohm[around], norm), place - first)
    w = near(at_hz)
    impedance = norm * (1 + w) / (1 - w)
    slope = 2 * norm * near.slope(at_hz) / (1 - w) ** 2
    if impedance.real <= 0:
        return float("nan")
    rise = slope.imag + abs(impedance.imag) / at_hz
    return float(at_hz * np.hypot(slope.real, rise) / (2 * impedance.real))


def matched_bandwidth(q: ArrayLike, vswr: float = VSWR_BAND) -> FloatArray:
    """Fractional bandwidth for a VSWR limit, matched at the centre: (s - 1) / (sqrt(s) Q).

    References
    ----------
    Yaghjian & Best 2005, as for `impedance_q`; for Q well above 1.
    """
    if not vswr > 1:
        raise ValueError(f"vswr must be above 1, not {vswr}")
    return np.asarray((vswr - 1.0) / (np.sqrt(vswr) * np.asarray(q, dtype=np.float64)))


def band_around(
    frequency_hz: FloatArray, reflection: ComplexArray, place: int, limit: float
) -> tuple[float, float] | None:
    """Edges of the band around sample `place` in which |reflection| <= `limit`, or None.

    None if the curve is above the limit at `place` or the sweep ends inside the band. Between
    samples |reflection|^2 is taken as straight.
    """
    power = np.abs(reflection) ** 2 - limit**2
    outside = power > 0
    if outside[place]:
        return None
    left = np.flatnonzero(outside[:place])
    right = np.flatnonzero(outside[place + 1 :])
    if not len(left) or not len(right):
        return None
    low, high = int(left[-1]), place + 1 + int(right[0])
    return (
        _straight_zero(frequency_hz, power, low),
        _straight_zero(frequency_hz, power, high - 1),
    )


class _BoundedCurve:
    """Samples of w = (Z - Rn) / (Z + Rn), Rn the median |Z|, with the way back to Z and Y."""

    def __init__(self, frequency: FloatArray, impedance: ComplexArray) -> None:
        self.frequency = frequency
        self.norm = float(np.median(np.abs(impedance))) or 1.0
        self.samples = reflection(impedance, self.norm)

    def impedance(self, w: complex) -> complex:
        return self.norm * (1 + w) / (1 - w) if w != 1 else complex(np.inf)

    def admittance(self, w: complex) -> complex:
        return (1 - w) / (1 + w) / self.norm if w != -1 else complex(np.inf)

    def impedance_slope(self) -> ComplexArray:
        """dZ/df at the samples, ohm per hertz."""
        slope = CubicSpline(self.frequency, self.samples)(self.frequency, 1)
        with np.errstate(divide="ignore", invalid="ignore"):
            return np.asarray(2 * self.norm * slope / (1 - self.samples) ** 2)


def _checked(
    frequency_hz: ArrayLike, values: ArrayLike, name: str
) -> tuple[FloatArray, ComplexArray]:
    frequency = np.asarray(frequency_hz, dtype=np.float64)
    samples = np.asarray(values, dtype=np.complex128)
    if frequency.ndim != 1 or samples.shape != frequency.shape:
        raise ValueError(
            f"frequency_hz and {name} must be one-dimensional and equally long, "
            f"got shapes {frequency.shape} and {samples.shape}"
        )
    if not (np.isfinite(frequency).all() and np.isfinite(samples).all()):
        raise ValueError(f"frequency_hz and {name} must be finite")
    if np.any(np.diff(frequency) <= 0):
        raise ValueError("frequency_hz must ascend without repeats")
    return frequency, samples


def _against_conductance(curve: _BoundedCurve, near: Near, frequency_hz: float) -> float:
    return -curve.admittance(near(frequency_hz)).real


def _falling_conductance(near: Near, frequency_hz: float) -> float:
    """The sign of the conductance's fall: y = (1 - w) / (1 + w) falls by 2 w' / (1 + w)^2."""
    w = near(frequency_hz)
    return (near.slope(frequency_hz) * (1 + w).conjugate() ** 2).real


def _dip(frequency: FloatArray, gamma: ComplexArray, place: int) -> Dip:
    curve = Near(frequency, gamma, place)
    at = _lowest(
        lambda f: abs(curve(f)) ** 2,
        lambda f: (curve(f).conjugate() * curve.slope(f)).real,
        frequency,
        place,
    )
    return Dip(
        frequency_hz=at,
        return_loss_db=float(return_loss_db(curve(at))),
        bandwidth_hz=_width(curve, frequency, gamma, at, 10 ** (-RETURN_LOSS_BAND_DB / 20)),
        vswr2_bandwidth_hz=_width(curve, frequency, gamma, at, (VSWR_BAND - 1) / (VSWR_BAND + 1)),
    )


def _width(
    curve: Near, frequency: FloatArray, gamma: ComplexArray, at: float, limit: float
) -> float:
    """Width of the band below `limit` around the minimum, which is put among the samples."""
    place = int(np.searchsorted(frequency, at))
    if frequency[place] != at:
        frequency = np.insert(frequency, place, at)
        gamma = np.insert(gamma, place, curve(at))
    band = band_around(frequency, gamma, place, limit)
    return band[1] - band[0] if band else float("nan")


def _lowest(
    function: Callable[[float], float],
    rising: Callable[[float], float],
    frequency: FloatArray,
    place: int,
) -> float:
    """Minimise within the two steps around sample `place`; `rising` has the sign of the slope."""
    low, high = frequency[max(place - 1, 0)], frequency[min(place + 1, len(frequency) - 1)]
    centre, half = frequency[place], (high - low) / 2
    if rising(low) < 0 < rising(high):
        return float(brentq(rising, low, high, xtol=1e-7 * half))
    # In steps from the sample, so that the tolerance is relative to the step.
    result = minimize_scalar(
        lambda t: function(centre + t * half),
        bounds=((low - centre) / half, (high - centre) / half),
        method="bounded",
        options={"xatol": 1e-7},
    )
    return float(centre + result.x * half)


def _sign_changes(values: FloatArray) -> list[int]:
    """Indices i with a change of sign from i to i + 1; an exact zero counts as what preceded."""
    sign = np.sign(values)
    for i in np.flatnonzero(sign[1:] == 0) + 1:
        sign[i] = sign[i - 1]
    return [int(i) for i in np.flatnonzero(sign[:-1] * sign[1:] < 0)]


def _straight_zero(frequency: FloatArray, values: FloatArray, left: int) -> float:
    part = values[left] / (values[left] - values[left + 1])
    return float(frequency[left] + part * (frequency[left + 1] - frequency[left]))
