"""One model kind and one mesh topology for a whole study.

Swept quantities then see lengths stretch; nothing jumps because a corner gained a figure or a run
gained a segment.
"""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from dataclasses import replace
from typing import Any

from simkit.errors import GeometryError
from simkit.geometry import line_rules
from simkit.geometry.chain_line import ChainLine
from simkit.geometry.grid_mesh import grid_plan
from simkit.geometry.line_mesh import line_plan
from simkit.geometry.mesh_plan import Case, Kind, MeshPlan
from simkit.geometry.network import chains_of
from simkit.study.model import Antenna, Carrier, ModelKind

MOST_CARRIERS = 12
"""Different carriers a mesh is planned for."""


def plan_mesh(antennas: Iterable[Antenna]) -> MeshPlan:
    """Choose model kind, corners and segment counts that serve every case of a study.

    Parameters
    ----------
    antennas : iterable of Antenna
        At least one. Cases that cannot be laid out, or whose strips meet otherwise than in most,
        are passed over here and refused when they are built.

    Raises
    ------
    GeometryError
        No case can be laid out; the text is that of the first one.
    """
    cases = _laid_out(_with_few_carriers(list(antennas)))
    kind, why = _kind(cases)
    if kind == "line":
        return line_plan(cases, why)
    return grid_plan(cases, why)


def _with_few_carriers(antennas: Sequence[Antenna]) -> list[Antenna]:
    """The antennas with at most a handful of different carriers, for planning only.

    Each new cross-section costs as much as a whole case. Where a sweep has many, a carrier is
    replaced by the next heavier one (thickness times excess permittivity) of an even choice, which
    widens the wires at least as much.
    """
    carriers = {a.carrier for a in antennas if a.carrier is not None}
    if len(carriers) <= MOST_CARRIERS:
        return list(antennas)

    def weight(carrier: Carrier) -> float:
        return carrier.thickness_m * (carrier.relative_permittivity - 1) * carrier.infill

    ordered = sorted(carriers, key=weight)
    step = -(-len(ordered) // MOST_CARRIERS)
    stand_in = {
        carrier: ordered[min((k // step + 1) * step, len(ordered)) - 1]
        for k, carrier in enumerate(ordered)
    }
    return [a if a.carrier is None else replace(a, carrier=stand_in[a.carrier]) for a in antennas]


def _laid_out(antennas: Sequence[Antenna]) -> list[Case]:
    """Cases with their chains, those of the commonest way of meeting only."""
    found: dict[tuple[Any, ...], list[Case]] = {}
    error: GeometryError | None = None
    for antenna in antennas:
        if any(strip.width_m <= 0 for strip in antenna.strips):
            continue
        try:
            lines = chains_of(antenna, tips=False)
        except GeometryError as problem:
            error = error or problem
            continue
        found.setdefault(signature(lines), []).append((antenna, lines))
    if not found:
        raise error or GeometryError("the study has no case with strips of positive width")
    return max(found.values(), key=len)


def signature(lines: Sequence[ChainLine]) -> tuple[Any, ...]:
    """What must agree for two antennas to share a mesh: vertices, loops, feed and junctions."""
    return tuple(
        (
            len(line.points),
            line.closed,
            line.feed.vertex if line.feed else None,
            line.start,
            line.end,
            line.tees,
            line.start_on_plane,
            line.end_on_plane,
            line.fed_foot,
        )
        for line in lines
    )


def _kind(cases: Sequence[Case]) -> tuple[Kind, str]:
    wanted = {antenna.model for antenna, _ in cases}
    reasons = [line_rules.excuse(antenna, lines) for antenna, lines in cases]
    against = next((reason for reason in reasons if reason), "")
    if cases[0][0].cable is not None:
        return "line", _line_for_cable(wanted, against)
    if "grid" in wanted:
        return "grid", "the study asks for the grid model"
    if "line" in wanted:
        return "line", "the study asks for the line model"
    if against:
        return "grid", f"grid model, since {against}"
    return "line", "line model: every strip, corner and junction is within its limits"


def _line_for_cable(wanted: set[ModelKind], against: str) -> str:
    """Why the line model is taken for a study with a cable.

    Raises
    ------
    GeometryError
        Only the grid model would do.
    """
    takes = "which only the line model takes"
    if "grid" in wanted:
        raise GeometryError(
            f"the study asks for the grid model and has a [cable], {takes}: let [model] choose, or "
            "leave the cable out"
        )
    if against and "line" not in wanted:
        raise GeometryError(
            f"the study has a [cable], {takes}, but {against}: leave the cable out, change the "
            'strips, or accept a larger error with kind = "line" in [model]'
        )
    return f"line model: the study has a cable, {takes}"
