"""Design of a match over a band: all usual networks, refined, ranked, and the bound on any.

Ranking asks what is left after the workshop: the worst return loss over the band once the most
sensitive single dimension is off by 1 %.
"""

from __future__ import annotations

import math
from collections.abc import Iterator, Sequence
from dataclasses import replace
from itertools import product

import numpy as np
from scipy.optimize import minimize, minimize_scalar

from simkit.feedline.bound import LARGEST_DB, match_bound
from simkit.feedline.candidates import MAKERS, Candidate, Task
from simkit.feedline.chain import Chain
from simkit.feedline.checks import FeedlineError, FloatArray, positive
from simkit.feedline.checks import quantity as q
from simkit.feedline.elements import Element, End, LineSection, Lumped, Stub, TappedLine
from simkit.feedline.line import Line
from simkit.feedline.oneport import OnePort
from simkit.feedline.parts import PartSupply
from simkit.feedline.report import Design, MatchReport
from simkit.feedline.round_lines import UniformLine
from simkit.feedline.solutions import check_load
from simkit.feedline.vary import dimensions, free_dimensions

POINTS = 41
"""Frequencies at which a band is judged."""

CHANGE = 0.01
"""Relative change of one dimension at a time that is judged."""

ROUNDS = 300
"""Most evaluations that refining one network may take."""

LOG_REACH = (-20.0, 1.5)
"""Logarithms of the factors by which refining may move a dimension: to nothing, to 4.5 times."""

NOTHING_M = 1e-6
"""A section shorter than this is none."""

NOT_NEEDED = "no network is needed, what would match has no length"

WANTED_DB = 15.0


def find_matches(
    load: OnePort,
    start_hz: float,
    stop_hz: float,
    *,
    reference_ohm: float = 50.0,
    line: Line | None = None,
    stub_line: Line | None = None,
    kinds: Sequence[str] = tuple(MAKERS),
    supply: PartSupply | None = None,
    wanted_db: float = WANTED_DB,
    refine: bool = True,
) -> MatchReport:
    """Design and rank networks that match a load over a band.

    Parameters
    ----------
    load : OnePort
        Must cover the band.
    start_hz, stop_hz : float
        The band.
    reference_ohm : float
        To be matched to.
    line, stub_line : Line, optional
        What sections and stubs are made of: a line of the reference in air if left out, stubs as
        sections.
    kinds : sequence of str
        Keys of `simkit.feedline.candidates.MAKERS`.
    supply : PartSupply, optional
        Bought parts; those with default Q, tolerance and range if left out.
    wanted_db : float
        Worst return loss aimed at; said in the report where the bound forbids it.
    refine : bool
        Move lengths from the exact match in the middle to the best worst return loss.

    Returns
    -------
    MatchReport

    Raises
    ------
    FeedlineError
        If the band has no width or is not covered, the load is purely reactive in it, a kind is
        unknown, or no kind gives a network.
    """
    check_band(start_hz, stop_hz)
    positive("reference resistance", reference_ohm, "ohm")
    positive("wanted return loss", wanted_db, "dB")
    unknown = [kind for kind in kinds if kind not in MAKERS]
    if unknown or not kinds:
        raise FeedlineError(
            f"no kind of network is called '{', '.join(unknown)}': choose from {', '.join(MAKERS)}"
        )
    band = load.at(np.linspace(start_hz, stop_hz, POINTS))
    centre_hz = (start_hz + stop_hz) / 2
    centre_ohm = complex(load.at([centre_hz]).impedance_ohm[0])
    check_load(centre_ohm, f" at {q(centre_hz, 'Hz')}")
    chosen = line if line is not None else UniformLine(reference_ohm)
    task = Task(
        centre_ohm, centre_hz, reference_ohm, chosen, stub_line or chosen, supply or PartSupply()
    )
    before = worst_return_loss_db(Chain((), reference_ohm), band)
    designs, notes = [], []
    for kind in kinds:
        try:
            found = _best_of_groups(list(MAKERS[kind](task)), band, before)
        except FeedlineError as error:
            notes.append(f"{kind}: {error}")
            continue
        if not found:
            notes.append(f"{kind}: {_why_none(kind, task)}")
            continue
        every = [_judged(c, band, task.supply, refine=refine) for c in found]
        judged = [design for design in every if design.chain.elements]
        if not judged:
            notes.append(f"{kind}: {NOT_NEEDED}")
            continue
        useful = [d for d in judged if d.worst_db > before or d.worst_db >= wanted_db]
        if not useful:
            best = max(d.worst_db for d in judged)
            notes.append(f"{kind}: over the band {best:.1f} dB at best, worse than no network")
        designs += useful
    if not designs and all(note.endswith(NOT_NEEDED) for note in notes):
        raise FeedlineError(
            f"no network is needed: the load has at least {before:.1f} dB return loss as it is"
        )
    if not designs:
        raise FeedlineError("no network matches this load: " + "; ".join(notes))
    ranked = sorted(_distinct(designs), key=lambda d: (-d.changed_db, -d.worst_db))
    bound = match_bound(load, start_hz, stop_hz)
    return MatchReport(
        start_hz, stop_hz, reference_ohm, before, tuple(ranked), bound, wanted_db, tuple(notes)
    )


