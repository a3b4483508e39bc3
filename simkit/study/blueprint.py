"""A study file understood but not yet evaluated: the tables with their expressions."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass, fields, is_dataclass
from typing import Any

from simkit.study.model import (
    CarrierSide,
    Connection,
    GroundKind,
    LineEnd,
    MixingName,
    ModelKind,
    StripEnd,
)
from simkit.study.paths import Axis
from simkit.study.tables import Quantity


@dataclass(frozen=True)
class PolylinePlan:
    """A path from point to point, or a spline through the points."""

    points: tuple[tuple[Quantity, Quantity], ...]
    smooth: bool


@dataclass(frozen=True)
class CurvePlan:
    """A path of `points` points for equal steps of the parameter t."""

    x: Quantity
    y: Quantity
    first: Quantity | None
    last: Quantity | None
    points: Quantity | None
    line: int | None


@dataclass(frozen=True)
class ArcPlan:
    """A part of a circle, counterclockwise if the angle grows from start to stop."""

    centre: tuple[Quantity, Quantity]
    radius: Quantity
    start: Quantity
    stop: Quantity
    points: Quantity | None
    line: int | None


@dataclass(frozen=True)
class MovePlan:
    """A turn about the origin, then a shift."""

    rotate: Quantity | None = None
    shift: tuple[Quantity, ...] | None = None


@dataclass(frozen=True)
class PathPlan:
    """A strip with a path of its own.

    `path` is None after a problem. `width` holds one width for all, one per point of a polyline,
    some at equal steps along a curve or arc, or is one that depends on the parameter of the curve.
    """

    name: str
    path: PolylinePlan | CurvePlan | ArcPlan | None
    width: tuple[Quantity, ...]
    width_along: bool = False
    move: MovePlan = MovePlan()
    line: int | None = None


@dataclass(frozen=True)
class MirrorPlan:
    """A strip that is another one mirrored at x = 0 (axis "y") or at y = 0 (axis "x")."""

    name: str
    of: str
    axis: Axis
    line: int | None
    move: MovePlan = MovePlan()


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
class PlacementPlan:
    """The table [placement]: turns about x, y and z in this order, then a shift."""

    rotate_x: Quantity | None = None
    rotate_y: Quantity | None = None
    rotate_z: Quantity | None = None
    shift: tuple[Quantity, ...] | None = None


@dataclass(frozen=True)
class CarrierPlan:
    """The table [carrier]; a named material stands with its solid permittivity and loss tangent."""

    material: str
    material_permittivity: float | None
    material_loss_tangent: float
    permittivity: Quantity | None
    loss_tangent: Quantity | None
    infill: Quantity | None
    mixing: MixingName
    skin: Quantity | None
    thickness: Quantity | None
    overhang: Quantity | None
    end_overhang: Quantity | None
    offset: Quantity | None
    side: CarrierSide
    depth: Quantity | None


@dataclass(frozen=True)
class GroundPlan:
    """The table [ground]."""

    kind: GroundKind
    permittivity: Quantity | None
    conductivity: Quantity | None
    line: int | None


@dataclass(frozen=True)
class CablePlan:
    """The table [cable]: a route of points from the feed's end, or a direction; and a length.

    A length given with a route is where the last leg ends.
    """

    strip: str
    end: StripEnd
    route: tuple[tuple[Quantity, ...], ...]
    direction: tuple[Quantity, ...]
    length: Quantity | None
    diameter: Quantity | None
    line: int | None


@dataclass(frozen=True)
class LinePlan:
    """What a line of the feed line is made of; items that are alike share one plan.

    `item` is the dotted name of the item that describes it, `kind` one of `LINES` of the schema.
    """

    item: str
    kind: str
    sizes: tuple[tuple[str, Quantity], ...]
    material_conductivity: float | None
    place: int | None

    def size(self, key: str) -> Quantity | None:
        """Return the quantity under a key, None if it is left out."""
        return dict(self.sizes).get(key)


@dataclass(frozen=True)
class FeedLinePlan:
    """One item of the feed line; `line` is None where it has none or after a problem."""

    name: str
    kind: str
    sizes: tuple[tuple[str, Quantity], ...]
    line: LinePlan | None
    end: LineEnd
    connection: Connection

    def size(self, key: str) -> Quantity | None:
        """Return the quantity under a key, None if it is left out."""
        return dict(self.sizes).get(key)


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
    converge: bool = False
    placement: PlacementPlan = PlacementPlan()
    carrier: CarrierPlan | None = None
    ground: GroundPlan | None = None
    cable: CablePlan | None = None
    feedline: tuple[FeedLinePlan, ...] = ()

    def shared(self) -> tuple[Quantity, ...]:
        """Return the quantities that all cases of a study have in common."""
        band = self.frequency
        found = [] if band is None else [band.start, band.stop, band.points]
        found.append(self.reference)
        paths = (strip.path for strip in self.strips if isinstance(strip, PathPlan))
        found += [path.points for path in paths if isinstance(path, CurvePlan | ArcPlan)]
        return tuple(quantity for quantity in found if quantity is not None)

    def names(self) -> set[str]:
        """Return the names of [values] the antenna depends on directly."""
        return {name for quantity in _quantities(self) for name in quantity.expression.names}


def _quantities(part: Any) -> Iterator[Quantity]:
    if isinstance(part, Quantity):
        yield part
    elif isinstance(part, tuple):
        for item in part:
            yield from _quantities(item)
    elif is_dataclass(part):
        for entry in fields(part):
            yield from _quantities(getattr(part, entry.name))
