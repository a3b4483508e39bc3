"""Elements of a feed line: each is a two-port, from the connector's side (1) to the antenna's (2).

Everything is worked out in reflections against one real resistance, never in impedances or chain
parameters, because those become infinite where a stub is a quarter wave long or a load is open.
A line of complex impedance is turned into that resistance in closed form; so no definition of waves
for complex impedances is called for.
"""

from __future__ import annotations

import math
from abc import ABC, abstractmethod
from dataclasses import dataclass
from typing import Literal

import numpy as np
from numpy.typing import ArrayLike
from scipy.constants import c

from simkit.feedline.checks import (
    ComplexArray,
    FeedlineError,
    FloatArray,
    frequencies,
    not_negative,
    positive,
)
from simkit.feedline.checks import quantity as q
from simkit.feedline.line import Line
from simkit.feedline.waves import cascade, series, shunt, two_port

End = Literal["short", "open"]
Connection = Literal["shunt", "series"]
Kind = Literal["R", "L", "C"]

UNITS: dict[Kind, str] = {"R": "ohm", "L": "H", "C": "F"}


class Element(ABC):
    """A two-port of the chain."""

    @property
    @abstractmethod
    def about(self) -> str:
        """What it is, with its sizes, in a few words."""

    @abstractmethod
    def scattering(
        self, frequency_hz: ArrayLike, reference_ohm: float, part: float = 1.0
    ) -> ComplexArray:
        """Return the scattering matrix, (F, 2, 2) complex.

        Parameters
        ----------
        frequency_hz : array_like of float, (F,)
        reference_ohm : float
            Real resistance that both ports refer to.
        part : float
            0 to 1: so much of the element, for the way it takes through a Smith chart.
        """

    @property
    def parts(self) -> tuple[Element, ...]:
        """The simple elements it is made of, from the antenna's side."""
        return (self,)

    def doubts(self, frequency_hz: ArrayLike) -> tuple[str, ...]:
        """Return what to distrust at these frequencies."""
        return ()


def _line_two_port(
    line: Line, length_m: float, frequency_hz: FloatArray, reference_ohm: float
) -> ComplexArray:
    values = line.values(frequency_hz)
    impedance = values.impedance_ohm
    rho = (impedance - reference_ohm) / (impedance + reference_ohm)
    once = np.exp(-values.propagation_per_m * length_m)
    below = 1 - rho**2 * once**2
    return two_port(rho * (1 - once**2) / below, once * (1 - rho**2) / below)


@dataclass(frozen=True)
class LineSection(Element):
    """A length of line.

    Attributes
    ----------
    line : Line
    length_m : float
        0 or more.
    """

    line: Line
    length_m: float

    def __post_init__(self) -> None:
        not_negative("length of a line section", self.length_m, "m")

    @property
    def about(self) -> str:
        """Length and line."""
        return f"{q(self.length_m, 'm')} of {self.line.about}"

    def scattering(
        self, frequency_hz: ArrayLike, reference_ohm: float, part: float = 1.0
    ) -> ComplexArray:
        """Return the scattering matrix (see `Element`)."""
        f = frequencies(frequency_hz)
        return _line_two_port(self.line, part * self.length_m, f, reference_ohm)

    def doubts(self, frequency_hz: ArrayLike) -> tuple[str, ...]:
        """Return those of the line."""
        return self.line.doubts(frequency_hz)


