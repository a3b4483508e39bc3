"""The grid model: each strip becomes a bundle of rails, tied where the metal bends, joins or ends.

Rails run all along without rungs, because every rung adds capacitance without lowering inductance;
metal across the strip is drawn only at ends, corners, junctions and beside the feed, and often
enough in strips of changing width that the rails cannot resonate against each other in the band.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, field
from itertools import pairwise

import numpy as np

from simkit.errors import GeometryError
from simkit.geometry.chain_line import ChainLine
from simkit.geometry.grid_layout import (
    Cut,
    Interval,
    Station,
    Widen,
    corner_block,
    junction_block,
)
from simkit.geometry.line_model import FED_OTHERWISE
from simkit.geometry.paths import point_at, turn_angle, turns, unit
from simkit.geometry.rails import RailRule
from simkit.geometry.wires import Chain, FloatArray, Wire


@dataclass
class Rails:
    """Collects the wires of a grid with their bookkeeping while chains are drawn."""

    rule: RailRule
    widen: Widen
    wires: list[Wire] = field(default_factory=list)
    wire_width_m: list[float] = field(default_factory=list)
    wire_part: list[float] = field(default_factory=list)
    source: list[tuple[int, float]] = field(default_factory=list)
    segments: int = 0
    blocks: dict[tuple[int, int], list[FloatArray]] = field(default_factory=dict)

    def add(
        self, start: FloatArray, end: FloatArray, count: int, width_m: float = 0.0, rail: int = -1
    ) -> list[int]:
        """A wire of `count` segments: a rail of a strip of a width, or metal across."""
        self.wires.append(
            Wire(
                (float(start[0]), float(start[1]), 0.0), (float(end[0]), float(end[1]), 0.0), count
            )
        )
        self.wire_width_m.append(width_m)
        parts = self.rule.current_parts(self.widen(width_m)) if width_m else np.ones(1)
        self.wire_part.append(float(parts[rail]))
        first = self.segments
        self.segments += count
        return list(range(first, self.segments))

    def draw(
        self,
        lines: Sequence[ChainLine],
        index: int,
        intervals: Sequence[Interval],
        cuts: Sequence[Cut],
    ) -> Chain:
        """Draw one chain; hosts must be drawn before their branches."""
        line = lines[index]
        if len(intervals) != len(cuts):
            raise GeometryError(FED_OTHERWISE)
        stations, pieces = _divided(line, intervals, cuts)
        rows = [
            self._row(line, station, before, after)
            for station, before, after in _neighbours(line, stations)
        ]
        self._take_over_joints(lines, index, rows)
        if line.closed:
            rows[-1] = rows[0]
        self._remember_blocks(lines, index, stations, rows)
        made: list[tuple[float, int]] = []
        for k, piece in enumerate(pieces):
            pair = stations[k], stations[k + 1]
            if piece.block >= 0:
                made += self._block(line, piece, pair, rows[k], rows[k + 1])
            else:
                made += self._straight(piece, pair, rows[k], rows[k + 1])
        joined = [line.start is not None, line.end is not None]
        for k, station in enumerate(stations):
            last = k == len(stations) - 1
            shared = (k == 0 and joined[0]) or (last and (joined[1] or line.closed))
            if station.tied and not shared:
                for a, b in pairwise(rows[k]):
                    self.add(a, b, 1)
        made.sort()
        return Chain(
            segments=np.array([segment for _, segment in made]),
            signs=np.ones(len(made), dtype=int),
            arc_m=np.array([arc for arc, _ in made]),
            length_m=line.length_m,
            closed=line.closed,
            spans=line.spans,
            open_start=line.start is None and not line.start_on_plane,
            open_end=line.end is None and not line.end_on_plane,
        )

    def _straight(
        self,
        piece: Piece,
        ends: tuple[Station, Station],
        first: FloatArray,
        last: FloatArray,
    ) -> list[tuple[float, int]]:
        """Rails from row to row; returns arc lengths and segments."""
        arcs = np.linspace(ends[0].arc_m, ends[1].arc_m, piece.segments + 1)
        middles = (arcs[:-1] + arcs[1:]) / 2
        width = (ends[0].width_m + ends[1].width_m) / 2
        made = []
        for rail, (a, b) in enumerate(zip(first, last, strict=True)):
            segments = self.add(a, b, piece.segments, width, rail)
            if piece.volts:
                self.source.append((segments[0], piece.volts))
            made += [(float(arc), s) for arc, s in zip(middles, segments, strict=True)]
        return made

    def _block(
        self,
        line: ChainLine,
        piece: Piece,
        ends: tuple[Station, Station],
        first: FloatArray,
        last: FloatArray,
    ) -> list[tuple[float, int]]:
        """A corner whose rails cross; the pieces that lead into it and out of it are returned."""
        nodes, before, after = corner_block(line, piece.block, self.rule, self.widen)
        corner = float(line.arcs_m[piece.block])
        widths = float(line.width_before_m[piece.block]), float(line.width_after_m[piece.block])
        made = []
        for j in range(self.rule.count):
            order = np.argsort(before[j])
            segment = self.add(first[j], nodes[j, order[0]], 1, widths[0], j)[0]
            made.append((float(ends[0].arc_m + corner + before.min()) / 2, segment))
            for k, following in pairwise(order):
                self.add(nodes[j, k], nodes[j, following], 1, widths[0], j)
        for k in range(self.rule.count):
            order = np.argsort(after[:, k])
            for j, following in pairwise(order):
                self.add(nodes[j, k], nodes[following, k], 1, widths[1], k)
            segment = self.add(nodes[order[-1], k], last[k], 1, widths[1], k)[0]
            made.append((float(ends[1].arc_m + corner + after.max()) / 2, segment))
        if piece.volts:
            self.source += [(segment, piece.volts) for _, segment in made]
        return made

    def _row(
        self, line: ChainLine, station: Station, before: FloatArray, after: FloatArray
    ) -> FloatArray:
        centre = point_at(line.points, station.arc_m)
        normal_a = np.array([-before[1], before[0]])
        normal_b = np.array([-after[1], after[0]])
        across = (normal_a + normal_b) / (1 + normal_a @ normal_b)
        across = across + station.slant * after
        offsets = self.rule.offsets_m(self.widen(station.width_m))
        return np.asarray(centre + offsets[:, None] * across[None])

    def _take_over_joints(
        self, lines: Sequence[ChainLine], index: int, rows: list[FloatArray]
    ) -> None:
        """The first (last) row of a branch is the host's row of nodes on its outer rail."""
        line = lines[index]
        for joint, place in ((line.start, 0), (line.end, -1)):
            if joint is None:
                continue
            nodes = self.blocks[joint.chain, joint.vertex]
            row = np.array(nodes)
            near = np.linalg.norm(row - rows[place], axis=1).sum()
            far = np.linalg.norm(row[::-1] - rows[place], axis=1).sum()
            rows[place] = row if near < far else row[::-1]

    def _remember_blocks(
        self,
        lines: Sequence[ChainLine],
        index: int,
        stations: Sequence[Station],
        rows: Sequence[FloatArray],
    ) -> None:
        for vertex, branch in lines[index].tees:
            block = junction_block(lines, index, vertex, branch, self.rule, self.widen)
            arcs = {round(station.arc_m, 12) for station in block.stations}
            outer = -1 if block.side > 0 else 0
            self.blocks[index, vertex] = [
                row[outer]
                for station, row in zip(stations, rows, strict=True)
                if round(station.arc_m, 12) in arcs and station.slant == block.stations[0].slant
            ]


