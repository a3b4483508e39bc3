"""How much to cut: the change of a dimension that puts a mode's dip where it is wanted."""

from __future__ import annotations

from dataclasses import dataclass, field, replace

import numpy as np
from scipy.optimize import brentq, minimize_scalar

from simkit.errors import MeasurementError
from simkit.measured.fit_result import LIMIT_95, FitResult
from simkit.measured.measurement import FloatArray
from simkit.measured.trim_model import NO_METAL_M2, ModeChange, TrimModel, decibels
from simkit.study.units import as_text

CURVE_POINTS = 41
FIRST_SHARE = 0.6
"""Part of a cut to make first when its uncertainty is too large to make all of it."""

CAUTIOUS = 0.3
"""Uncertainty over change from which cutting in steps is advised."""


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
    band_hz, band_return_loss_db, band_return_loss_now_db
        The wanted band and the least return loss in it after the change and before; a trim for a
        band makes it as large as this dimension allows.
    metal_m2 : (float, float)
        Area of metal that is to be added, and taken off; NaN if unknown.
    gain_dbi : (float, float)
        Peak gain of the mode before and after, NaN unless `with_gain` has found it.
    of_feedline : bool
        The dimension is one of the feed line alone, which plain scaling says nothing about.
    is_measured : bool
        A measured dip of this build was paired with the mode.
    values, dips_hz, dip_sigmas_hz : (N,) float array
        Trim curve: the dip against the dimension, with its standard deviation.
    losses_db : (N,) float array
        Least return loss in the band against the dimension; that of the dip without a band.
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
    band_return_loss_now_db: float = float("nan")
    gain_dbi: tuple[float, float] = (float("nan"), float("nan"))
    metal_m2: tuple[float, float] = (float("nan"), float("nan"))
    losses_db: FloatArray = field(repr=False, default_factory=lambda: np.empty(0))
    of_feedline: bool = False
    is_measured: bool = True

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
        """Metal is needed where the present piece has none."""
        if np.isfinite(self.metal_m2[0]):
            return self.metal_m2[0] > NO_METAL_M2
        return self.change > 0

    @property
    def cuts_metal(self) -> bool:
        """Metal is to be taken off, and none to be added."""
        return not self.adds_metal and not self.metal_m2[1] <= NO_METAL_M2

    @property
    def in_steps(self) -> bool:
        """Metal is to be removed and the uncertainty is large against the cut."""
        return self.cuts_metal and LIMIT_95 * self.sigma > CAUTIOUS * abs(self.change)

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
        Aim at the best match over this band instead: the largest least return loss. `target_hz`
        then only says from where to look.

    Raises
    ------
    MeasurementError
        If the measurement has no dip, the mode has none by the model, or the target is out of
        reach.
    """
    model = TrimModel(result, file)
    present = model.present(name)
    model.check_reach(name, reach)
    label = model.label(half_waves)

    def dip(value: float, x: FloatArray | None = None) -> float:
        return model.dip_hz(half_waves, {name: value - present}, x)

    now = dip(present)
    if not np.isfinite(now):
        raise MeasurementError(
            f"the {label} mode shows no dip in the fitted model, so there is nothing to aim with"
        )
    model.check_measured(half_waves)
    band = band_hz or (target_hz, target_hz)
    model.check_band(band)
    grid = np.linspace(*reach, CURVE_POINTS)
    track = np.array([dip(float(v)) for v in grid])
    unit = model.problem.variation.unit(name)
    wanted = _reached(grid, track, target_hz, present, f"{label} dip", name, unit)
    fine = min(1e-8, 1e-6 * (reach[1] - reach[0]))  # a dimension may be one of nanohenry
    aim = float(brentq(lambda v: dip(v) - target_hz, *wanted, xtol=fine))
    if band[1] > band[0]:
        aim = _best_in_band(model, band, name, present, aim, reach)
    place = int(np.searchsorted(grid, aim))
    grid, track = np.insert(grid, place, aim), np.insert(track, place, dip(aim))
    coarse = np.linspace(*reach, 9)
    sigmas = [model.sigma(lambda x, v=float(v): dip(v, x)) for v in coarse]  # type: ignore[misc]
    step = 1e-4 * (reach[1] - reach[0])
    slope = (dip(aim + step) - dip(aim - step)) / (2 * step)
    spread = model.sigma(lambda x: dip(aim, x))
    changes = {name: aim - present}
    of_feedline = name in model.chosen.surrogate.line_names
    return Trim(
        name=name,
        unit=unit,
        label=label,
        half_waves=half_waves,
        target_hz=dip(aim),
        present_hz=now,
        present_sigma_hz=model.sigma(lambda x: dip(present, x)),
        present=present,
        change=aim - present,
        scaling_change=float("nan") if of_feedline else present * (now / dip(aim) - 1),
        sigma=abs(spread / slope),
        slope_hz_per_m=slope,
        modes=model.mode_changes(changes),
        values=grid,
        dips_hz=track,
        dip_sigmas_hz=np.interp(grid, coarse, sigmas),
        of_feedline=of_feedline,
        measured_hz=model.measured_hz(half_waves),
        is_measured=model.is_measured(half_waves),
        band_hz=band,
        band_return_loss_db=decibels(model.worst(band, changes)),
        band_return_loss_now_db=decibels(model.worst(band, {})),
        metal_m2=model.metal_m2(changes),
        losses_db=np.array(
            [decibels(model.worst(band, {name: float(v) - present})) for v in grid]
            if band[1] > band[0]
            else []
        ),
    )


def _best_in_band(
    model: TrimModel,
    band: tuple[float, float],
    name: str,
    present: float,
    near: float,
    reach: tuple[float, float],
) -> float:
    """Value that makes the largest |reflection| in a band least, near the one with the dip in it.

    A change of the value moves the dip by about its own part: the band's width over its middle says
    how far to look.
    """
    room = 2 * abs(near) * (band[1] - band[0]) / (band[1] + band[0])
    room = max(room, 0.01 * (reach[1] - reach[0]))
    found = minimize_scalar(
        lambda v: model.worst(band, {name: v - present}),
        bounds=(max(near - 2 * room, reach[0]), min(near + 2 * room, reach[1])),
        method="bounded",
        options={"xatol": 1e-4 * (reach[1] - reach[0])},
    )
    return float(found.x)


def _reached(
    grid: FloatArray,
    track: FloatArray,
    target: float,
    present: float,
    what: str,
    name: str,
    unit: str,
) -> tuple[float, float]:
    """Neighbouring grid values around the target, those nearest to the present one."""
    off = track - target
    with np.errstate(invalid="ignore"):
        crossing = np.flatnonzero(off[:-1] * off[1:] <= 0)
    if not len(crossing):
        known = track[np.isfinite(track)]
        span = f"{known.min() / 1e6:.1f} to {known.max() / 1e6:.1f} MHz" if len(known) else "none"
        raise MeasurementError(
            f"{target / 1e6:.1f} MHz is out of reach for the {what} by `{name}` alone: from "
            f"{as_text(float(grid[0]), unit, 5)} to {as_text(float(grid[-1]), unit, 5)} it goes "
            f"over {span}; allow more (--by {name}=LOW..HIGH) or choose another dimension"
        )
    place = min(crossing, key=lambda k: abs(grid[k] - present))
    return float(grid[place]), float(grid[place + 1])


def with_gain(result: FitResult, trim: Trim, *, file: int = -1) -> Trim:
    """Return the trim with the peak gain of its mode before and after, from two more solutions.

    Parameters are those of `trim_fitted` and what it returned.

    Raises
    ------
    GeometryError, EngineError, StudyError
    """
    changes = {trim.name: trim.change}
    (gains,) = TrimModel(result, file).gains_dbi((trim.half_waves,), changes)
    return replace(trim, gain_dbi=gains)
