"""Natural modes: which poles are kept, how their half waves are counted, their currents."""

from dataclasses import replace
from types import SimpleNamespace

import numpy as np
import pytest

from simkit.geometry import build_wires, plan_mesh
from simkit.geometry.wires import Chain, PathPiece, StripSpan
from simkit.response.modes import NaturalMode, find_modes, half_waves, turned_to_real
from simkit.response.rational import RationalModel, Sweep, fit_weights
from simkit.runner.currents import sweep_currents
from simkit.study.model import Strip

SEGMENTS = 47


WHOLE = (StripSpan(0, 0.0, 1.0),)


def chain(closed=False, spans=WHOLE):
    order = np.arange(SEGMENTS)
    ones = np.ones(SEGMENTS, dtype=int)
    return Chain(order, ones, (order + 0.5) / SEGMENTS, 1.0, closed, spans)


def on_chain(one):
    """What of a grid of one chain is looked at when half waves are counted."""
    path = (PathPiece(0, 0.0, one.length_m),)
    return SimpleNamespace(
        chains=(one,),
        path=path,
        path_closed=one.closed,
        path_on_plane=(False, False),
        feed_width_m=1e-3,
    )


def wave(half_wave_count, closed=False):
    place = chain().arc_m
    shape = np.cos if closed else np.sin
    return shape(half_wave_count * np.pi * place) * np.exp(0.7j)


@pytest.mark.parametrize("number", [1, 2, 3, 4, 7])
def test_half_waves_from_tip_to_tip(number):
    assert half_waves(wave(number), on_chain(chain())) == number


@pytest.mark.parametrize("number", [0, 2, 4, 6])
def test_half_waves_round_a_loop(number):
    assert half_waves(wave(number, closed=True), on_chain(chain(closed=True))) == number


def test_half_waves_do_not_depend_on_how_wires_are_drawn():
    """Every third segment drawn backwards, and all of them numbered otherwise."""
    rng = np.random.default_rng(11)
    order = rng.permutation(SEGMENTS)
    signs = np.where(np.arange(SEGMENTS) % 3 == 0, -1, 1)
    current = np.zeros(SEGMENTS, dtype=complex)
    current[order] = wave(3) * signs
    turned = replace(chain(), segments=order, signs=signs)
    assert half_waves(current, on_chain(turned)) == 3


def test_quiet_ripple_is_not_counted():
    """Points below 5 % of the largest do not count, those above do."""
    ripple = np.where(np.arange(SEGMENTS) < 6, np.where(np.arange(SEGMENTS) % 2, 1, -1), 0)
    body = np.where(ripple == 0, wave(1), 0)
    assert half_waves(body + 0.04 * ripple * np.exp(0.7j), on_chain(chain())) == 1
    assert half_waves(body + 0.10 * ripple * np.exp(0.7j), on_chain(chain())) > 3


def test_phase_that_slides_along_the_antenna_is_turned_out():
    """Radiating modes are not quite in one phase."""
    slide = np.exp(0.5j * chain().arc_m)
    assert half_waves(wave(3) * slide, on_chain(chain())) == 3


def test_turned_to_real_takes_all_it_can():
    rng = np.random.default_rng(4)
    current = rng.standard_normal(23) * np.exp(1.1j) + 0.1j * rng.standard_normal(23)
    best = np.sum(turned_to_real(current).real ** 2)
    for angle in np.linspace(0, np.pi, 37):
        assert np.sum((current * np.exp(1j * angle)).real ** 2) <= best * (1 + 1e-12)


def test_mode_numbers_and_admittance():
    mode = NaturalMode(0.9e9 + 0.1e9j, 1, np.ones(3, dtype=complex), 2e6j)
    assert mode.frequency_hz == 0.9e9
    assert mode.q == pytest.approx(4.5)
    at = mode.feed_admittance(np.array([0.9e9, 1.0e9]))
    assert at == pytest.approx([2e6j / -0.1e9j, 2e6j / (0.1e9 - 0.1e9j)])


def made_sweep(poles, residues, spare_shift=0.0, steady=1, moved=1):
    """Sweep of 15 samples of given poles (GHz), with spare models whose first pole is elsewhere."""
    frequency = np.linspace(0.3e9, 3e9, 15)

    def model(at):
        terms = 0.1e9 / (frequency[:, None] - np.array(at)[None] * 1e9)
        values = terms @ residues
        return RationalModel(frequency, fit_weights(frequency / 3e9, values, 1e-12)[0], values)

    others = model([poles[0] + spare_shift, *poles[1:]])
    return Sweep(model(poles), True, 1e-4, (model(poles),) * steady + (others,) * moved)


