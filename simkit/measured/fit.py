"""Fit named uncertain values of a study to measured sweeps.

Least squares of the complex reflection (or of its magnitude, or of the modes' dips alone) over the
free values and over what a bench adds (`bench_errors`), each of the latter with its usual size as
prior. Neighbouring points of a sweep share their errors, so they count as far fewer: the weight
comes from the size and the correlation length of the residuals. The intervals hold 95 % and contain
the error of the model itself.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass, field, replace
from typing import TYPE_CHECKING, Literal

import numpy as np
from scipy.optimize import least_squares
from scipy.stats import qmc

from simkit.errors import MeasurementError
from simkit.measured.bench_errors import (
    ANALYSER,
    AnalyserErrors,
    ErrorSizes,
    warp,
    with_capacitance,
)
from simkit.measured.dips import measured_dips, pinned_dip, smooth
from simkit.measured.measurement import ComplexArray, FloatArray, Measurement
from simkit.measured.pairing import ModelledDip, Pairing
from simkit.measured.quality import quality_notes
from simkit.measured.selection import CaseModes
from simkit.measured.simulator import REFERENCE_OHM, Engine, Surrogate, build_surrogate
from simkit.measured.variation import SCALE, Known, Variation
from simkit.response.features import Dip, find_dips

if TYPE_CHECKING:
    from simkit.study import Study

To = Literal["complex", "magnitude", "features"]

CANDIDATES = 128
"""Points of the bounds that are tried by pairing before the best ones start a search."""

STARTS = 3
SEED = 6
FIRST_SIGMA = 0.02
"""Residual of |reflection| assumed before the first look: a directivity of -34 dB."""

DIP_SIGMA = 0.002
"""Relative error of a measured dip's frequency: a directivity of -36 dB moves a dip of Q 5 by 0.3 %
at worst."""

DEPTH_SIGMA = 0.1
MOST_POINTS = 240
"""Neighbours are averaged down to about so many; their errors are shared anyway."""

POINTS_ACROSS = 8
"""Points kept across the narrowest dip."""

LIMIT_95 = 1.96
CONFOUNDED = 0.9
"""Correlation from which two values cannot be told apart in practice: together they are known more
than twice as well as each."""

LEARNT = 0.8
"""The data have not determined a value whose error they shrink by less than this."""


@dataclass(frozen=True, eq=False)
class FittedCurve:
    """One measured file with the model before and after, all at the file's reference plane.

    Attributes
    ----------
    measurement : Measurement
        Within the band that was compared, referred to the study's resistance.
    build : dict of str to float
        Values as cut, SI.
    before, after : (F,) complex array
        Modelled reflection with the values of the study and with the fitted ones; the latter with
        the errors of the bench.
    dips : tuple of Dip
        Measured.
    pairs : tuple of (int, int)
        Half waves of the mode and place in `dips`.
    errors : AnalyserErrors
    """

    measurement: Measurement
    build: dict[str, float]
    before: ComplexArray
    after: ComplexArray
    dips: tuple[Dip, ...]
    pairs: tuple[tuple[int, int], ...]
    errors: AnalyserErrors
    modes_before: CaseModes
    modes_after: CaseModes

    @property
    def residual(self) -> ComplexArray:
        """Measured minus fitted reflection."""
        return np.asarray(self.measurement.reflection - self.after)


@dataclass(frozen=True)
class FittedValue:
    """One free value, SI; `low` and `high` hold 95 %."""

    name: str
    nominal: float
    value: float
    sigma: float
    bounds: tuple[float, float]
    prior: Known | None
    learnt: float
    """Standard deviation after over before: near 1 if the data say nothing."""

    @property
    def low(self) -> float:
        return self.value - LIMIT_95 * self.sigma

    @property
    def high(self) -> float:
        return self.value + LIMIT_95 * self.sigma

    @property
    def at_bound(self) -> bool:
        """The search was stopped by a bound."""
        low, high = self.bounds
        return min(self.value - low, high - self.value) < 1e-4 * (high - low)


@dataclass(frozen=True)
class Confounding:
    """Two values the data cannot tell apart.

    ``first**1 * second**exponent`` is `product` within `relative_sigma`.
    """

    first: str
    second: str
    correlation: float
    exponent: float
    product: float
    relative_sigma: float


@dataclass(frozen=True, eq=False)
class FitResult:
    """What a fit found.

    Attributes
    ----------
    values : tuple of FittedValue
    correlation : (P, P) float array
        Of the free values, priors included.
    confounded : tuple of Confounding
        By the data alone, priors left out.
    curves : tuple of FittedCurve
    capacitance_f : float
        Across the feed, beyond the model's.
    mode_errors : dict of int to float
        By half waves: by how much the measured mode lies below the modelled one, relative, within
        the model's error.
    rms_before, rms_after : float
        Of the difference in reflection.
    surrogate_error : float
        Largest |error| of the interpolated model against a solution at the fitted values.
    """

    study: Study = field(repr=False)
    to: To
    values: tuple[FittedValue, ...]
    correlation: FloatArray
    confounded: tuple[Confounding, ...]
    curves: tuple[FittedCurve, ...]
    capacitance_f: float
    mode_errors: dict[int, float]
    rms_before: float
    rms_after: float
    surrogate_error: float
    solves: int
    notes: tuple[str, ...]
    problem: FitProblem = field(repr=False)
    solution: FloatArray = field(repr=False)
    covariance: FloatArray = field(repr=False)

    def fitted(self) -> dict[str, float]:
        """Fitted numbers by name, SI."""
        return {value.name: value.value for value in self.values}

    def as_text(self) -> str:
        """Values with intervals and what they mean."""
        from simkit.measured.fit_words import fit_text

        return fit_text(self)

    def study_text(self) -> str:
        """The study's text with the fitted values in it."""
        names = ", ".join(str(curve.measurement.path.name) for curve in self.curves)
        head = [f"Fitted to {names}; intervals of 95 %:"]
        variation = self.problem.variation
        head += [
            f"  {v.name} = {variation.text(v.name, v.value)}, "
            f"from {variation.text(v.name, v.low)} to {variation.text(v.name, v.high)}"
            for v in self.values
        ]
        return variation.rewritten(self.fitted(), head)


