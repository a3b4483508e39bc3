"""The frequency sweep: one vector-valued rational function fitted to a few solved frequencies.

References
----------
Nakatsukasa, Sete, Trefethen, "The AAA algorithm for rational approximation", SIAM J. Sci. Comput.
40(3), 2018, doi:10.1137/16M1106122. All components share one set of weights, hence of poles.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass

import numpy as np
import scipy.linalg
from numpy.typing import NDArray

FloatArray = NDArray[np.float64]
ComplexArray = NDArray[np.complex128]

FIRST_SAMPLES = 8
VERIFIED_EACH = 9
"""One sample more is spent on verification for so many, and two at least: a long band hides a mode
more easily, and one agreement may be luck."""

MOST_BESIDE_POLES = 3
LOOSE = 5e-4
STRONG = 0.02
"""Up to so many samples more are taken by poles that the last one still moved by this part of their
frequency, if their peaks reach that part of the highest. Currents settle before the poles of low Q
do: of strips bent, joined and closed to loops, poles came out up to 0.3 % off without it, 0.07 %
with it, for a sample more in one sweep of four."""

SKETCH = 6
"""Random combinations of all currents that the fit looks at."""

CANDIDATES = 300
TOLERANCE_FLOOR = 3e-4
FIT_TOLERANCE_FLOOR = 3e-5
"""The engine's currents carry about 1e-5 of noise; a tighter fit would find poles in it."""


@dataclass(frozen=True)
class RationalModel:
    """Barycentric rational function through solved samples.

    Attributes
    ----------
    frequency_hz : (M,) float array
        Samples in ascending order.
    weight : (M,) complex array
        Barycentric weights; 0 for samples that only verified the fit.
    values : (M, K) complex array
        Solved vectors.
    """

    frequency_hz: FloatArray
    weight: ComplexArray
    values: ComplexArray

    def __call__(self, frequency_hz: FloatArray) -> ComplexArray:
        """Evaluate at (F,) frequencies in Hz; returns (F, K)."""
        return self.combined(frequency_hz, self.values)

    def combined(self, frequency_hz: FloatArray, values: ComplexArray) -> ComplexArray:
        """Evaluate what takes the given (M, K) or (M,) values at the samples; (F, K) or (F,)."""
        return barycentric_values(
            np.atleast_1d(frequency_hz), self.frequency_hz, self.weight, values
        )

    def poles_hz(self) -> ComplexArray:
        """Poles in the complex frequency plane, Hz; that of a decaying mode has Im > 0."""
        used = self.weight != 0
        scale = float(self.frequency_hz[-1])
        return _poles(self.frequency_hz[used] / scale, self.weight[used]) * scale

    def residues(self, poles_hz: ComplexArray) -> ComplexArray:
        """Residues at simple poles, (P, K), in units of the values times Hz."""
        used = self.weight != 0
        cauchy = 1.0 / (poles_hz[:, None] - self.frequency_hz[used][None])
        numerator = (cauchy * self.weight[used]) @ self.values[used]
        slope = -(cauchy**2) @ self.weight[used]
        return np.asarray(numerator / slope[:, None], dtype=np.complex128)


@dataclass(frozen=True)
class Sweep:
    """Outcome of an adaptive sweep.

    Attributes
    ----------
    model : RationalModel
    converged : bool
    error : float
        Last difference between prediction and model, relative to the median norm of the values.
    spare_models : tuple of RationalModel
        Fits with one sample left out, for judging which poles are real.
    """

    model: RationalModel
    converged: bool
    error: float
    spare_models: tuple[RationalModel, ...]


def barycentric_values(
    frequency_hz: FloatArray, samples_hz: FloatArray, weight: ComplexArray, values: ComplexArray
) -> ComplexArray:
    """Evaluate a barycentric rational function, quickly also where F is large.

    Parameters
    ----------
    frequency_hz : (F,) float array
    samples_hz : (M,) float array
    weight : (M,) complex array
    values : (M, K) or (M,) complex array
        At the samples.

    Returns
    -------
    (F, K) or (F,) complex array
    """
    columns = values.reshape(len(values), -1)
    above = np.empty((len(weight), columns.shape[1] + 1), dtype=np.complex128)
    above[:, :-1], above[:, -1] = weight[:, None] * columns, weight
    difference = frequency_hz[:, None] - samples_hz
    met = (difference == 0).any(axis=1)
    difference[met] = 1.0
    # One product of real matrices: the real and the imaginary parts lie side by side.
    sums = ((1.0 / difference) @ above.view(np.float64)).view(np.complex128)
    result = sums[:, :-1] / sums[:, -1:]
    for row in np.flatnonzero(met):
        at = int(np.argmin(abs(frequency_hz[row] - samples_hz)))
        if weight[at] != 0:
            result[row] = columns[at]
        else:  # a sample of weight 0 takes no part, not even where it is asked for
            others = np.arange(len(weight)) != at
            terms = weight[others] / (frequency_hz[row] - samples_hz[others])
            result[row] = terms @ columns[others] / terms.sum()
    return result.reshape(len(frequency_hz), *values.shape[1:])