@pytest.fixture(scope="module")
def grid(make):
    antenna = make.straight(150, 6, 75)
    return build_wires(antenna, plan_mesh([antenna]))


def residues_on(grid, sizes):
    place = (np.arange(grid.segments) + 0.5) / grid.segments
    shapes = [np.sin((k + 1) * np.pi * place) for k in range(len(sizes))]
    return np.array([np.tile(s, 2) * size for s, size in zip(shapes, sizes, strict=True)]) + 0j


POLES = [0.9 + 0.1j, 1.8 + 0.14j, 2.7 + 0.17j]


def numbers(modes):
    return [mode.half_waves for mode in modes]


def test_poles_become_modes_in_order(grid):
    modes = find_modes(made_sweep(POLES[::-1], residues_on(grid, [1, 1, 1])[::-1]), grid, 3e8, 3e9)
    assert numbers(modes) == [1, 2, 3]
    assert [mode.pole_hz for mode in modes] == pytest.approx([p * 1e9 for p in POLES], rel=1e-6)
    for mode in modes:
        assert abs(mode.current).max() == pytest.approx(1)
        assert mode.current[np.argmax(abs(mode.current))] == pytest.approx(1)


def test_feed_residue_is_that_of_the_feed_current(grid):
    sizes = [1.0, 0.5, 0.25]
    modes = find_modes(made_sweep(POLES, residues_on(grid, sizes)), grid, 3e8, 3e9)
    ((feed, _),) = grid.source
    expected = 0.1e9 * residues_on(grid, sizes)[:, feed]
    assert [mode.feed_residue_hz for mode in modes] == pytest.approx(expected, rel=1e-4, abs=1e3)


def test_weak_poles_are_dropped(grid):
    modes = find_modes(made_sweep(POLES, residues_on(grid, [1, 1e-4, 1])), grid, 3e8, 3e9)
    assert numbers(modes) == [1, 3]


def test_poles_that_move_when_a_sample_is_left_out_are_dropped(grid):
    residues = residues_on(grid, [1, 1, 1])
    assert numbers(find_modes(made_sweep(POLES, residues, 0.004), grid, 3e8, 3e9)) == [1, 2, 3]
    assert numbers(find_modes(made_sweep(POLES, residues, 0.006), grid, 3e8, 3e9)) == [2, 3]


@pytest.mark.parametrize(
    ("first", "moved", "kept"),
    [
        (0.9 + 0.1j, 1, True),  # the sample that shows a narrow mode may be the one left out
        (0.9 + 0.1j, 2, False),
        (0.9 + 0.25j, 0, True),  # Q of 1.8
        (0.9 + 0.25j, 1, False),  # as wide as the poles of a background
    ],
)
def test_two_of_three_fits_are_enough_for_narrow_poles(grid, first, moved, kept):
    poles = [first, *POLES[1:]]
    sweep = made_sweep(poles, residues_on(grid, [1, 1, 1]), 0.5, steady=3 - moved, moved=moved)
    assert len(find_modes(sweep, grid, 3e8, 3e9)) == 2 + kept


@pytest.mark.long
@pytest.mark.parametrize("length_mm", [600, 603, 606, 608, 611, 622, 625, 627])
def test_no_mode_of_a_long_strip_is_lost_or_added(make, length_mm):
    """Twelve modes within 30 samples: some fits lack the sample that shows one of them."""
    antenna = make.straight(length_mm, 6, length_mm / 2, band=make.band(0.1e9, 2.9e9, 281))
    grid = build_wires(antenna, plan_mesh([antenna]))
    modes = find_modes(sweep_currents(antenna, grid), grid, 0.1e9, 2.9e9)
    # A thin strip's modes are nearly harmonic; c/2L is at most 250 MHz here.
    assert numbers(modes)[:11] == list(range(1, 12))


@pytest.mark.parametrize(
    ("pole", "kept"),
    [
        (0.25 + 0.08j, True),  # below the band, its upper half width in it
        (0.25 + 0.03j, False),  # narrower: nothing of it is in the band
        (3.01 + 0.1j, False),
        (0.9 - 0.1j, False),  # would grow with time
        (0.9 + 0.5j, False),  # wider than its own frequency, Q under 1.5
    ],
)
def test_poles_outside_the_band_or_without_ringing(grid, pole, kept):
    modes = find_modes(made_sweep([pole, *POLES[1:]], residues_on(grid, [1, 1, 1])), grid, 3e8, 3e9)
    assert len(modes) == 2 + kept


