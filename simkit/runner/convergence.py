"""How far mode frequencies hang on the mesh, and what that adds to their error.

The rules that turn strips into wires were found with segments of certain lengths, and wires do not
converge to flat metal however fine they are. A refinement therefore says how much of a mode
frequency is an accident of this mesh; it never takes away from the rules' own error.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass, replace
from typing import Any

import numpy as np
from scipy.optimize import brentq

from simkit.errors import EngineError, GeometryError
from simkit.geometry import MeshPlan, WireGrid, build_wires, chains_of
from simkit.geometry.refine import cut_count, refined
from simkit.response.modes import NaturalMode
from simkit.study.model import Antenna

FACTORS = (2 / 3, 1.5, 2.25)
"""Meshes solved besides the planned one: times as many segments along each strip."""

LEAST_CHANGE = 0.1
"""Meshes nearer to each other than this part of their segments would compare noise."""

MOST_SEGMENTS = 1600
"""Finer meshes than this are not tried; one takes a minute."""

SAME_MODE = 0.05
"""A mode on another mesh is the same one if it has as many half waves and lies this near."""

LEAST_ORDER, MOST_ORDER = 0.7, 4.0
"""Orders of convergence that are believed. Slower ones leave almost anything beyond the last mesh,
quicker ones are a coincidence of three numbers."""

SAFETY = 1.25
"""On what extrapolation through three meshes leaves over, as usual for this estimate (Roache,
J. Fluids Eng. 116, 405, 1994)."""

SolveModes = Callable[[Antenna, WireGrid], Sequence[NaturalMode]]


@dataclass(frozen=True)
class Level:
    """Mode frequencies on one mesh.

    Attributes
    ----------
    name : str
    segments : int
        Unknowns of the engine.
    size : float
        Length of segments, relative to the planned mesh.
    frequency_hz : tuple of float
        One for each mode of the planned mesh; NaN for a mode not found again.
    """

    name: str
    segments: int
    size: float
    frequency_hz: tuple[float, ...]


@dataclass(frozen=True)
class Convergence:
    """Mode frequencies on several meshes, and the error they speak for.

    Attributes
    ----------
    half_waves : tuple of int
        Of the modes on the planned mesh, from the lowest up.
    on_plane : bool
        They are those of the path and its image in a ground plane.
    levels : tuple of Level
        From the coarsest mesh to the finest, the planned one among them.
    planned : int
        Its place among the levels.
    other_rails : Level or None
        Grid model: the planned lengths with another number of rails, where no strips join in a T.
    mesh_error : tuple of float
        Relative error of each mode frequency that the meshes speak for.
    how : tuple of str
        How it was found, in a few words.
    rules_error : float
        Relative standard error of the rules.
    exhausted : bool
        The engine's limits leave no room for segments as fine as wanted.
    remarks : tuple of str
        Meshes that could not be solved, and why.
    """

    half_waves: tuple[int, ...]
    on_plane: bool
    levels: tuple[Level, ...]
    planned: int
    other_rails: Level | None
    mesh_error: tuple[float, ...]
    how: tuple[str, ...]
    rules_error: float
    exhausted: bool
    remarks: tuple[str, ...] = ()

    @property
    def relative_error(self) -> tuple[float, ...]:
        """Both errors together, never less than that of the rules."""
        return tuple(float(np.hypot(self.rules_error, error)) for error in self.mesh_error)


def converge(
    antenna: Antenna, plan: MeshPlan, modes: Sequence[NaturalMode], solve: SolveModes
) -> Convergence:
    """Solve an antenna on coarser and finer meshes and estimate the error of its mode frequencies.

    Parameters
    ----------
    antenna : Antenna
    plan : MeshPlan
    modes : sequence of NaturalMode
        On the planned mesh.
    solve : callable
        (antenna, wire grid) -> natural modes.

    Raises
    ------
    GeometryError
        The antenna cannot be built by the plan.
    """
    grid = build_wires(antenna, plan)
    at_hz = tuple(mode.frequency_hz for mode in modes)
    levels = [Level("as planned", grid.segments, 1.0, at_hz)]
    remarks: list[str] = []

    def level(name: str, other: MeshPlan) -> Level | None:
        try:
            wires = build_wires(antenna, other)
            if wires.segments > MOST_SEGMENTS:
                remarks.append(f"{name}: {wires.segments} segments are too many to try")
                return None
            found = solve(antenna, wires)
        except (GeometryError, EngineError) as error:
            remarks.append(f"{name}: {error}")
            return None
        size = cut_count(plan) / cut_count(other)
        return Level(name, wires.segments, size, same_modes(modes, found))

    exhausted, last = False, plan
    for name, factor in zip(("coarser", "finer", "finest"), FACTORS, strict=True):
        other = refined(plan, antenna, factor)
        wanted = cut_count(plan) * factor
        exhausted |= factor > 1 and cut_count(other) < 0.9 * wanted
        before = plan if factor < 1 else last
        if abs(np.log(cut_count(other) / cut_count(before))) < LEAST_CHANGE:
            continue
        if made := level(name, other):
            levels.append(made)
        last = other if factor > 1 else plan
    levels.sort(key=lambda level: -level.size)
    rails = _other_rails(antenna, plan)
    beside = level(f"{rails} rails", replace(plan, rails=rails)) if rails else None
    planned = next(k for k, level in enumerate(levels) if level.size == 1.0)
    errors, words = _errors(levels, planned, beside)
    return Convergence(
        half_waves=tuple(mode.half_waves for mode in modes),
        on_plane=any(grid.path_on_plane),
        levels=tuple(levels),
        planned=planned,
        other_rails=beside,
        mesh_error=errors,
        how=words,
        rules_error=grid.relative_error,
        exhausted=bool(exhausted),
        remarks=tuple(remarks),
    )


def _other_rails(antenna: Antenna, plan: MeshPlan) -> int:
    """Another number of rails for which there are rules; 0 in the line model and for T junctions.

    The rails of a branch cut the strip it ends on, so with another number the mesh is another.
    """
    if plan.kind == "line" or any(line.tees for line in chains_of(antenna, tips=False)):
        return 0
    return plan.rails + 2 if plan.rails < 9 else plan.rails - 2


def same_modes(wanted: Sequence[NaturalMode], found: Sequence[NaturalMode]) -> tuple[float, ...]:
    """Frequencies of the same modes on another mesh, hertz; NaN for one not found."""
    rest = list(found)
    frequencies = []
    for mode in wanted:
        alike = [other for other in rest if other.half_waves == mode.half_waves]
        best = min(alike, key=lambda o: abs(o.frequency_hz - mode.frequency_hz), default=None)
        if best and abs(best.frequency_hz / mode.frequency_hz - 1) < SAME_MODE:
            rest.remove(best)
            frequencies.append(best.frequency_hz)
        else:
            frequencies.append(float("nan"))
    return tuple(frequencies)


def _errors(
    levels: Sequence[Level], planned: int, beside: Level | None
) -> tuple[tuple[float, ...], tuple[str, ...]]:
    errors, words = [], []
    for mode, at_hz in enumerate(levels[planned].frequency_hz):
        values = np.array([level.frequency_hz[mode] for level in levels])
        error, how = mesh_error(np.array([level.size for level in levels]), values / at_hz, planned)
        rails = abs(beside.frequency_hz[mode] / at_hz - 1) if beside else float("nan")
        if np.isfinite(rails):
            error, how = float(np.hypot(error, rails)), f"{how}, and rails"
        errors.append(error)
        words.append(how)
    return tuple(errors), tuple(words)


def mesh_error(size: Any, value: Any, planned: int) -> tuple[float, str]:
    """Error of one of several values found with segments of different lengths.

    Parameters
    ----------
    size, value : (N,) float arrays
        Lengths, descending, and the value found with each; NaN where there is none.
    planned : int
        The value whose error is wanted.

    Returns
    -------
    error : float
        In the unit of the values; 0 if there is nothing to compare with.
    how : str
        Where the last three shifts shrink steadily: distance to the limit of
        ``value + constant * size**order``, with a margin. With two values: the same with order 1.
        Otherwise the spread of the last three, or of all if the planned one is not among them.
    """
    size, value = np.asarray(size, dtype=float), np.asarray(value, dtype=float)
    here = value[planned]
    known = np.isfinite(value)
    size, value = size[known], value[known]
    if len(value) < 2:
        return 0.0, "no other mesh"
    if len(value) == 2:
        slope = abs(value[1] - value[0]) / (size[0] - size[1])
        return float(slope * size[value == here][0]), "taken as order 1"
    order = _order(size, value)
    if order is not None:
        gain = size[-1] ** order / (size[-2] ** order - size[-1] ** order)
        limit = value[-1] + (value[-1] - value[-2]) * gain
        return float(SAFETY * abs(here - limit)), f"steady, order {order:.1f}"
    last = value[-3:] if here in value[-3:] else value
    return float(np.ptp(last)), "spread"


def _order(size: Any, value: Any) -> float | None:
    """Order of convergence of the last three values; None if they do not converge steadily."""
    shifts = np.diff(value)
    if not (np.all(shifts > 0) or np.all(shifts < 0)):
        return None
    ratio = shifts[-2] / shifts[-1]
    coarse, middle, fine = size[-3:]

    def excess(order: float) -> float:
        expected = (coarse**order - middle**order) / (middle**order - fine**order)
        return float(expected - ratio)

    if excess(LEAST_ORDER) > 0 or excess(MOST_ORDER) < 0:
        return None
    return float(brentq(excess, LEAST_ORDER, MOST_ORDER))
