"""Solve one case: antenna in, everything the store keeps about it out."""

from __future__ import annotations

import time
from collections.abc import Sequence
from dataclasses import replace
from functools import lru_cache
from typing import Any

import numpy as np

from simkit.engine.pynec import EarthMethod, SeriesLoad, solve_wires
from simkit.errors import EngineError, GeometryError
from simkit.feedline.checks import FeedlineError
from simkit.geometry import MeshPlan, WireGrid, build_wires
from simkit.geometry.conductor import face_resistance_ohm
from simkit.geometry.placement import far_from_earth
from simkit.geometry.wires import FloatArray
from simkit.response.cable import (
    cable_level_db,
    mode_errors,
    most_wanted,
    parts_on_cable,
    told_apart,
)
from simkit.response.modes import NaturalMode, find_modes, without_echoes
from simkit.response.ownership import OwnedFeatures, owned_features
from simkit.response.pattern import (
    Radiators,
    gain_grid_dbi,
    peak_direction,
    radiated_power_w,
)
from simkit.response.rational import ComplexArray, Sweep, adaptive_sweep
from simkit.response.strip_current import current_along_strips, totals_matrix
from simkit.response.terminals import feed_impedance_ohm
from simkit.runner.connector import Connector
from simkit.runner.convergence import Convergence, converge
from simkit.runner.result import CaseResult
from simkit.store.schema import MODES, PHI_DEG, POSITIONS, SAMPLES, THETA_DEG, Status
from simkit.study.model import Antenna

SEGMENT_WEIGHT = 0.1
"""Weight of a segment's current against its strip's in judging a sweep. On rails of 1.5 to 30 mm
wide strips it leaves 1.6 % of the largest current as the error of any, and the poles are those of
the totals alone; it costs 0 to 8 samples where rails are not tied, else up to 4."""

BALANCE_TOLERANCE = 0.03
"""Radiated plus lost power may differ from the input power by this part before a case is doubtful.

The currents come from the same moment solution as the input power, so a gap between the two is an
inconsistency of the solution itself; sound grids stay within 1 %.
"""


REMEMBERED = 8
"""Antennas a process keeps the currents of, for cases that differ in their feed line alone."""


def solve_case(antenna: Antenna, plan: MeshPlan) -> CaseResult:
    """Solve one case from strips to stored features.

    Parameters
    ----------
    antenna : Antenna
    plan : MeshPlan
        Mesh topology of the study.

    Returns
    -------
    CaseResult
        `REFUSED` with the reason if the geometry cannot be modelled, `FAILED` if the engine fails.
        Anything else that goes wrong is a bug and raises.
    """
    begin = time.perf_counter()
    solves = 0
    try:
        grid, sweep = _currents(antenna, plan)
        solves = len(sweep.model.frequency_hz)
        arrays, doubts, notes = _evaluate(antenna, grid, sweep)
        if antenna.converge:
            meshes = _convergence(antenna, plan, grid, sweep)
            # The rules' own error is in both.
            own = np.sqrt(
                np.maximum(arrays["mode_frequency_error"] ** 2 - meshes.rules_error**2, 0.0)
            )
            arrays["mode_frequency_error"] = np.hypot(_padded(meshes.relative_error), own)
    except (GeometryError, FeedlineError) as error:
        return CaseResult(Status.REFUSED, str(error), time.perf_counter() - begin, solves)
    except EngineError as error:
        return CaseResult(Status.FAILED, str(error), time.perf_counter() - begin, solves)
    status = Status.DOUBTFUL if doubts else Status.SOLVED
    words = "; ".join([*doubts, *notes])
    return CaseResult(status, words, time.perf_counter() - begin, solves, arrays)


def _currents(antenna: Antenna, plan: MeshPlan) -> tuple[WireGrid, Sweep]:
    """Wires and currents; of antennas that differ in their feed line alone, once."""
    if antenna.feedline:
        return _remembered(replace(antenna, feedline=()), plan)
    grid = build_wires(antenna, plan)
    return grid, sweep_currents(antenna, grid)


_remembered = lru_cache(maxsize=REMEMBERED)(_currents)


def solve_convergence(antenna: Antenna, plan: MeshPlan) -> Convergence:
    """Mode frequencies of one case on its planned mesh, on coarser and on finer ones.

    Raises
    ------
    GeometryError, EngineError
        The case has no solution on its planned mesh.
    """
    grid = build_wires(antenna, plan)
    return _convergence(antenna, plan, grid, sweep_currents(antenna, grid))


def _convergence(antenna: Antenna, plan: MeshPlan, grid: WireGrid, sweep: Sweep) -> Convergence:
    return converge(
        antenna,
        plan,
        _modes(antenna, grid, sweep)[0],
        lambda antenna, grid: _modes(antenna, grid, sweep_currents(antenna, grid))[0],
    )


