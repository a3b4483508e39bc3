"""The rational model: fit, poles, adaptive sampling, on responses whose poles are known."""

import numpy as np
import pytest

from simkit.engine.pynec import solve_wires
from simkit.geometry.wires import Wire
from simkit.response.features import reflection
from simkit.response.rational import (
    FIRST_SAMPLES,
    RationalModel,
    adaptive_sweep,
    barycentric_values,
    fit_weights,
)

START, STOP = 0.3e9, 3.0e9
POLES = np.array([0.9 + 0.1j, 1.7 + 0.13j, 2.75 + 0.18j]) * 1e9


def shapes(components=5, seed=3):
    rng = np.random.default_rng(seed)
    return rng.standard_normal((3, components)) + 1j * rng.standard_normal((3, components))


def exact(frequency, components=5):
    """Three poles with unlike vector residues on a constant."""
    terms = 0.2e9 / (np.atleast_1d(frequency)[:, None] - POLES[None])
    return terms @ shapes(components) + 0.3


def modelled(sweep, count):
    poles = sweep.model.poles_hz()
    inside = poles[(poles.real > START) & (poles.real < STOP) & (poles.imag > 0)]
    assert len(inside) == count
    return inside[np.argsort(inside.real)]


def test_fit_of_exact_rational_data_finds_its_poles():
    frequency = np.linspace(START, STOP, 9)
    values = exact(frequency)
    weight, misfit = fit_weights(frequency / STOP, values, 1e-12)
    assert misfit < 1e-10
    model = RationalModel(frequency, weight, values)
    poles = model.poles_hz()
    nearest = np.array([poles[np.argmin(abs(poles - pole))] for pole in POLES])
    assert nearest == pytest.approx(POLES, rel=1e-9)
    assert model.residues(nearest) == pytest.approx(0.2e9 * shapes(), rel=1e-7)


def test_fit_evaluates_between_samples():
    frequency = np.linspace(START, STOP, 9)
    values = exact(frequency)
    model = RationalModel(frequency, fit_weights(frequency / STOP, values, 1e-12)[0], values)
    between = np.linspace(START, STOP, 143)
    assert model(between) == pytest.approx(exact(between), rel=1e-8)


def test_fit_stops_at_its_tolerance():
    """Four support points carry three poles; a looser fit takes fewer."""
    frequency = np.linspace(START, STOP, 15)
    values = exact(frequency)
    tight = np.count_nonzero(fit_weights(frequency / STOP, values, 1e-9)[0])
    loose = np.count_nonzero(fit_weights(frequency / STOP, values, 2.0)[0])
    assert tight == 4
    assert loose < tight


def test_fit_needs_three_samples():
    frequency = np.array([0.5])
    with pytest.raises(ValueError, match="needs at least 3 samples, got 1"):
        fit_weights(frequency, np.ones((1, 2), dtype=complex), 1e-3)


def test_evaluation_at_samples_returns_what_was_solved():
    frequency = np.linspace(START, STOP, 9)
    values = exact(frequency)
    weight, _ = fit_weights(frequency / STOP, values, 1e-9)
    model = RationalModel(frequency, weight, values)
    assert np.any(weight == 0)
    used = weight != 0
    assert np.array_equal(model(frequency[used]), values[used])
    # Samples of weight 0 are predicted from the others.
    assert model(frequency[~used]) == pytest.approx(values[~used], rel=1e-7)


def test_weights_of_the_samples_sum_to_one_everywhere():
    samples = np.array([1.0, 1.5, 2.5, 4.0])
    weight = np.array([1.0, -2.0 + 1j, 0.0, 0.7])
    rows = barycentric_values(np.array([0.5, 1.5, 2.5, 3.3]), samples, weight, np.eye(4) + 0j)
    assert rows.sum(axis=1) == pytest.approx(np.ones(4))
    assert rows[1] == pytest.approx([0, 1, 0, 0])
    assert rows[:, 2] == pytest.approx(np.zeros(4))


def test_values_are_those_of_the_barycentric_formula():
    samples = np.array([1.0, 1.5, 2.5, 4.0])
    weight = np.array([1.0, -2.0 + 1j, 0.0, 0.7])
    values = np.array([[1.0 + 2j, 3.0], [0.5, -1j], [7.0, 7.0], [2.0, 1.0 - 1j]])
    found = barycentric_values(np.array([0.5, 1.5, 2.5]), samples, weight, values)
    used = [0, 1, 3]  # the sample without a weight takes no part, not even where it is asked for
    for row, at in ((0, 0.5), (2, 2.5)):
        terms = weight[used] / (at - samples[used])
        assert found[row] == pytest.approx(terms @ values[used] / terms.sum(), rel=1e-13)
    assert np.array_equal(found[1], values[1])
    one = barycentric_values(np.array([0.5, 1.5, 2.5]), samples, weight, values[:, 0])
    assert np.array_equal(one, found[:, 0])


def test_a_sweep_does_not_sample_beside_the_last_sample():
    """Where two successive models differ most is beside the sample that only the later one knows;
    a search that goes there solves a frequency 0.33 % of the band beside another for nothing.

    The response is the current along a lossy line with an open end, which has poles for ever.
    """
    taken = []
    place = np.linspace(0.05, 0.95, 6)

    def solve(frequency):
        taken.append(frequency)
        way = 0.1 + 1j * np.pi * frequency / 1e9
        return np.cosh(way * (1 - place)) / np.sinh(way)

    assert adaptive_sweep(solve, 0.1e9, 2.9e9).converged
    assert np.diff(np.sort(taken)).min() > 0.005 * 2.8e9


