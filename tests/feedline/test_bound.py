"""Bode and Fano's bound of a fitted resonator."""

from __future__ import annotations

import math

import numpy as np
import pytest

from simkit.feedline import FeedlineError, OnePort, match_bound

START, STOP = 700e6, 1000e6
MIDDLE = math.sqrt(START * STOP)
F = np.linspace(600e6, 1100e6, 201)
BEND = F / MIDDLE - MIDDLE / F


@pytest.mark.parametrize("kind", ["series", "parallel"])
def test_tuned_resonator(kind):
    """exp(-pi / (Q B)) is the least reflection; here 8.686 pi / (9 x 0.3586) = 8.455 dB."""
    relative = 1 + 1j * 9.0 * BEND
    impedance = 40 * relative if kind == "series" else 40 / relative
    bound = match_bound(OnePort.from_impedance(F, impedance), START, STOP)
    assert bound.kind == kind
    assert bound.resistance_ohm == pytest.approx(40, rel=1e-4)
    assert bound.q_at(MIDDLE) == pytest.approx(9.0, rel=1e-4)
    assert bound.resonance_hz == pytest.approx(MIDDLE, rel=1e-4)
    breadth = (STOP - START) / MIDDLE
    neper = math.pi / (9.0 * breadth)
    assert bound.return_loss_db == pytest.approx(20 / math.log(10) * neper, rel=1e-4)
    assert bound.return_loss_db == pytest.approx(8.455, abs=0.005)
    assert bound.misfit < 1e-3
    assert f"no network without loss gives more than {bound.return_loss_db:.1f} dB" in (
        bound.as_text(850e6)
    )


def test_a_capacitor_in_line_alone():
    """Off resonance the larger reactance counts: pi R C w1 w2 / (w2 - w1)."""
    capacitance = 1.3e-12
    load = OnePort.from_impedance(F, 20 - 1j / (2 * np.pi * F * capacitance))
    bound = match_bound(load, START, STOP)
    low, high = 2 * np.pi * START, 2 * np.pi * STOP
    neper = math.pi * 20 * capacitance * low * high / (high - low)
    assert bound.return_loss_db == pytest.approx(20 / math.log(10) * neper, rel=1e-3)
    assert bound.inductance_h == pytest.approx(0, abs=1e-12)
    assert bound.q_at(MIDDLE) == pytest.approx(
        1 / (2 * np.pi * MIDDLE * capacitance * 20), rel=1e-3
    )


def test_pure_resistance_has_no_bound():
    bound = match_bound(OnePort.from_impedance(F, np.full(201, 33.0)), START, STOP)
    assert bound.return_loss_db == 100.0
    assert bound.q_at(MIDDLE) == pytest.approx(0, abs=1e-9)
    assert "no limit that matters" in bound.as_text(MIDDLE)


def test_what_is_no_resonator_is_called_rough():
    turning = 0.6 * np.exp(-1j * np.linspace(0, 20, 201))
    bound = match_bound(OnePort(F, turning), START, STOP)
    assert "take the bound as a rough one" in bound.as_text(MIDDLE)


def test_reactive_load_is_refused():
    with pytest.raises(FeedlineError, match="purely reactive at 700 MHz"):
        match_bound(OnePort.from_impedance(F, 30j * BEND), START, STOP)
