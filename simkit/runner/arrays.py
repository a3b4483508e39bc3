"""What the store keeps of one case, as arrays by name."""

from __future__ import annotations

from collections.abc import Sequence
from typing import Any

import numpy as np

from simkit.geometry import WireGrid
from simkit.geometry.conductor import face_resistance_ohm
from simkit.geometry.wires import FloatArray
from simkit.response.cable import (
    cable_level_db,
    mode_errors,
    parts_on_cable,
)
from simkit.response.modes import NaturalMode
from simkit.response.ownership import OwnedFeatures
from simkit.response.pattern import (
    Radiators,
)
from simkit.response.rational import Sweep
from simkit.response.strip_current import current_along_strips
from simkit.runner.currents import source_weight
from simkit.store.schema import MODES, POSITIONS, SAMPLES
from simkit.study.model import Antenna


def grid_arrays(grid: WireGrid) -> dict[str, Any]:
    radiators = Radiators.of(grid)
    arrays: dict[str, Any] = {
        "length": radiators.length_m,
        "conductor_factor": grid.per_segment(grid.conductor_factor_per_m),
        "series_inductance": grid.per_segment(grid.series_inductance_h_per_m),
        "loss_inductance": grid.per_segment(grid.loss_inductance_h_per_m),
        "strip_index": grid.strip_index,
        "strip_position": grid.strip_position,
        "model_gap": grid.model_gap_m,
        "study_gap": grid.study_gap_m,
        "feed_width": grid.feed_width_m,
        "wire_radius": grid.radius_m,
        "source_segment": grid.source[0][0],
        "source_weight": source_weight(grid),
        "path_on_plane": int(any(grid.path_on_plane)),
    }
    for axis, name in enumerate("xyz"):
        arrays[name] = radiators.middle_m[:, axis]
        arrays[f"direction_{name}"] = radiators.direction[:, axis]
    return arrays


def ground_arrays(antenna: Antenna) -> dict[str, Any]:
    ground = antenna.ground
    if ground is None:
        return {"ground_permittivity": np.nan, "ground_conductivity": np.nan}
    if ground.kind == "plane":
        return {"ground_permittivity": 1.0, "ground_conductivity": np.inf}
    return {
        "ground_permittivity": ground.relative_permittivity,
        "ground_conductivity": ground.conductivity_s_per_m,
    }


def sample_arrays(antenna: Antenna, grid: WireGrid, sweep: Sweep) -> dict[str, Any]:
    count = len(sweep.model.frequency_hz)
    frequency = np.full(SAMPLES, np.nan)
    frequency[:count] = sweep.model.frequency_hz
    weight = np.full(SAMPLES, complex(np.nan, np.nan))
    weight[:count] = sweep.model.weight
    face = np.full(SAMPLES, np.nan)
    face[:count] = [face_resistance_ohm(antenna.metal, float(f)) for f in sweep.model.frequency_hz]
    currents = np.full((2, SAMPLES, grid.segments), complex(np.nan, np.nan))
    currents[:, :count] = np.moveaxis(sweep.model.values.reshape(count, 2, grid.segments), 1, 0)
    return {
        "sample_frequency": frequency,
        "weight": weight,
        "surface_resistance": face,
        "current": currents[0],
        "probe_current": currents[1],
    }


def mode_arrays(antenna: Antenna, grid: WireGrid, modes: Sequence[NaturalMode]) -> dict[str, Any]:
    positions = np.linspace(0, 1, POSITIONS)
    strips = len(antenna.strips)
    shapes = np.full((MODES, strips, POSITIONS), complex(np.nan, np.nan))
    half_waves = np.full(MODES, -1)
    if modes:
        currents = np.array([mode.current for mode in modes])
        shapes[: len(modes)] = current_along_strips(currents, grid.chains, strips, positions)
    for index, mode in enumerate(modes):
        shapes[index] /= shapes[index].flat[int(np.nanargmax(abs(shapes[index])))]
        half_waves[index] = mode.half_waves
    return {
        "mode_frequency": padded([mode.frequency_hz for mode in modes]),
        "mode_q": padded([mode.q for mode in modes]),
        "mode_half_waves": half_waves,
        "mode_frequency_error": padded(mode_errors(modes, grid)),
        "mode_current": shapes,
    }


def cable_arrays(
    grid: WireGrid, sweep: Sweep, modes: Sequence[NaturalMode], features: Sequence[OwnedFeatures]
) -> dict[str, Any]:
    """How much of each mode flows on the feed cable; NaN without one."""
    levels = []
    for owned in features:
        level = float("nan")
        if owned.peak is not None and grid.cable >= 0:
            at_hz = owned.peak.frequency_hz
            driven = sweep.model(np.array([at_hz]))[0, : grid.segments]
            level = cable_level_db(driven, grid, at_hz)
        levels.append(level)
    return {
        "cable_current": padded(levels),
        "mode_on_cable": padded([parts_on_cable(mode, grid)[0] for mode in modes]),
    }


_FEATURES = {
    "conductance_peak_frequency": ("peak", "frequency_hz"),
    "conductance_peak_resistance": ("peak", "resistance_ohm"),
    "series_resonance_frequency": ("series", "frequency_hz"),
    "series_resonance_resistance": ("series", "resistance_ohm"),
    "parallel_resonance_frequency": ("parallel", "frequency_hz"),
    "parallel_resonance_resistance": ("parallel", "resistance_ohm"),
    "dip_frequency": ("dip", "frequency_hz"),
    "dip_return_loss": ("dip", "return_loss_db"),
    "dip_bandwidth": ("dip", "bandwidth_hz"),
}
"""Of the store: which of a mode's features, and what of it; NaN for a mode without it."""


def feature_arrays(features: Sequence[OwnedFeatures]) -> dict[str, Any]:
    arrays = {
        name: padded([getattr(getattr(f, feature), part, np.nan) for f in features])
        for name, (feature, part) in _FEATURES.items()
    }
    return arrays | {"impedance_q": padded([f.q for f in features])}


def padded(values: Sequence[float] | FloatArray) -> FloatArray:
    row = np.full(MODES, np.nan)
    row[: len(values)] = values
    return row
