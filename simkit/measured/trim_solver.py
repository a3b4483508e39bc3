"""The two equations of a trim by two dimensions, over the changes of both."""

from __future__ import annotations

from collections.abc import Callable, Sequence

import numpy as np
from scipy.optimize import brentq, least_squares

from simkit.errors import MeasurementError
from simkit.measured.measurement import FloatArray
from simkit.measured.targets import Target
from simkit.measured.trim_model import TrimModel
from simkit.study.units import as_text

MAP_POINTS = 13
"""Values of either dimension on the map, which also starts the search."""

STARTS = 3
REACHED = 0.05
"""Steps of a target (see `targets`) within which it counts as reached: 0.005 % of frequency, 0.0005
of |reflection|."""


class PairSolver:
    """The two equations over the two changes."""

    def __init__(
        self,
        model: TrimModel,
        targets: Sequence[Target],
        names: tuple[str, str],
        present: FloatArray,
        limits: FloatArray,
    ) -> None:
        self.model, self.targets, self.names = model, targets, names
        self.present, self.limits = present, limits
        along = [np.linspace(low, high, MAP_POINTS) for low, high in limits.tolist()]
        self.map_values = (along[0], along[1])
        self.one_is_enough = False
        """The second target is met without touching the second dimension."""

    def changes(self, change: FloatArray) -> dict[str, float]:
        return dict(zip(self.names, map(float, change), strict=True))

    def off(self, change: FloatArray, x: FloatArray | None = None) -> FloatArray:
        """How far the targets are missed, (2,)."""
        changes = self.changes(change)
        return np.array([target.off(self.model, changes, x) for target in self.targets])

    def shown(self, change: FloatArray) -> FloatArray:
        """What the targets show, (2,)."""
        changes = self.changes(change)
        return np.array([target.shown(self.model, changes) for target in self.targets])

    def tracked(self, change: FloatArray) -> FloatArray:
        """What goes evenly with the dimensions, (2,)."""
        changes = self.changes(change)
        return np.array([target.tracked(self.model, changes) for target in self.targets])

    def table(self) -> FloatArray:
        """What is missed (2) and tracked (2) over the map, (N, N, 4)."""
        rows = []
        for first in self.map_values[0]:
            for second in self.map_values[1]:
                change = np.array([first, second]) - self.present
                rows.append(np.concatenate([self.off(change), self.tracked(change)]))
        return np.array(rows).reshape(MAP_POINTS, MAP_POINTS, 4)

    def solution(self, table: FloatArray) -> FloatArray:
        """The changes, (2,).

        Raises
        ------
        MeasurementError
        """
        alone = self._first_alone(table)
        if alone is not None:
            self.one_is_enough = True
            return alone
        cost = np.where(np.isnan(table[..., :2]).any(axis=-1), np.inf, 0.0)
        cost = cost + np.nan_to_num(np.sum(table[..., :2] ** 2, axis=-1))
        order = np.argsort(cost, axis=None)[:STARTS]
        best: tuple[float, FloatArray] | None = None
        for place in order:
            if not np.isfinite(cost.flat[place]):
                continue
            i, j = np.unravel_index(int(place), cost.shape)
            start = np.array([self.map_values[0][i], self.map_values[1][j]]) - self.present
            found = self._polished(start)
            missed = float(np.abs(self.off(found)).max())
            if best is None or missed < best[0]:
                best = (missed, found)
        if best is None or not best[0] <= REACHED:
            raise MeasurementError(self._out_of_reach(best[1] if best else None))
        return best[1]

    def _polished(self, start: FloatArray) -> FloatArray:
        """Least squares within the reach; unknowns are parts of it."""
        half = np.ptp(self.limits, axis=1) / 2
        low, high = ((limit - self.present) / half for limit in self.limits.T)
        found = least_squares(
            lambda u: np.nan_to_num(self.off(u * half), nan=1e3),
            np.clip(start / half, low + 1e-6, high - 1e-6),
            bounds=(low, high),
            diff_step=1e-4,
            xtol=1e-10,
            max_nfev=80,
        )
        return np.asarray(found.x * half)

    def _first_alone(self, table: FloatArray) -> FloatArray | None:
        """The first dimension's change if it meets both targets, the second a return loss."""
        if self.targets[1].kind != "match":
            return None
        values = self.map_values[0]
        off = np.array([self.targets[0].off(self.model, self._single(v)) for v in values])
        with np.errstate(invalid="ignore"):
            crossing = np.flatnonzero(off[:-1] * off[1:] <= 0)
        if not len(crossing):
            return None
        place = min(crossing, key=lambda k: abs(values[k] - self.present[0]))
        aim = brentq(
            lambda v: self.targets[0].off(self.model, self._single(v)),
            values[place],
            values[place + 1],
        )
        change = np.array([float(aim) - self.present[0], 0.0])
        return change if self.off(change)[1] <= 0 else None

    def _single(self, value: float) -> dict[str, float]:
        return {self.names[0]: float(value) - float(self.present[0]), self.names[1]: 0.0}

    def _out_of_reach(self, nearest: FloatArray | None) -> str:
        units = [self.model.problem.variation.unit(name) for name in self.names]
        reach = " and ".join(
            f"`{name}` from {as_text(low, unit, 5)} to {as_text(high, unit, 5)}"
            for name, unit, (low, high) in zip(self.names, units, self.limits, strict=True)
        )
        wanted = " and ".join(target.text(self.model) for target in self.targets)
        text = f"{wanted} cannot be reached together by {reach}"
        if nearest is not None:
            shown = self.shown(nearest)
            got = " and ".join(
                f"{self.model.label(t.half_waves)} dip at {value / 1e6:.1f} MHz"
                if t.kind == "dip"
                else f"{value:.1f} dB"
                for t, value in zip(self.targets, shown, strict=True)
            )
            place = " and ".join(
                as_text(float(value), unit, 5)
                for value, unit in zip(self.present + nearest, units, strict=True)
            )
            text += f"; the nearest is {got} at {place}"
        return f"{text}; allow more (--by NAME=LOW..HIGH) or choose other dimensions"

    def jacobian(self, change: FloatArray) -> FloatArray:
        """Of what is missed over the changes, (2, 2)."""
        return self._slopes(self.off, change)

    def covariance(self, change: FloatArray, jacobian: FloatArray) -> FloatArray:
        """Of the changes: what is uncertain in the targets, through the inverse of their slopes."""
        spread = self.model.covariance(lambda x: self.off(change, x))
        if self.one_is_enough:
            return np.diag([spread[0, 0] / jacobian[0, 0] ** 2, 0.0])
        inverse = np.linalg.pinv(jacobian)
        return np.asarray(inverse @ spread @ inverse.T)

    def slopes(self, change: FloatArray) -> FloatArray:
        """Of what is tracked over the changes, (2, 2)."""
        return self._slopes(self.tracked, change)

    def _slopes(self, of: Callable[[FloatArray], FloatArray], change: FloatArray) -> FloatArray:
        columns = []
        for place, step in enumerate(1e-4 * np.ptp(self.limits, axis=1)):
            move = np.zeros(2)
            move[place] = step
            columns.append((of(change + move) - of(change - move)) / (2 * step))
        return np.array(columns).T

    def scaling(self) -> FloatArray:
        """Changes that scale both dimensions by the factor the first frequency target asks for.

        A value of the feed line alone does not scale with the antenna and stays.
        """
        line = self.model.chosen.surrogate.line_names
        scaled = np.array([name not in line for name in self.names])
        for target in self.targets:
            now = self.model.dip_hz(target.half_waves, {})
            if np.isfinite(target.middle_hz) and np.isfinite(now):
                return np.asarray(self.present * scaled * (now / target.middle_hz - 1))
        return np.zeros(2)
