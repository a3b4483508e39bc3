"""How much to cut: the change of a dimension that puts a mode's dip where it is wanted."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, field, replace

import numpy as np
from scipy.optimize import brentq

from simkit.errors import MeasurementError
from simkit.measured.fit_problem import FitProblem, modelled_dip, referred
from simkit.measured.fit_result import LIMIT_95, FitResult
from simkit.measured.measurement import FloatArray
from simkit.measured.simulator import REFERENCE_OHM
from simkit.measured.variation import SCALE
from simkit.response.labels import half_wave_label

CURVE_POINTS = 41
FIRST_SHARE = 0.6
"""Part of a cut to make first when its uncertainty is too large to make all of it."""

CAUTIOUS = 0.3
"""Uncertainty over change from which cutting in steps is advised."""


@dataclass(frozen=True)
class ModeChange:
    """A mode before and after the trim; NaN without a dip."""

    label: str
    half_waves: int
    before_hz: float
    after_hz: float
    before_return_loss_db: float
    after_return_loss_db: float


@dataclass(frozen=True, eq=False)
class Trim:
    """The change of one dimension for one target, SI.

    Attributes
    ----------
    name : str
    half_waves : int
        Of the mode that is aimed with.
    target_hz, present_hz : float
        Wanted dip, and the present one by the fitted model.
    present : float
        The dimension now.
    change : float
        To add to it by the fitted model.
    scaling_change : float
        The same by plain scaling, frequency going with one over the dimension.
    sigma : float
        Standard deviation of the change.
    slope_hz_per_m : float
        How the dip moves with the dimension (per unit of it in SI).
    correction_factor : float
        Model over scaling: multiply a change from plain scaling by it.
    modes : tuple of ModeChange
    band_hz, band_return_loss_db
        The wanted band and the least return loss in it after the change.
    gain_dbi : (float, float)
        Peak gain of the mode before and after, NaN unless `with_gain` has found it.
    of_feedline : bool
        The dimension is one of the feed line alone, which plain scaling says nothing about.
    values, dips_hz, dip_sigmas_hz : (N,) float array
        Trim curve: the dip against the dimension, with its standard deviation.
    """

    name: str
    unit: str
    label: str
    half_waves: int
    target_hz: float
    present_hz: float
    present_sigma_hz: float
    present: float
    change: float
    scaling_change: float
    sigma: float
    slope_hz_per_m: float
    modes: tuple[ModeChange, ...]
    values: FloatArray = field(repr=False)
    dips_hz: FloatArray = field(repr=False)
    dip_sigmas_hz: FloatArray = field(repr=False)
    measured_hz: float = float("nan")
    band_hz: tuple[float, float] = (float("nan"), float("nan"))
    band_return_loss_db: float = float("nan")
    gain_dbi: tuple[float, float] = (float("nan"), float("nan"))
    of_feedline: bool = False

    @property
    def low(self) -> float:
        """Lower end of the 95 % interval of the change."""
        return self.change - LIMIT_95 * self.sigma

    @property
    def high(self) -> float:
        """Upper end of the 95 % interval of the change."""
        return self.change + LIMIT_95 * self.sigma

    @property
    def correction_factor(self) -> float:
        """Change by the model over change by plain scaling; NaN where both vanish."""
        return self.change / self.scaling_change if self.scaling_change else float("nan")

    @property
    def adds_metal(self) -> bool:
        """The dimension must grow."""
        return self.change > 0

    @property
    def in_steps(self) -> bool:
        """Metal is to be removed and the uncertainty is large against the cut."""
        return (
            not self.of_feedline
            and self.change < 0
            and LIMIT_95 * self.sigma > CAUTIOUS * abs(self.change)
        )

    @property
    def first_share(self) -> float:
        """Part of the cut that surely does not go too far, at most 60 %."""
        safe = 1 - LIMIT_95 * self.sigma / abs(self.change) if self.change else 0.0
        return float(min(FIRST_SHARE, max(np.floor(10 * safe) / 10, 0.3)))

    @property
    def first_step(self) -> float:
        """First cut where `in_steps`."""
        return self.first_share * self.change

    def as_text(self) -> str:
        """The cut with what to know about it."""
        from simkit.measured.trim_words import trim_text

        return trim_text(self)


def trim_fitted(
    result: FitResult,
    half_waves: int,
    target_hz: float,
    name: str,
    reach: tuple[float, float],
    *,
    file: int = -1,
    band_hz: tuple[float, float] | None = None,
) -> Trim:
    """Trim one dimension with a fitted model.

    Parameters
    ----------
    result : FitResult
        Its model must cover `name` over `reach` (`also` of `fit`).
    half_waves : int
        Mode whose dip is to be moved.
    target_hz : float
    name : str
    reach : (float, float)
        Values the dimension may take, SI.
    file : int, optional
        Which of the measured builds is trimmed; the last one if left out.
    band_hz : (float, float), optional
        Band in which the match after the trim is told.
    band_hz : (float, float), optional
        Band in which the match after the trim is told.

    Raises
    ------
    MeasurementError
        If the mode has no dip, or the target is out of reach.
    """
    problem, x = result.problem, result.solution
    file = file % len(problem.files)
    values = problem.values(x, problem.files[file].build)
    if name not in (*problem.names, *problem.files[file].surrogate.names):
        raise MeasurementError(f"the model does not vary `{name}`, so it cannot be trimmed")
    present = values[name]

    def dip(value: float, at: FloatArray = x) -> float:
        found = modelled_dip(problem, at, file, half_waves, {name: value - present})
        return found.frequency_hz if found else float("nan")

    label = half_wave_label(half_waves, result.curves[file].modes_after.on_plane)
    now = dip(present)
    if not np.isfinite(now):
        raise MeasurementError(
            f"the {label} mode shows no dip in the fitted model, so there is nothing to aim with"
        )
    grid = np.linspace(*reach, CURVE_POINTS)
    track = np.array([dip(float(v)) for v in grid])
    wanted = _reached(grid, track, target_hz, present, name, label)
    span = reach[1] - reach[0]  # a dimension may be one of nanohenry
    aim = float(brentq(lambda v: dip(v) - target_hz, *wanted, xtol=min(1e-8, 1e-6 * span)))
    sigmas = np.array([_dip_sigma(result, dip, float(v)) for v in grid[:: CURVE_POINTS // 8]])
    sigma_track = np.interp(grid, grid[:: CURVE_POINTS // 8], sigmas)
    step = min(1e-5, 1e-3 * span)
    slope = (dip(aim + step) - dip(aim - step)) / (2 * step)
    spread = _dip_sigma(result, dip, aim)
    measured = dict(result.curves[file].pairs).get(half_waves)
    of_feedline = name in problem.files[file].surrogate.line_names
    return Trim(
        name=name,
        unit=problem.variation.unit(name),
        label=label,
        half_waves=half_waves,
        target_hz=target_hz,
        present_hz=now,
        present_sigma_hz=_dip_sigma(result, dip, present),
        present=present,
        change=aim - present,
        scaling_change=float("nan") if of_feedline else present * (now / target_hz - 1),
        sigma=abs(spread / slope),
        slope_hz_per_m=slope,
        modes=_mode_changes(problem, x, file, name, aim - present),
        values=grid,
        dips_hz=track,
        dip_sigmas_hz=sigma_track,
        of_feedline=of_feedline,
        band_hz=band_hz or (target_hz, target_hz),
        band_return_loss_db=_worst_db(
            problem, x, file, name, aim - present, band_hz or (target_hz, target_hz)
        ),
        measured_hz=float("nan")
        if measured is None
        else result.curves[file].dips[measured].frequency_hz,
    )


def _worst_db(
    problem: FitProblem,
    x: FloatArray,
    file: int,
    name: str,
    change: float,
    band_hz: tuple[float, float],
) -> float:
    """Least return loss in a band after the change."""
    chosen = problem.files[file]
    values = problem.values(x, chosen.build)
    values[name] += change
    f = np.linspace(*band_hz, 41)
    gamma = problem.true_curve(x, chosen.surrogate, values, f)
    shown = referred(gamma, REFERENCE_OHM, chosen.measurement.reference_ohm)
    return float(-20 * np.log10(max(float(np.abs(shown).max()), 1e-6)))


def _reached(
    grid: FloatArray, track: FloatArray, target: float, present: float, name: str, label: str
) -> tuple[float, float]:
    """Neighbouring grid values around the target, those nearest to the present one."""
    off = track - target
    with np.errstate(invalid="ignore"):
        crossing = np.flatnonzero(off[:-1] * off[1:] <= 0)
    if not len(crossing):
        known = track[np.isfinite(track)]
        span = f"{known.min() / 1e6:.1f} to {known.max() / 1e6:.1f} MHz" if len(known) else "none"
        raise MeasurementError(
            f"{target / 1e6:.1f} MHz is out of reach for the {label} dip by `{name}` alone: from "
            f"{grid[0]:.4g} to {grid[-1]:.4g} (SI) it goes over {span}; allow more or choose "
            "another dimension"
        )
    place = min(crossing, key=lambda k: abs(grid[k] - present))
    return float(grid[place]), float(grid[place + 1])


def _dip_sigma(result: FitResult, dip: Callable[[float, FloatArray], float], value: float) -> float:
    """Standard deviation of the modelled dip from the covariance of all unknowns."""
    problem, x = result.problem, result.solution
    rows = []
    for place in range(problem.common):
        step = 0.02 if place < problem.free else 0.3
        ahead, back = x.copy(), x.copy()
        ahead[place] += step
        back[place] -= step
        rows.append((dip(value, ahead) - dip(value, back)) / (2 * step))
    gradient = np.nan_to_num(np.array(rows))
    covariance = result.covariance[: len(rows), : len(rows)]
    return float(np.sqrt(max(gradient @ covariance @ gradient, 0.0)))


def with_gain(result: FitResult, trim: Trim, *, file: int = -1) -> Trim:
    """Return the trim with the peak gain of its mode before and after, from two more solutions.

    Parameters are those of `trim_fitted` and what it returned.

    Raises
    ------
    GeometryError, EngineError, StudyError
    """
    from simkit.geometry import plan_mesh
    from simkit.runner.solve import solve_case

    problem = result.problem
    chosen = problem.files[file % len(problem.files)]
    values = chosen.build | problem.values(result.solution, chosen.build)
    values.pop(SCALE, None)
    antennas = [
        replace(problem.variation.antenna(point), converge=False)
        for point in (values, values | {trim.name: trim.present + trim.change})
    ]
    plan = plan_mesh(antennas)
    gains = []
    for antenna in antennas:
        solved = solve_case(antenna, plan)
        numbers = solved.arrays.get("mode_half_waves")
        place = [] if numbers is None else list(np.flatnonzero(numbers == trim.half_waves))
        peaks = np.asarray(solved.arrays.get("peak_gain", ()))
        gains.append(float(peaks[place[0]]) if place else float("nan"))
    return replace(trim, gain_dbi=(gains[0], gains[1]))


def _mode_changes(
    problem: FitProblem, x: FloatArray, file: int, name: str, change: float
) -> tuple[ModeChange, ...]:
    surrogate = problem.files[file].surrogate
    rows = []
    for n in surrogate.half_waves:
        before = modelled_dip(problem, x, file, n, {})
        after = modelled_dip(problem, x, file, n, {name: change})
        rows.append(
            ModeChange(
                half_wave_label(n, surrogate.nodes[0].on_plane),
                n,
                before.frequency_hz if before else float("nan"),
                after.frequency_hz if after else float("nan"),
                before.return_loss_db if before else float("nan"),
                after.return_loss_db if after else float("nan"),
            )
        )
    return tuple(rows)
