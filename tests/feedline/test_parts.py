"""Values that parts are sold in."""

from __future__ import annotations

import math

import pytest

from simkit.feedline.parts import E24, PartSupply, reactive_part


def test_e24_are_the_rounded_steps_but_for_eight():
    """IEC 60063 keeps eight older values between 2.7 and 4.7 and 8.2 off the rule."""
    steps = [round(10 * 10 ** (n / 24)) for n in range(24)]
    assert len(E24) == 24
    assert sum(a != b for a, b in zip(E24, steps, strict=True)) == 8
    assert all(abs(a - b) <= 1 for a, b in zip(E24, steps, strict=True))


def test_values_in_range_ascend():
    supply = PartSupply(smallest_f=0.47e-12, largest_f=1e-11)
    values = supply.values("C")
    assert values == sorted(values)
    assert values[0] == 0.47e-12
    assert values[-1] == 1e-11
    assert 2.2e-12 in values


def test_nearest_values():
    assert PartSupply().near("L", 38.8e-9, 4) == [33e-9, 36e-9, 39e-9, 43e-9]


@pytest.mark.parametrize("connection", ["shunt", "series"])
@pytest.mark.parametrize("size", [0.02, -0.02])
def test_part_of_a_reactance(connection, size):
    kind, value = reactive_part(size, 868e6, connection)
    omega = 2 * math.pi * 868e6
    impedance = 1j * omega * value if kind == "L" else 1 / (1j * omega * value)
    found = impedance if connection == "series" else 1 / impedance
    assert found == pytest.approx(1j * size)


def test_no_part_for_no_reactance():
    assert reactive_part(0.0, 868e6, "shunt") is None
