"""Natural modes from a measured sweep: a low-order pole model, its order judged by held-out data.

The natural modes of an antenna are the poles of its feed admittance, which are the zeros of
1 + reflection. The reflection itself is fitted by a rational function with few pole pairs behind a
delay; parts of the sweep are held out in turn, the order that predicts them best is taken. How
certain each mode is follows from the same parts left out, and from what an unsettled reference
plane and the analyser's directivity would do to it.

References
----------
B. Gustavsen, A. Semlyen, "Rational approximation of frequency domain responses by vector fitting",
IEEE Trans. Power Delivery 14(3), 1999: the relocation of poles.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from scipy.optimize import linear_sum_assignment

from simkit.measured.measurement import ComplexArray, FloatArray, Measurement

ORDERS = (1, 2, 3, 4, 5, 6)
FOLDS = 5
BLOCKS = 20
"""The sweep is cut into so many pieces; every fifth is held out together."""

MOST_POINTS = 250
ROUNDS = 12
PLANE_SIGMA_S = 20e-12
"""Standard error of a reference plane nobody has settled, one way: 6 mm of air.

A delay of this size cannot be found in the sweep: the poles stand in for it. On clean simulated
curves a search by held-out error took off 60 ps that were not there and moved the modes by 5 %."""

DIRECTIVITY = 0.011
"""Standard deviation of real and imaginary part of what a calibration leaves: -36 dB."""

LEAST_DECAY = 1e-4
"""Of a pole over its size: a pole on the frequency axis would make the model infinite there."""

LEAST_Q = 1.0
LARGEST_SPREAD = 0.02
"""Relative standard error of a frequency above which the data do not support the mode."""

LARGEST_Q_SPREAD = 0.4
TELLING = 0.9
"""A higher order must lower the held-out error to this part."""


@dataclass(frozen=True)
class MeasuredMode:
    """A natural mode read from a sweep.

    Attributes
    ----------
    frequency_hz, q : float
    frequency_sigma_hz, q_sigma : float
        Standard errors: parts of the sweep left out, reference plane, directivity.
    supported : bool
    why : str
        Why the data do not support it, empty if they do.
    """

    frequency_hz: float
    q: float
    frequency_sigma_hz: float
    q_sigma: float
    supported: bool
    why: str = ""


@dataclass(frozen=True, eq=False)
class PoleModel:
    """A reflection as constant plus pole pairs, with a delay.

    Attributes
    ----------
    poles : (N,) complex array
        In units of j `scale_hz`, each with its conjugate in the list.
    residues : (N,) complex array
    constant : float
    scale_hz : float
    delay_s : float
        One way.
    """

    poles: ComplexArray
    residues: ComplexArray
    constant: float
    scale_hz: float
    delay_s: float

    def __call__(self, frequency_hz: FloatArray) -> ComplexArray:
        """Reflection, (F,)."""
        s = 1j * frequency_hz / self.scale_hz
        gamma = self.constant + (1 / (s[:, None] - self.poles)) @ self.residues
        return np.asarray(gamma * np.exp(-4j * np.pi * frequency_hz * self.delay_s))

    def natural_hz(self) -> ComplexArray:
        """Natural frequencies: zeros of 1 + reflection with the delay taken off; Im > 0 decays."""
        # A short far from all poles has its zero at infinity; nearly there is near enough.
        level = 1 + self.constant
        level = level if abs(level) > 1e-9 else 1e-9
        matrix = np.diag(self.poles) - np.outer(np.ones(len(self.poles)), self.residues / level)
        s = np.linalg.eigvals(matrix)
        found = -1j * s * self.scale_hz
        return np.asarray(found[(found.real > 0) & (found.imag > 0)])


@dataclass(frozen=True, eq=False)
class MeasuredModes:
    """What the sweep says of natural modes.

    Attributes
    ----------
    modes : tuple of MeasuredMode
        Within the band, lowest first.
    order : int
        Pole pairs of the model.
    held_out_error : float
        Rms of its prediction of parts it had not seen.
    model : PoleModel
    """

    modes: tuple[MeasuredMode, ...]
    order: int
    held_out_error: float
    model: PoleModel
    notes: tuple[str, ...] = ()


def measured_modes(
    measurement: Measurement, *, delay_s: float = 0.0, delay_sigma_s: float = PLANE_SIGMA_S
) -> MeasuredModes:
    """Natural modes of a measured antenna.

    Parameters
    ----------
    measurement : Measurement
        At the feed: a cable in between moves the zeros of 1 + reflection.
    delay_s : float, optional
        Of line between the reference plane and the feed, one way; taken off.
    delay_sigma_s : float, optional
        Its standard error, 0 where the plane is certain.

    Returns
    -------
    MeasuredModes
        Modes the data do not support are in it, marked and with the reason.
    """
    frequency, gamma = _thinned(measurement)
    folds = _folds(len(frequency))
    order, error = _chosen(frequency, gamma, folds, delay_s)
    model = fit_poles(frequency, gamma, order, delay_s)
    spare = [
        fit_poles(frequency[folds != k], gamma[folds != k], order, delay_s) for k in range(FOLDS)
    ]
    shifted = [
        fit_poles(frequency, gamma, order, delay_s + delay_sigma_s),
        fit_poles(frequency, gamma + DIRECTIVITY, order, delay_s),
        fit_poles(frequency, gamma + 1j * DIRECTIVITY, order, delay_s),
    ]
    band = (float(frequency[0]), float(frequency[-1]))
    modes = _modes(model, spare, shifted, band)
    notes = []
    if error > 0.05:
        notes.append(
            f"no model of up to {ORDERS[-1]} pole pairs predicts the curve within 0.05 (this one: "
            f"{error:.3f}): a long cable, noise or ripple hides the modes"
        )
    if delay_s:
        notes.append(f"a delay of {delay_s * 1e12:+.0f} ps one way was taken off")
    return MeasuredModes(modes, order, error, model, tuple(notes))


def fit_poles(
    frequency_hz: FloatArray, gamma: ComplexArray, order: int, delay_s: float = 0.0
) -> PoleModel:
    """Fit a reflection by `order` pole pairs and a constant, after taking a delay off.

    Parameters
    ----------
    frequency_hz : (F,) float array
    gamma : (F,) complex array
    order : int
    delay_s : float, optional
        One way.
    """
    scale = float(np.sqrt(frequency_hz[0] * frequency_hz[-1])) or float(frequency_hz[-1])
    s: ComplexArray = np.asarray(1j * frequency_hz / scale, dtype=np.complex128)
    turned = gamma * np.exp(4j * np.pi * frequency_hz * delay_s)
    flat: ComplexArray = np.asarray(turned, dtype=np.complex128)
    places = np.linspace(s[0].imag, s[-1].imag, order + 2)[1:-1]
    poles: ComplexArray = np.asarray((1j - 0.1) * places, dtype=np.complex128)
    for _ in range(ROUNDS):
        poles = _relocated(s, flat, poles)
    basis = _basis(s, poles)
    columns = np.hstack([basis, np.ones((len(s), 1))])
    found = _least(columns, flat)
    pairs = found[:-1].reshape(-1, 2) @ np.array([1, 1j])
    return PoleModel(
        np.concatenate([poles, poles.conj()]),
        np.concatenate([pairs, pairs.conj()]),
        float(found[-1]),
        scale,
        delay_s,
    )


def _basis(s: ComplexArray, poles: ComplexArray) -> ComplexArray:
    """Two real-coefficient functions for each pair: residues 1 and j."""
    ahead = 1 / (s[:, None] - poles)
    behind = 1 / (s[:, None] - poles.conj())
    pair = np.stack([ahead + behind, 1j * (ahead - behind)], axis=2)
    return np.asarray(pair.reshape(len(s), -1))


def _relocated(s: ComplexArray, gamma: ComplexArray, poles: ComplexArray) -> ComplexArray:
    """One step of vector fitting: zeros of the common denominator become the poles."""
    basis = _basis(s, poles)
    columns = np.hstack([basis, np.ones((len(s), 1)), -gamma[:, None] * basis])
    found = _least(columns, gamma)[basis.shape[1] + 1 :]
    size = 2 * len(poles)
    matrix = np.zeros((size, size))
    for k, pole in enumerate(poles):
        matrix[2 * k : 2 * k + 2, 2 * k : 2 * k + 2] = [
            [pole.real, pole.imag],
            [-pole.imag, pole.real],
        ]
    ones = np.zeros(size)
    ones[::2] = 2.0
    moved = np.linalg.eigvals(matrix - np.outer(ones, found))
    decay = np.maximum(np.abs(moved.real), LEAST_DECAY * np.maximum(np.abs(moved), LEAST_DECAY))
    moved = -decay + 1j * moved.imag
    upper = moved[moved.imag > 1e-9]
    # Pairs that met on the real axis are parted again, so that the order stays.
    lost = np.sort_complex(moved[np.abs(moved.imag) <= 1e-9])[::2]
    parted = lost + 1j * np.maximum(0.1 * np.abs(lost), 1e-3)
    return np.asarray(np.concatenate([upper, parted])[: len(poles)])


def _least(columns: ComplexArray, wanted: ComplexArray) -> FloatArray:
    """Real least squares solution of a complex system, columns scaled alike."""
    matrix = np.vstack([columns.real, columns.imag])
    size = np.linalg.norm(matrix, axis=0)
    size[size == 0] = 1.0
    right = np.concatenate([wanted.real, wanted.imag])
    return np.asarray(np.linalg.lstsq(matrix / size, right, rcond=None)[0] / size)


def _thinned(measurement: Measurement) -> tuple[FloatArray, ComplexArray]:
    """At most some 250 points, means of neighbours."""
    group = max(len(measurement.frequency_hz) // MOST_POINTS, 1)
    count = len(measurement.frequency_hz) // group * group
    frequency = measurement.frequency_hz[:count].reshape(-1, group).mean(axis=1)
    gamma = measurement.reflection[:count].reshape(-1, group).mean(axis=1)
    return np.asarray(frequency), np.asarray(gamma)


def _folds(points: int) -> np.ndarray[tuple[int, ...], np.dtype[np.intp]]:
    return np.asarray(np.arange(points) * BLOCKS // points % FOLDS, dtype=np.intp)


def _chosen(
    frequency: FloatArray,
    gamma: ComplexArray,
    folds: np.ndarray[tuple[int, ...], np.dtype[np.intp]],
    delay_s: float,
) -> tuple[int, float]:
    """The lowest order that no higher one beats clearly, and its held-out error."""
    most = [n for n in ORDERS if 12 * n <= len(frequency)] or [1]
    errors = {n: _held_out(frequency, gamma, folds, n, delay_s) for n in most}
    best = most[0]
    for order in most[1:]:
        if errors[order] < TELLING * errors[best]:
            best = order
    return best, errors[best]


def _held_out(
    frequency: FloatArray,
    gamma: ComplexArray,
    folds: np.ndarray[tuple[int, ...], np.dtype[np.intp]],
    order: int,
    delay: float,
) -> float:
    total = 0.0
    for k in range(FOLDS):
        kept = folds != k
        model = fit_poles(frequency[kept], gamma[kept], order, delay)
        off = gamma[~kept] - model(frequency[~kept])
        # A pole beside a held-out block may miss it by far; the reflection stays near the disc.
        total += float(np.sum(np.minimum(np.abs(off), 2.0) ** 2))
    return float(np.sqrt(total / len(frequency)))


def _modes(
    model: PoleModel,
    spare: list[PoleModel],
    shifted: list[PoleModel],
    band: tuple[float, float],
) -> tuple[MeasuredMode, ...]:
    natural = model.natural_hz()
    inside = (natural.real > band[0]) & (natural.real < band[1])
    natural = natural[inside & (natural.real > 2 * 0.3 * natural.imag)]
    natural = natural[np.argsort(natural.real)]
    others = np.array([_matched(natural, other.natural_hz()) for other in spare])
    moved = np.array([_matched(natural, other.natural_hz()) for other in shifted])
    return tuple(_mode(complex(pole), others[:, k], moved[:, k]) for k, pole in enumerate(natural))


def _matched(natural: ComplexArray, other: ComplexArray) -> ComplexArray:
    """The other poles that belong to these, NaN where there are too few."""
    result = np.full(len(natural), complex(np.nan, np.nan))
    if len(natural) and len(other):
        rows, columns = linear_sum_assignment(np.abs(natural[:, None] - other[None]))
        result[rows] = other[columns]
    return result


def _mode(pole: complex, seen: ComplexArray, moved: ComplexArray) -> MeasuredMode:
    q = pole.real / (2 * pole.imag)
    if not np.isfinite(seen).all():
        nan = float("nan")
        return MeasuredMode(
            pole.real, q, nan, nan, False, "it vanishes when a part of the sweep is left out"
        )
    spread = _spread(seen.real, moved.real - pole.real)
    q_spread = _spread(seen.real / (2 * seen.imag), moved.real / (2 * moved.imag) - q)
    why = ""
    if spread > LARGEST_SPREAD * pole.real:
        why = f"its frequency is uncertain by {spread / pole.real:.1%}"
    elif q < LEAST_Q:
        why = f"a Q of {q:.2f} is no resonance but the background's slope"
    elif q_spread > LARGEST_Q_SPREAD * q:
        why = f"its Q is uncertain by {q_spread / q:.0%}"
    return MeasuredMode(pole.real, q, spread, q_spread, not why, why)


def _spread(left_out: FloatArray, shifts: FloatArray) -> float:
    """Standard error from values with a part left out each, and from shifts of one sigma each."""
    jackknife = (FOLDS - 1) / FOLDS * float(np.sum((left_out - left_out.mean()) ** 2))
    return float(np.sqrt(jackknife + float(np.sum(np.nan_to_num(shifts) ** 2))))