def is_straight(line: ChainLine, interval: Interval) -> bool:
    """True if no vertex bends the interval."""
    arcs = line.arcs_m
    inside = (arcs > interval.start.arc_m + 1e-12) & (arcs < interval.stop.arc_m - 1e-12)
    bends = turns(line.points)
    return not (len(bends) and np.any(bends[inside[1:-1]] > 1e-6))


def is_even(line: ChainLine, interval: Interval) -> bool:
    """True if the interval is straight and of constant width."""
    return (
        is_straight(line, interval) and abs(interval.start.width_m - interval.stop.width_m) < 1e-9
    )


def outer_detour_m(line: ChainLine, interval: Interval, rule: RailRule) -> float:
    """How much longer than the centre line the outer rail of a corner piece is, metres."""
    vertex = max(interval.start.vertex, interval.stop.vertex)
    if vertex < 1:
        return 0.0
    turn = float(turns(line.points)[vertex - 1])
    edge = float(rule.offsets_m(interval.start.width_m)[-1])
    return float(edge * np.tan(turn / 2))


@dataclass(frozen=True)
class Piece:
    """Between two neighbouring rows: segments of each rail, volts of the source, corner block."""

    segments: int
    volts: float = 0.0
    block: int = -1


def _divided(
    line: ChainLine, intervals: Sequence[Interval], cuts: Sequence[Cut]
) -> tuple[list[Station], list[Piece]]:
    """All stations of a chain and what lies between them.

    Ties lie where a division into equal segments has nodes: the engine takes segments of unequal
    length badly where several wires meet. With 8 and 9 segments between ties a third apart, the
    full-wave mode of a straight strip came out 0.15 % higher, with 4 and 5 0.3 %.
    """
    stations: list[Station] = [intervals[0].start]
    pieces: list[Piece] = []
    for interval, cut in zip(intervals, cuts, strict=True):
        if interval.block >= 0:
            stations.append(interval.stop)
            pieces.append(Piece(1, interval.fed, interval.block))
            continue
        even = is_even(line, interval)
        parts = cut.ties + 1 if even else cut.segments
        shares = _shares(cut.segments, parts)
        edges = interval.start.arc_m + interval.length_m * np.cumsum([0, *shares]) / sum(shares)
        tied = {round((k + 1) * parts / (cut.ties + 1)) for k in range(cut.ties)}
        for part in range(1, parts):
            arc = float(edges[part])
            width = float(line.width_at(np.array([arc]))[0])
            stations.append(Station(arc, width, part in tied))
        stations.append(interval.stop)
        pieces += [Piece(count, interval.fed) for count in shares]
    return stations, pieces


