"""A study file understood but not yet evaluated: the tables with their expressions."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Literal

from simkit.study.model import ModelKind, StripEnd
from simkit.study.tables import Quantity

Axis = Literal["x", "y"]


@dataclass(frozen=True)
class PathPlan:
    """A strip with a path of its own."""

    name: str
    path: tuple[tuple[Quantity, Quantity], ...]
    width: Quantity | None


@dataclass(frozen=True)
class MirrorPlan:
    """A strip that is another one mirrored at x = 0 (axis "y") or at y = 0 (axis "x")."""

    name: str
    of: str
    axis: Axis
    line: int | None


@dataclass(frozen=True)
class MetalPlan:
    """The table [metal]; without one, a perfect conductor of no thickness."""

    material: str = "perfect conductor"
    material_conductivity: float | None = None
    conductivity: Quantity | None = None
    thickness: Quantity | None = None


@dataclass(frozen=True)
class EndFeedPlan:
    """A source bridging two strip ends."""

    from_strip: str
    from_end: StripEnd
    to_strip: str
    to_end: StripEnd
    from_line: int | None
    to_line: int | None


@dataclass(frozen=True)
class CutFeedPlan:
    """A source in a cut across a strip; without `gap` the cut is a tenth of the width."""

    strip: str
    at: Quantity | None
    gap: Quantity | None


@dataclass(frozen=True)
class FrequencyPlan:
    """The table [frequency]."""

    start: Quantity | None
    stop: Quantity | None
    points: Quantity | None


@dataclass(frozen=True)
class Blueprint:
    """Everything an antenna is resolved from, besides the numbers of [values].

    Parts that could not be read are None or empty; what is left can still be checked against the
    limits, so that all problems of a file come at once.
    """

    strips: tuple[PathPlan | MirrorPlan, ...]
    metal: MetalPlan
    feed: EndFeedPlan | CutFeedPlan | None
    reference: Quantity | None
    frequency: FrequencyPlan | None
    model: ModelKind

    def shared(self) -> tuple[Quantity, ...]:
        """Return the quantities that all cases of a study have in common."""
        band = self.frequency
        found = [] if band is None else [band.start, band.stop, band.points]
        found.append(self.reference)
        return tuple(quantity for quantity in found if quantity is not None)

    def names(self) -> set[str]:
        """Return the names of [values] the antenna depends on directly."""
        quantities: list[Quantity | None] = [*self.shared()]
        for strip in self.strips:
            if isinstance(strip, PathPlan):
                quantities += [strip.width, *(place for point in strip.path for place in point)]
        quantities += [self.metal.conductivity, self.metal.thickness]
        if isinstance(self.feed, CutFeedPlan):
            quantities += [self.feed.at, self.feed.gap]
        return {name for q in quantities if q is not None for name in q.expression.names}