@dataclass(frozen=True, eq=False)
class _File:
    measurement: Measurement
    build: dict[str, float]
    surrogate: Surrogate
    dips: tuple[Dip, ...]
    noise: float
    pins: dict[int, int]
    weight: float = 0.0


class FitProblem:
    """Residuals over the unknowns: free values in half widths of their bounds, then errors.

    The errors are in standard deviations: one per mode, one of all modes, the capacitance, then
    `ANALYSER` for each file.
    """

    def __init__(
        self,
        variation: Variation,
        files: Sequence[_File],
        bounds: Mapping[str, tuple[float, float]],
        known: Mapping[str, Known],
        sizes: ErrorSizes,
        to: To,
    ) -> None:
        self.variation, self.files, self.to, self.sizes = variation, list(files), to, sizes
        self.names = tuple(bounds)
        self.bounds = dict(bounds)
        self.known = dict(known)
        pairs = [bounds[name] for name in self.names]
        self.middle = np.array([(low + high) / 2 for low, high in pairs])
        self.half = np.array([(high - low) / 2 for low, high in pairs])
        self.half_waves = tuple(sorted({n for file in files for n in file.surrogate.half_waves}))
        self.pairings: list[tuple[tuple[int, int], ...]] = [() for _ in files]

    @property
    def free(self) -> int:
        """Number of free values."""
        return len(self.names)

    @property
    def unknowns(self) -> int:
        """Free values and errors."""
        return self.common + ANALYSER * len(self.files)

    @property
    def common(self) -> int:
        """Unknowns that all files share; they come first."""
        return self.free + len(self.half_waves) + 2

    def values(self, x: FloatArray, build: Mapping[str, float]) -> dict[str, float]:
        """Numbers for every axis of a surrogate, SI."""
        numbers = self.middle + self.half * x[: self.free]
        nominal = {
            axis.name: build.get(axis.name, self.variation.nominal(axis.name))
            for file in self.files
            for axis in file.surrogate.axes
        }
        return nominal | dict(zip(self.names, map(float, numbers), strict=True))

    def at(self, values: Mapping[str, float]) -> FloatArray:
        """Unknowns of given values without errors."""
        x = np.zeros(self.unknowns)
        for place, name in enumerate(self.names):
            x[place] = np.clip((values[name] - self.middle[place]) / self.half[place], -1, 1)
        return x

    def mode_errors(self, x: FloatArray) -> FloatArray:
        """Relative frequency error of each mode of `half_waves`."""
        own = x[self.free : self.free + len(self.half_waves)] * self.sizes.mode
        return np.asarray(own + x[self.common - 2] * self.sizes.model)

    def capacitance_f(self, x: FloatArray) -> float:
        """Capacitance across the feed."""
        return float(x[self.common - 1] * self.sizes.capacitance_f)

    def analyser(self, x: FloatArray, place: int) -> AnalyserErrors:
        """Errors of one file."""
        start = self.common + place * ANALYSER
        return AnalyserErrors.of(x[start : start + ANALYSER], self.sizes)

    def true_curve(
        self, x: FloatArray, surrogate: Surrogate, values: Mapping[str, float], f: FloatArray
    ) -> ComplexArray:
        """Reflection of the antenna itself, reference `REFERENCE_OHM`, without the analyser."""
        modes = surrogate.modes(values)
        errors = self.mode_errors(x)[[self.half_waves.index(n) for n in modes.half_waves]]
        places = np.where(np.isfinite(modes.dip_hz), modes.dip_hz, modes.natural_hz * 1.02)
        gamma = surrogate.reflection(values, warp(f, places, errors))
        return with_capacitance(f, gamma, self.capacitance_f(x), REFERENCE_OHM)

    def shown(self, x: FloatArray, place: int) -> ComplexArray:
        """What the analyser shows of one file's antenna, in the file's reference."""
        file = self.files[place]
        f = file.measurement.frequency_hz
        gamma = self.true_curve(x, file.surrogate, self.values(x, file.build), f)
        gamma = referred(gamma, REFERENCE_OHM, file.measurement.reference_ohm)
        return self.analyser(x, place).apply(f, gamma)

    def residuals(self, x: FloatArray) -> FloatArray:
        """Weighted differences of all files, then the priors."""
        parts = []
        for place, file in enumerate(self.files):
            if self.to == "features":
                parts.append(self.feature_residuals(x, place))
                continue
            shown, measured = self.shown(x, place), file.measurement.reflection
            if self.to == "magnitude":
                parts.append(file.weight * (abs(measured) - abs(shown)))
            else:
                off = file.weight * (measured - shown)
                parts += [off.real, off.imag]
        return np.concatenate([*parts, *self.priors(x)])

    def priors(self, x: FloatArray) -> list[FloatArray]:
        """Rows of the priors: of the known values, then of the errors."""
        numbers = self.middle + self.half * x[: self.free]
        rows = [
            (numbers[self.names.index(k.name)] - k.value) / k.sigma for k in self.known.values()
        ]
        return [np.array(rows), x[self.free :]]

    def feature_residuals(self, x: FloatArray, place: int) -> FloatArray:
        """Dips against dips of the paired modes: frequency and depth."""
        file = self.files[place]
        modes = file.surrogate.modes(self.values(x, file.build))
        errors = dict(zip(self.half_waves, self.mode_errors(x), strict=True))
        rows = []
        for half_waves, dip in self.pairings[place]:
            where = modes.half_waves.index(half_waves)
            if not np.isfinite(modes.dip_hz[where]):
                continue
            modelled = modes.dip_hz[where] * (1 - errors[half_waves])
            measured = file.dips[dip]
            rows.append(np.log(modelled / measured.frequency_hz) / DIP_SIGMA)
            depths = 10 ** (-np.array([modes.return_loss_db[where], measured.return_loss_db]) / 20)
            rows.append((depths[0] - depths[1]) / DEPTH_SIGMA)
        return np.array(rows)

    def pair(self, x: FloatArray, place: int) -> Pairing:
        """Pair one file's dips with the modes at some unknowns."""
        file = self.files[place]
        modes = file.surrogate.modes(self.values(x, file.build))
        heard = [ModelledDip(d.frequency_hz, 10 ** (-d.return_loss_db / 20)) for d in file.dips]
        band = file.surrogate.band_hz
        swept = (file.measurement.frequency_hz[0], file.measurement.frequency_hz[-1])
        pins = [
            (modes.half_waves.index(n), j) for n, j in file.pins.items() if n in modes.half_waves
        ]
        return modes.pair(heard, band, (float(swept[0]), float(swept[1])), pins)

    def settle_pairs(self, x: FloatArray) -> None:
        """Keep the pairing at some unknowns for the features."""
        for place, file in enumerate(self.files):
            names = file.surrogate.half_waves
            found = {names[i]: j for i, j in self.pair(x, place).pairs}
            self.pairings[place] = tuple(sorted(found.items()))

    def misfit(self, x: FloatArray) -> float:
        """How badly the modes at some unknowns fit the measured dips."""
        return sum(self.pair(x, place).misfit for place in range(len(self.files)))

    def starts(self) -> list[FloatArray]:
        """Nominal values and an even choice of the bounds, best paired first."""
        points = [np.zeros(self.free)]
        if self.free:
            cloud = qmc.Sobol(self.free, seed=SEED).random(CANDIDATES)
            points += list(2 * cloud - 1)
        full = [np.concatenate([point, np.zeros(self.unknowns - self.free)]) for point in points]
        costs = [self.misfit(x) + 0.5 * float(np.sum(self.priors(x)[0] ** 2)) for x in full]
        return [full[k] for k in np.argsort(costs)[:STARTS]]

    def solve(self, start: FloatArray) -> FloatArray:
        """Least squares from one start."""
        limit = np.full(self.unknowns, np.inf)
        limit[: self.free] = 1.0
        found = least_squares(
            self.residuals,
            np.clip(start, -0.999 * limit, 0.999 * limit),
            bounds=(-limit, limit),
            x_scale=1.0,
            xtol=1e-7,
            ftol=1e-9,
            max_nfev=60,
        )
        return np.asarray(found.x)

    def reweigh(self, x: FloatArray) -> None:
        """Set each file's weight from the size and the correlation length of its residual."""
        for place, file in enumerate(self.files):
            off = file.measurement.reflection - self.shown(x, place)
            size = max(float(np.sqrt(np.mean(np.abs(off) ** 2) / 2)), file.noise, 1e-4)
            self.files[place] = replace(file, weight=1 / (size * np.sqrt(correlation_length(off))))

    def jacobian(self, x: FloatArray) -> FloatArray:
        """Central differences of the residuals, (R, U)."""
        step = 1e-4
        columns = []
        for place in range(self.unknowns):
            ahead, back = x.copy(), x.copy()
            ahead[place] += step
            back[place] -= step
            columns.append((self.residuals(ahead) - self.residuals(back)) / (2 * step))
        return np.array(columns).T


