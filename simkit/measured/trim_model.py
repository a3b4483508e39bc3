"""A fitted model as trims see it: what a change of dimensions does to dips, match, gain, metal.

Changes are differences (SI) to add to the values of the build that is trimmed. The errors of the
model stay in, those of the analyser and its cable are left out: a trim aims at the antenna itself.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass, replace

import numpy as np

from simkit.errors import GeometryError, MeasurementError, StudyError
from simkit.measured.fit_problem import modelled_dip, referred
from simkit.measured.fit_result import FitResult, FittedCurve
from simkit.measured.measurement import FloatArray
from simkit.measured.simulator import REFERENCE_OHM
from simkit.measured.variation import SCALE
from simkit.response.features import Dip
from simkit.response.labels import half_wave_label

BAND_POINTS = 41
LEAST_REFLECTION = 1e-6

NO_METAL_M2 = 0.5e-6
"""Metal that need not be spoken of: half a square millimetre is what a file takes off a burr."""


@dataclass(frozen=True)
class ModeChange:
    """A mode before and after the trim; NaN without a dip."""

    label: str
    half_waves: int
    before_hz: float
    after_hz: float
    before_return_loss_db: float
    after_return_loss_db: float


class TrimModel:
    """One measured build of a fit, with its dimensions free to change.

    Parameters
    ----------
    result : FitResult
    file : int, optional
        Which of the measured builds; the last one if left out.
    """

    def __init__(self, result: FitResult, file: int = -1) -> None:
        self.result, self.problem, self.x = result, result.problem, result.solution
        self.file = file % len(self.problem.files)
        self.chosen = self.problem.files[self.file]
        self.values = self.problem.values(self.x, self.chosen.build)
        self._dips: dict[tuple[object, ...], Dip | None] = {}
        self.on_plane = result.curves[self.file].modes_after.on_plane

    def present(self, name: str) -> float:
        """A dimension as it is now, SI.

        Raises
        ------
        MeasurementError
            If the fitted model does not vary it.
        """
        varied = dict.fromkeys([*self.problem.names, *self.chosen.surrogate.names])
        if name not in varied:
            raise MeasurementError(
                f"the model does not vary `{name}`, so it cannot be trimmed; it varies "
                f"{', '.join(varied) or 'nothing'}"
            )
        return self.values[name]

    def check_reach(self, name: str, reach: tuple[float, float]) -> None:
        """Raise if a dimension may go where the fitted model was not solved.

        Raises
        ------
        MeasurementError
        """
        for axis in self.chosen.surrogate.axes:
            if axis.name != name:
                continue
            low, high = float(axis.nodes[0]), float(axis.nodes[-1])
            slack = 1e-9 * (high - low)
            if reach[0] < low - slack or reach[1] > high + slack:
                text = self.problem.variation.text
                raise MeasurementError(
                    f"the fitted model covers `{name}` from {text(name, low)} to "
                    f"{text(name, high)}, the trim may go from {text(name, reach[0])} to "
                    f"{text(name, reach[1])}: fit with also={{{name!r}: (low, high)}} in SI, or "
                    "reach less far"
                )

    def label(self, half_waves: int) -> str:
        return half_wave_label(half_waves, self.on_plane)

    def dip(
        self, half_waves: int, changes: Mapping[str, float], x: FloatArray | None = None
    ) -> Dip | None:
        """Dip of a mode after some changes, None without one."""
        if x is not None:
            return modelled_dip(self.problem, x, self.file, half_waves, changes)
        key = (half_waves, *changes.items())
        if key not in self._dips:
            self._dips[key] = modelled_dip(self.problem, self.x, self.file, half_waves, changes)
        return self._dips[key]

    def dip_hz(
        self, half_waves: int, changes: Mapping[str, float], x: FloatArray | None = None
    ) -> float:
        """Frequency of that dip, NaN without one."""
        found = self.dip(half_waves, changes, x)
        return found.frequency_hz if found else float("nan")

    def reflection_size(
        self,
        frequency_hz: FloatArray,
        changes: Mapping[str, float],
        x: FloatArray | None = None,
    ) -> FloatArray:
        """|reflection| after some changes, in the reference of the study, (F,)."""
        x = self.x if x is None else x
        values = self.problem.values(x, self.chosen.build)
        values = {name: value + changes.get(name, 0.0) for name, value in values.items()}
        gamma = self.problem.true_curve(x, self.chosen.surrogate, values, frequency_hz)
        shown = referred(gamma, REFERENCE_OHM, self.chosen.measurement.reference_ohm)
        return np.asarray(np.abs(shown))

    def worst(
        self,
        band_hz: tuple[float, float],
        changes: Mapping[str, float],
        x: FloatArray | None = None,
    ) -> float:
        """Largest |reflection| in a band after some changes."""
        frequency = np.linspace(*band_hz, BAND_POINTS if band_hz[1] > band_hz[0] else 1)
        return float(self.reflection_size(frequency, changes, x).max())

    def check_band(self, band_hz: tuple[float, float]) -> None:
        """Raise if the model cannot tell the match at these frequencies.

        Raises
        ------
        MeasurementError
        """
        low, high = self.chosen.surrogate.band_hz
        if band_hz[0] < low or band_hz[1] > high:
            raise MeasurementError(
                f"the target {band_text(band_hz)} reaches beyond {low / 1e6:.1f} to "
                f"{high / 1e6:.1f} MHz, where the model holds for all values within the bounds; "
                "widen [frequency] of the study or choose another target"
            )

    def covariance(self, of: Callable[[FloatArray], FloatArray]) -> FloatArray:
        """Covariance of some numbers (K,) of the model, (K, K), from that of all its unknowns."""
        rows = []
        for place in range(self.problem.common):
            step = 0.02 if place < self.problem.free else 0.3
            ahead, back = self.x.copy(), self.x.copy()
            ahead[place] += step
            back[place] -= step
            rows.append((of(ahead) - of(back)) / (2 * step))
        gradient = np.nan_to_num(np.array(rows))
        covariance = self.result.covariance[: len(rows), : len(rows)]
        return np.asarray(gradient.T @ covariance @ gradient)

    def sigma(self, of: Callable[[FloatArray], float]) -> float:
        """Standard deviation of one number of the model."""
        return float(np.sqrt(max(self.covariance(lambda x: np.array([of(x)]))[0, 0], 0.0)))

    def check_measured(self, half_waves: int) -> None:
        """Raise if the sweeps of this build have no dip at all.

        Raises
        ------
        MeasurementError
        """
        if any(curve.dips for curve in self._of_this_build()):
            return
        curve = self.result.curves[self.file]
        expected = curve.modes_before.dip_hz[curve.modes_before.half_waves.index(half_waves)]
        frequency = curve.measurement.frequency_hz / 1e6
        where = f"{expected / 1e6:.0f} MHz" if np.isfinite(expected) else "no frequency"
        raise MeasurementError(
            f"{curve.measurement.path}: no dip from {frequency[0]:.0f} to {frequency[-1]:.0f} MHz, "
            f"so nothing measured says where that of the {self.label(half_waves)} mode is (by the "
            f"study at {where}), and a cut would rest on the study alone; check the connection, or "
            "sweep where the dip is"
        )

    def is_measured(self, half_waves: int) -> bool:
        """Whether a measured dip of this build was paired with a mode."""
        return any(half_waves in dict(curve.pairs) for curve in self._of_this_build())

    def _of_this_build(self) -> list[FittedCurve]:
        """Its own curve and those of its repeats."""
        return [c for c in self.result.curves if c.build == self.result.curves[self.file].build]

    def measured_hz(self, half_waves: int) -> float:
        """Measured dip that was paired with a mode, NaN without one."""
        curve = self.result.curves[self.file]
        place = dict(curve.pairs).get(half_waves)
        return float("nan") if place is None else curve.dips[place].frequency_hz

    def mode_changes(self, changes: Mapping[str, float]) -> tuple[ModeChange, ...]:
        """Every mode's dip before and after."""
        rows = []
        for n in self.chosen.surrogate.half_waves:
            before, after = self.dip(n, {}), self.dip(n, changes)
            rows.append(
                ModeChange(
                    self.label(n),
                    n,
                    before.frequency_hz if before else float("nan"),
                    after.frequency_hz if after else float("nan"),
                    before.return_loss_db if before else float("nan"),
                    after.return_loss_db if after else float("nan"),
                )
            )
        return tuple(rows)

    def metal_m2(self, changes: Mapping[str, float]) -> tuple[float, float]:
        """Areas of metal that the changed build has and the present one lacks, and the reverse.

        NaN if either cannot be drawn.
        """
        from shapely.ops import unary_union

        from simkit.geometry.outlines import outline

        now = self.build_values()
        try:
            before, after = (
                unary_union([outline(s) for s in self.problem.variation.antenna(point).strips])
                for point in (now, now | {n: now[n] + change for n, change in changes.items()})
            )
        except (GeometryError, StudyError):
            return float("nan"), float("nan")
        return float(after.difference(before).area), float(before.difference(after).area)

    def build_values(self) -> dict[str, float]:
        """Values of the build by the fit, without the overall scale, which no study has."""
        values = self.chosen.build | self.values
        values.pop(SCALE, None)
        return values

    def gains_dbi(
        self, half_waves: tuple[int, ...], changes: Mapping[str, float]
    ) -> tuple[tuple[float, float], ...]:
        """Peak gain of modes before and after, from two solutions through the engine.

        Raises
        ------
        GeometryError, EngineError, StudyError
        """
        from simkit.geometry import plan_mesh
        from simkit.runner.solve import solve_case

        now = self.build_values()
        points = (now, now | {name: now[name] + change for name, change in changes.items()})
        antennas = [
            replace(self.problem.variation.antenna(point), converge=False) for point in points
        ]
        plan = plan_mesh(antennas)
        solved = [solve_case(antenna, plan).arrays for antenna in antennas]
        found = []
        for wanted in half_waves:
            pair = []
            for arrays in solved:
                numbers = arrays.get("mode_half_waves")
                place = [] if numbers is None else list(np.flatnonzero(numbers == wanted))
                peaks = np.asarray(arrays.get("peak_gain", ()))
                pair.append(float(peaks[place[0]]) if place else float("nan"))
            found.append((pair[0], pair[1]))
        return tuple(found)


def decibels(reflection_size: float) -> float:
    """Return loss of a |reflection|, positive."""
    return float(-20 * np.log10(max(reflection_size, LEAST_REFLECTION)))


def band_text(band_hz: tuple[float, float]) -> str:
    """Return ``868.0 MHz`` or ``863.0 to 870.0 MHz``."""
    low, high = band_hz
    if high > low:
        return f"{low / 1e6:.1f} to {high / 1e6:.1f} MHz"
    return f"{low / 1e6:.1f} MHz"