def best_tap(
    load: OnePort,
    start_hz: float,
    stop_hz: float,
    line: Line,
    length_m: float,
    *,
    end: End = "short",
    reference_ohm: float = 50.0,
) -> Design:
    """Find the tap on a line of given length, shorted or open at the end away from the antenna.

    Returns
    -------
    Design
        With the best worst return loss over the band that the place of the tap can give.

    Raises
    ------
    FeedlineError
        As `find_matches`, or if the length is not positive.
    """
    check_band(start_hz, stop_hz)
    positive("length of the line", length_m, "m")
    band = load.at(np.linspace(start_hz, stop_hz, POINTS))

    def chain(part: float) -> Chain:
        tapped = TappedLine(line, part * length_m, (1 - part) * length_m, end)
        return Chain((tapped,), reference_ohm)

    def miss(part: float) -> float:
        return _worst_reflection(chain(part), band)

    places = np.linspace(0, 1, 201)
    middle = int(np.argmin([miss(float(part)) for part in places]))
    around = (places[max(middle - 1, 0)], places[min(middle + 1, len(places) - 1)])
    part = minimize_scalar(miss, bounds=around, method="bounded", options={"xatol": 1e-7}).x
    candidate = Candidate("tapped line", chain(float(part)))
    return _judged(candidate, band, PartSupply(), refine=False)


def worst_return_loss_db(chain: Chain, band: OnePort) -> float:
    """Return the smallest return loss at the connector over a load's frequencies, at most 100."""
    return _in_db(_worst_reflection(chain, band))


def _worst_reflection(chain: Chain, band: OnePort) -> float:
    return float(np.abs(chain.reflection(band)).max())


def _in_db(reflection: float) -> float:
    return min(LARGEST_DB, -20 * math.log10(max(reflection, 1e-12)))


def check_band(start_hz: float, stop_hz: float) -> None:
    positive("start of the band", start_hz, "Hz")
    positive("stop of the band", stop_hz, "Hz")
    if stop_hz <= start_hz:
        raise FeedlineError(
            f"the band from {q(start_hz, 'Hz')} to {q(stop_hz, 'Hz')} has no width: give two "
            "different frequencies, the lower one first"
        )


def _best_of_groups(
    candidates: list[Candidate], band: OnePort, before_db: float
) -> list[Candidate]:
    """Of candidates that differ in bought parts alone, the best one, if it is of any use."""
    best: dict[str, tuple[float, Candidate]] = {}
    kept = []
    for candidate in candidates:
        if not candidate.group:
            kept.append(candidate)
            continue
        found_db = worst_return_loss_db(candidate.chain, band)
        if found_db > best.get(candidate.group, (before_db,))[0]:
            best[candidate.group] = (found_db, candidate)
    return kept + [candidate for _, candidate in best.values()]


def _why_none(kind: str, task: Task) -> str:
    if kind in ("L-section", "single part"):
        return "no values at hand give a better match than no network"
    line_ohm = task.line.impedance_at(task.frequency_hz)
    return (
        f"no place on a line of {line_ohm:.4g} ohm behind {task.load_ohm:.4g} ohm lets one stub "
        f"match it to {task.reference_ohm:g} ohm: take a line of another impedance"
    )


