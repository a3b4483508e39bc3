"""The response of a study as a function of a few free values, fast enough for a fit.

Nodes are placed over the bounds of the free values (Chebyshev points through the engine, or the
cases of a stored sweep) and the reflection is interpolated between them. It is interpolated over
frequency divided by that of the lowest mode: the resonances then stay where they are and only the
shape of the curve changes, which a low polynomial follows. The feed line comes afterwards
(`simkit.measured.connector`), for any values of its own.
"""

from __future__ import annotations

import itertools
from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass, field, replace

import numpy as np
from scipy.interpolate import CubicSpline

from simkit.errors import MeasurementError
from simkit.measured.connector import FeedLineModel, owners, values_of_line_alone
from simkit.measured.measurement import ComplexArray, FloatArray
from simkit.measured.pairing import ModelledDip
from simkit.measured.selection import CaseModes
from simkit.measured.variation import SCALE, Variation
from simkit.response.features import reflection
from simkit.study.model import Antenna, FrequencyBand

REFERENCE_OHM = 50.0
"""Reflections are interpolated for this reference; any would do."""

MARGIN = 0.02
"""Part by which nodes are solved beyond the band, over what the shift of the modes asks for."""

STEPS = 600
"""Frequencies at which a node is kept; 300 to 3000 MHz in steps of 4.5 MHz."""

_DIP, _NATURAL, _Q, _LOSS = range(4)


@dataclass(frozen=True, eq=False)
class Node:
    """One solved point: curve and modes.

    Attributes
    ----------
    reflect : callable
        Frequencies in the band to the reflection at the feed.
    modes : dict of int to (dip_hz, natural_hz, q, return_loss_db)
        By number of half waves; NaN where a mode owns no dip. Dips are those at the feed.
    on_plane : bool
    peaks : dict of int to (frequency_hz, resistance_ohm)
        Conductance peaks at the feed of the modes that own one.
    """

    reflect: Callable[[FloatArray], ComplexArray]
    modes: dict[int, tuple[float, float, float, float]]
    on_plane: bool = False
    peaks: dict[int, tuple[float, float]] = field(default_factory=dict)


@dataclass(frozen=True, eq=False)
class Axis:
    """Ascending nodes of one free value, SI."""

    name: str
    nodes: FloatArray

    def weights(self, value: float) -> FloatArray:
        """Lagrange weights of the nodes at a value, or those of a cubic spline on many nodes."""
        nodes = self.nodes
        if len(nodes) == 1:
            return np.ones(1)
        if len(nodes) > 7:
            return np.asarray(CubicSpline(nodes, np.eye(len(nodes)))(value))
        gaps = nodes[:, None] - nodes[None] + np.eye(len(nodes))
        parts = (value - nodes[None] + np.zeros_like(gaps)) / gaps
        np.fill_diagonal(parts, 1.0)
        return np.asarray(parts.prod(axis=1))


def chebyshev(low: float, high: float, count: int) -> FloatArray:
    """Nodes over an interval, both ends among them."""
    angles = np.arange(count) * np.pi / max(count - 1, 1)
    return np.asarray((low + high) / 2 - (high - low) / 2 * np.cos(angles))