def fit_weights(
    frequency: FloatArray, sketch: ComplexArray, tolerance: float
) -> tuple[ComplexArray, float]:
    """Set-valued AAA: barycentric weights for few vector-valued samples.

    Parameters
    ----------
    frequency : (M,) float array
        Scaled to order one.
    sketch : (M, K) complex array
    tolerance : float
        Largest misfit at the samples that are not interpolated, relative to the largest norm.

    Returns
    -------
    weights : (M,) complex array
        0 for samples not used as support points.
    misfit : float
    """
    fit = _fit(frequency, sketch, tolerance, ())
    return fit.weights, fit.misfit


@dataclass(frozen=True)
class _Fit:
    """Weights, 0 for samples that are no support points, and the latter as they were chosen."""

    weights: ComplexArray
    misfit: float
    support: tuple[int, ...]


def _fit(
    frequency: FloatArray, sketch: ComplexArray, tolerance: float, first: Sequence[int]
) -> _Fit:
    """As `fit_weights`, beginning with some samples as support points."""
    count, width = sketch.shape
    if count < 3:
        raise ValueError(f"a rational fit needs at least 3 samples, got {count}")
    apart = frequency[:, None] - frequency
    np.fill_diagonal(apart, 1.0)  # a sample is never held against itself
    cauchy = 1.0 / apart
    slopes = (sketch[:, None] - sketch) * cauchy[:, :, None]
    scale = float(np.sqrt(_powers(sketch).max()))
    support = list(first) or [int(np.argmax(_powers(sketch - sketch.mean(axis=0))))]
    rest = [k for k in range(count) if k not in support]
    while True:
        loewner = slopes[rest][:, support].swapaxes(1, 2).reshape(-1, len(support))
        weights = np.linalg.svd(loewner, full_matrices=False)[2][-1].conj()
        terms = cauchy[rest][:, support] * weights
        fitted = terms @ sketch[support] / terms.sum(axis=1, keepdims=True)
        missed = _powers(sketch[rest] - fitted)
        misfit = float(np.sqrt(missed.max())) / scale
        enough = len(rest) > 1 and (len(rest) - 1) * width >= len(support) + 1
        if misfit < tolerance or not enough:
            break
        support.append(rest.pop(int(np.argmax(missed))))
    result = np.zeros(count, dtype=np.complex128)
    result[support] = weights
    return _Fit(result, misfit, tuple(support))


def _powers(rows: ComplexArray) -> FloatArray:
    """Squared norm of each row."""
    return np.asarray(
        np.einsum("ij,ij->i", rows.real, rows.real) + np.einsum("ij,ij->i", rows.imag, rows.imag)
    )


def _poles(frequency: FloatArray, weight: ComplexArray) -> ComplexArray:
    """Zeros of the barycentric denominator by its arrowhead pencil."""
    count = len(frequency)
    right = np.eye(count + 1, dtype=np.complex128)
    right[0, 0] = 0
    left = np.zeros((count + 1, count + 1), dtype=np.complex128)
    left[0, 1:] = weight
    left[1:, 0] = 1
    left[1:, 1:] = np.diag(frequency)
    poles = scipy.linalg.eigvals(left, right)
    return np.asarray(poles[np.isfinite(poles)], dtype=np.complex128)


