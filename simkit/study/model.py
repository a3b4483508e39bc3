"""What a study says once its expressions are evaluated: plain values in SI units."""

from __future__ import annotations

from dataclasses import dataclass
from pathlib import Path
from typing import Literal

ModelKind = Literal["auto", "line", "grid"]
StripEnd = Literal["start", "end"]


@dataclass(frozen=True)
class Strip:
    """A flat conductor following a path in the plane z = 0.

    Attributes
    ----------
    name : str
    path_m : tuple of (float, float)
        Centre line, at least two points, metres. A path whose last point equals its first is a
        closed loop.
    width_m : float
        Constant width, metres.
    """

    name: str
    path_m: tuple[tuple[float, float], ...]
    width_m: float


@dataclass(frozen=True)
class Metal:
    """Sheet metal. `conductivity_s_per_m` None means a perfect conductor."""

    material: str
    conductivity_s_per_m: float | None
    thickness_m: float


@dataclass(frozen=True)
class EndFeed:
    """A source bridging two strip ends."""

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
class FrequencyBand:
    """`points` equally spaced frequencies from `start_hz` to `stop_hz`, both included."""

    start_hz: float
    stop_hz: float
    points: int


@dataclass(frozen=True)
class Antenna:
    """Everything the solution of one case depends on, resolved to SI."""

    strips: tuple[Strip, ...]
    metal: Metal
    feed: EndFeed | CutFeed
    reference_ohm: float
    frequency: FrequencyBand
    model: ModelKind = "auto"


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