def test_sweep_of_a_rational_response_finds_its_poles_and_settles_early():
    calls = []

    def solve(frequency):
        calls.append(frequency)
        return exact(frequency)[0]

    sweep = adaptive_sweep(solve, START, STOP)
    assert sweep.converged
    assert sweep.error < 1e-3
    assert len(calls) == len(sweep.model.frequency_hz) <= FIRST_SAMPLES + 4
    assert modelled(sweep, 3) == pytest.approx(POLES, rel=1e-5)
    assert np.all(np.diff(sweep.model.frequency_hz) > 0)
    assert sweep.model.frequency_hz[[0, -1]] == pytest.approx([START, STOP], rel=0)


def test_spare_models_agree_on_the_poles():
    sweep = adaptive_sweep(lambda f: exact(f)[0], START, STOP)
    assert len(sweep.spare_models) == 3
    for spare in sweep.spare_models:
        assert len(spare.frequency_hz) == len(sweep.model.frequency_hz) - 1
        poles = spare.poles_hz()
        for pole in POLES:
            assert np.min(abs(poles - pole)) < 1e-3 * pole.imag


def noisy_solver(components, seed):
    """The exact response with 1e-5 of noise, what the engine has."""
    rng = np.random.default_rng(seed)

    def solve(frequency):
        clean = exact(frequency, components)[0]
        noise = rng.standard_normal(components) + 1j * rng.standard_normal(components)
        return clean + 1e-5 * np.linalg.norm(clean) / np.sqrt(2 * components) * noise

    return solve


@pytest.mark.parametrize("seed", range(5))
def test_noise_like_the_engines_does_not_raise_the_count(seed):
    """No more samples than without, but for one; no pole more in band."""
    quiet = adaptive_sweep(lambda f: exact(f, 40)[0], START, STOP)
    noisy = adaptive_sweep(noisy_solver(40, seed), START, STOP)
    assert noisy.converged
    assert len(noisy.model.frequency_hz) <= len(quiet.model.frequency_hz) + 1
    assert modelled(noisy, 3) == pytest.approx(POLES, rel=1e-3)


def test_tolerance_has_a_floor_above_the_engines_noise():
    """Asked for 1e-9 of a response with 1e-5 of noise, the sweep settles all the same."""
    sweep = adaptive_sweep(noisy_solver(40, seed=2), START, STOP, tolerance=1e-9)
    assert sweep.converged
    assert len(sweep.model.frequency_hz) <= FIRST_SAMPLES + 5


def test_a_response_that_is_not_rational_stops_at_the_cap_and_says_so():
    def solve(frequency):
        rng = np.random.default_rng(int(frequency))
        return rng.standard_normal(8) + 1j * rng.standard_normal(8)

    sweep = adaptive_sweep(solve, START, STOP, most_samples=13)
    assert not sweep.converged
    assert len(sweep.model.frequency_hz) == 13
    assert sweep.error > 1e-2


def test_the_same_sweep_twice_is_bit_identical():
    one, two = (adaptive_sweep(lambda f: exact(f, 40)[0], START, STOP).model for _ in range(2))
    assert np.array_equal(one.weight, two.weight)
    assert np.array_equal(one.values, two.values)


@pytest.fixture(scope="module")
def wire_sweep():
    """A strip of 150 x 6 mm as a wire of 51 segments, swept over 0.1 to 2.9 GHz."""
    wires = (Wire((0.0, 0.0, 0.0), (0.1491, 0.0, 0.0), 51),)

    def solve(frequency):
        return solve_wires(wires, 0.0015, frequency, [((25, 1.0),), ((6, 1.0),)])

    return adaptive_sweep(lambda f: solve(f).ravel(), 0.1e9, 2.9e9), solve


def test_2801_frequencies_from_at_most_16_solves(wire_sweep):
    sweep, solve = wire_sweep
    assert sweep.converged
    assert len(sweep.model.frequency_hz) <= 16
    frequency = np.linspace(0.1e9, 2.9e9, 2801)
    swept = sweep.model(frequency)[:, 25]
    # Every 71st, so that no sample of the sweep is among them.
    chosen = np.arange(30, 2801, 71)
    assert np.min(abs(frequency[chosen, None] - sweep.model.frequency_hz)) > 1e3
    direct = np.array([solve(f)[0, 25] for f in frequency[chosen]])
    error = reflection(1 / swept[chosen], 50.0) - reflection(1 / direct, 50.0)
    assert np.max(abs(error)) < 1e-3


def test_swept_currents_of_both_sources_follow_direct_solutions(wire_sweep):
    """Three times the sweep's tolerance: it is judged on few combinations of the currents."""
    sweep, solve = wire_sweep
    frequency = np.linspace(0.15e9, 2.85e9, 23)
    direct = np.array([solve(f).ravel() for f in frequency])
    error = np.linalg.norm(sweep.model(frequency) - direct, axis=1)
    assert error.max() < 3e-3 * np.median(np.linalg.norm(direct, axis=1))