@dataclass(frozen=True)
class Stub(Element):
    """A length of line with a shorted or open end, across the line or in it.

    Attributes
    ----------
    line : Line
    length_m : float
        0 or more. The end itself is ideal.
    end : {"short", "open"}
    connection : {"shunt", "series"}
    """

    line: Line
    length_m: float
    end: End = "short"
    connection: Connection = "shunt"

    def __post_init__(self) -> None:
        not_negative("length of a stub", self.length_m, "m")
        _one_of("end of a stub", self.end, ("short", "open"))
        _one_of("connection of a stub", self.connection, ("shunt", "series"))

    @property
    def about(self) -> str:
        """End, connection, length and line."""
        end = "shorted" if self.end == "short" else "open"
        return f"{end} {self.connection} stub, {q(self.length_m, 'm')} of {self.line.about}"

    def reflection(self, frequency_hz: ArrayLike, reference_ohm: float) -> ComplexArray:
        """Return what the stub alone reflects, (F,) complex."""
        values = self.line.values(frequency_hz)
        impedance = values.impedance_ohm
        rho = (impedance - reference_ohm) / (impedance + reference_ohm)
        end = (1 if self.end == "open" else -1) * np.exp(
            -2 * values.propagation_per_m * self.length_m
        )
        return np.asarray((rho + end) / (1 + rho * end))

    def scattering(
        self, frequency_hz: ArrayLike, reference_ohm: float, part: float = 1.0
    ) -> ComplexArray:
        """Return the scattering matrix (see `Element`)."""
        joined = shunt if self.connection == "shunt" else series
        return joined(self.reflection(frequency_hz, reference_ohm), part)

    def doubts(self, frequency_hz: ArrayLike) -> tuple[str, ...]:
        """Return those of the line."""
        return self.line.doubts(frequency_hz)


@dataclass(frozen=True)
class TappedLine(Element):
    """One line from the antenna to a shorted or open end, with the connector tapped in between.

    Attributes
    ----------
    line : Line
    antenna_side_m, end_side_m : float
        From the antenna to the tap, and from the tap to the end.
    end : {"short", "open"}
    """

    line: Line
    antenna_side_m: float
    end_side_m: float
    end: End = "short"

    def __post_init__(self) -> None:
        not_negative("length from the antenna to the tap", self.antenna_side_m, "m")
        not_negative("length from the tap to the end", self.end_side_m, "m")
        _one_of("end of a tapped line", self.end, ("short", "open"))

    @property
    def length_m(self) -> float:
        """Of the whole line, metres."""
        return self.antenna_side_m + self.end_side_m

    @property
    def about(self) -> str:
        """Lengths and line."""
        end = "shorted" if self.end == "short" else "open"
        return (
            f"{q(self.length_m, 'm')} of {self.line.about}, {end}, "
            f"tapped {q(self.end_side_m, 'm')} from its end"
        )

    @property
    def parts(self) -> tuple[Element, ...]:
        """Line section and stub."""
        return (
            LineSection(self.line, self.antenna_side_m),
            Stub(self.line, self.end_side_m, self.end),
        )

    def scattering(
        self, frequency_hz: ArrayLike, reference_ohm: float, part: float = 1.0
    ) -> ComplexArray:
        """Return the scattering matrix (see `Element`)."""
        section, stub = (x.scattering(frequency_hz, reference_ohm, part) for x in self.parts)
        return cascade(stub, section)

    def doubts(self, frequency_hz: ArrayLike) -> tuple[str, ...]:
        """Return those of the line."""
        return self.line.doubts(frequency_hz)


@dataclass(frozen=True)
class Lumped(Element):
    """A resistor, inductor or capacitor, across the line or in it.

    Attributes
    ----------
    kind : {"R", "L", "C"}
    value : float
        Ohm, henry or farad.
    connection : {"shunt", "series"}
    q : float
        Reactance over series resistance of an inductor or capacitor, the same at all frequencies;
        infinite without loss.
    """

    kind: Kind
    value: float
    connection: Connection
    q: float = math.inf

    def __post_init__(self) -> None:
        _one_of("kind of a part", self.kind, ("R", "L", "C"))
        _one_of("connection of a part", self.connection, ("shunt", "series"))
        positive(f"value of a part ({self.kind})", self.value, UNITS[self.kind])
        if not self.q > 0:
            raise FeedlineError(f"Q of a part is {self.q:g}: it must be more than 0")

    @property
    def about(self) -> str:
        """Connection, value and Q."""
        quality = f", Q {self.q:.4g}" if self.kind != "R" and math.isfinite(self.q) else ""
        return f"{self.connection} {q(self.value, UNITS[self.kind])}{quality}"

    def reflection(self, frequency_hz: ArrayLike, reference_ohm: float) -> ComplexArray:
        """Return what the part alone reflects, (F,) complex."""
        omega = 2 * np.pi * frequencies(frequency_hz)
        above: ComplexArray = np.full(len(omega), complex(self.value))
        below = np.ones(len(omega))
        if self.kind == "L":
            above = np.asarray(omega * self.value * complex(1 / self.q, 1))
        if self.kind == "C":
            above, below = np.full(len(omega), complex(1 / self.q, -1)), omega * self.value
        return np.asarray((above - reference_ohm * below) / (above + reference_ohm * below))

    def scattering(
        self, frequency_hz: ArrayLike, reference_ohm: float, part: float = 1.0
    ) -> ComplexArray:
        """Return the scattering matrix (see `Element`)."""
        joined = shunt if self.connection == "shunt" else series
        return joined(self.reflection(frequency_hz, reference_ohm), part)


