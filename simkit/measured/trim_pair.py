"""Two dimensions for two targets at once: two equations, two unknowns, and how well they go."""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass, field

import numpy as np

from simkit.errors import MeasurementError
from simkit.measured.fit_result import LIMIT_95, FitResult
from simkit.measured.measurement import FloatArray
from simkit.measured.targets import Target
from simkit.measured.trim import CAUTIOUS, FIRST_SHARE
from simkit.measured.trim_model import NO_METAL_M2, ModeChange, TrimModel
from simkit.measured.trim_solver import PairSolver

ALIKE = 0.15
"""Sine of the angle between what the two dimensions do, from which they count as doing the same: an
error of the model of 0.2 % is then enlarged seven times."""


@dataclass(frozen=True, eq=False)
class PairTrim:
    """The change of two dimensions for two targets, SI.

    Attributes
    ----------
    names, units : (str, str)
    targets : (Target, Target)
    labels : (str, str)
        The targets in words.
    present, change : (2,) float array
    covariance : (2, 2) float array
        Of the changes.
    scaling_change : (2,) float array
        Plain scaling of both dimensions by one factor: what the first target asks for, frequency
        going with one over the size.
    before, after, scaled : (2,) float array
        What the targets show now, after the change, and after plain scaling: a dip's frequency
        (Hz) or a least return loss (dB).
    angle_sine : float
        How differently the dimensions act on the targets, 1 best, 0 not at all.
    slopes : (2, 2) float array
        How `Target.tracked` goes with the dimensions, row target, column dimension.
    modes : tuple of ModeChange
    metal_m2 : (float, float)
        Metal to be added and taken off.
    map_values : ((N,), (N,)) float arrays
        Values of the dimensions on the map.
    map_tracked : (2, N, N) float array
        `Target.tracked` there; first index after the target is the first dimension.
    tracked, tracked_sigma : (2,) float array
        The same where the targets are met, and its standard deviation.
    shown_sigma : (2,) float array
        Standard deviation of what the targets show, at the new dimensions.
    gains_dbi : tuple of (float, float)
        Peak gain of the targets' modes before and after, empty unless found.
    unmeasured : tuple of str
        Labels of the targets' modes that no measured dip of this build was paired with.
    """

    names: tuple[str, str]
    units: tuple[str, str]
    targets: tuple[Target, Target]
    labels: tuple[str, str]
    mode_labels: tuple[str, str]
    present: FloatArray
    change: FloatArray
    covariance: FloatArray
    scaling_change: FloatArray
    before: FloatArray
    after: FloatArray
    scaled: FloatArray
    angle_sine: float
    slopes: FloatArray
    modes: tuple[ModeChange, ...]
    metal_m2: tuple[float, float]
    map_values: tuple[FloatArray, FloatArray] = field(repr=False)
    map_tracked: FloatArray = field(repr=False)
    tracked: FloatArray = field(repr=False)
    tracked_sigma: FloatArray = field(repr=False)
    shown_sigma: FloatArray = field(repr=False)
    gains_dbi: tuple[tuple[float, float], ...] = ()
    unmeasured: tuple[str, ...] = ()

    @property
    def sigma(self) -> FloatArray:
        """Standard deviations of the changes, (2,)."""
        return np.asarray(np.sqrt(np.diag(self.covariance)))

    @property
    def low(self) -> FloatArray:
        """Lower ends of the 95 % intervals of the changes, each for itself."""
        return np.asarray(self.change - LIMIT_95 * self.sigma)

    @property
    def high(self) -> FloatArray:
        """Upper ends."""
        return np.asarray(self.change + LIMIT_95 * self.sigma)

    @property
    def correlation(self) -> float:
        """Between the two changes."""
        return float(self.covariance[0, 1] / max(float(np.prod(self.sigma)), 1e-300))

    @property
    def is_nothing(self) -> bool:
        """Both targets are met now already, within the uncertainty of what they show."""
        return bool((np.abs(self.after - self.before) < LIMIT_95 * self.shown_sigma).all())

    @property
    def is_determined(self) -> bool:
        """At least one change is larger than its uncertainty."""
        return bool((np.abs(self.change) > LIMIT_95 * self.sigma).any())

    @property
    def well_conditioned(self) -> bool:
        """The dimensions act differently enough on the targets."""
        return self.angle_sine >= ALIKE

    @property
    def adds_metal(self) -> bool:
        """Metal is needed where the present piece has none."""
        if np.isfinite(self.metal_m2[0]):
            return self.metal_m2[0] > NO_METAL_M2
        return bool((self.change > 0).any())

    @property
    def cuts_metal(self) -> bool:
        """Metal is to be taken off, and none to be added."""
        return not self.adds_metal and not self.metal_m2[1] <= NO_METAL_M2

    @property
    def in_steps(self) -> bool:
        """Metal is to be removed and an uncertainty is large against its cut."""
        wide = LIMIT_95 * self.sigma > CAUTIOUS * np.abs(self.change)
        return self.cuts_metal and bool(wide.any())

    @property
    def first_share(self) -> float:
        """Part of both cuts to make first."""
        return FIRST_SHARE

    def as_text(self) -> str:
        """The cut with what to know about it."""
        from simkit.measured.trim_pair_words import pair_text

        return pair_text(self)


