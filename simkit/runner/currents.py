"""Currents of the engine over the band, and the impedance at the feed that follows."""

from __future__ import annotations

import numpy as np

from simkit.engine.pynec import EarthMethod, SeriesLoad, solve_wires
from simkit.geometry import WireGrid
from simkit.geometry.conductor import face_resistance_ohm
from simkit.geometry.placement import far_from_earth
from simkit.geometry.wires import FloatArray
from simkit.response.rational import ComplexArray, RationalModel, Sweep, adaptive_sweep
from simkit.response.strip_current import totals_matrix
from simkit.response.terminals import feed_impedance_ohm
from simkit.store.schema import SAMPLES
from simkit.study.model import Antenna

SEGMENT_WEIGHT = 0.1
"""Weight of a segment's current against its strip's in judging a sweep. On rails of 1.5 to 30 mm
wide strips it leaves 1.6 % of the largest current as the error of any, and the poles are those of
the totals alone; it costs 0 to 8 samples where rails are not tied, else up to 4."""


def sweep_currents(antenna: Antenna, grid: WireGrid, *, tolerance: float = 1e-3) -> Sweep:
    """Adaptive sweep of the segment currents for the feed and for the second source.

    Raises
    ------
    EngineError
    """

    def solve(frequency_hz: float) -> ComplexArray:
        currents = solve_wires(
            grid.wires,
            grid.radius_m,
            frequency_hz,
            [grid.source, grid.probe],
            series=series_loads(antenna, grid, frequency_hz),
            ground=antenna.ground,
            earth=earth,
        )
        return np.asarray(currents.ravel(), dtype=np.complex128)

    # One way for the whole band: a change from one to the other would be a step.
    earth: EarthMethod = "integrals" if far_from_earth(grid, antenna) else "reflection"
    band = antenna.frequency
    return adaptive_sweep(
        solve,
        band.start_hz,
        band.stop_hz,
        tolerance=tolerance,
        most_samples=SAMPLES,
        observe=_judged(grid),
    )


def _judged(grid: WireGrid) -> FloatArray:
    """What a sweep is judged by: totals of the strips and, less strictly, every segment's current.

    Without the latter, currents between rails are found at the samples only: in between they come
    out wrong by the size of the largest, and a mode's own current drowns in them.
    """
    totals = totals_matrix(grid)
    one = np.vstack([totals, SEGMENT_WEIGHT * np.eye(grid.segments)])
    none = np.zeros_like(one)
    return np.block([[one, none], [none, one]])


def series_loads(antenna: Antenna, grid: WireGrid, frequency_hz: float) -> list[SeriesLoad]:
    """Load of each wire at one frequency: conductor, carrier and the loss of both."""
    resistance = resistance_ohm_per_m(antenna, grid, frequency_hz)
    return [
        SeriesLoad(float(ohm), float(henry))
        for ohm, henry in zip(resistance, grid.series_inductance_h_per_m, strict=True)
    ]


def resistance_ohm_per_m(antenna: Antenna, grid: WireGrid, frequency_hz: float) -> FloatArray:
    """Series resistance of each wire, conductor and plastic, (W,) ohm per metre."""
    face = face_resistance_ohm(antenna.metal, frequency_hz)
    omega = 2 * np.pi * frequency_hz
    return np.asarray(face * grid.conductor_factor_per_m + omega * grid.loss_inductance_h_per_m)


def feed_impedance(
    grid: WireGrid, currents: ComplexArray, frequency_hz: FloatArray
) -> ComplexArray:
    """Impedance at the study's feed gap from (F, S) currents for 1 V at the feed, ohm."""
    return _impedance(grid, currents @ source_weight(grid), frequency_hz)


def swept_impedance(grid: WireGrid, model: RationalModel, frequency_hz: FloatArray) -> ComplexArray:
    """Impedance at the study's feed gap over (F,) frequencies by a sweep of both sources, ohm."""
    sampled = model.values[:, : grid.segments] @ source_weight(grid)
    return _impedance(grid, model.combined(frequency_hz, sampled), frequency_hz)


def _impedance(
    grid: WireGrid, feed_current_a: ComplexArray, frequency_hz: FloatArray
) -> ComplexArray:
    return feed_impedance_ohm(
        feed_current_a,
        frequency_hz,
        grid.feed_width_m,
        grid.model_gap_m,
        grid.study_gap_m,
    )


def source_weight(grid: WireGrid) -> FloatArray:
    """(S,) part of the feed voltage across each segment; its mean of the currents is the feed's."""
    weight = np.zeros(grid.segments)
    for segment, volts in grid.source:
        weight[segment] += volts
    return weight