def referred(gamma: ComplexArray, from_ohm: float, to_ohm: float) -> ComplexArray:
    """Refer a reflection to another resistance."""
    step = (from_ohm - to_ohm) / (from_ohm + to_ohm)
    return np.asarray((gamma + step) / (1 + step * gamma))


def correlation_length(off: ComplexArray) -> float:
    """Points of a residual that count as one, at least 1.

    The integral of the correlation up to where it has died away.
    """
    count = len(off)
    spectrum = np.fft.fft(off, 2 * count)
    correlation = np.fft.ifft(abs(spectrum) ** 2)[:count].real
    if not correlation[0] > 0:
        return 1.0
    correlation = correlation / correlation[0]
    low = np.flatnonzero(correlation < 0.1)
    stop = int(low[0]) if len(low) else count
    return float(1 + 2 * correlation[1:stop].sum())


def fit(
    study: Study,
    measurements: Sequence[Measurement],
    free: Mapping[str, tuple[float, float]],
    *,
    known: Sequence[Known] = (),
    to: To = "complex",
    builds: Sequence[Mapping[str, float]] | None = None,
    pins: Sequence[Mapping[int, float]] | None = None,
    sizes: ErrorSizes | None = None,
    also: Mapping[str, tuple[float, float]] | None = None,
    surrogate: Surrogate | None = None,
    progress: Callable[[int, int], None] | None = None,
) -> FitResult:
    """Fit free values of a study to measured sweeps.

    Parameters
    ----------
    study : Study
    measurements : sequence of Measurement
        Repeats of one build, or several builds.
    free : mapping of str to (float, float)
        Names of values with their bounds, SI; ``scale`` stands for all dimensions alike.
    known : sequence of Known
        What is known of values. One that is not in `free` becomes free within three widths.
    to : {"complex", "magnitude", "features"}
        What to fit. The phase tells most, but only behind a good port extension.
    builds : sequence of mappings, optional
        Values as cut, SI, one per measurement; free names in it are not held.
    pins : sequence of mappings, optional
        Half waves to the frequency (Hz) of the measured dip that is certainly of that mode.
    sizes : ErrorSizes, optional
        Standard deviations of the bench's errors.
    also : mapping, optional
        Bounds of values that are not fitted but varied later.
    surrogate : Surrogate, optional
        Interpolated model over all of these values; solved through the engine if left out.
    progress : callable, optional
        Called with the number of solved points and their total.

    Returns
    -------
    FitResult

    Raises
    ------
    MeasurementError
        If there is nothing to fit, or no frequency in common.
    GeometryError, EngineError, StudyError
        If the study cannot be solved within the bounds.
    """
    variation = Variation(study)
    bounds, beliefs = _free_values(variation, free, known)
    sizes = sizes or ErrorSizes()
    files, engine, notes = _files(
        variation, measurements, bounds, builds, pins, also or {}, surrogate, progress
    )
    problem = FitProblem(variation, files, bounds, beliefs, sizes, to)
    nominal = problem.at({name: variation.nominal(name) for name in problem.names})
    solution = _searched(problem)
    covariance, data_only = _covariances(problem, solution)
    curves = tuple(_curve(problem, solution, nominal, place) for place in range(len(problem.files)))
    error = 0.0
    if engine is not None:
        at = problem.values(solution, problem.files[0].build)
        error = problem.files[0].surrogate.error_at(
            at, engine.node({k: v for k, v in at.items() if k != SCALE})
        )
    return FitResult(
        study=study,
        to=to,
        values=_fitted_values(problem, solution, covariance),
        correlation=_correlation(covariance[: problem.free, : problem.free]),
        confounded=_confounded(problem, solution, data_only),
        curves=curves,
        capacitance_f=problem.capacitance_f(solution),
        mode_errors=dict(
            zip(problem.half_waves, map(float, problem.mode_errors(solution)), strict=True)
        ),
        rms_before=_rms([c.measurement.reflection - c.before for c in curves]),
        rms_after=_rms([c.residual for c in curves]),
        surrogate_error=error,
        solves=engine.solves if engine is not None else 0,
        notes=tuple(dict.fromkeys(notes)),
        problem=problem,
        solution=solution,
        covariance=covariance,
    )