def _modes(
    antenna: Antenna, grid: WireGrid, sweep: Sweep
) -> tuple[tuple[NaturalMode, ...], list[str]]:
    """Natural modes to keep, and what to say of others."""
    band = antenna.frequency
    found = find_modes(sweep, grid, band.start_hz, band.stop_hz)
    if grid.cable >= 0:
        found = told_apart(found, grid)
        if antenna.ground is not None:
            own = without_echoes([mode for mode in found if mode.half_waves >= 0])
            found = (*own, *(mode for mode in found if mode.half_waves < 0))
        return most_wanted(found, MODES), []
    if antenna.ground is None:
        return found[:MODES], []
    kept = without_echoes(found)
    stay = {mode.pole_hz for mode in kept}
    gone = [f"{m.frequency_hz / 1e6:.1f}" for m in found if m.pole_hz not in stay]
    if not gone:
        return kept[:MODES], []
    return kept[:MODES], [
        "the ground's echo comes back when a mode has largely died away, so antenna and ground "
        f"resonate together; left out are weaker natural modes at {', '.join(gone)} MHz with the "
        "same current as one that is kept; without [ground] the modes are those of the antenna"
    ]


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
            series=_series_loads(antenna, grid, frequency_hz),
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


def _series_loads(antenna: Antenna, grid: WireGrid, frequency_hz: float) -> list[SeriesLoad]:
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
    return _impedance_of(grid, currents @ source_weight(grid), frequency_hz)


def _impedance_of(
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


def _evaluate(
    antenna: Antenna, grid: WireGrid, sweep: Sweep
) -> tuple[dict[str, Any], list[str], list[str]]:
    """Arrays of the store, doubts, and notes: what to know without being doubtful for it."""
    band = antenna.frequency
    frequency_hz = np.linspace(band.start_hz, band.stop_hz, band.points)
    sampled = sweep.model.values[:, : grid.segments] @ source_weight(grid)
    impedance = _impedance_of(grid, sweep.model.matrix(frequency_hz) @ sampled, frequency_hz)
    modes, notes = _modes(antenna, grid, sweep)
    connector = Connector.of(antenna, frequency_hz, impedance)
    features = owned_features(
        modes, frequency_hz, impedance, antenna.reference_ohm, connector.dips()
    )
    arrays: dict[str, Any] = {"impedance": impedance}
    arrays |= _grid_arrays(grid) | _ground_arrays(antenna) | _sample_arrays(antenna, grid, sweep)
    arrays |= _mode_arrays(antenna, grid, modes) | _feature_arrays(features)
    arrays |= _cable_arrays(grid, sweep, modes, features)
    radiation = [
        _radiation(antenna, grid, sweep, mode, owned)
        for mode, owned in zip(modes, features, strict=True)
    ]
    arrays |= _stacked(radiation)
    arrays |= connector.arrays(arrays)
    if antenna.ground is not None and antenna.ground.kind == "earth":
        notes.append("over real earth the power balance is not checked: the earth's part is unseen")
    doubts = [*_doubts(antenna, grid, sweep, modes, radiation), *connector.doubts]
    return arrays, doubts, notes


def _doubts(
    antenna: Antenna,
    grid: WireGrid,
    sweep: Sweep,
    modes: Sequence[NaturalMode],
    radiation: list[dict[str, Any]],
) -> list[str]:
    found = list(grid.doubts)
    if not sweep.converged:
        found.append(
            f"the frequency sweep did not settle within {len(sweep.model.frequency_hz)} samples "
            f"(last difference {sweep.error:.1e}): narrow the band"
            + (", or leave [ground] out if it is far below" if antenna.ground else "")
        )
    for mode, row in zip(modes, radiation, strict=True):
        if abs(row["power_balance"] - 1) > BALANCE_TOLERANCE:
            found.append(
                f"at {row['pattern_frequency'] / 1e6:.1f} MHz ({_of(mode)}) radiated and lost "
                f"power are {row['power_balance']:.3f} of the input power; 1 within "
                f"{BALANCE_TOLERANCE} is expected"
            )
    return found


def _of(mode: NaturalMode) -> str:
    return f"mode of {mode.half_waves} half waves" if mode.half_waves >= 0 else "a cable mode"


def _grid_arrays(grid: WireGrid) -> dict[str, Any]:
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


def _ground_arrays(antenna: Antenna) -> dict[str, Any]:
    ground = antenna.ground
    if ground is None:
        return {"ground_permittivity": np.nan, "ground_conductivity": np.nan}
    if ground.kind == "plane":
        return {"ground_permittivity": 1.0, "ground_conductivity": np.inf}
    return {
        "ground_permittivity": ground.relative_permittivity,
        "ground_conductivity": ground.conductivity_s_per_m,
    }


def _sample_arrays(antenna: Antenna, grid: WireGrid, sweep: Sweep) -> dict[str, Any]:
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


def _mode_arrays(antenna: Antenna, grid: WireGrid, modes: Sequence[NaturalMode]) -> dict[str, Any]:
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
        "mode_frequency": _padded([mode.frequency_hz for mode in modes]),
        "mode_q": _padded([mode.q for mode in modes]),
        "mode_half_waves": half_waves,
        "mode_frequency_error": _padded(mode_errors(modes, grid)),
        "mode_current": shapes,
    }


