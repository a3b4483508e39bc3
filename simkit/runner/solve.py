"""Solve one case: antenna in, everything the store keeps about it out."""

from __future__ import annotations

import time
from collections.abc import Sequence
from dataclasses import replace
from functools import lru_cache
from typing import Any

import numpy as np

from simkit.errors import EngineError, GeometryError
from simkit.feedline.checks import FeedlineError
from simkit.geometry import MeshPlan, WireGrid, build_wires
from simkit.response.cable import (
    most_wanted,
    told_apart,
)
from simkit.response.modes import NaturalMode, find_modes, without_echoes
from simkit.response.ownership import owned_features
from simkit.response.rational import Sweep
from simkit.runner.arrays import (
    cable_arrays,
    feature_arrays,
    grid_arrays,
    ground_arrays,
    mode_arrays,
    padded,
    sample_arrays,
)
from simkit.runner.connector import Connector
from simkit.runner.convergence import Convergence, converge
from simkit.runner.currents import (
    sweep_currents,
    swept_impedance,
)
from simkit.runner.radiation import radiation_of, stacked
from simkit.runner.result import CaseResult
from simkit.store.schema import MODES, Status
from simkit.study.model import Antenna

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
            arrays["mode_frequency_error"] = np.hypot(padded(meshes.relative_error), own)
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


def _evaluate(
    antenna: Antenna, grid: WireGrid, sweep: Sweep
) -> tuple[dict[str, Any], list[str], list[str]]:
    """Arrays of the store, doubts, and notes: what to know without being doubtful for it."""
    band = antenna.frequency
    frequency_hz = np.linspace(band.start_hz, band.stop_hz, band.points)
    impedance = swept_impedance(grid, sweep.model, frequency_hz)
    modes, notes = _modes(antenna, grid, sweep)
    connector = Connector.of(antenna, frequency_hz, impedance)
    features = owned_features(
        modes, frequency_hz, impedance, antenna.reference_ohm, connector.dips()
    )
    arrays: dict[str, Any] = {"impedance": impedance}
    arrays |= grid_arrays(grid) | ground_arrays(antenna) | sample_arrays(antenna, grid, sweep)
    arrays |= mode_arrays(antenna, grid, modes) | feature_arrays(features)
    arrays |= cable_arrays(grid, sweep, modes, features)
    radiation = [
        radiation_of(antenna, grid, sweep, mode, owned)
        for mode, owned in zip(modes, features, strict=True)
    ]
    arrays |= stacked(radiation)
    arrays |= connector.arrays(arrays)
    if antenna.ground is not None and antenna.ground.kind == "earth":
        notes.append("over real earth the power balance is not checked: the earth's part is unseen")
    of_line, line_notes = connector.judged(arrays)
    doubts = [*_doubts(antenna, grid, sweep, modes, radiation), *of_line]
    return arrays, doubts, [*notes, *line_notes]


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