def _free_values(
    variation: Variation, free: Mapping[str, tuple[float, float]], known: Sequence[Known]
) -> tuple[dict[str, tuple[float, float]], dict[str, Known]]:
    beliefs = {k.name: k for k in known}
    bounds = {name: pair for name, pair in free.items()}
    for k in known:
        bounds.setdefault(k.name, (k.value - 3 * k.width, k.value + 3 * k.width))
    if not bounds:
        raise MeasurementError(
            "nothing is free to fit: name at least one value with its bounds, as in "
            "--free carrier.permittivity=2..3.5"
        )
    for name, (low, high) in bounds.items():
        if not (name == SCALE and SCALE not in variation.study.values):
            variation.check(name)
        if not low < high:
            raise MeasurementError(f"the bounds of {name} must ascend, got {low:g} to {high:g}")
    return bounds, beliefs


def _files(
    variation: Variation,
    measurements: Sequence[Measurement],
    bounds: Mapping[str, tuple[float, float]],
    builds: Sequence[Mapping[str, float]] | None,
    pins: Sequence[Mapping[int, float]] | None,
    also: Mapping[str, tuple[float, float]],
    surrogate: Surrogate | None,
    progress: Callable[[int, int], None] | None,
) -> tuple[list[_File], Engine | None, list[str]]:
    if not measurements:
        raise MeasurementError("no measured file is given; name at least one")
    antenna = variation.study.nominal()
    axes = dict(bounds)
    for name, (low, high) in also.items():
        a, b = axes.get(name, (low, high))
        axes[name] = (min(a, low), max(b, high))
    made: dict[tuple[tuple[str, float], ...], Surrogate] = {}
    files, notes, engine = [], [], None
    band = (antenna.frequency.start_hz, antenna.frequency.stop_hz)
    for place, raw in enumerate(measurements):
        measurement = raw.renormalised(antenna.reference_ohm)
        build = dict(builds[place]) if builds is not None else {}
        held = {k: v for k, v in build.items() if k not in axes}
        key = tuple(sorted(held.items()))
        if surrogate is not None:
            made[key] = surrogate
        elif key not in made:
            common = _common(measurement, band)
            made[key], engine = build_surrogate(variation, held, axes, common, progress=progress)
        dips, dip_notes = measured_dips(measurement)
        said = (*measurement.notes, *quality_notes(measurement), *dip_notes)
        notes += [f"{measurement.path.name}: {note}" for note in said]
        cut = _cut(measurement, made[key].band_hz, bounds.get(SCALE, (1.0, 1.0)), band)
        pinned = _pinned(pins[place] if pins is not None else {}, dips, measurement)
        noise = smooth(cut).noise
        cut = _thinned(cut, dips)
        weight = 1 / (FIRST_SIGMA * np.sqrt(max(len(cut.frequency_hz) / 30, 1.0)))
        files.append(_File(cut, build, made[key], tuple(dips), noise, pinned, float(weight)))
    return files, engine, notes


