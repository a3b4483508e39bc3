"""A curve between its samples, against a resonance known in closed form."""

import numpy as np
import pytest

from simkit.response.near import Near


@pytest.mark.parametrize(
    ("samples_per_half_width", "error"),
    # 6th power of step over half width times (0.5 * 1.5 * 2.5)^2, the six samples' product.
    [(10, 3.6e-6), (5, 2.3e-4)],
)
def test_error_beside_a_resonance_is_that_of_six_samples(samples_per_half_width, error):
    half_width, step = 20e6, 20e6 / samples_per_half_width
    frequency = 868e6 + step * (np.arange(31) - 15.5)
    curve = half_width / (frequency - 868e6 - 1j * half_width)
    near = Near(frequency, curve, 15)
    assert near(frequency[15]) == pytest.approx(curve[15], rel=1e-12)
    off = abs(near(868e6) - 1j)
    assert error / 2 < off <= error
    assert near.imag(868e6) == near(868e6).imag


@pytest.mark.parametrize("place", [0, 1, 29, 30])
def test_ends_are_served_by_the_last_six_samples(place):
    frequency = 3e8 + 1e6 * np.arange(31.0)
    curve = (frequency / 3e8) ** 5 - 2j * (frequency / 3e8) ** 2
    near = Near(frequency, curve, place)
    between = frequency[place] + (0.4e6 if place < 30 else -0.4e6)
    # A polynomial of the fifth degree goes through six samples exactly, but for rounding.
    assert near(between) == pytest.approx(
        (between / 3e8) ** 5 - 2j * (between / 3e8) ** 2, rel=1e-9
    )


@pytest.mark.parametrize("at", [3.07e8, 3.154e8, 3.3e8])
def test_the_slope_is_that_of_the_polynomial(at):
    frequency = 3e8 + 1e6 * np.arange(31.0)
    near = Near(
        frequency, frequency**3 * 1e-24 - 1j * frequency**2 * 1e-16, round((at - 3e8) / 1e6)
    )
    # Exact for a polynomial, but for what rounding leaves of a cancelling sixth of it.
    assert near.slope(at) == pytest.approx(3 * at**2 * 1e-24 - 2j * at * 1e-16, rel=1e-7)