def _shares(total: int, parts: int) -> list[int]:
    edges = [round(k * total / parts) for k in range(parts + 1)]
    return [max(b - a, 1) for a, b in pairwise(edges)]


def _neighbours(
    line: ChainLine, stations: Sequence[Station]
) -> list[tuple[Station, FloatArray, FloatArray]]:
    """Each station with the unit directions of the path just before and after it.

    On a leg both are the leg's; on a vertex those of its two legs; on a curve of many short legs
    the chords to the neighbouring stations.
    """
    arcs = line.arcs_m
    found = []
    for k, station in enumerate(stations):
        if 0 < station.vertex < len(line.points) - 1:
            before = unit(line.points[station.vertex] - line.points[station.vertex - 1])
            after = unit(line.points[station.vertex + 1] - line.points[station.vertex])
            found.append((station, before, after))
            continue
        leg = min(
            max(int(np.searchsorted(arcs, station.arc_m, side="right")) - 1, 0), len(arcs) - 2
        )
        along = unit(line.points[leg + 1] - line.points[leg])
        before = after = along
        inner = 0 < k < len(stations) - 1
        if inner:
            here = point_at(line.points, station.arc_m)
            left = unit(here - point_at(line.points, stations[k - 1].arc_m))
            right = unit(point_at(line.points, stations[k + 1].arc_m) - here)
            # A chord that runs round a corner says nothing of the leg the station lies on.
            if max(turn_angle(left, along), turn_angle(right, along)) < np.deg2rad(20.0):
                before, after = left, right
        found.append((station, before, after))
    return found
