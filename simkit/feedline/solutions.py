"""All exact matches of one impedance at one frequency, without loss: stubs, L-sections, steps."""

from __future__ import annotations

import math
from dataclasses import dataclass

from simkit.feedline.checks import FeedlineError, positive
from simkit.feedline.elements import Connection, End

SAME = 1e-12
REACTIVE = 1e-9
"""A load that absorbs less than this part of an incident wave counts as purely reactive."""


@dataclass(frozen=True)
class StubSolution:
    """One exact match by a line section and a stub, lengths in wavelengths on their lines."""

    distance: float
    length: float
    end: End
    connection: Connection


@dataclass(frozen=True)
class LSolution:
    """One exact match by two reactances.

    Attributes
    ----------
    first : {"shunt", "series"}
        Connection of the one next to the load.
    susceptance_s, reactance_ohm : float
        Of the shunt and of the series part.
    """

    first: Connection
    susceptance_s: float
    reactance_ohm: float


@dataclass(frozen=True)
class QuarterSolution:
    """A line section of the feeding line, in wavelengths, then a quarter wave of another line."""

    distance: float
    impedance_ohm: float


def check_load(impedance_ohm: complex, where: str = "") -> None:
    """Refuse a load that takes no power.

    Raises
    ------
    FeedlineError
    """
    r, size = impedance_ohm.real, abs(impedance_ohm)
    taken = 0.0 if math.isinf(size) or size == 0 else 2 * r / (r + size)
    if math.isnan(size) or taken < -REACTIVE:
        raise FeedlineError(
            f"the load is {impedance_ohm:.4g} ohm{where}: it gives power out, or is no number; "
            "check the reference plane and the calibration"
        )
    if taken < REACTIVE:
        raise FeedlineError(
            f"the load is purely reactive{where} ({impedance_ohm:.4g} ohm): it takes no power, and "
            "no network without loss can match it; look for a frequency at which it has resistance"
        )


def stub_solutions(
    load_ohm: complex,
    line_ohm: float,
    *,
    reference_ohm: float | None = None,
    stub_ohm: float | None = None,
    connection: Connection = "shunt",
    ends: tuple[End, ...] = ("short", "open"),
) -> list[StubSolution]:
    """Match by one stub at a distance from the load: at most two distances for each end.

    Parameters
    ----------
    load_ohm : complex
    line_ohm : float
        Of the line between load and stub.
    reference_ohm, stub_ohm : float, optional
        What to match to, and the stub's impedance; both `line_ohm` if left out.
    connection : {"shunt", "series"}
    ends : tuple of {"short", "open"}

    Returns
    -------
    list of StubSolution
        Ascending in distance; empty if no place on the line has the reference's conductance
        (resistance for a series stub).

    Raises
    ------
    FeedlineError
        If the load is purely reactive or an impedance is not positive.
    """
    check_load(load_ohm)
    reference = line_ohm if reference_ohm is None else reference_ohm
    stub = line_ohm if stub_ohm is None else stub_ohm
    for name, value in (("line", line_ohm), ("reference", reference), ("stub", stub)):
        positive(f"impedance of the {name}", value, "ohm")
    gamma = (load_ohm - line_ohm) / (load_ohm + line_ohm)
    # A series stub is a shunt one seen a quarter wave on: impedances become admittances.
    sign = 1 if connection == "shunt" else -1
    wanted = line_ohm / reference if connection == "shunt" else reference / line_ohm
    relative = stub / line_ohm if connection == "shunt" else line_ohm / stub
    found = []
    for distance, rest in _places(sign * gamma, wanted):
        for end in ends:
            # Susceptance of an open stub is tan; dual to it the reactance of a shorted one.
            rises = (end == "open") == (connection == "shunt")
            needed = -rest * relative
            angle = math.atan(needed) if rises else math.atan2(-1.0, needed)
            found.append(StubSolution(distance, angle % math.pi / (2 * math.pi), end, connection))
    return found


def _places(gamma: complex, wanted: float) -> list[tuple[float, float]]:
    """Distances, in wavelengths, at which Re y = `wanted`, with Im y; y = (1 - G)/(1 + G)."""
    rho = abs(gamma)
    if rho < SAME:
        return [(0.0, 0.0)] if abs(wanted - 1) < SAME else []
    cosine = ((1 - rho**2) / wanted - 1 - rho**2) / (2 * rho)
    if abs(cosine) > 1 + SAME:
        return []
    turn = math.acos(max(-1.0, min(1.0, cosine)))
    start = math.atan2(gamma.imag, gamma.real)
    places = []
    for angle in {turn, -turn}:
        y = (1 - rho * complex(math.cos(angle), math.sin(angle))) / (
            1 + rho * complex(math.cos(angle), math.sin(angle))
        )
        distance = (start - angle) / 2 % math.pi / (2 * math.pi)
        places.append((0.0 if 0.5 - distance < SAME else distance, y.imag))
    return sorted(places)


def l_solutions(load_ohm: complex, reference_ohm: float) -> list[LSolution]:
    """Match by one shunt and one series reactance: up to four ways.

    Raises
    ------
    FeedlineError
        If the load is purely reactive or the reference not positive.

    References
    ----------
    D. M. Pozar, Microwave Engineering, section 5.1 (from memory, re-derived).
    """
    check_load(load_ohm)
    positive("reference resistance", reference_ohm, "ohm")
    r, x, r0 = load_ohm.real, load_ohm.imag, reference_ohm
    found = []
    y = 1 / load_ohm
    if y.real <= 1 / r0:
        # In parallel with the load a susceptance that leaves the resistance r0.
        rest = math.sqrt(y.real * (1 / r0 - y.real))
        for total in sorted({rest, -rest}, reverse=True):
            seen = 1 / complex(y.real, total)
            found.append(LSolution("shunt", total - y.imag, -seen.imag))
    if r <= r0:
        rest = math.sqrt(r * (r0 - r))
        for total in sorted({rest, -rest}, reverse=True):
            seen = 1 / complex(r, total)
            found.append(LSolution("series", -seen.imag, total - x))
    return found


def quarter_solutions(
    load_ohm: complex, line_ohm: float, reference_ohm: float
) -> list[QuarterSolution]:
    """Match by a quarter wave at a place where the impedance on the line is real.

    Raises
    ------
    FeedlineError
        If the load is purely reactive or an impedance is not positive.
    """
    check_load(load_ohm)
    positive("impedance of the line", line_ohm, "ohm")
    positive("reference resistance", reference_ohm, "ohm")
    gamma = (load_ohm - line_ohm) / (load_ohm + line_ohm)
    if abs(gamma) < SAME:
        return [QuarterSolution(0.0, math.sqrt(line_ohm * reference_ohm))]
    start = math.atan2(gamma.imag, gamma.real)
    found = []
    for angle, real in ((0.0, 1 + abs(gamma)), (math.pi, 1 - abs(gamma))):
        seen = line_ohm * real / (2 - real)
        distance = (start - angle) / 2 % math.pi / (2 * math.pi)
        distance = 0.0 if 0.5 - distance < SAME else distance
        found.append(QuarterSolution(distance, math.sqrt(seen * reference_ohm)))
    return sorted(found, key=lambda solution: solution.distance)
