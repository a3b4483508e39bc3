"""Fit named uncertain values of a study to measured sweeps.

Least squares of the complex reflection (or of its magnitude, or of the modes' dips alone) over the
free values and over what a bench adds (`bench_errors`), each of the latter with its usual size as
prior. Neighbouring points of a sweep share their errors, so they count as far fewer: the weight
comes from the size and the correlation length of the residuals. The intervals hold 95 % and contain
the error of the model itself.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from dataclasses import replace
from typing import TYPE_CHECKING

import numpy as np

from simkit.errors import GeometryError, MeasurementError, StudyError
from simkit.measured.bench_errors import ErrorSizes
from simkit.measured.dips import measured_dips, pinned_dip, smooth
from simkit.measured.fit_problem import INDEPENDENT, FitFile, FitProblem, To, referred
from simkit.measured.fit_result import Confounding, FitResult, FittedCurve, FittedValue
from simkit.measured.measurement import ComplexArray, FloatArray, Measurement
from simkit.measured.quality import quality_notes
from simkit.measured.simulator import REFERENCE_OHM, STEPS, Engine, Surrogate, build_surrogate
from simkit.measured.variation import SCALE, Known, Variation
from simkit.response.features import Dip

if TYPE_CHECKING:
    from simkit.study import Study

REWEIGHINGS = 2
"""Times the weights are set anew from the residuals."""

MOST_POINTS = 240
"""Neighbours are averaged down to about so many; their errors are shared anyway."""

LARGEST_TURN_RAD = 0.3
"""What a feed line may turn the reflection by within one mean, which then loses 0.4 % of it."""

POINTS_ACROSS = 8
"""Points kept across the narrowest dip."""

FIRST_SIGMA = 0.02
"""Residual of |reflection| assumed before the first look: a directivity of -34 dB."""

SAME_BUILD = 1e-6
"""Relative difference up to which two builds have the same of a value."""

CONFOUNDED = 0.9
"""Correlation from which two values cannot be told apart in practice: together they are known more
than twice as well as each."""


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
        If there is nothing to fit, no frequency in common, or not every antenna within the bounds
        can be built.
    EngineError
        If one of them cannot be solved.
    """
    variation = Variation(study)
    bounds, beliefs = _free_values(variation, free, known)
    sizes = sizes or ErrorSizes()
    given = [dict(build) for build in builds] if builds is not None else [{}] * len(measurements)
    _check_shared(variation, bounds, given)
    files, engines, notes = _files(
        variation, measurements, bounds, given, pins, also or {}, surrogate, progress
    )
    problem = FitProblem(variation, files, bounds, beliefs, sizes, to)
    nominal = problem.at({name: variation.nominal(name) for name in problem.names})
    solution = _searched(problem)
    covariance, data_only = _covariances(problem, solution)
    curves = tuple(_curve(problem, solution, nominal, place) for place in range(len(problem.files)))
    error = _interpolation_error(problem, solution, engines)
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
        solves=sum(engine.solves for engine in dict.fromkeys(engines) if engine is not None),
        notes=tuple(dict.fromkeys(notes)),
        problem=problem,
        solution=solution,
        covariance=covariance,
    )


def _free_values(
    variation: Variation, free: Mapping[str, tuple[float, float]], known: Sequence[Known]
) -> tuple[dict[str, tuple[float, float]], dict[str, Known]]:
    beliefs = {k.name: k for k in known}
    bounds = dict(free)
    for k in known:
        bounds.setdefault(k.name, k.bounds)
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
    builds: Sequence[Mapping[str, float]],
    pins: Sequence[Mapping[int, float]] | None,
    also: Mapping[str, tuple[float, float]],
    surrogate: Surrogate | None,
    progress: Callable[[int, int], None] | None,
) -> tuple[list[FitFile], list[Engine | None], list[str]]:
    if not measurements:
        raise MeasurementError("no measured file is given; name at least one")
    antenna = variation.study.nominal()
    axes = dict(bounds)
    for name, pair in also.items():
        as_cut = [build[name] for build in builds if name in build]
        reached = [*pair, *axes.get(name, pair), *as_cut]
        axes[name] = (min(reached), max(reached))
    made: dict[tuple[tuple[str, float], ...], tuple[Surrogate, Engine | None]] = {}
    files: list[FitFile] = []
    engines: list[Engine | None] = []
    notes = []
    band = (antenna.frequency.start_hz, antenna.frequency.stop_hz)
    for place, raw in enumerate(measurements):
        measurement = raw.renormalised(antenna.reference_ohm)
        build = dict(builds[place])
        held = {k: v for k, v in build.items() if k not in axes}
        key = tuple(sorted(held.items()))
        if surrogate is not None:
            made[key] = surrogate, None
        elif key not in made:
            common = _common(measurement, band)
            made[key] = _solved(variation, held, axes, common, progress)
        model, engine = made[key]
        dips, dip_notes = measured_dips(measurement)
        expected = _expected(model, measurement.reference_ohm)
        said = (*measurement.notes, *quality_notes(measurement, expected), *dip_notes)
        notes += [f"{measurement.path.name}: {note}" for note in said]
        cut = _cut(measurement, model.band_hz, bounds.get(SCALE, (1.0, 1.0)), band)
        notes += _lost_notes(measurement, cut, dips)
        pinned = _pinned(pins[place] if pins is not None else {}, dips, measurement)
        noise = smooth(cut).noise
        cut = _thinned(cut, dips, _delay_s(model))
        weight = 1 / (FIRST_SIGMA * np.sqrt(max(len(cut.frequency_hz) / INDEPENDENT, 1.0)))
        files.append(FitFile(cut, build, model, tuple(dips), noise, pinned, float(weight)))
        engines.append(engine)
    return files, engines, notes


