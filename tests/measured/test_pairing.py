"""Pairing measured with modelled dips where the right answer is known."""

import numpy as np
import pytest

from simkit.measured.pairing import ModelledDip, pair


def dips(*places_mhz, depth=0.3):
    depths = np.broadcast_to(depth, len(places_mhz))
    return [ModelledDip(f * 1e6, float(d)) for f, d in zip(places_mhz, depths, strict=True)]


DIPOLE = (918.0, 2872.0)
CROWDED = (800.0, 1010.0, 1180.0, 1390.0, 1600.0)


def scaled(places, factor):
    return tuple(place * factor for place in places)


@pytest.mark.parametrize("factor", [0.8, 0.93, 1.0, 1.02, 1.1, 1.25])
@pytest.mark.parametrize("places", [DIPOLE, CROWDED])
def test_a_common_factor_is_found(places, factor):
    found = pair(dips(*places), dips(*scaled(places, factor)))
    assert found.pairs == tuple((i, i) for i in range(len(places)))
    # Drawn towards 1 by the spread of common factors: (0.02 / 0.08)^2 over the number of pairs.
    assert np.log(found.scale) == pytest.approx(np.log(factor), rel=0.04, abs=1e-12)


def test_nearest_frequency_would_be_wrong_where_order_and_ratios_are_right():
    """All modes 14 % low: the second measured dip is nearer to the first mode than to its own."""
    measured = scaled(CROWDED, 0.86)
    assert abs(measured[2] - CROWDED[1]) < abs(measured[2] - CROWDED[2])
    assert pair(dips(*CROWDED), dips(*measured)).pairs == tuple((i, i) for i in range(5))


@pytest.mark.parametrize("gone", range(5))
def test_a_mode_without_measured_dip_stays_alone(gone):
    measured = [f for i, f in enumerate(scaled(CROWDED, 0.95)) if i != gone]
    kept = [i for i in range(5) if i != gone]
    assert pair(dips(*CROWDED), dips(*measured)).pairs == tuple(
        (i, place) for place, i in enumerate(kept)
    )


@pytest.mark.parametrize("extra_mhz", [500.0, 1400.0, 1900.0, 3300.0])
def test_an_extra_measured_dip_is_left_over(extra_mhz):
    measured = sorted((*scaled(DIPOLE, 1.03), extra_mhz))
    wanted = tuple((i, measured.index(f)) for i, f in enumerate(scaled(DIPOLE, 1.03)))
    modelled = dips(*DIPOLE, depth=[0.18, 0.34])
    depth = [0.85 if f == extra_mhz else 0.25 for f in measured]
    assert pair(modelled, dips(*measured, depth=depth)).pairs == wanted


def test_missing_and_extra_at_once():
    modelled = dips(*CROWDED)
    measured = dips(*sorted((*scaled((800.0, 1180.0, 1390.0, 1600.0), 1.04), 2600.0)))
    assert pair(modelled, measured).pairs == ((0, 0), (2, 1), (3, 2), (4, 3))


def test_depth_decides_between_two_equally_near_dips():
    modelled = dips(1000.0, 2000.0, depth=[0.2, 0.9])
    measured = dips(980.0, 1020.0, 2000.0, depth=[0.9, 0.25, 0.9])
    assert pair(modelled, measured).pairs == ((0, 1), (1, 2))


def test_another_depth_costs_without_parting_a_pair():
    like, unlike = (pair(dips(900.0, depth=0.2), dips(900.0, depth=d)) for d in (0.2, 0.5))
    assert like.pairs == unlike.pairs == ((0, 0),)
    # Two spreads of |reflection|: half their square.
    assert unlike.cost - like.cost == pytest.approx(2.0)


def test_a_mode_without_modelled_dip_takes_a_left_over_one_only():
    modelled = [
        ModelledDip(900e6, 0.2),
        ModelledDip(1880e6, float("nan")),
        ModelledDip(2870e6, 0.3),
    ]
    assert pair(modelled, dips(880.0, 1845.0, 2800.0)).pairs == ((0, 0), (1, 1), (2, 2))
    assert pair(modelled, dips(880.0, 2800.0)).pairs == ((0, 0), (2, 1))
    assert pair(modelled, dips(880.0, 1400.0, 2800.0)).pairs == ((0, 0), (2, 2))


def test_dips_beyond_the_other_band_cost_nothing():
    modelled = dips(900.0, 2900.0)
    measured = dips(905.0)
    seen = pair(modelled, measured, measured_band_hz=(0.3e9, 2.0e9))
    unseen = pair(modelled, measured, measured_band_hz=(0.3e9, 3.0e9))
    assert seen.pairs == unseen.pairs == ((0, 0),)
    assert seen.cost < 0.1 < 5 < unseen.cost
    other = pair(measured, modelled, modelled_band_hz=(0.3e9, 2.0e9))
    assert other.pairs == ((0, 0),)
    assert other.cost < 0.1


def test_nothing_to_pair():
    assert pair([], dips(900.0)).pairs == ()
    assert pair(dips(900.0), []).pairs == ()
    empty = pair([], [])
    assert (empty.pairs, empty.scale, empty.cost) == ((), 1.0, 0.0)


def test_another_antenna_is_not_forced_to_fit():
    assert pair(dips(900.0), dips(1500.0)).pairs == ()


def test_misfit_ranks_models_as_they_stand():
    measured = dips(900.0, 2800.0)
    near, far = pair(dips(905.0, 2810.0), measured), pair(dips(945.0, 2940.0), measured)
    assert near.pairs == far.pairs
    assert near.misfit < 0.2 < 2 < far.misfit
    assert far.cost < far.misfit


def random_build(rng):
    """A model with three to six modes and a build that moves, loses and adds dips."""
    count = int(rng.integers(3, 7))
    model = np.cumprod(np.r_[600.0, rng.uniform(1.13, 1.6, count - 1)])
    depth = rng.uniform(0.1, 0.7, count)
    place = model * np.exp(rng.normal(0, 0.06) + rng.normal(0, 0.012, count))
    heard = np.clip(depth + rng.normal(0, 0.1, count), 0.01, 0.97)
    owner = list(range(count))
    if rng.random() < 0.3:
        owner.remove(int(np.argmax(depth)))
    extra = rng.random() < 0.3
    found = [(place[i], heard[i], i) for i in owner]
    if extra:
        found.append((rng.uniform(400, 900), 0.9, -1))
    found.sort()
    truth = tuple((i, j) for j, (_, _, i) in enumerate(found) if i >= 0)
    return (
        dips(*model, depth=depth),
        dips(*(f for f, _, _ in found), depth=[d for _, d, _ in found]),
        truth,
    )


def test_random_builds_are_paired_right():
    """Spreads of a careful build; two modes may overlap then, so not every one can be right."""
    rng = np.random.default_rng(868)
    right = 0
    for _ in range(300):
        modelled, measured, truth = random_build(rng)
        right += tuple(sorted(truth)) == pair(modelled, measured).pairs
    assert right >= 285