def trim_pair(
    result: FitResult,
    targets: tuple[Target, Target],
    reaches: Mapping[str, tuple[float, float]],
    *,
    file: int = -1,
    gain: bool = False,
) -> PairTrim:
    """Trim two dimensions with a fitted model so that two targets are reached at once.

    Parameters
    ----------
    result : FitResult
        Its model must cover the dimensions over their reach (`also` of `fit`).
    targets : (Target, Target)
        A return loss that is exceeded anyway costs nothing: the second dimension then stays.
    reaches : mapping of str to (float, float)
        The two dimensions with the values they may take, SI.
    file : int, optional
        Which of the measured builds is trimmed; the last one if left out.
    gain : bool, optional
        Solve twice more for the gain of the targets' modes.

    Returns
    -------
    PairTrim

    Raises
    ------
    MeasurementError
        If the measurement has no dip, a mode has none by the model, or the targets are out of reach
        together.
    """
    model = TrimModel(result, file)
    first, second = reaches
    names = (first, second)
    present = np.array([model.present(name) for name in names])
    for name in names:
        model.check_reach(name, reaches[name])
    limits = np.array([reaches[name] for name in names], dtype=float)
    for target in targets:
        if np.isfinite(target.band_hz).all():
            model.check_band(target.band_hz)
        if target.kind != "band" and not np.isfinite(model.dip_hz(target.half_waves, {})):
            raise MeasurementError(
                f"the {model.label(target.half_waves)} mode shows no dip in the fitted model, so "
                "there is nothing to aim with"
            )
        model.check_measured(target.half_waves)
    solver = PairSolver(model, targets, names, present, limits)
    table = solver.table()
    change = solver.solution(table)
    jacobian = solver.jacobian(change)
    changes = solver.changes(change)
    scaling = solver.scaling()
    half = np.ptp(limits, axis=1) / 2
    return PairTrim(
        names=names,
        units=(model.problem.variation.unit(first), model.problem.variation.unit(second)),
        targets=targets,
        labels=(targets[0].text(model), targets[1].text(model)),
        mode_labels=(model.label(targets[0].half_waves), model.label(targets[1].half_waves)),
        present=present,
        change=change,
        covariance=solver.covariance(change, jacobian),
        scaling_change=scaling,
        before=solver.shown(np.zeros(2)),
        after=solver.shown(change),
        scaled=solver.shown(scaling),
        angle_sine=_angle_sine(jacobian * half),
        slopes=solver.slopes(change),
        modes=model.mode_changes(changes),
        metal_m2=model.metal_m2(changes),
        map_values=solver.map_values,
        map_tracked=np.moveaxis(table[..., 2:], -1, 0),
        tracked=np.array(
            [t.return_loss_db if t.kind == "match" else t.tracked(model, changes) for t in targets]
        ),
        tracked_sigma=_sigmas(model, [t.tracked for t in targets], changes),
        shown_sigma=_sigmas(model, [t.shown for t in targets], changes),
        unmeasured=tuple(
            dict.fromkeys(
                model.label(t.half_waves) for t in targets if not model.is_measured(t.half_waves)
            )
        ),
        gains_dbi=model.gains_dbi(tuple(t.half_waves for t in targets), changes) if gain else (),
    )


def _sigmas(
    model: TrimModel,
    numbers: Sequence[Callable[[TrimModel, Mapping[str, float], FloatArray | None], float]],
    changes: Mapping[str, float],
) -> FloatArray:
    """Standard deviations of some numbers of the targets after some changes."""
    return np.sqrt(
        np.maximum(
            np.diag(
                model.covariance(lambda x: np.array([of(model, changes, x) for of in numbers]))
            ),
            0.0,
        )
    )


def _angle_sine(matrix: FloatArray) -> float:
    """Sine of the angle between the columns of a 2 x 2 matrix."""
    sizes = np.linalg.norm(matrix, axis=0)
    if not (sizes > 0).all():
        return 0.0
    return float(abs(np.linalg.det(matrix)) / np.prod(sizes))