def test_a_response_without_modes_in_band(make):
    antenna = make.straight(150, 6, 75, band=make.band(0.1e9, 0.4e9, 31))
    grid = build_wires(antenna, plan_mesh([antenna]))
    assert find_modes(sweep_currents(antenna, grid), grid, 0.1e9, 0.4e9) == ()


@pytest.mark.parametrize("at", [75.0, 40.0])
def test_solved_modes_have_their_shapes(make, at):
    """Close to sines, whichever source excites them; 7 % is what radiation bends them by."""
    antenna = make.straight(150, 6, at)
    grid = build_wires(antenna, plan_mesh([antenna]))
    modes = find_modes(sweep_currents(antenna, grid), grid, 0.3e9, 3e9)
    assert numbers(modes) == [1, 2, 3]
    (path,) = grid.chains
    for mode in modes:
        sine = np.sin(mode.half_waves * np.pi * path.arc_m / path.length_m)
        along = turned_to_real(mode.current[path.segments])
        fit = along @ sine / (sine @ sine)
        assert np.linalg.norm(along - fit * sine) < 0.15 * np.linalg.norm(along)


@pytest.fixture(scope="module")
def rails(make):
    antenna = replace(make.straight(150, 6, 75), model="grid")
    return build_wires(antenna, plan_mesh([antenna]))


def shapes_on_rails(grid, number, shares):
    """A current of so many half waves with a part of it on each rail."""
    (path,) = grid.chains
    current = np.zeros(grid.segments, dtype=complex)
    arcs, place = path.places()
    order = np.argsort(place, kind="stable")
    share = np.tile(shares, len(arcs))
    current[path.segments[order]] = (
        share * np.sin(number * np.pi * arcs / path.length_m)[place[order]]
    )
    return np.tile(current, 2)


def test_poles_of_currents_between_rails_are_no_modes(rails):
    """Whatever flows up one rail and down the others is an artefact of the bundle."""
    alike, opposed = np.array([0.4, 0.2, 0.4]), np.array([0.5, -1.0, 0.52])
    rows = [shapes_on_rails(rails, k, alike) for k in (1, 2, 3)]
    assert numbers(find_modes(made_sweep(POLES, np.array(rows)), rails, 3e8, 3e9)) == [1, 2, 3]
    rows[1] = shapes_on_rails(rails, 2, opposed)
    assert numbers(find_modes(made_sweep(POLES, np.array(rows)), rails, 3e8, 3e9)) == [1, 3]


def test_solved_modes_of_rails_are_those_of_one_wire(make, rails):
    """To 0.1 %: both models are good to 0.05 % on this strip."""
    antenna = make.straight(150, 6, 75)
    single = build_wires(antenna, plan_mesh([antenna]))
    found = [find_modes(sweep_currents(antenna, g), g, 0.3e9, 3e9) for g in (single, rails)]
    assert numbers(found[0]) == numbers(found[1]) == [1, 2, 3]
    for one, other in zip(*found, strict=True):
        assert other.frequency_hz == pytest.approx(one.frequency_hz, rel=1e-3)
        assert other.q == pytest.approx(one.q, rel=1e-2)


def test_solved_branch_is_part_of_the_way(make):
    """A T whose long arm is the stem: half waves are counted along bar and stem."""
    antenna = make.straight(60, 4, 15)
    stem = Strip("stem", ((0.04, 0.0), (0.04, 0.08)), 0.004)
    antenna = replace(antenna, strips=(*antenna.strips, stem))
    for kind in ("line", "grid"):
        grid = build_wires(*with_plan(replace(antenna, model=kind)))
        assert sum(abs(p.end_m - p.start_m) for p in grid.path) == pytest.approx(0.12)
        modes = find_modes(sweep_currents(antenna, grid), grid, 0.3e9, 3e9)
        assert numbers(modes)[:2] == [1, 2], kind


def with_plan(antenna):
    return antenna, plan_mesh([antenna])


def test_solved_loop_counts_its_periods(make):
    antenna = make.loop(90, 60, 3, 20)
    grid = build_wires(antenna, plan_mesh([antenna]))
    modes = find_modes(sweep_currents(antenna, grid), grid, 0.3e9, 3e9)
    assert numbers(modes)[:2] == [2, 2]
    # One wavelength round 300 mm.
    assert modes[0].frequency_hz == pytest.approx(1e9, rel=0.15)
