"""What a study says once its expressions are evaluated: plain values in SI units."""

from __future__ import annotations

import math
from dataclasses import dataclass
from itertools import pairwise
from pathlib import Path
from typing import Literal

ModelKind = Literal["auto", "line", "grid"]
StripEnd = Literal["start", "end"]
MixingName = Literal["plastic-host", "bruggeman", "series", "parallel"]
CarrierSide = Literal["below", "both", "embedded"]
GroundKind = Literal["plane", "earth"]
StripLineKind = Literal["two-strips", "strip-over-plate", "coplanar-strips"]
LineEnd = Literal["short", "open"]
Connection = Literal["shunt", "series"]
PartKind = Literal["resistor", "inductor", "capacitor"]
Vector = tuple[float, float, float]

NO_ROTATION: tuple[Vector, Vector, Vector] = ((1.0, 0.0, 0.0), (0.0, 1.0, 0.0), (0.0, 0.0, 1.0))


@dataclass(frozen=True)
class Strip:
    """A flat conductor following a path in the plane z = 0, before it is placed in space.

    Attributes
    ----------
    name : str
    path_m : tuple of (float, float)
        Centre line, at least two points, metres. A path whose last point equals its first is a
        closed loop.
    width_m : float
        Width, metres; the largest one if it changes along the path.
    widths_m : tuple of float
        Width at each path point if it changes, linear in between; empty if it does not.
    """

    name: str
    path_m: tuple[tuple[float, float], ...]
    width_m: float
    widths_m: tuple[float, ...] = ()

    @property
    def widths(self) -> tuple[float, ...]:
        """Width at each path point, metres."""
        return self.widths_m or (self.width_m,) * len(self.path_m)


@dataclass(frozen=True)
class Metal:
    """Sheet metal. `conductivity_s_per_m` None means a perfect conductor."""

    material: str
    conductivity_s_per_m: float | None
    thickness_m: float


@dataclass(frozen=True)
class Placement:
    """How the plane of the strips is turned and lifted: a point p goes to `rotation` p + shift.

    Attributes
    ----------
    rotation : 3 by 3 tuple of float
        Rows of a rotation matrix.
    shift_m : (float, float, float)
        Applied after the rotation, metres.
    """

    rotation: tuple[Vector, Vector, Vector] = NO_ROTATION
    shift_m: Vector = (0.0, 0.0, 0.0)


@dataclass(frozen=True)
class Carrier:
    """The plastic under all strips, as described; its cross-section follows from it strip by strip.

    Attributes
    ----------
    relative_permittivity, loss_tangent : float
        Of the solid plastic.
    thickness_m : float
        Whole thickness; of each of the two carriers if `side` is "both".
    infill : float
        Solid part of the volume, skins included, 0 to 1.
    mixing : str
        Rule for plastic mixed with air: Maxwell Garnett with plastic as host, Bruggeman, or layers
        across ("series") or along ("parallel") the field.
    skin_m : float
        Solid skin at the bottom and at the top of the carrier, metres each.
    overhang_m : float
        Carrier beyond each edge of the strip, sideways, for a strip in the middle of it.
    end_overhang_m : float
        Carrier beyond open strip ends.
    offset_m : float
        How far the strip lies off the carrier's centre line, to the left seen along its path: the
        carrier reaches `overhang_m` - `offset_m` beyond the left edge.
    side : str
        "below" the strip, "both" for one carrier on either side, or "embedded".
    depth_m : float
        Plastic above an embedded strip; else 0.
    material : str
        Its name, for tables.
    """

    relative_permittivity: float
    loss_tangent: float
    thickness_m: float
    infill: float = 1.0
    mixing: MixingName = "plastic-host"
    skin_m: float = 0.0
    overhang_m: float = 0.0
    end_overhang_m: float = 0.0
    offset_m: float = 0.0
    side: CarrierSide = "below"
    depth_m: float = 0.0
    material: str = "given permittivity"

    @property
    def permittivity(self) -> complex:
        """Relative permittivity of the solid plastic, eps' - j eps''."""
        loss = self.relative_permittivity * self.loss_tangent
        # Not `-1j * 0`, which would leave an imaginary part of -0.0.
        return complex(self.relative_permittivity, -loss if loss else 0.0)


@dataclass(frozen=True)
class Ground:
    """What fills the space below z = 0: a perfect plane, or earth with these constants."""

    kind: GroundKind
    relative_permittivity: float = 1.0
    conductivity_s_per_m: float = 0.0


@dataclass(frozen=True)
class EndFeed:
    """A source bridging two strip ends, of two strips or of one."""

    from_strip: str
    from_end: StripEnd
    to_strip: str
    to_end: StripEnd


@dataclass(frozen=True)
class CutFeed:
    """A source in a cut across one strip, `at_m` along its path, the cut `gap_m` wide."""

    strip: str
    at_m: float
    gap_m: float