def _judged(candidate: Candidate, band: OnePort, supply: PartSupply, *, refine: bool) -> Design:
    chain = candidate.chain
    if refine and candidate.refinable:
        chain = _refined(chain, band)
    chain = without_nothing(chain)
    worst = worst_return_loss_db(chain, band)
    changed, sensitive = _after_change(chain, band, worst)
    result = chain.terminate(band)
    return Design(
        candidate.kind,
        chain,
        dimensions(chain),
        worst,
        changed,
        sensitive,
        _within_tolerance(chain, band, supply.tolerance, worst),
        float(result.efficiency.min()),
        result.doubts,
    )


def _refined(chain: Chain, band: OnePort) -> Chain:
    """Move all lengths, each by a factor, to the best worst reflection."""
    free = free_dimensions(chain)
    if not free:
        return chain

    def moved(logs: FloatArray) -> Chain:
        other = chain
        for dimension, log in zip(free, np.clip(logs, *LOG_REACH), strict=True):
            other = dimension.scaled(other, math.exp(float(log)))
        return other

    start = np.zeros(len(free))
    simplex = np.vstack([start, 0.03 * np.eye(len(free))])
    found = minimize(
        lambda logs: _worst_reflection(moved(logs), band),
        start,
        method="Nelder-Mead",
        options={
            "initial_simplex": simplex,
            "maxfev": ROUNDS,
            "xatol": 1e-5,
            "fatol": 1e-6,
        },
    )
    best = moved(found.x)
    return best if _worst_reflection(best, band) < _worst_reflection(chain, band) else chain


def without_nothing(chain: Chain) -> Chain:
    """Leave out sections and stubs that were moved to no length; all of them may be."""
    return replace(chain, elements=tuple(e for e in chain.elements if not _is_nothing(e)))


def _is_nothing(element: Element) -> bool:
    """Whether a length of line does nothing at all.

    A stub of no length does if its end then neither shorts the line nor breaks it.
    """
    if isinstance(element, Stub):
        harmless = (element.connection == "shunt") == (element.end == "open")
        return harmless and element.length_m < NOTHING_M
    return isinstance(element, LineSection) and element.length_m < NOTHING_M


def _after_change(chain: Chain, band: OnePort, worst_db: float) -> tuple[float, str]:
    """Worst return loss with the most sensitive dimension 1 % off, and its name."""
    lowest, name = worst_db, ""
    for dimension in dimensions(chain):
        for factor in (1 - CHANGE, 1 + CHANGE):
            changed = worst_return_loss_db(dimension.scaled(chain, factor), band)
            if changed < lowest:
                lowest, name = changed, dimension.text
    return lowest, name


def _within_tolerance(chain: Chain, band: OnePort, tolerance: float, worst_db: float) -> float:
    """Worst return loss over all corners of the tolerances of bought parts."""
    places = [k for k, element in enumerate(chain.elements) if isinstance(element, Lumped)]
    return min(
        worst_db, *(worst_return_loss_db(c, band) for c in _corners(chain, places, tolerance))
    )


def _corners(chain: Chain, places: list[int], tolerance: float) -> Iterator[Chain]:
    for factors in product((1 - tolerance, 1 + tolerance), repeat=len(places)):
        elements = list(chain.elements)
        for place, factor in zip(places, factors, strict=True):
            part = elements[place]
            assert isinstance(part, Lumped)
            elements[place] = replace(part, value=part.value * factor)
        yield replace(chain, elements=tuple(elements))


def _distinct(designs: list[Design]) -> list[Design]:
    """Leave out designs whose dimensions all agree with those of another to 0.1 %."""
    kept: dict[tuple[str, ...], Design] = {}
    for design in designs:
        sizes = (f"{d.name} {d.value:.3g}" for d in design.dimensions)
        ends = (str(getattr(element, "end", "")) for element in design.chain.elements)
        kept.setdefault((design.kind, *ends, *sizes), design)
    return list(kept.values())
