"""The longest way from tip to tip through the feed."""

from __future__ import annotations

from collections.abc import Sequence

from simkit.geometry.chain_line import ChainLine, Joint
from simkit.geometry.wires import PathPiece


def longest_path(lines: Sequence[ChainLine]) -> tuple[PathPiece, ...]:
    """Pieces of chains from one tip through the feed to another, the longest such way.

    Parameters
    ----------
    lines : sequence of ChainLine
        The fed chain first.

    Returns
    -------
    tuple of PathPiece
        In order; a fed loop is one piece once round.
    """
    fed = lines[0]
    if fed.closed:
        return (PathPiece(0, 0.0, fed.length_m),)
    assert fed.feed is not None  # the first chain is the fed one by construction
    middle = float(fed.arcs_m[fed.feed.vertex])
    ahead = _onward(lines, 0, middle, 1, frozenset([0]))
    behind = _onward(lines, 0, middle, -1, frozenset([0]))
    first = [PathPiece(p.chain, p.end_m, p.start_m) for p in reversed(behind)]
    # The two halves meet at the feed on the fed chain: one piece.
    whole = PathPiece(0, first[-1].start_m, ahead[0].end_m)
    return (*first[:-1], whole, *ahead[1:])


def ends_on_plane(lines: Sequence[ChainLine], path: Sequence[PathPiece]) -> tuple[bool, bool]:
    """Whether the start and the end of a path stand on a ground plane."""

    def stands(chain: int, arc_m: float) -> bool:
        line = lines[chain]
        return line.start_on_plane if arc_m < line.length_m / 2 else line.end_on_plane

    if lines[0].closed:
        return False, False
    return stands(path[0].chain, path[0].start_m), stands(path[-1].chain, path[-1].end_m)


def _length(pieces: Sequence[PathPiece]) -> float:
    return sum(abs(piece.end_m - piece.start_m) for piece in pieces)


def _onward(
    lines: Sequence[ChainLine], chain: int, arc_m: float, way: int, seen: frozenset[int]
) -> list[PathPiece]:
    """Longest way on from a place on a chain, in one direction along it."""
    line = lines[chain]
    end = line.length_m if way > 0 else 0.0
    ways = [[PathPiece(chain, arc_m, end), *_past_end(lines, line, way, seen)]]
    for vertex, branch in line.tees:
        at = float(line.arcs_m[vertex])
        if branch in seen or (at - arc_m) * way <= 0:
            continue
        into = _along_branch(lines, branch, Joint(chain, vertex), seen | {branch})
        ways.append([PathPiece(chain, arc_m, at), *into])
    return max(ways, key=_length)


def _past_end(
    lines: Sequence[ChainLine], line: ChainLine, way: int, seen: frozenset[int]
) -> list[PathPiece]:
    joint = line.end if way > 0 else line.start
    if joint is None or joint.chain in seen:
        return []
    at = float(lines[joint.chain].arcs_m[joint.vertex])
    return max(
        (_onward(lines, joint.chain, at, turn, seen | {joint.chain}) for turn in (1, -1)),
        key=_length,
    )


def _along_branch(
    lines: Sequence[ChainLine], branch: int, joint: Joint, seen: frozenset[int]
) -> list[PathPiece]:
    line = lines[branch]
    if line.start == joint:
        return _onward(lines, branch, 0.0, 1, seen)
    return _onward(lines, branch, line.length_m, -1, seen)
