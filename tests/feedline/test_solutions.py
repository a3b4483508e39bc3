"""Exact matches of one impedance: every solution matches, and none is missing."""

from __future__ import annotations

import cmath
import math

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from simkit.feedline import (
    Chain,
    FeedlineError,
    LineSection,
    Lumped,
    OnePort,
    Stub,
    UniformLine,
    l_solutions,
    quarter_solutions,
    stub_solutions,
)
from simkit.feedline.parts import reactive_part

F = 868e6
LOADS = st.builds(complex, st.floats(1.0, 900.0), st.floats(-700.0, 700.0))
MATCHED = 1e-6
"""Rounding near the ends of arc cosine, where solutions merge, costs half of the digits."""


def seen(load_ohm, elements, reference=50.0):
    load = OnePort.from_impedance([F], [load_ohm])
    return abs(Chain(tuple(elements), reference).reflection(load)[0])


@given(LOADS, st.sampled_from(["shunt", "series"]), st.floats(30.0, 90.0))
@settings(max_examples=60, deadline=None)
def test_every_stub_matches(load_ohm, connection, stub_ohm):
    line, other = UniformLine(50.0, 0.8), UniformLine(stub_ohm)
    found = stub_solutions(load_ohm, 50.0, stub_ohm=stub_ohm, connection=connection)
    assert len(found) in (2, 4)
    for s in found:
        assert 0 <= s.distance < 0.5
        assert 0 <= s.length < 0.5
        section = LineSection(line, s.distance * line.wavelength_at(F))
        stub = Stub(other, s.length * other.wavelength_at(F), s.end, s.connection)
        assert seen(load_ohm, [section, stub]) < MATCHED


@given(LOADS, st.floats(20.0, 300.0))
@settings(max_examples=40, deadline=None)
def test_stubs_on_a_line_of_another_impedance(load_ohm, line_ohm):
    line = UniformLine(line_ohm)
    rho = abs((load_ohm - line_ohm) / (load_ohm + line_ohm))
    swr = (1 + rho) / (1 - rho)
    found = stub_solutions(load_ohm, line_ohm, reference_ohm=50.0)
    # The conductance on the line runs from 1/(Z swr) to swr/Z.
    if swr > 1.001 * max(line_ohm / 50, 50 / line_ohm):
        assert len(found) == 4
    elif swr < 0.999 * max(line_ohm / 50, 50 / line_ohm):
        assert found == []
    for s in found:
        section = LineSection(line, s.distance * line.wavelength_at(F))
        stub = Stub(line, s.length * line.wavelength_at(F), s.end)
        assert seen(load_ohm, [section, stub]) < MATCHED


@given(LOADS)
@settings(max_examples=60, deadline=None)
def test_every_l_section_matches(load_ohm):
    found = l_solutions(load_ohm, 50.0)
    inside = load_ohm.real <= 50, (1 / load_ohm).real <= 1 / 50
    assert len(found) in ((sum(inside) * 2,) if 50 not in (load_ohm.real,) else (2, 3, 4))
    for s in found:
        parts = {
            "shunt": reactive_part(s.susceptance_s, F, "shunt"),
            "series": reactive_part(s.reactance_ohm, F, "series"),
        }
        order = ["shunt", "series"] if s.first == "shunt" else ["series", "shunt"]
        elements = [Lumped(*parts[c], c) for c in order if parts[c] is not None]
        assert seen(load_ohm, elements) < MATCHED


@given(LOADS)
@settings(max_examples=30, deadline=None)
def test_every_quarter_wave_matches(load_ohm):
    line = UniformLine(75.0)
    for s in quarter_solutions(load_ohm, 75.0, 50.0):
        other = UniformLine(s.impedance_ohm)
        section = LineSection(line, s.distance * line.wavelength_at(F))
        quarter = LineSection(other, other.wavelength_at(F) / 4)
        assert seen(load_ohm, [section, quarter]) < MATCHED


def test_an_exact_match_needs_nothing():
    (short, opened) = stub_solutions(50.0, 50.0)
    assert (short.distance, short.length) == (0.0, 0.25)
    assert (opened.distance, opened.length) == (0.0, 0.0)
    for s in l_solutions(50.0, 50.0):
        assert s.susceptance_s == 0
        assert s.reactance_ohm == pytest.approx(0)
    assert quarter_solutions(50.0, 50.0, 50.0)[0].impedance_ohm == pytest.approx(50.0)


@pytest.mark.parametrize("load", [0.0, 70j, complex(math.inf), complex(1e-12, -30)])
@pytest.mark.parametrize(
    "solve",
    [
        lambda z: stub_solutions(z, 50.0),
        lambda z: l_solutions(z, 50.0),
        lambda z: quarter_solutions(z, 50.0, 50.0),
    ],
    ids=["stub", "L", "quarter"],
)
def test_reactive_loads_are_refused(solve, load):
    with pytest.raises(FeedlineError, match="purely reactive"):
        solve(complex(load))


def test_active_loads_and_bad_lines_are_refused():
    with pytest.raises(FeedlineError, match="gives power out"):
        l_solutions(-3 + 4j, 50.0)
    with pytest.raises(FeedlineError, match="gives power out, or is no number"):
        l_solutions(complex(cmath.nan, 1), 50.0)
    with pytest.raises(FeedlineError, match="impedance of the stub is -1 ohm"):
        stub_solutions(30 + 1j, 50.0, stub_ohm=-1.0)


def test_all_four_l_sections_of_a_load_inside_both_circles():
    found = l_solutions(20 + 100j, 50.0)
    assert [s.first for s in found] == ["shunt", "shunt", "series", "series"]
    assert len({round(s.reactance_ohm, 6) for s in found}) == 4
    assert np.isfinite([s.susceptance_s for s in found]).all()
