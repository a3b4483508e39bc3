"""A mesh plan with finer or coarser segments, to see how far the numbers hang on the mesh.

Only the length of segments changes: model kind, figures of corners and junctions and the source
stay as they are, so a mode found on one mesh is the same mode on the next.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import replace

import numpy as np

from simkit.errors import GeometryError
from simkit.geometry.chain_line import ChainLine
from simkit.geometry.dressing import dressing_of
from simkit.geometry.grid_layout import layout
from simkit.geometry.grid_mesh import GRID_SHORTEST_RADII, grid_rule, source_m
from simkit.geometry.line_rules import runs, segment_limits_m
from simkit.geometry.mesh_plan import ChainPlan, MeshPlan
from simkit.geometry.network import chains_of
from simkit.geometry.wires import FloatArray
from simkit.study.model import Antenna


def refined(plan: MeshPlan, antenna: Antenna, factor: float) -> MeshPlan:
    """The plan with `factor` times as many segments, as far as this antenna allows.

    Parameters
    ----------
    plan : MeshPlan
    antenna : Antenna
        The case to be refined: the engine refuses segments shorter than about two wire radii, so
        wide strips leave no room for finer ones.
    factor : float
        Over 1 for finer segments, under 1 for coarser ones.

    Returns
    -------
    MeshPlan
        Equal to `plan` where nothing can be refined.

    Raises
    ------
    GeometryError
        The antenna cannot be laid out by this plan.
    """
    lines = chains_of(antenna)
    if [len(line.points) - 2 for line in lines] != [len(c.vertices) for c in plan.chains]:
        raise GeometryError("the mesh plan is another antenna's")
    chains = tuple(
        _refined_chain(plan, antenna, lines, index, factor) for index in range(len(lines))
    )
    cable = plan.cable
    if cable is not None:
        # Half a segment on every leg may be rounded up.
        most = int(np.ceil(2 * cable.most * max(factor, 1.0)))
        cable = replace(cable, most=most, fineness=cable.fineness * factor)
    return replace(plan, chains=chains, cable=cable)


def _refined_chain(
    plan: MeshPlan, antenna: Antenna, lines: Sequence[ChainLine], index: int, factor: float
) -> ChainPlan:
    chain = plan.chains[index]
    counts = np.array(chain.counts)
    if plan.kind == "line":
        most, fixed = _line_limits(plan, antenna, lines, index)
        odd = fixed
        fixed = np.zeros(len(counts), dtype=bool)
    else:
        most, fixed = _grid_limits(plan, antenna, lines, index)
        odd = np.zeros(len(counts), dtype=bool)
    wanted = np.round(counts * factor).astype(int)
    # A run beyond its limit already (a narrow strip of the sweep set the count) is left alone.
    wanted = np.where(factor > 1, np.clip(wanted, counts, np.maximum(most, counts)), wanted)
    least = np.array([ties + 1 for ties in chain.ties]) if chain.ties else np.ones(len(counts))
    wanted = np.where(fixed, counts, np.maximum(wanted, least).astype(int))
    # The middle of a run with a centred feed is a segment, so its number stays odd.
    wanted = np.where(odd, np.maximum(wanted - (wanted % 2 == 0), 3), wanted)
    return replace(chain, counts=tuple(int(n) for n in wanted))


def _line_limits(
    plan: MeshPlan, antenna: Antenna, lines: Sequence[ChainLine], index: int
) -> tuple[FloatArray, FloatArray]:
    """Most segments of each run, and which runs must keep an odd number."""
    centred = plan.centred and index == 0
    stretches = runs(lines[index], plan.chains[index].vertices, centred=centred)
    shortest, _ = segment_limits_m(antenna, lines, stretches)
    lengths = np.array([run.stop_m - run.start_m for run in stretches])
    spare = np.array([0.5 if run.fed and not centred else 0.0 for run in stretches])
    odd = np.array([run.fed and centred for run in stretches])
    return np.floor(lengths / shortest - spare + 1e-6), odd


def _grid_limits(
    plan: MeshPlan, antenna: Antenna, lines: Sequence[ChainLine], index: int
) -> tuple[FloatArray, FloatArray]:
    """Most segments of each interval, and which intervals stay as they are."""
    widen = dressing_of(antenna).effective_width_m
    rule = grid_rule(lines, plan.rails, widen)
    kinds = plan.chains[index].vertices
    rows = layout(lines, index, rule, widen, source_m(antenna, rule), kinds)
    lengths = np.array([row.length_m for row in rows])
    # Pieces inside corners, steps and junctions have the lengths their rules were found with.
    fixed = np.array([bool(row.fed) or row.single or row.block >= 0 for row in rows])
    return np.floor(lengths / (GRID_SHORTEST_RADII * rule.radius_m) + 1e-6), fixed


def cut_count(plan: MeshPlan) -> int:
    """Segments along all chains of a plan, rails counted once; its inverse measures their size."""
    return sum(sum(chain.counts) for chain in plan.chains)
