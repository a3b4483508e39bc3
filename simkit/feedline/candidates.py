"""Networks that match a load at the middle of a band, to be refined and ranked by `match`."""

from __future__ import annotations

import math
from collections.abc import Iterator
from dataclasses import dataclass, replace
from itertools import product

from simkit.feedline.chain import Chain
from simkit.feedline.elements import Connection, Element, LineSection, Lumped, Stub, TappedLine
from simkit.feedline.line import Line
from simkit.feedline.lines import CoplanarStrips, StripOverPlate, TwoStrips, width_for
from simkit.feedline.parts import PartSupply, reactive_part
from simkit.feedline.round_lines import UniformLine
from simkit.feedline.solutions import l_solutions, quarter_solutions, stub_solutions

NEAR = 6
"""E24 values tried on either place of an L-section."""


@dataclass(frozen=True)
class Candidate:
    """A network of one kind; those of one `group` differ in bought parts, and the best one stays.

    `refinable` tells lengths, which may take any value, from parts, which may not.
    """

    kind: str
    chain: Chain
    group: str = ""
    refinable: bool = True


@dataclass(frozen=True)
class Task:
    """What the networks are for: impedance in the middle of the band, and what to make them of."""

    load_ohm: complex
    frequency_hz: float
    reference_ohm: float
    line: Line
    stub_line: Line
    supply: PartSupply

    def chain(self, *elements: Element) -> Chain:
        """Return a chain to the reference."""
        return Chain(elements, self.reference_ohm)


def stubs(task: Task) -> Iterator[Candidate]:
    """Single stubs across the line, all solutions."""
    return _stubs(task, "shunt")


def series_stubs(task: Task) -> Iterator[Candidate]:
    """Single stubs in the line, all solutions."""
    return _stubs(task, "series")


def _stubs(task: Task, connection: Connection) -> Iterator[Candidate]:
    line, stub, f = task.line, task.stub_line, task.frequency_hz
    found = stub_solutions(
        task.load_ohm,
        line.impedance_at(f),
        reference_ohm=task.reference_ohm,
        stub_ohm=stub.impedance_at(f),
        connection=connection,
    )
    for solution in found:
        section = LineSection(line, solution.distance * line.wavelength_at(f))
        end = Stub(stub, solution.length * stub.wavelength_at(f), solution.end, connection)
        yield Candidate(f"{connection} stub", task.chain(section, end))


def taps(task: Task) -> Iterator[Candidate]:
    """Taps on one line that runs on to a short circuit."""
    f, line = task.frequency_hz, task.line
    impedance, wave_m = line.impedance_at(f), line.wavelength_at(f)
    for solution in stub_solutions(
        task.load_ohm, impedance, reference_ohm=task.reference_ohm, ends=("short",)
    ):
        tapped = TappedLine(line, solution.distance * wave_m, solution.length * wave_m, "short")
        yield Candidate("tapped line", task.chain(tapped))


def quarter_waves(task: Task) -> Iterator[Candidate]:
    """A quarter wave of another impedance where the line has a real one."""
    f, line = task.frequency_hz, task.line
    for solution in quarter_solutions(task.load_ohm, line.impedance_at(f), task.reference_ohm):
        other = line_of(line, solution.impedance_ohm, f)
        section = LineSection(other, other.wavelength_at(f) / 4)
        before = LineSection(line, solution.distance * line.wavelength_at(f))
        yield Candidate("quarter wave", task.chain(*([before] if before.length_m else []), section))


def line_of(line: Line, impedance_ohm: float, frequency_hz: float) -> Line:
    """Return a line like another one with a given impedance.

    Strips get another width; other lines are taken by impedance and velocity factor.

    Raises
    ------
    FeedlineError
        If no width of strip has it.
    """
    if isinstance(line, TwoStrips | StripOverPlate | CoplanarStrips):
        return width_for(line, impedance_ohm)
    if isinstance(line, UniformLine):
        return replace(line, impedance_ohm=impedance_ohm)
    factor = 1 / math.sqrt(line.values([frequency_hz]).permittivity[0])
    return UniformLine(impedance_ohm, min(1.0, factor))


def l_sections(task: Task) -> Iterator[Candidate]:
    """L-sections, all solutions, with the E24 values around the exact ones, or just these."""
    f, supply = task.frequency_hz, task.supply
    for number, solution in enumerate(l_solutions(task.load_ohm, task.reference_ohm)):
        order: tuple[Connection, Connection] = ("shunt", "series")
        if solution.first == "series":
            order = ("series", "shunt")
        choices: list[list[Lumped]] = []
        for connection in order:
            shunt = connection == "shunt"
            exact = solution.susceptance_s if shunt else solution.reactance_ohm
            part = reactive_part(exact, f, connection)
            if part is not None:
                kind, value = part
                near = supply.near(kind, value, NEAR)
                choices.append([supply.part(kind, v, connection) for v in near])
        for parts in product(*choices):
            free = supply.series == "any"
            yield Candidate("L-section", task.chain(*parts), f"L-section {number}", free)


def single_parts(task: Task) -> Iterator[Candidate]:
    """One inductor or capacitor, across the line or in it, of every E24 value."""
    connections: tuple[Connection, ...] = ("series", "shunt")
    for connection in connections:
        for kind in ("L", "C"):
            for value in task.supply.values("L" if kind == "L" else "C"):
                part = task.supply.part("L" if kind == "L" else "C", value, connection)
                free = task.supply.series == "any"
                yield Candidate("single part", task.chain(part), f"{connection} {kind}", free)


MAKERS = {
    "shunt stub": stubs,
    "series stub": series_stubs,
    "tapped line": taps,
    "L-section": l_sections,
    "quarter wave": quarter_waves,
    "single part": single_parts,
}
"""Kinds of network by name."""