def _solved(
    variation: Variation,
    held: Mapping[str, float],
    axes: Mapping[str, tuple[float, float]],
    band_hz: tuple[float, float],
    progress: Callable[[int, int], None] | None,
) -> tuple[Surrogate, Engine]:
    """The model over the bounds; an antenna that cannot be built there is said to lie there."""
    try:
        return build_surrogate(variation, held, axes, band_hz, progress=progress)
    except (GeometryError, StudyError) as error:
        text = variation.text
        reach = ", ".join(
            f"{name} from {text(name, low)} to {text(name, high)}"
            for name, (low, high) in axes.items()
        )
        raise MeasurementError(
            f"not every antenna within the bounds ({reach}) can be built: {error}; narrow the "
            "bounds"
        ) from error


def _check_shared(
    variation: Variation,
    bounds: Mapping[str, tuple[float, float]],
    builds: Sequence[Mapping[str, float]],
) -> None:
    """A free value is one number for all builds: refuse it where they were cut differently."""
    for name in bounds:
        if name == SCALE:
            continue
        values = [build.get(name, variation.nominal(name)) for build in builds]
        if max(values) - min(values) > SAME_BUILD * max(map(abs, values)):
            said = " and ".join(dict.fromkeys(variation.text(name, value) for value in values))
            raise MeasurementError(
                f"`{name}` cannot be fitted to these builds together, which have {said} of it: it "
                "would be one number for all; leave it as cut, free `scale` if all were cut alike "
                "wrong, or fit one build at a time"
            )


def _interpolation_error(
    problem: FitProblem, x: FloatArray, engines: Sequence[Engine | None]
) -> float:
    """Largest error of the interpolation at the fitted values, NaN if nothing can be solved."""
    errors = []
    done: list[Surrogate] = []
    for file, engine in zip(problem.files, engines, strict=True):
        if engine is None or file.surrogate in done:
            continue
        done.append(file.surrogate)
        at = problem.values(x, file.build)
        node = engine.node({name: value for name, value in at.items() if name != SCALE})
        errors.append(file.surrogate.error_at(at, node))
    return max(errors, default=float("nan"))


def _expected(surrogate: Surrogate, reference_ohm: float) -> tuple[FloatArray, ComplexArray]:
    """What the model shows in the middle of the bounds."""
    middle = {axis.name: float(axis.nodes[[0, -1]].mean()) for axis in surrogate.axes}
    frequency = np.linspace(*surrogate.band_hz, STEPS)
    gamma = surrogate.reflection(middle, frequency)
    return frequency, referred(gamma, REFERENCE_OHM, reference_ohm)


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


def _lost_notes(whole: Measurement, cut: Measurement, dips: Sequence[Dip]) -> list[str]:
    """Say which measured dips lie where the model does not reach."""
    low, high = float(cut.frequency_hz[0]), float(cut.frequency_hz[-1])
    lost = [d.frequency_hz for d in dips if not low <= d.frequency_hz <= high]
    if not lost:
        return []
    places = ", ".join(f"{place / 1e6:.1f}" for place in lost)
    return [
        f"{whole.path.name}: only {low / 1e6:.0f} to {high / 1e6:.0f} MHz can be compared for all "
        f"values within the bounds, so the measured dip at {places} MHz is left out of the curves; "
        "narrow the bounds, or give the study (or the stored sweep) a wider band"
    ]


def _delay_s(surrogate: Surrogate) -> float:
    """Of the feed line as drawn, one way."""
    if surrogate.feedline is None:
        return 0.0
    middle = sum(surrogate.band_hz) / 2
    return surrogate.feedline.chain({}).delay_s(middle)


def _thinned(measurement: Measurement, dips: Sequence[Dip], delay_s: float) -> Measurement:
    """Means of neighbouring points, as many as leave each dip and each turn well sampled."""
    frequency, gamma = measurement.frequency_hz, measurement.reflection
    group = len(frequency) // MOST_POINTS
    step = float(np.median(np.diff(frequency)))
    widths = [dip.bandwidth_hz for dip in dips if np.isfinite(dip.bandwidth_hz)]
    if widths:
        group = min(group, int(min(widths) / step / POINTS_ACROSS))
    if delay_s:
        group = min(group, int(LARGEST_TURN_RAD / (4 * np.pi * step * delay_s)))
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
    for _ in range(REWEIGHINGS):
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
    return np.asarray(full), np.asarray(alone[: problem.free, : problem.free])


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
