"""Fit named uncertain values of a study to measured sweeps.

Least squares of the complex reflection (or of its magnitude, or of the modes' dips alone) over the
free values and over what a bench adds (`bench_errors`), each of the latter with its usual size as
prior. Neighbouring points of a sweep share their errors, so they count as far fewer: the weight
comes from the size and the correlation length of the residuals. The intervals hold 95 % and contain
the error of the model itself.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from itertools import combinations
from typing import TYPE_CHECKING

import numpy as np

from simkit.errors import GeometryError, MeasurementError
from simkit.measured.bench_errors import ErrorSizes
from simkit.measured.fit_files import fit_files
from simkit.measured.fit_problem import FitProblem, To
from simkit.measured.fit_result import (
    CONFOUNDED,
    LIMIT_95,
    Confounding,
    FitResult,
    FittedCurve,
    FittedValue,
    times_narrower,
)
from simkit.measured.measurement import ComplexArray, FloatArray, Measurement
from simkit.measured.simulator import Engine, Surrogate
from simkit.measured.variation import SCALE, Known, Variation

if TYPE_CHECKING:
    from simkit.study import Study

REWEIGHINGS = 3
"""Times the weights are set anew from the residuals."""

SAME_BUILD = 1e-6
"""Relative difference up to which two builds have the same of a value."""


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
        Standard deviations of the errors of bench and model; the usual ones, with what the rules
        state for the study's nominal antenna, if left out.
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
    sizes = sizes or _usual_sizes(variation)
    given = [dict(build) for build in builds] if builds is not None else [{}] * len(measurements)
    _check_shared(variation, bounds, given)
    files, engines, notes = fit_files(
        variation, measurements, bounds, given, pins, also or {}, surrogate, progress
    )
    problem = FitProblem(variation, files, bounds, beliefs, sizes, to)
    nominal = problem.at({name: variation.nominal(name) for name in problem.names})
    solution = _searched(problem)
    jacobian = problem.jacobian(solution)
    covariance = np.asarray(np.linalg.pinv(jacobian.T @ jacobian))
    curves = tuple(_curve(problem, solution, nominal, place) for place in range(len(problem.files)))
    error = _interpolation_error(problem, solution, engines)
    return FitResult(
        study=study,
        to=to,
        values=_fitted_values(problem, solution, covariance),
        correlation=_correlation(covariance[: problem.free, : problem.free]),
        confounded=_confounded(problem, solution, jacobian),
        tied=_tied(problem, covariance),
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


def _usual_sizes(variation: Variation) -> ErrorSizes:
    from simkit.geometry import build_wires, plan_mesh

    antenna = variation.study.nominal()
    try:
        grid = build_wires(antenna, plan_mesh([antenna]))
    except GeometryError:  # the bounds may lie where it can be built
        return ErrorSizes()
    return ErrorSizes.of_model(grid.relative_error)


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


def _without_priors(
    problem: FitProblem, jacobian: FloatArray, names: tuple[str, str]
) -> FloatArray:
    """Covariance of two free values without what was known of these two, (2, 2)."""
    first_prior = len(jacobian) - (problem.unknowns - problem.free) - len(problem.known)
    rows = [first_prior + k for k, name in enumerate(problem.known) if name in names]
    data = np.delete(jacobian, rows, axis=0)
    # A direction nothing determines gets a large but finite variance.
    weak = np.zeros(problem.unknowns)
    weak[: problem.free] = 1e-4
    alone = np.linalg.pinv(data.T @ data + np.diag(weak))
    pair = [problem.names.index(name) for name in names]
    return np.asarray(alone[np.ix_(pair, pair)])


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
    problem: FitProblem, x: FloatArray, jacobian: FloatArray
) -> tuple[Confounding, ...]:
    """Pairs of values of which a combination is known far better than each."""
    numbers = problem.middle + problem.half * x[: problem.free]
    found = []
    for i, j in combinations(range(problem.free), 2):
        names = (problem.names[i], problem.names[j])
        pair = [i, j]
        covariance = _without_priors(problem, jacobian, names) * np.outer(
            problem.half[pair], problem.half[pair]
        )
        correlation = float(_correlation(covariance)[0, 1])
        narrower = times_narrower(correlation)
        alone = LIMIT_95 * np.sqrt(np.diag(covariance))
        # Where not even the combination is known within the bounds, there is nothing to tell.
        if narrower >= CONFOUNDED and (alone < narrower * problem.half[pair]).any():
            found.append(_confounding(names, numbers[pair], covariance, correlation))
    return tuple(found)


def _confounding(
    names: tuple[str, str], numbers: FloatArray, covariance: FloatArray, correlation: float
) -> Confounding:
    """Return what is known of two values together and of each alone."""
    size = np.sqrt(np.diag(covariance))
    trade = float(correlation * size[1] / size[0])
    exponent = product = relative = float("nan")
    if min(numbers) > 0:
        log = covariance / np.outer(numbers, numbers)
        if log[0, 0] > log[1, 1]:  # the better known one first, so that its power is 1
            turned = np.asarray(covariance[::-1, ::-1])
            return _confounding((names[1], names[0]), numbers[::-1], turned, correlation)
        exponent = -log[0, 1] / log[1, 1]
        product = numbers[0] * numbers[1] ** exponent
        relative = np.sqrt(max(log[0, 0] - log[0, 1] ** 2 / log[1, 1], 0.0))
    return Confounding(
        first=names[0],
        second=names[1],
        correlation=correlation,
        exponent=float(exponent),
        product=float(product),
        relative_sigma=float(relative),
        trade=trade,
        alone_sigma=(float(size[0]), float(size[1])),
    )


def _tied(problem: FitProblem, covariance: FloatArray) -> dict[str, float]:
    """By how much each value's interval would shrink if all the others were known."""
    shared = covariance[: problem.free, : problem.free]
    narrower = np.diag(shared) * np.diag(np.linalg.pinv(shared))
    return {
        name: float(np.sqrt(max(number, 1.0)))
        for name, number in zip(problem.names, narrower, strict=True)
    }


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