class Surrogate:
    """Reflection and mode features between nodes.

    Parameters
    ----------
    axes : sequence of Axis
        Of the values that change the antenna.
    nodes : sequence of Node
        In the order of `itertools.product` over the axes.
    band_hz : (float, float)
        In which every node can be evaluated.
    feedline : FeedLineModel, optional
        What lies between feed and connector; without it they are one.
    line_names : sequence of str
        Values that change the feed line alone.
    """

    def __init__(
        self,
        axes: Sequence[Axis],
        nodes: Sequence[Node],
        band_hz: tuple[float, float],
        feedline: FeedLineModel | None = None,
        line_names: Sequence[str] = (),
    ) -> None:
        self.axes = tuple(axes)
        self.nodes = tuple(nodes)
        self.feedline = feedline
        self.line_names = tuple(line_names)
        self.names = (*(axis.name for axis in axes), *line_names)
        """Values the model is a function of."""
        common = set.intersection(*(set(node.modes) for node in nodes))
        self.half_waves = tuple(
            sorted(
                common, key=lambda n: float(np.mean([node.modes[n][_NATURAL] for node in nodes]))
            )
        )
        table = np.array([[node.modes[n] for n in self.half_waves] for node in nodes])
        table = table.reshape(len(nodes), len(self.half_waves), 4)
        with np.errstate(invalid="ignore"):
            self._log = np.log(table)
            self._log_peaks = np.log(
                [[node.peaks.get(n, (np.nan, np.nan)) for n in self.half_waves] for node in nodes]
            ).reshape(len(nodes), len(self.half_waves), 2)
        lowest = table[:, 0, _NATURAL] if self.half_waves else np.ones(len(nodes))
        stretch = lowest / np.exp(np.mean(np.log(lowest)))
        self._log_stretch = np.log(stretch)
        low, high = band_hz[0] / stretch.min(), band_hz[1] / stretch.max()
        if not low < high:
            raise MeasurementError(
                "the modes move by more than the whole band within the bounds; narrow them"
            )
        self.band_hz = (low * float(stretch.max()), high * float(stretch.min()))
        """Frequencies at which the interpolation holds for all values within the bounds."""
        self._grid = np.linspace(low, high, STEPS)
        self._curves = np.array(
            [node.reflect(self._grid * s) for node, s in zip(nodes, stretch, strict=True)]
        )

    def _weights(self, values: Mapping[str, float]) -> FloatArray:
        weight = np.ones(1)
        for axis in self.axes:
            weight = np.outer(weight, axis.weights(values[axis.name])).ravel()
        return weight

    def at_feed(self, values: Mapping[str, float], frequency_hz: FloatArray) -> ComplexArray:
        """Reflection at the feed for the reference `REFERENCE_OHM`, (F,).

        `values` holds one number per name and optionally `scale`.
        """
        weight = self._weights(values)
        stretch = np.exp(weight @ self._log_stretch)
        # Small enough that threads of a linear algebra library would only wait for each other.
        curve = CubicSpline(self._grid, np.einsum("n,nf->f", weight, self._curves))
        return np.asarray(curve(frequency_hz * values.get(SCALE, 1.0) / stretch))

    def through(
        self, values: Mapping[str, float], frequency_hz: FloatArray, at_feed: ComplexArray
    ) -> ComplexArray:
        """Reflection at the connector for one at the feed, both for `REFERENCE_OHM`, (F,)."""
        if self.feedline is None:
            return at_feed
        return self.feedline.through(values, frequency_hz, at_feed, REFERENCE_OHM)

    def reflection(self, values: Mapping[str, float], frequency_hz: FloatArray) -> ComplexArray:
        """Reflection at the connector for the reference `REFERENCE_OHM`, (F,); see `at_feed`."""
        return self.through(values, frequency_hz, self.at_feed(values, frequency_hz))

    def modes(self, values: Mapping[str, float]) -> CaseModes:
        """Modes and the dips they own at the connector; NaN where a mode has none.

        Without a feed line the dips are interpolated, and NaN where not every node has them.
        """
        modes = self.feed_modes(values)
        if self.feedline is None:
            return modes
        frequency = np.linspace(*self.band_hz, STEPS)
        at_feed = self.at_feed(values, frequency)
        dips = self.feedline.dips(values, frequency, at_feed, REFERENCE_OHM)
        conductance = (((1 - at_feed) / (1 + at_feed)) / REFERENCE_OHM).real
        places = [dip.frequency_hz for dip in dips]
        own = owners(
            places,
            np.interp(places, frequency, conductance),
            modes.natural_hz,
            modes.q,
            self._peaks(values)[:, 1],
        )
        table = np.full((3, len(modes.q)), np.nan)
        # Of several dips that fall to one mode the deepest is its own.
        for mode, dip in sorted(
            zip(own, dips, strict=True), key=lambda pair: pair[1].return_loss_db
        ):
            if mode >= 0:
                table[:, mode] = dip.frequency_hz, dip.return_loss_db, dip.bandwidth_hz
        loose = tuple(
            ModelledDip(dip.frequency_hz, 10 ** (-dip.return_loss_db / 20))
            for mode, dip in zip(own, dips, strict=True)
            if mode < 0
        )
        rows = {"dip_hz": table[0], "return_loss_db": table[1], "bandwidth_hz": table[2]}
        return replace(modes, **rows, loose=loose)

    def feed_modes(self, values: Mapping[str, float]) -> CaseModes:
        """Modes and the dips they own at the feed; NaN where not every node has the dip."""
        rows = np.exp(np.tensordot(self._weights(values), self._log, axes=1))
        rows = rows.reshape(-1, 4)
        scale = values.get(SCALE, 1.0)
        return CaseModes(
            half_waves=self.half_waves,
            natural_hz=rows[:, _NATURAL] / scale,
            q=rows[:, _Q],
            dip_hz=rows[:, _DIP] / scale,
            return_loss_db=rows[:, _LOSS],
            bandwidth_hz=np.full(len(rows), np.nan),
            on_plane=self.nodes[0].on_plane,
        )

    def places_hz(self, values: Mapping[str, float]) -> FloatArray:
        """Where at the feed each mode is seen, NaN where it is not: its dip, or behind a feed line,
        where a dip at the feed is nobody's business, its conductance peak; (M,)."""
        if self.feedline is None:
            return self.feed_modes(values).dip_hz
        return np.asarray(self._peaks(values)[:, 0] / values.get(SCALE, 1.0))

    def _peaks(self, values: Mapping[str, float]) -> FloatArray:
        """Frequency and resistance of the conductance peaks, (M, 2)."""
        rows = np.exp(np.tensordot(self._weights(values), self._log_peaks, axes=1))
        return np.asarray(rows.reshape(-1, 2))

    def error_at(self, values: Mapping[str, float], node: Node) -> float:
        """Largest difference at the feed from a point solved by itself, in the band that holds
        throughout."""
        frequency = np.linspace(*self.band_hz, STEPS)
        solved = node.reflect(frequency)
        return float(np.abs(self.at_feed({**values, SCALE: 1.0}, frequency) - solved).max())