@dataclass(frozen=True)
class Transformer(Element):
    """A transformer or balun of constant ratio.

    Attributes
    ----------
    impedance_ratio : float
        Impedance on the antenna's side over that on the connector's side.
    loss_db : float
        When terminated as meant.
    nominal_ohm : float
        Impedance meant on the connector's side; matters for the loss only.
    """

    impedance_ratio: float
    loss_db: float = 0.0
    nominal_ohm: float = 50.0

    def __post_init__(self) -> None:
        positive("impedance ratio", self.impedance_ratio, "")
        not_negative("loss of a transformer", self.loss_db, "dB")
        positive("nominal impedance of a transformer", self.nominal_ohm, "ohm")

    @property
    def about(self) -> str:
        """Ratio and loss."""
        loss = f", {self.loss_db:.3g} dB" if self.loss_db else ""
        return f"transformer 1 : {self.impedance_ratio:.4g} in impedance{loss}"

    def scattering(
        self, frequency_hz: ArrayLike, reference_ohm: float, part: float = 1.0
    ) -> ComplexArray:
        """Return the scattering matrix (see `Element`)."""
        ones = np.ones(len(frequencies(frequency_hz)), dtype=np.complex128)
        ratio = self.impedance_ratio**part
        first, through = (1 - ratio) / (1 + ratio), 2 * math.sqrt(ratio) / (1 + ratio)
        ideal = two_port(first * ones, through * ones, -first * ones)
        rho = (self.nominal_ohm - reference_ohm) / (self.nominal_ohm + reference_ohm)
        once = 10 ** (-part * self.loss_db / 20)
        below = 1 - rho**2 * once**2
        pad = two_port(rho * (1 - once**2) / below * ones, once * (1 - rho**2) / below * ones)
        return cascade(pad, ideal)


@dataclass(frozen=True)
class PortExtension(Element):
    """Ideal line of the reference resistance: moves the reference plane and nothing else.

    Attributes
    ----------
    delay_s : float
        One way. Below 0 it takes a stretch of line away, as an analyser's port extension does.
    """

    delay_s: float

    def __post_init__(self) -> None:
        if not math.isfinite(self.delay_s):
            raise FeedlineError(f"delay of a port extension is {self.delay_s:g} s: give a number")

    @classmethod
    def of_length(cls, length_m: float, permittivity: float = 1.0) -> PortExtension:
        """Return the extension by a length of line filled with a dielectric."""
        not_negative("length of a port extension", length_m, "m")
        if not 1 <= permittivity < math.inf:
            raise FeedlineError(f"relative permittivity is {permittivity:g}: it must be 1 or more")
        return cls(length_m * math.sqrt(permittivity) / c)

    @property
    def about(self) -> str:
        """Delay and the length in air that has it."""
        return f"port extension {q(self.delay_s, 's')} ({q(self.delay_s * c, 'm')} in air)"

    def scattering(
        self, frequency_hz: ArrayLike, reference_ohm: float, part: float = 1.0
    ) -> ComplexArray:
        """Return the scattering matrix (see `Element`)."""
        through = np.exp(-2j * np.pi * frequencies(frequency_hz) * self.delay_s * part)
        return two_port(np.zeros_like(through), through)


def _one_of(name: str, value: str, allowed: tuple[str, ...]) -> None:
    if value not in allowed:
        raise FeedlineError(f"{name} is '{value}': choose from {', '.join(allowed)}")