def _common(measurement: Measurement, band: tuple[float, float]) -> tuple[float, float]:
    low = max(float(measurement.frequency_hz[0]), band[0])
    high = min(float(measurement.frequency_hz[-1]), band[1])
    if not low < high:
        raise MeasurementError(
            f"{measurement.path}: measured from {measurement.frequency_hz[0] / 1e6:g} to "
            f"{measurement.frequency_hz[-1] / 1e6:g} MHz, the study's band is {band[0] / 1e6:g} to "
            f"{band[1] / 1e6:g} MHz: no frequency in common; change [frequency] or measure there"
        )
    return low, high


def _cut(
    measurement: Measurement,
    band: tuple[float, float],
    scale: tuple[float, float],
    study_band: tuple[float, float],
) -> Measurement:
    """The part of a sweep that the model covers whatever the values are."""
    low = max(band[0] / scale[0] * 1.005, study_band[0])
    high = min(band[1] / scale[1] * 0.995, study_band[1])
    inside = (measurement.frequency_hz >= low) & (measurement.frequency_hz <= high)
    if inside.sum() < 11:
        raise MeasurementError(
            f"{measurement.path}: only {int(inside.sum())} points lie from {low / 1e6:.1f} to "
            f"{high / 1e6:.1f} MHz, where the model can be compared for all values within the "
            "bounds; narrow the bounds, or widen [frequency] of the study and the measured band"
        )
    return replace(
        measurement,
        frequency_hz=measurement.frequency_hz[inside],
        reflection=measurement.reflection[inside],
    )