class Engine:
    """Solves single points of a study for a fit, all with one mesh.

    Parameters
    ----------
    variation : Variation
    base : mapping of str to float
        Overrides that all points share: the build as cut.
    bounds : mapping of str to (float, float)
        Of the free values; the mesh is planned over their corners.
    band_hz : (float, float)
        In which the answers are needed.
    """

    def __init__(
        self,
        variation: Variation,
        base: Mapping[str, float],
        bounds: Mapping[str, tuple[float, float]],
        band_hz: tuple[float, float],
    ) -> None:
        from simkit.geometry import plan_mesh

        self.variation, self.base = variation, dict(base)
        self.band = FrequencyBand(band_hz[0], band_hz[1], STEPS)
        middle = {name: (low + high) / 2 for name, (low, high) in bounds.items()}
        corners = itertools.product(*({*pair} for pair in bounds.values()))
        points = [middle, *(dict(zip(bounds, corner, strict=True)) for corner in corners)]
        self.plan = plan_mesh([self.antenna(point) for point in points])
        self.solves = 0
        self._solved: dict[Antenna, Node] = {}

    def antenna(self, values: Mapping[str, float]) -> Antenna:
        """The antenna of a point without its feed line, with the band of the fit."""
        antenna = self.variation.antenna({**self.base, **values})
        return replace(antenna, frequency=self.band, converge=False, feedline=())

    def node(self, values: Mapping[str, float]) -> Node:
        """Solve one point; points that differ in the feed line alone are one.

        Raises
        ------
        GeometryError, EngineError, StudyError
        """
        antenna = self.antenna(values)
        if antenna not in self._solved:
            self._solved[antenna] = self._solve(antenna)
        return self._solved[antenna]

    def _solve(self, antenna: Antenna) -> Node:
        from simkit.geometry import build_wires
        from simkit.response.cable import told_apart
        from simkit.response.modes import find_modes
        from simkit.response.ownership import owned_features
        from simkit.runner.currents import sweep_currents, swept_impedance

        grid = build_wires(antenna, self.plan)
        sweep = sweep_currents(antenna, grid)
        self.solves += len(sweep.model.frequency_hz)

        def impedance(frequency_hz: FloatArray) -> ComplexArray:
            return swept_impedance(grid, sweep.model, frequency_hz)

        frequency = np.linspace(self.band.start_hz, self.band.stop_hz, self.band.points)
        found = find_modes(sweep, grid, self.band.start_hz, self.band.stop_hz)
        modes = told_apart(found, grid)
        features = owned_features(modes, frequency, impedance(frequency), antenna.reference_ohm)
        owned: dict[int, tuple[float, float, float, float]] = {}
        peaks: dict[int, tuple[float, float]] = {}
        for mode, feature in zip(modes, features, strict=True):
            if mode.half_waves < 0:
                continue  # of the feed cable: nothing says which is which in another case
            dip, peak = feature.dip, feature.peak
            if peak is not None and mode.half_waves not in owned:
                peaks[mode.half_waves] = (peak.frequency_hz, peak.resistance_ohm)
            owned.setdefault(
                mode.half_waves,
                (
                    dip.frequency_hz if dip else np.nan,
                    mode.frequency_hz,
                    mode.q,
                    dip.return_loss_db if dip else np.nan,
                ),
            )
        return Node(
            lambda frequency_hz: reflection(impedance(frequency_hz), REFERENCE_OHM),
            owned,
            any(grid.path_on_plane),
            peaks,
        )