def adaptive_sweep(
    solve: Callable[[float], ComplexArray],
    start_hz: float,
    stop_hz: float,
    *,
    tolerance: float = 1e-3,
    most_samples: int = 40,
    seed: int = 20,
    observe: FloatArray | None = None,
) -> Sweep:
    """Sample a vector response until a rational function describes it over a whole band.

    Parameters
    ----------
    solve : callable
        Frequency in Hz to a (K,) complex vector.
    start_hz, stop_hz : float
    tolerance : float
        Largest difference between successive models relative to the median norm of the response;
        at least 3e-4, to stay clear of the engine's noise.
    most_samples : int
        Cap on solved frequencies; a sweep that reaches it says it did not converge.
    observe : (P, K) float array, optional
        What of the vector the fit is judged by, as a matrix; all of it if left out. The whole
        vector is still evaluated with the same poles.
    seed : int
        Of the random projection that compresses the vectors for the fit.

    Returns
    -------
    Sweep
    """
    search = _Search(solve, start_hz, stop_hz, max(tolerance, TOLERANCE_FLOOR), seed, observe)
    verified = beside_poles = 0
    error = np.inf
    while True:
        wanted, difference = search.where_in_doubt()
        full = len(search.frequencies) >= most_samples
        if difference < search.tolerance:
            wanted = search.emptiest()
            if verified >= max(2, (len(search.frequencies) - verified) / VERIFIED_EACH):
                pole = search.loose_pole() if beside_poles < MOST_BESIDE_POLES else None
                if pole is None or full:
                    return search.result(converged=True, error=error)
                wanted = search.around(pole)
                beside_poles += 1
        if full:
            return search.result(converged=False, error=max(error, difference))
        error = search.error_at(wanted)
        verified = verified + 1 if error < search.tolerance else 0


