"""Ranking stored cases, ambiguous pairs and pins."""

import time

import numpy as np
import pytest

from simkit.errors import MeasurementError, StoreError
from simkit.measured import compare, nearest_cases
from simkit.measured.pairing import ModelledDip, ambiguous_pairs, pair
from simkit.measured.wording import nearest_text

from .test_comparison import bench, results

BAND = (0.3e9, 3.0e9)


def dips(*places):
    return [ModelledDip(place * 1e6, 0.2) for place in places]


def test_the_case_of_the_build_comes_first():
    data = results()
    found = nearest_cases(data, bench(0.9e9 * 76 / 82, 2.7e9 * 76 / 82))
    assert len(found) == 5
    assert found[0].values == {"arm": 0.082, "width": 0.008}
    scores = [near.score for near in found]
    assert scores == sorted(scores)
    # Noise of 1e-3 alone is left.
    assert found[0].curve < 3e-3
    text = nearest_text(bench(0.9e9, 2.7e9), found)
    assert "arm 82 mm, width 8 mm" in text


def test_without_dips_the_curve_alone_decides():
    data = results()
    measured = bench(0.9e9, 2.7e9)
    flat = type(measured)(measured.path, measured.frequency_hz, 0.8 + 0 * measured.reflection, 50.0)
    found = nearest_cases(data, flat, best=2)
    assert len(found) == 2
    assert np.isinf(found[0].misfit)
    assert np.isfinite(found[0].score)


def test_no_common_band_or_no_case_is_refused():
    measured = bench(0.9e9, 2.7e9)
    far = type(measured)(measured.path, measured.frequency_hz + 9e9, measured.reflection, 50.0)
    with pytest.raises(MeasurementError, match="no frequency in common"):
        nearest_cases(results(), far)
    data = results()
    data["status"][:] = 0
    with pytest.raises(StoreError, match="no case of these results is solved"):
        nearest_cases(data, measured)


def test_a_clear_pairing_is_not_called_ambiguous():
    modelled, heard = dips(900, 2700), dips(905, 2720)
    best = pair(modelled, heard, BAND, BAND)
    assert ambiguous_pairs(best, modelled, heard, BAND, BAND) == {}


def test_a_dip_between_two_modes_is_ambiguous_until_it_is_pinned():
    modelled, heard = dips(900, 1800, 1900, 2700), dips(900, 1850, 2700)
    best = pair(modelled, heard, BAND, BAND)
    doubtful = ambiguous_pairs(best, modelled, heard, BAND, BAND)
    (link,) = doubtful
    assert link[1] == 1
    other = 3 - link[0]
    assert (other, 1) in doubtful[link].pairs
    pinned = pair(modelled, heard, BAND, BAND, pins=[(other, 1)])
    assert (other, 1) in pinned.pairs
    assert ambiguous_pairs(pinned, modelled, heard, BAND, BAND, pins=[(other, 1)]) == {}


def test_a_pin_overrules_the_comparison():
    measured = bench(0.9e9, 2.7e9, second=1.75e9)
    free = compare(results(), measured, 2)
    pinned = compare(results(), measured, 2, pins={3: free.lines[0].measured_hz})
    assert pinned.lines[2].measured_hz == free.lines[0].measured_hz
    with pytest.raises(MeasurementError, match="no measured dip lies within 2%"):
        compare(results(), measured, 2, pins={3: 2.2e9})
    with pytest.raises(MeasurementError, match="not among those of this case"):
        compare(results(), measured, 2, pins={7: free.lines[0].measured_hz})


@pytest.mark.long
def test_a_thousand_cases_are_compared_while_one_waits():
    arms = tuple(np.linspace(0.07, 0.082, 40))
    data = results(arms, tuple(np.linspace(0.004, 0.012, 25)))
    begin = time.perf_counter()
    comparison = compare(data, bench(0.9e9, 2.7e9))
    nearest_cases(data, bench(0.9e9, 2.7e9))
    print(f"1000 cases: {time.perf_counter() - begin:.1f} s")
    assert comparison.lines[0].is_paired
