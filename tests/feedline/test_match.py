"""Design over a band: what is found, how it is judged, and what is refused."""

from __future__ import annotations

import math
from dataclasses import replace

import numpy as np
import pytest

from simkit.feedline import (
    Chain,
    Coaxial,
    FeedlineError,
    LineSection,
    Lumped,
    OnePort,
    PartSupply,
    Stub,
    TappedLine,
    TwoStrips,
    UniformLine,
    best_tap,
    find_matches,
    worst_return_loss_db,
)
from simkit.feedline.candidates import MAKERS, Candidate, line_of
from simkit.feedline.match import without_nothing
from simkit.feedline.vary import dimensions, free_dimensions

F = np.linspace(780e6, 960e6, 91)
BAND = (853e6, 883e6)
OMEGA = 2 * np.pi * F
LOAD = OnePort.from_impedance(F, 68 + 1j * OMEGA * 55e-9 - 1j / (OMEGA * 0.52e-12))
IDEAL = PartSupply(math.inf, math.inf, 0.0)


@pytest.fixture(scope="module")
def report():
    return find_matches(LOAD, *BAND)


def test_all_kinds_are_found_and_ranked(report):
    assert {design.kind for design in report.designs} == set(MAKERS)
    robust = [design.changed_db for design in report.designs]
    assert robust == sorted(robust, reverse=True)
    assert report.best is report.designs[0]
    assert report.best.worst_db > 15 > report.before_db
    assert report.notes == ()


def test_what_is_said_of_a_design_is_so(report):
    inner = LOAD.at(np.linspace(*BAND, 301))
    for design in report.designs:
        result = design.chain.terminate(inner)
        # Judged at 41 points; between them it can be worse by some hundredths of a decibel.
        assert result.return_loss_db.min() == pytest.approx(design.worst_db, abs=0.05)
        assert design.changed_db <= design.worst_db + 1e-9
        assert design.tolerance_db <= design.worst_db + 1e-9
        assert result.efficiency.min() == pytest.approx(design.efficiency, abs=1e-3)
        assert 0 < design.efficiency <= 1 + 1e-12


def test_no_network_without_loss_beats_the_bound():
    """Over a wide band, where the bound is near."""
    f = np.linspace(600e6, 1200e6, 121)
    w = 2 * np.pi * f
    load = OnePort.from_impedance(f, 50 + 1j * w * 120e-9 - 1j / (w * 0.24e-12))
    found = find_matches(load, 700e6, 1050e6, supply=IDEAL, wanted_db=12.0)
    assert 2 < found.bound.return_loss_db < 12
    assert found.best.worst_db < found.bound.return_loss_db
    text = found.as_text()
    assert "12 dB cannot be had without loss" in text
    assert f"gives more than {found.bound.return_loss_db:.1f} dB" in text


def test_refining_gains_over_the_match_in_the_middle():
    kinds = ("shunt stub", "tapped line")
    exact = find_matches(LOAD, *BAND, kinds=kinds, refine=False)
    better = find_matches(LOAD, *BAND, kinds=kinds)
    assert better.best.worst_db > exact.best.worst_db + 0.5
    middle = LOAD.at([sum(BAND) / 2])
    for design in exact.designs:
        assert worst_return_loss_db(design.chain, middle) == pytest.approx(100.0)


def test_refining_does_not_run_off_to_endless_lines():
    """On a line with loss a hopeless load is matched best by loss alone."""
    w = 2 * np.pi * np.linspace(500e6, 1500e6, 101)
    load = OnePort.from_impedance(w / 2 / np.pi, 0.47 + 1j * (w * 3.67e-9 - 1 / (w * 44e-15)))
    line = UniformLine(60.0, 0.55, 3.0, 1e9, 0.02)
    found = find_matches(
        load, 838e6, 1066e6, reference_ohm=216.0, kinds=("shunt stub",), line=line, wanted_db=1.0
    )
    lengths = [d.value for design in found.designs for d in free_dimensions(design.chain)]
    half_wave_m = line.wavelength_at(952e6) / 2
    assert half_wave_m < max(lengths) <= half_wave_m * math.exp(1.5)


def test_all_stub_solutions_are_there():
    found = find_matches(LOAD, *BAND, kinds=("shunt stub", "series stub"))
    ends = {(d.kind, d.chain.elements[1].end) for d in found.designs}
    assert len(found.designs) == 8
    assert len(ends) == 4