def _cable_arrays(
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
        "cable_current": _padded(levels),
        "mode_on_cable": _padded([parts_on_cable(mode, grid)[0] for mode in modes]),
    }


def _padded(values: Sequence[float] | FloatArray) -> FloatArray:
    row = np.full(MODES, np.nan)
    row[: len(values)] = values
    return row


def _feature_arrays(features: Sequence[OwnedFeatures]) -> dict[str, Any]:
    nan = float("nan")
    return {
        "conductance_peak_frequency": _padded(
            [f.peak.frequency_hz if f.peak else nan for f in features]
        ),
        "conductance_peak_resistance": _padded(
            [f.peak.resistance_ohm if f.peak else nan for f in features]
        ),
        "series_resonance_frequency": _padded(
            [f.series.frequency_hz if f.series else nan for f in features]
        ),
        "series_resonance_resistance": _padded(
            [f.series.resistance_ohm if f.series else nan for f in features]
        ),
        "parallel_resonance_frequency": _padded(
            [f.parallel.frequency_hz if f.parallel else nan for f in features]
        ),
        "parallel_resonance_resistance": _padded(
            [f.parallel.resistance_ohm if f.parallel else nan for f in features]
        ),
        "dip_frequency": _padded([f.dip.frequency_hz if f.dip else nan for f in features]),
        "dip_return_loss": _padded([f.dip.return_loss_db if f.dip else nan for f in features]),
        "dip_bandwidth": _padded([f.dip.bandwidth_hz if f.dip else nan for f in features]),
        "impedance_q": _padded([f.q for f in features]),
    }


def _radiation(
    antenna: Antenna, grid: WireGrid, sweep: Sweep, mode: NaturalMode, owned: OwnedFeatures
) -> dict[str, Any]:
    """Pattern, gain, efficiency and power balance of one mode.

    A mode the feed excites is shown as it is driven, at its conductance peak; the others by their
    own current at the natural frequency, with the balance taken for the second source.

    Over real earth there is no balance. What the earth takes is the rest of the input power and
    counts as lost; a mode that the feed does not excite has none, so it is taken to lose the same
    part as the currents of the second source.
    """
    driven = owned.peak is not None
    frequency_hz = owned.peak.frequency_hz if owned.peak else mode.frequency_hz
    both = sweep.model(np.array([frequency_hz]))[0].reshape(2, -1)
    fed, source = (both[0], grid.source) if driven else (both[1], grid.probe)
    shown = fed if driven else mode.current
    radiators = Radiators.of(grid, antenna.ground)
    resistance = grid.per_segment(resistance_ohm_per_m(antenna, grid, frequency_hz))

    def lost_w(current: ComplexArray) -> float:
        return float(0.5 * np.sum(resistance * abs(current) ** 2 * radiators.length_m))

    input_w = 0.5 * sum(volts * fed[segment].real for segment, volts in source)
    radiated_w = radiated_power_w(radiators, fed, frequency_hz)
    balance = (radiated_w + lost_w(fed)) / input_w
    radiated_share = radiated_w / input_w
    if not driven:
        radiated_w = radiated_power_w(radiators, shown, frequency_hz)
    efficiency = radiated_w / (radiated_w + lost_w(shown))
    if antenna.ground is not None and antenna.ground.kind == "earth":
        efficiency, balance = radiated_share, float("nan")
    gain = gain_grid_dbi(
        radiators, shown, frequency_hz, radiated_w / efficiency, THETA_DEG, PHI_DEG
    )
    top = np.unravel_index(int(np.argmax(gain)), gain.shape)
    theta, phi, intensity = peak_direction(
        radiators, shown, frequency_hz, (float(THETA_DEG[top[0]]), float(PHI_DEG[top[1]])), 10.0
    )
    directivity = 10 * np.log10(4 * np.pi * intensity / radiated_w)
    return {
        "pattern_frequency": frequency_hz,
        "driven": int(driven),
        "gain": gain,
        "peak_gain": directivity + 10 * np.log10(efficiency),
        "peak_theta": theta,
        "peak_phi": phi,
        "directivity": directivity,
        "efficiency": efficiency,
        "power_balance": balance,
    }


def _stacked(rows: list[dict[str, Any]]) -> dict[str, Any]:
    """One array a name from one dict a mode, padded to the slots of the store."""
    gain = np.full((MODES, len(THETA_DEG), len(PHI_DEG)), np.nan)
    driven = np.full(MODES, -1)
    for index, row in enumerate(rows):
        gain[index], driven[index] = row["gain"], row["driven"]
    names = [name for name in rows[0] if name not in ("gain", "driven")] if rows else []
    stacked: dict[str, Any] = {name: _padded([row[name] for row in rows]) for name in names}
    return stacked | {"gain": gain, "driven": driven}
