"""Feature selective validation on curves whose likeness is known."""

import numpy as np
import pytest

from simkit.measured.fsv import agreement, decibels, grade

F = np.linspace(1e9, 2e9, 400)


def curve(shift=0.0):
    dips = ((1.2e9, 40e6, 8), (1.5e9, 50e6, 20), (1.8e9, 30e6, 12))
    return -1 - sum(depth * np.exp(-(((F - shift - at) / width) ** 2)) for at, width, depth in dips)


def test_identical_curves_do_not_differ():
    same = agreement(F, curve(), F, curve())
    assert (same.amplitude, same.feature, same.overall) == (0.0, 0.0, 0.0)
    assert same.grade == "excellent"
    assert same.overall_at.max() == 0.0


def test_the_order_of_the_curves_does_not_matter():
    a, b = curve(), curve(15e6)
    there, back = agreement(F, a, F, b), agreement(F, b, F, a)
    assert there.overall == pytest.approx(back.overall, rel=1e-12)


def test_a_growing_shift_makes_a_growing_difference():
    found = [agreement(F, curve(), F, curve(shift)) for shift in (3e6, 10e6, 30e6, 60e6)]
    overall = [one.overall for one in found]
    assert overall == sorted(overall)
    assert found[0].grade in ("excellent", "very good")
    assert found[-1].grade in ("poor", "very poor")


def test_a_scaled_curve_differs_by_its_offset_formula():
    factor = 1.1
    found = agreement(F, curve(), F, factor * curve())
    # All parts scale: trend and offset each give (f - 1)/(f + 1) times their mean size over itself.
    part = (factor - 1) / (factor + 1)
    trend = part
    assert found.amplitude > trend
    # The offset enters with its exponential; its mean size is 1, its largest value about 2.
    assert found.amplitude == pytest.approx(trend + part * np.exp(part), rel=0.1)
    # Slopes, details and bends with the same sign: 2 (1/2 + 1/6 + 1/7.2) of the part at most.
    assert found.feature < 2 * part * (1 / 2 + 1 / 6 + 1 / 7.2)


@pytest.mark.parametrize(
    ("value", "word"),
    [
        (0.0, "excellent"),
        (0.1, "very good"),
        (0.3, "good"),
        (0.79, "fair"),
        (1.5, "poor"),
        (1.6, "very poor"),
        (99.0, "very poor"),
    ],
)
def test_grades(value, word):
    assert grade(value) == word


def test_curves_on_different_steps_are_compared_where_both_exist():
    coarse = np.linspace(0.5e9, 1.9e9, 901)
    found = agreement(F, curve(), coarse, np.interp(coarse, F, curve()))
    assert found.frequency_hz[0] == 1e9
    assert found.frequency_hz[-1] == 1.9e9
    assert found.overall < 0.05


def test_no_common_band_is_an_error():
    with pytest.raises(ValueError, match="no frequency in common"):
        agreement(F, curve(), F + 5e9, curve())
    with pytest.raises(ValueError, match="finite"):
        agreement(F, np.nan * F, F, curve())


def test_constant_curves_have_no_features_to_differ_in():
    found = agreement(F, 0 * F - 3, F, 0 * F - 3)
    assert found.overall == 0.0
    assert decibels([0.0]) == pytest.approx([-60.0])