def test_parts_are_e24_and_have_q_and_tolerance():
    lossy = find_matches(LOAD, *BAND, kinds=("L-section",), supply=PartSupply(30, 150, 0.05))
    clean = find_matches(LOAD, *BAND, kinds=("L-section",), supply=IDEAL)
    supply = PartSupply()
    for design in lossy.designs:
        for part in design.chain.elements:
            assert isinstance(part, Lumped)
            assert part.value in supply.values(part.kind)
            assert part.q == (30 if part.kind == "L" else 150)
        assert design.tolerance_db < design.changed_db
        assert design.efficiency < 1
    assert clean.best.efficiency == pytest.approx(1)
    assert clean.best.tolerance_db == clean.best.worst_db


def test_single_parts_are_the_best_of_all_values():
    """A series coil takes away a capacitive reactance."""
    load = OnePort.from_impedance(F, 48 - 1j * np.full(91, 55.0))
    found = find_matches(load, *BAND, kinds=("single part",), supply=IDEAL)
    (part,) = found.best.chain.elements
    assert (part.kind, part.connection, part.value) == ("L", "series", 10e-9)


def test_lines_of_strip_and_their_loss():
    line = TwoStrips(4e-3, 3e-3, 0.1e-3, 2.7, 0.01, 0.0, 1.5e7)
    found = find_matches(LOAD, *BAND, line=line, kinds=("quarter wave",), refine=False)
    section = found.best.chain.elements[-1]
    assert isinstance(section.line, TwoStrips)
    assert section.line.width_m != line.width_m
    assert 0.8 < found.best.efficiency < 0.99
    text = found.as_text()
    assert "line A: two strips" in text
    assert "mm of line A" in text


def test_quarter_wave_of_another_kind_of_line():
    coax = Coaxial(1e-3, 3.35e-3, 2.1)
    other = line_of(coax, 61.0, 868e6)
    assert isinstance(other, UniformLine)
    assert other.impedance_ohm == 61.0
    assert other.wavelength_at(868e6) == pytest.approx(coax.wavelength_at(868e6))


def test_a_kind_that_gives_nothing_says_so():
    load = OnePort.from_impedance(F, np.full(91, 100 + 0j))
    line = UniformLine(95.0)
    found = find_matches(load, *BAND, line=line, kinds=("shunt stub", "quarter wave"))
    assert "shunt stub: no place on a line of 95 ohm" in found.notes[0]
    with pytest.raises(FeedlineError, match="no network matches this load: shunt stub"):
        find_matches(load, *BAND, line=line, kinds=("shunt stub",))


def test_a_matched_load_stays_matched():
    load = OnePort.from_impedance(F, np.full(91, 50.0 + 0j))
    found = find_matches(load, *BAND)
    assert found.before_db == 100.0
    assert found.best.worst_db > 60
    assert all(np.isfinite([d.worst_db, d.changed_db, d.tolerance_db]).all() for d in found.designs)
    assert "the load sets no limit" in found.as_text()


def test_rows_and_text(report):
    rows = report.as_rows()
    assert [row["rank"] for row in rows] == list(range(1, len(rows) + 1))
    assert rows[0]["worst_return_loss_db"] == report.best.worst_db
    text = report.as_text(3)
    assert text.startswith("match to 50 ohm from 853 MHz to 883 MHz; without a network at least")
    assert "efficiency  most sensitive\n" in text
    assert f"{report.best.changed_db:.1f} dB" in text
    assert f"{len(rows) - 3} more, with less left when 1 % off" in text


def test_a_line_has_one_letter_throughout_the_table():
    found = find_matches(LOAD, *BAND, line=UniformLine(115.0), kinds=("quarter wave",))
    named = [replace(found.designs[0], sensitive=f"line {n} impedance 9 ohm") for n in (1, 2)]
    text = replace(found, designs=tuple(named)).as_text()
    assert [line[-22:] for line in text.splitlines() if line.endswith(" 9 ohm")] == [
        "line A impedance 9 ohm",
        "line B impedance 9 ohm",
    ]
    one = find_matches(LOAD, *BAND, kinds=("tapped line",)).designs[0]
    text = replace(found, designs=(replace(one, sensitive="line impedance 9 ohm"),)).as_text()
    assert "line A impedance 9 ohm" in text


def test_best_tap_on_a_shorted_line():
    """The exact tap of a line just as long as the exact one needs it."""
    exact = find_matches(LOAD, *BAND, kinds=("tapped line",)).best.chain.elements[0]
    assert isinstance(exact, TappedLine)
    design = best_tap(LOAD, *BAND, UniformLine(50.0), exact.length_m)
    (tapped,) = design.chain.elements
    assert tapped.antenna_side_m == pytest.approx(exact.antenna_side_m, rel=2e-3)
    assert tapped.length_m == pytest.approx(exact.length_m)
    worse = best_tap(LOAD, *BAND, UniformLine(50.0), exact.length_m * 1.05)
    assert worse.worst_db < design.worst_db