def _thinned(measurement: Measurement, dips: Sequence[Dip]) -> Measurement:
    """Means of neighbouring points, as many as leave each dip well sampled."""
    frequency, gamma = measurement.frequency_hz, measurement.reflection
    group = len(frequency) // MOST_POINTS
    widths = [dip.bandwidth_hz for dip in dips if np.isfinite(dip.bandwidth_hz)]
    if widths:
        step = float(np.median(np.diff(frequency)))
        group = min(group, int(min(widths) / step / POINTS_ACROSS))
    if group < 2:
        return measurement
    count = len(frequency) // group * group
    return replace(
        measurement,
        frequency_hz=frequency[:count].reshape(-1, group).mean(axis=1),
        reflection=gamma[:count].reshape(-1, group).mean(axis=1),
    )


def _pinned(
    wanted: Mapping[int, float], dips: Sequence[Dip], measurement: Measurement
) -> dict[int, int]:
    return {n: pinned_dip(dips, frequency, measurement) for n, frequency in wanted.items()}


def _searched(problem: FitProblem) -> FloatArray:
    """Best of several starts, weights settled on the way."""
    found = []
    for start in problem.starts():
        problem.settle_pairs(start)
        x = problem.solve(start)
        found.append((float(np.sum(problem.residuals(x) ** 2)), x))
    x = min(found, key=lambda item: item[0])[1]
    problem.settle_pairs(x)
    for _ in range(2):
        if problem.to != "features":
            problem.reweigh(x)
        x = problem.solve(x)
    return x