def counts_for(free: int) -> int:
    """Nodes along each of so many free values: few values can afford more."""
    return {0: 1, 1: 7, 2: 5, 3: 4}.get(free, 3)


def build_surrogate(
    variation: Variation,
    base: Mapping[str, float],
    bounds: Mapping[str, tuple[float, float]],
    band_hz: tuple[float, float],
    *,
    progress: Callable[[int, int], None] | None = None,
) -> tuple[Surrogate, Engine]:
    """Solve the nodes over the bounds through the engine.

    Raises
    ------
    GeometryError, EngineError, StudyError
        If a node cannot be solved.
    """
    bounds = {name: pair for name, pair in bounds.items() if name != SCALE}
    line_names = values_of_line_alone(variation, base, bounds)
    feedline = FeedLineModel(variation, base) if variation.study.nominal().feedline else None
    bounds = {name: pair for name, pair in bounds.items() if name not in line_names}
    count = counts_for(len(bounds))
    axes = [Axis(name, chebyshev(low, high, count)) for name, (low, high) in bounds.items()]
    reach = _reach(variation, base, bounds, band_hz)
    engine = Engine(variation, base, bounds, reach)
    points = list(itertools.product(*(axis.nodes for axis in axes)))
    nodes = []
    for number, point in enumerate(points):
        nodes.append(engine.node(dict(zip(bounds, map(float, point), strict=True))))
        if progress is not None:
            progress(number + 1, len(points))
    return Surrogate(axes, nodes, reach, feedline, line_names), engine


def _reach(
    variation: Variation,
    base: Mapping[str, float],
    bounds: Mapping[str, tuple[float, float]],
    band_hz: tuple[float, float],
) -> tuple[float, float]:
    """Band to solve so that the wanted one is covered wherever the lowest mode goes."""
    if not bounds:
        return band_hz[0] * (1 - MARGIN), band_hz[1] * (1 + MARGIN)
    engine = Engine(variation, base, bounds, band_hz)
    middle = {name: (low + high) / 2 for name, (low, high) in bounds.items()}
    swing = 1.0
    centre = engine.node(middle).modes
    for name, pair in bounds.items():
        places = [engine.node({**middle, name: value}).modes for value in pair]
        common = set(centre).intersection(*places)
        if common:
            lowest = min(common, key=lambda n: centre[n][_NATURAL])
            ends = [place[lowest][_NATURAL] for place in places]
            swing *= max(ends) / min(ends)
    swing = min(swing, 1.6)
    return band_hz[0] / swing * (1 - MARGIN), band_hz[1] * swing * (1 + MARGIN)