class _Search:
    """Samples taken so far, the present fit and the one before it."""

    def __init__(
        self,
        solve: Callable[[float], ComplexArray],
        start_hz: float,
        stop_hz: float,
        tolerance: float,
        seed: int,
        observe: FloatArray | None,
    ) -> None:
        self.solve = solve
        self.start_hz, self.stop_hz = start_hz, stop_hz
        self.tolerance = tolerance
        angles = np.arange(FIRST_SAMPLES) * np.pi / (FIRST_SAMPLES - 1)
        first = (start_hz + stop_hz) / 2 - (stop_hz - start_hz) / 2 * np.cos(angles)
        first[0], first[-1] = start_hz, stop_hz
        self.frequencies: list[float] = [float(f) for f in first]
        self.values = [solve(f) for f in self.frequencies]
        size = len(self.values[0]) if observe is None else len(observe)
        rng = np.random.default_rng(seed)
        self.projection = rng.standard_normal((size, min(SKETCH, size))) / np.sqrt(size)
        if observe is not None:
            self.projection = observe.T @ self.projection
        self.sketch = [value @ self.projection for value in self.values]
        self.candidates = np.linspace(start_hz, stop_hz, CANDIDATES)
        self.fits: dict[tuple[int, ...], ComplexArray] = {}
        self.support: tuple[int, ...] = ()
        # The first comparison is with the fit that lacks the sample in the middle of the band.
        middle = FIRST_SAMPLES // 2
        self.newest = self.frequencies[middle]
        self.before = self._on_candidates([k for k in range(FIRST_SAMPLES) if k != middle])
        self.now = self._on_candidates(range(FIRST_SAMPLES))

    def _weights(self, chosen: list[int] | range) -> ComplexArray:
        """Weights of the fit through some samples, each set fitted once, in the order asked for."""
        key = tuple(sorted(chosen))
        if key not in self.fits:
            self.fits[key] = self._fitted(key)
        return self.fits[key][np.searchsorted(key, chosen)]

    def _fitted(self, chosen: tuple[int, ...]) -> ComplexArray:
        frequency = np.array([self.frequencies[k] for k in chosen]) / self.stop_hz
        sketch = np.array([self.sketch[k] for k in chosen])
        fit_tolerance = max(self.tolerance / 10, FIT_TOLERANCE_FLOOR)
        # The last fit had one sample more or less. Begun with all of its support points but the
        # last, this one may still end with fewer.
        first = [chosen.index(k) for k in self.support[:-1] if k in chosen]
        fit = _fit(frequency, sketch, fit_tolerance, first)
        self.support = tuple(chosen[k] for k in fit.support)
        return fit.weights

    def _on_candidates(self, chosen: list[int] | range) -> ComplexArray:
        samples = np.array([self.frequencies[k] for k in chosen])
        sketch = np.array([self.sketch[k] for k in chosen])
        return barycentric_values(self.candidates, samples, self._weights(chosen), sketch)

    def scale(self) -> float:
        return float(np.median(np.linalg.norm(self.now, axis=1)))

    def where_in_doubt(self) -> tuple[float, float]:
        """Where the next sample tells most, and by how much the model may be off at worst.

        The last two models differ most about the sample that only the later one knows. There it is
        exact, so up to the next sample around their difference counts in proportion to the
        distance. A difference beyond the currents themselves says no more than that neither model
        is any good; such places are judged by how far the samples are.
        """
        taken = np.array(self.frequencies)
        away = abs(self.candidates - self.newest)
        reach = np.min(abs(taken - self.newest)[taken != self.newest])
        difference = np.linalg.norm(self.now - self.before, axis=1) / self.scale()
        difference *= np.minimum(away / reach, 1.0)
        empty = np.min(abs(self.candidates[:, None] - taken), axis=1)
        difference[empty < 1e-3 * (self.stop_hz - self.start_hz)] = -1.0
        worst = float(difference.max())
        rank = np.minimum(difference, 1.0) * empty if worst > 1.0 else difference
        return float(self.candidates[int(np.argmax(rank))]), worst

    def add(self, frequency_hz: float) -> None:
        self.newest = frequency_hz
        self.frequencies.append(frequency_hz)
        self.values.append(self.solve(frequency_hz))
        self.sketch.append(self.values[-1] @ self.projection)
        self.before, self.now = self.now, self._on_candidates(range(len(self.frequencies)))

    def loose_pole(self) -> complex | None:
        """The strong pole that the last sample moved farthest, if by more than `LOOSE`."""
        count = len(self.frequencies)
        now = self._sketched(range(count))
        poles, before = now.poles_hz(), self._sketched(range(count - 1)).poles_hz()
        poles = poles[(poles.imag > 0) & (poles.real <= self.stop_hz)]
        poles = poles[(poles.real + poles.imag >= self.start_hz) & (poles.real > 3 * poles.imag)]
        if not poles.size or not before.size:
            return None
        height = np.linalg.norm(now.residues(poles), axis=1) / poles.imag
        poles = poles[height > STRONG * height.max()]
        moved = np.min(abs(poles[:, None] - before), axis=1) / poles.real
        worst = int(np.argmax(moved))
        return complex(poles[worst]) if moved[worst] > LOOSE else None

    def _sketched(self, chosen: range) -> RationalModel:
        samples = np.array([self.frequencies[k] for k in chosen])
        sketch = np.array([self.sketch[k] for k in chosen])
        return RationalModel(samples, self._weights(chosen), sketch)

    def around(self, pole_hz: complex) -> float:
        """A frequency by the pole, far from the samples taken."""
        empty = np.min(abs(self.candidates[:, None] - np.array(self.frequencies)), axis=1)
        worth = empty / (abs(self.candidates - pole_hz) + pole_hz.imag / 2)
        return float(self.candidates[int(np.argmax(worth))])

    def emptiest(self) -> float:
        """Middle of the widest interval without a sample, judged as Chebyshev nodes lie."""
        middle, half = (self.start_hz + self.stop_hz) / 2, (self.stop_hz - self.start_hz) / 2
        angles = np.sort(np.arccos(np.clip((middle - np.array(self.frequencies)) / half, -1, 1)))
        widest = int(np.argmax(np.diff(angles)))
        return float(middle - half * np.cos((angles[widest] + angles[widest + 1]) / 2))

    def error_at(self, frequency_hz: float) -> float:
        """Solve one more frequency and return how far the model was off there."""
        count = len(self.frequencies)
        samples = np.array(self.frequencies)
        predicted = barycentric_values(
            np.array([frequency_hz]), samples, self._weights(range(count)), np.array(self.sketch)
        )[0]
        self.add(frequency_hz)
        return float(np.linalg.norm(self.sketch[-1] - predicted)) / self.scale()

    def result(self, *, converged: bool, error: float) -> Sweep:
        order = np.argsort(self.frequencies)
        spare = [
            self._model([int(k) for k in np.delete(order, drop)]) for drop in _left_out(len(order))
        ]
        return Sweep(self._model([int(k) for k in order]), converged, error, tuple(spare))

    def _model(self, chosen: list[int]) -> RationalModel:
        return RationalModel(
            np.array([self.frequencies[k] for k in chosen]),
            self._weights(chosen),
            np.array([self.values[k] for k in chosen]),
        )


def _left_out(count: int) -> tuple[int, ...]:
    """Inner samples to leave out in turn: one in each third of the band."""
    return tuple(sorted({max(1, min(count - 2, round(count * t))) for t in (0.25, 0.5, 0.75)}))