def test_sections_of_no_length_are_left_out():
    line = UniformLine(50.0)
    stub, nothing = Stub(line, 20e-3), LineSection(line, 3e-10)
    assert without_nothing(Chain((nothing, stub), 60.0)) == Chain((stub,), 60.0)
    assert without_nothing(Chain((nothing,))) == Chain(())
    # Of no length, the one stub is an open circuit across the line, the other a wire in it.
    harmless = (Stub(line, 0.0, "open", "shunt"), Stub(line, 3e-10, "short", "series"))
    assert without_nothing(Chain((*harmless, stub))) == Chain((stub,))
    # And these short the line and break it.
    telling = (Stub(line, 0.0, "short", "shunt"), Stub(line, 0.0, "open", "series"))
    assert without_nothing(Chain(telling)) == Chain(telling)


@pytest.mark.parametrize("refine", [True, False])
def test_a_matched_load_gets_no_network_of_no_length(refine):
    load = OnePort.from_impedance(F, np.full(len(F), 50 + 0j))
    kinds = ("shunt stub", "series stub", "quarter wave")
    report = find_matches(load, *BAND, kinds=kinds, refine=refine)
    lengths = [d.value for design in report.designs for d in design.dimensions if d.unit == "m"]
    assert len(lengths) == 3
    assert min(lengths) > 0.08  # a quarter of 345 mm
    assert "no less than wanted: no network is needed" in report.as_text()


def test_no_network_is_needed_where_all_of_them_vanish(monkeypatch):
    load = OnePort.from_impedance(F, np.full(len(F), 50 + 0j))
    line = UniformLine(50.0)
    monkeypatch.setitem(
        MAKERS,
        "shunt stub",
        lambda task: [Candidate("shunt stub", task.chain(Stub(line, 0.0, "open")))],
    )
    with pytest.raises(FeedlineError, match=r"no network is needed: the load has at least 100\.0"):
        find_matches(load, *BAND, kinds=("shunt stub",))


def test_dimensions_of_a_chain():
    line = TwoStrips(4e-3, 3e-3)
    chain = Chain(
        (
            LineSection(line, 30e-3),
            Stub(line, 20e-3),
            TappedLine(UniformLine(70.0), 11e-3, 7e-3),
            Lumped("C", 1e-12, "shunt"),
        )
    )
    assert [d.text for d in free_dimensions(chain)] == [
        "section length 30 mm",
        "stub length 20 mm",
        "antenna to tap 11 mm",
        "tap to end 7 mm",
        "shunt C 1 pF",
    ]
    every = {d.name: d for d in dimensions(chain)}
    wider = every["line 1 width"].scaled(chain, 1.01)
    # Both elements of the line get it.
    assert [wider.elements[n].line.width_m for n in (0, 1)] == pytest.approx([4.04e-3] * 2)
    assert wider.elements[2] == chain.elements[2]
    assert every["line 2 impedance"].scaled(chain, 0.9).elements[2].line.impedance_ohm == 63.0
    assert every["tap to end"].scaled(chain, 2.0).elements[2].end_side_m == 14e-3


@pytest.mark.parametrize(
    ("call", "match"),
    [
        (
            lambda: find_matches(LOAD, 860e6, 870e6, wanted_db=float("nan")),
            "wanted return loss is nan dB",
        ),
        (lambda: find_matches(LOAD, 870e6, 870e6), "has no width: give two different frequencies"),
        (lambda: find_matches(LOAD, 880e6, 870e6), "from 880 MHz to 870 MHz has no width"),
        (lambda: find_matches(LOAD, 500e6, 870e6), "known from 780 MHz to 960 MHz"),
        (lambda: find_matches(LOAD, *BAND, kinds=("magic",)), "called 'magic': choose from shunt"),
        (lambda: find_matches(LOAD, *BAND, reference_ohm=-1), "reference resistance is -1 ohm"),
        (lambda: best_tap(LOAD, *BAND, UniformLine(50.0), -0.1), "length of the line is -100 mm"),
        (
            lambda: find_matches(OnePort.from_impedance(F, 1j * OMEGA * 5e-9), *BAND),
            "purely reactive at 868 MHz",
        ),
        (lambda: PartSupply(tolerance=-0.1), "tolerance of parts is -0.1"),
        (lambda: PartSupply(inductor_q=0.0), "inductor_q is 0"),
    ],
)
def test_wishes_that_cannot_be(call, match):
    with pytest.raises(FeedlineError, match=match):
        call()