@dataclass(frozen=True)
class Cable:
    """Outer conductor of the feed cable, a wire from one end of the feed.

    Attributes
    ----------
    strip : str
    end : "start" or "end"
        The end of the feed that the braid is joined to; of a cut the side that leads to this end of
        the strip.
    points_m : tuple of (float, float, float)
        Its centre line from that end to the cable's own, metres, in the axes of the drawing: x and
        y in the plane of the strips, z along its normal. It is placed together with the strips.
    diameter_m : float
        Of the braid.
    """

    strip: str
    end: StripEnd
    points_m: tuple[Vector, ...]
    diameter_m: float

    @property
    def legs_m(self) -> tuple[float, ...]:
        """Length of each straight part, metres."""
        return tuple(math.dist(a, b) for a, b in pairwise(self.points_m))

    @property
    def length_m(self) -> float:
        """Along its centre line, metres."""
        return sum(self.legs_m)


@dataclass(frozen=True)
class StripLine:
    """What a line of two strips, or of a strip over a plate, is made of.

    Attributes
    ----------
    kind : str
    width_m : float
    distance_m : float
        Between the faces of two strips, from strip to plate, or between the edges of strips side by
        side.
    other_width_m : float or None
        Width of the second strip if it is another one.
    sheet_m : float
        Thickness of the sheet that carries strips side by side; 0 without one.
    permittivity, loss_tangent : float
        Of the sheet: between the strips, or under them if they lie side by side.
    overhang_m : float or None
        Sheet beyond the strips' edges; far beyond if None.
    thickness_m : float
        Of the metal.
    conductivity_s_per_m : float or None
        None for no loss.
    """

    kind: StripLineKind
    width_m: float
    distance_m: float
    other_width_m: float | None = None
    sheet_m: float = 0.0
    permittivity: float = 1.0
    loss_tangent: float = 0.0
    overhang_m: float | None = None
    thickness_m: float = 0.0
    conductivity_s_per_m: float | None = None


@dataclass(frozen=True)
class CoaxialLine:
    """A coaxial line by its diameters, metres; no loss in the metal without a conductivity."""

    inner_m: float
    outer_m: float
    permittivity: float = 1.0
    loss_tangent: float = 0.0
    conductivity_s_per_m: float | None = None


@dataclass(frozen=True)
class DataSheetLine:
    """A line by impedance, velocity factor and attenuation, as data sheets of cables have it."""

    impedance_ohm: float
    velocity_factor: float = 1.0
    attenuation_db_per_m: float = 0.0
    attenuation_at_hz: float = 1e9
    loss_tangent: float = 0.0


FeedLineMake = StripLine | CoaxialLine | DataSheetLine


@dataclass(frozen=True)
class LineItem:
    """A length of line in the feed line."""

    name: str
    line: FeedLineMake
    length_m: float


@dataclass(frozen=True)
class StubItem:
    """A length of line with a shorted or open end, across the feed line or in it."""

    name: str
    line: FeedLineMake
    length_m: float
    end: LineEnd
    connection: Connection


@dataclass(frozen=True)
class TappedItem:
    """A line from the antenna to its end, with the way to the connector tapped in between."""

    name: str
    line: FeedLineMake
    from_antenna_m: float
    beyond_m: float
    end: LineEnd


@dataclass(frozen=True)
class PartItem:
    """A resistor, inductor or capacitor; `value` in ohm, henry or farad, `q` infinite if ideal."""

    name: str
    part: PartKind
    value: float
    connection: Connection
    q: float


@dataclass(frozen=True)
class TransformerItem:
    """A transformer or balun: antenna's over connector's impedance, loss, connector's impedance."""

    name: str
    impedance_ratio: float
    loss_db: float
    nominal_ohm: float


@dataclass(frozen=True)
class ExtensionItem:
    """A stretch of ideal line of the reference resistance, by its one-way delay."""

    name: str
    delay_s: float


FeedLineItem = LineItem | StubItem | TappedItem | PartItem | TransformerItem | ExtensionItem


@dataclass(frozen=True)
class FrequencyBand:
    """`points` equally spaced frequencies from `start_hz` to `stop_hz`, both included."""

    start_hz: float
    stop_hz: float
    points: int


@dataclass(frozen=True)
class Antenna:
    """Everything the solution of one case depends on, resolved to SI.

    Without a carrier the strips are in air, without a ground in free space. `converge` asks for a
    refinement of the model in every case, as an estimate of its error. `feedline` runs from the
    feed to the connector; without items the connector is the feed. Without a `cable` nothing is
    joined to the strips.
    """

    strips: tuple[Strip, ...]
    metal: Metal
    feed: EndFeed | CutFeed
    reference_ohm: float
    frequency: FrequencyBand
    model: ModelKind = "auto"
    placement: Placement = Placement()
    carrier: Carrier | None = None
    ground: Ground | None = None
    converge: bool = False
    feedline: tuple[FeedLineItem, ...] = ()
    cable: Cable | None = None


@dataclass(frozen=True)
class Case:
    """One point of a sweep.

    Attributes
    ----------
    index : int
        Position in the study, 0-based; the first swept name varies slowest.
    values : dict of str to float
        Swept values in SI, in the order the study names them.
    antenna : Antenna or None
        None if this point does not resolve; `refused` then says why.
    refused : str
    """

    index: int
    values: dict[str, float]
    antenna: Antenna | None
    refused: str = ""


@dataclass(frozen=True)
class MeasuredFile:
    """A measured sweep named in the study, tied to a build by swept values (SI)."""

    path: Path
    build: dict[str, float]