def _covariances(problem: FitProblem, x: FloatArray) -> tuple[FloatArray, FloatArray]:
    """Covariance of all unknowns, and of the free values by the data alone."""
    jacobian = problem.jacobian(x)
    full = np.linalg.pinv(jacobian.T @ jacobian)
    priors = len(problem.known)
    rows = len(jacobian) - (problem.unknowns - problem.free) - priors
    data = np.delete(jacobian, np.s_[rows : rows + priors], axis=0)
    # A direction nothing determines gets a large but finite variance.
    weak = np.zeros(problem.unknowns)
    weak[: problem.free] = 1e-4
    alone = np.linalg.pinv(data.T @ data + np.diag(weak))
    return full, alone[: problem.free, : problem.free]


def _correlation(covariance: FloatArray) -> FloatArray:
    size = np.sqrt(np.maximum(np.diag(covariance), 1e-300))
    return np.asarray(covariance / np.outer(size, size))


def _fitted_values(
    problem: FitProblem, x: FloatArray, covariance: FloatArray
) -> tuple[FittedValue, ...]:
    numbers = problem.middle + problem.half * x[: problem.free]
    sigma = problem.half * np.sqrt(np.diag(covariance)[: problem.free])
    found = []
    for place, name in enumerate(problem.names):
        prior = problem.known.get(name)
        before = prior.sigma if prior is not None else problem.half[place] / np.sqrt(3)
        found.append(
            FittedValue(
                name,
                problem.variation.nominal(name),
                float(numbers[place]),
                float(sigma[place]),
                problem.bounds[name],
                prior,
                float(min(sigma[place] / before, 1.0)),
            )
        )
    return tuple(found)


def _confounded(
    problem: FitProblem, x: FloatArray, covariance: FloatArray
) -> tuple[Confounding, ...]:
    """Pairs of positive values whose product is known far better than each."""
    numbers = problem.middle + problem.half * x[: problem.free]
    correlation = _correlation(covariance)
    found = []
    for i in range(problem.free):
        for j in range(i + 1, problem.free):
            if abs(correlation[i, j]) < CONFOUNDED or min(numbers[i], numbers[j]) <= 0:
                continue
            scale = problem.half / numbers
            log = covariance * np.outer(scale, scale)
            exponent = -log[i, j] / log[j, j]
            variance = log[i, i] - log[i, j] ** 2 / log[j, j]
            found.append(
                Confounding(
                    problem.names[i],
                    problem.names[j],
                    float(correlation[i, j]),
                    float(exponent),
                    float(numbers[i] * numbers[j] ** exponent),
                    float(np.sqrt(max(variance, 0.0))),
                )
            )
    return tuple(found)


def _curve(problem: FitProblem, x: FloatArray, nominal: FloatArray, place: int) -> FittedCurve:
    file = problem.files[place]
    bare = nominal.copy()
    values = problem.values(x, file.build)
    return FittedCurve(
        measurement=file.measurement,
        build=file.build,
        before=problem.shown(bare, place),
        after=problem.shown(x, place),
        dips=file.dips,
        pairs=problem.pairings[place],
        errors=problem.analyser(x, place),
        modes_before=file.surrogate.modes(problem.values(bare, file.build)),
        modes_after=file.surrogate.modes(values),
    )


def _rms(parts: Sequence[ComplexArray]) -> float:
    return float(np.sqrt(np.mean(np.abs(np.concatenate(parts)) ** 2)))


def modelled_dip(
    problem: FitProblem, x: FloatArray, file: int, half_waves: int, changes: Mapping[str, float]
) -> Dip | None:
    """Dip a mode owns in the fitted model, errors of the model included, those of the bench not.

    `changes` are differences (SI) to add to values of the file's build.
    """
    chosen = problem.files[file]
    values = problem.values(x, chosen.build)
    values = {name: value + changes.get(name, 0.0) for name, value in values.items()}
    modes = chosen.surrogate.modes(values)
    if half_waves not in modes.half_waves:
        return None
    place = modes.dip_hz[modes.half_waves.index(half_waves)]
    if not np.isfinite(place):
        return None
    low, high = chosen.surrogate.band_hz
    f = np.linspace(max(0.85 * place, low), min(1.15 * place, high), 301)
    gamma = problem.true_curve(x, chosen.surrogate, values, f)
    dips = find_dips(f, referred(gamma, REFERENCE_OHM, chosen.measurement.reference_ohm))
    return min(dips, key=lambda dip: abs(dip.frequency_hz - place)) if dips else None
