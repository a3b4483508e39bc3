"""The mesh topology of a study as a value, and how a moving feed shares its leg out."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import asdict, dataclass
from typing import Any, Literal

import numpy as np

from simkit.geometry.cable import CableCut
from simkit.geometry.chain_line import ChainLine
from simkit.geometry.grid_layout import Interval
from simkit.geometry.line_rules import Run, VertexKind
from simkit.study.model import Antenna

Kind = Literal["line", "grid"]

Case = tuple[Antenna, tuple[ChainLine, ...]]

MOVING_SHARE = 0.1
"""A feed that divides its leg less unevenly than this over a study keeps its counts on both sides:
lengths then stretch, and nothing jumps."""


@dataclass(frozen=True)
class ChainPlan:
    """How one chain is cut: a kind for each inner vertex; segments and ties of each run."""

    vertices: tuple[VertexKind, ...]
    counts: tuple[int, ...]
    ties: tuple[int, ...] = ()


@dataclass(frozen=True)
class MeshPlan:
    """Model kind and mesh topology of a study.

    Attributes
    ----------
    kind : {"line", "grid"}
    why : str
        Why this kind, one sentence for the user.
    rails : int
        Wires side by side along each strip; 1 in the line model.
    centred : bool
        Line model: the feed sits in the middle of its run in every case, on the middle segment.
    chains : tuple of ChainPlan
        The fed one first.
    moving : bool
        The feed moves along its leg from case to case: the leg keeps its number of segments, which
        each case shares out to both sides of the feed (`split_counts`).
    cable : CableCut or None
        The feed cable, whose wires come last.
    """

    kind: Kind
    why: str
    rails: int
    centred: bool
    chains: tuple[ChainPlan, ...]
    moving: bool = False
    cable: CableCut | None = None

    def as_dict(self) -> dict[str, Any]:
        """Plain lists and text, fit for JSON."""
        found = asdict(self)
        if self.cable is None:
            del found["cable"]  # studies without a cable keep their keys
        return found


def feed_moves(shares: Sequence[float | None]) -> bool:
    """True if the feed takes places on one leg that no fixed counts on both sides would serve."""
    known = [share for share in shares if share is not None]
    return len(known) == len(shares) and max(known) - min(known) > MOVING_SHARE


def left_share(stretches: Sequence[Run] | Sequence[Interval], pair: tuple[int, int]) -> float:
    """Part of the fed leg that lies before the feed."""
    left, right = (stretches[index].length_m for index in pair)
    return left / (left + right)


def split_counts(counts: Sequence[int], pair: tuple[int, int], share: float) -> tuple[int, ...]:
    """Share the segments of the fed leg out to both sides of a moving feed, by length.

    Parameters
    ----------
    counts : sequence of int
        Segments of all runs.
    pair : (int, int)
        The runs before and after the feed.
    share : float
        Part of the leg before the feed.

    Notes
    -----
    The source takes one segment more. The shorter side is rounded down rather than up, because the
    engine refuses segments that are too short and bears those that are a little long.
    """
    total = counts[pair[0]] + counts[pair[1]]
    short = int(np.floor(min(share, 1 - share) * (total + 1) - 0.5 + 0.35))
    short = min(max(short, 1), total - 1)
    found = list(counts)
    split = (short, total - short) if share <= 0.5 else (total - short, short)
    found[pair[0]], found[pair[1]] = split
    return tuple(found)


def settled(wishes: Sequence[Any], limits: Sequence[Any]) -> Any:
    # The small allowance keeps a count that is exact on paper from falling to the next lower one.
    wanted = np.minimum(np.max(wishes, axis=0), np.min(limits, axis=0)) + 1e-6
    return np.maximum(np.floor(wanted).astype(int), 1)
