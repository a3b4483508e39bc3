"""Values that resistors, inductors and capacitors are sold in, with their Q and tolerance."""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import Literal

from simkit.feedline.checks import FeedlineError, not_negative, positive
from simkit.feedline.elements import Connection, Kind, Lumped

E24 = (
    10,
    11,
    12,
    13,
    15,
    16,
    18,
    20,
    22,
    24,
    27,
    30,
    33,
    36,
    39,
    43,
    47,
    51,
    56,
    62,
    68,
    75,
    82,
    91,
)
"""Two digits of the values in a decade, IEC 60063."""


@dataclass(frozen=True)
class PartSupply:
    """Parts at hand.

    Attributes
    ----------
    inductor_q, capacitor_q : float
        Taken as the same at all frequencies; common chip parts near 1 GHz have about these.
    tolerance : float
        Relative, of every part.
    smallest_h, largest_h, smallest_f, largest_f : float
        Range of inductors and capacitors.
    series : {"E24", "any"}
        Values to be had: those of the E24 series, or any, as trimmers and hand-wound coils have.
    """

    inductor_q: float = 40.0
    capacitor_q: float = 200.0
    tolerance: float = 0.05
    smallest_h: float = 1e-9
    largest_h: float = 1e-6
    smallest_f: float = 0.2e-12
    largest_f: float = 1e-9
    series: Literal["E24", "any"] = "E24"

    def __post_init__(self) -> None:
        not_negative("tolerance of parts", self.tolerance, "")
        if self.tolerance >= 1:
            raise FeedlineError(
                f"tolerance of parts is {self.tolerance:.4g}: it must be below 1 (100 %)"
            )
        if self.series not in ("E24", "any"):
            raise FeedlineError(f"values of parts are '{self.series}': choose from E24, any")
        for name in ("inductor_q", "capacitor_q"):
            if not getattr(self, name) > 0:
                raise FeedlineError(f"{name} is {getattr(self, name):g}: it must be more than 0")
        for name, unit in (("smallest_h", "H"), ("largest_h", "H")):
            positive(name, getattr(self, name), unit)
        for name, unit in (("smallest_f", "F"), ("largest_f", "F")):
            positive(name, getattr(self, name), unit)

    def part(self, kind: Kind, value: float, connection: Connection) -> Lumped:
        """Return a part with the Q of its kind."""
        quality = {"L": self.inductor_q, "C": self.capacitor_q, "R": math.inf}[kind]
        return Lumped(kind, value, connection, quality)

    def values(self, kind: Kind) -> list[float]:
        """Return all E24 values of inductors or capacitors, ascending."""
        low, high = self._range(kind)
        decades = range(math.floor(math.log10(low)) - 1, math.ceil(math.log10(high)) + 1)
        every = (float(f"{digits}e{decade - 1}") for decade in decades for digits in E24)
        slack = 1e-9
        return [v for v in every if low * (1 - slack) <= v <= high * (1 + slack)]

    def _range(self, kind: Kind) -> tuple[float, float]:
        return {
            "L": (self.smallest_h, self.largest_h),
            "C": (self.smallest_f, self.largest_f),
            "R": (1.0, 1e6),
        }[kind]

    def near(self, kind: Kind, value: float, count: int) -> list[float]:
        """Return the `count` E24 values nearest to one in ratio; where any are had, just it."""
        if self.series == "any":
            low, high = self._range(kind)
            return [value] if low <= value <= high else []
        ranked = sorted(self.values(kind), key=lambda v: abs(math.log(v / value)))
        return sorted(ranked[:count])


def reactive_part(
    reactance: float, frequency_hz: float, connection: Connection
) -> tuple[Kind, float] | None:
    """Return the part that has a reactance in series, or a susceptance in shunt; None for 0.

    Parameters
    ----------
    reactance : float
        Ohm if in series, siemens if in shunt.
    """
    omega = 2 * math.pi * frequency_hz
    if reactance == 0:
        return None
    inductive = (reactance > 0) == (connection == "series")
    size = abs(reactance)
    grows = size / omega, 1 / (omega * size)
    if inductive:
        return "L", grows[0] if connection == "series" else grows[1]
    return "C", grows[1] if connection == "series" else grows[0]
