"""Currents of strips from currents of segments: sums over rails, ways along chains and path."""

from dataclasses import replace
from types import SimpleNamespace

import numpy as np
import pytest

from simkit.geometry.wires import Chain, PathPiece, StripSpan
from simkit.response.strip_current import (
    ChainCurve,
    chain_current,
    coherence,
    current_along_path,
    current_along_strips,
    totals_matrix,
)

SEGMENTS = 47
WHOLE = (StripSpan(0, 0.0, 1.0),)


def chain(closed=False, spans=WHOLE, **more):
    order = np.arange(SEGMENTS)
    ones = np.ones(SEGMENTS, dtype=int)
    return Chain(order, ones, (order + 0.5) / SEGMENTS, 1.0, closed, spans, **more)


def bundle(rails=3, first=0):
    """A chain of several rails: segments numbered rail by rail, the middle one drawn backwards."""
    segments = first + np.arange(rails * SEGMENTS)
    signs = np.repeat([1 if rail != 1 else -1 for rail in range(rails)], SEGMENTS)
    arcs = np.tile((np.arange(SEGMENTS) + 0.5) / SEGMENTS, rails)
    order = np.argsort(arcs, kind="stable")
    return Chain(segments[order], signs[order], arcs[order], 1.0, False, WHOLE)


def grid_of(*chains, path=None):
    segments = 1 + max(int(one.segments.max()) for one in chains)
    path = path or (PathPiece(0, 0.0, 1.0),)
    return SimpleNamespace(
        chains=chains, segments=segments, path=path, path_closed=chains[0].closed
    )


def wave(half_wave_count, closed=False):
    place = chain().arc_m
    shape = np.cos if closed else np.sin
    return shape(half_wave_count * np.pi * place) * np.exp(0.7j)


def test_currents_along_strips_run_from_start_to_end_of_each():
    """West is strip 1, drawn from the feed to its tip, so against the chain; the gap is 0.02."""
    spans = (StripSpan(1, 0.40, 0.0), StripSpan(0, 0.42, 1.0))
    along = current_along_strips(wave(2), [chain(spans=spans)], 2, np.array([0.0, 0.5, 1.0]))
    expected = np.sin(2 * np.pi * np.array([[0.42, 0.71, 1.0], [0.4, 0.2, 0.0]]))
    expected[1] *= -1
    # Straight lines between 47 points on a sine leave 0.3 %.
    assert along * np.exp(-0.7j) == pytest.approx(expected, abs=4e-3)


def test_current_vanishes_at_open_ends_and_closes_on_loops():
    ends = np.array([0.0, 1.0])
    assert current_along_strips(wave(3), [chain()], 1, ends) == pytest.approx(np.zeros((1, 2)))
    closed = chain(closed=True, spans=(StripSpan(0, -0.3, 0.7),))
    both = current_along_strips(wave(2, closed=True), [closed], 1, ends)
    assert both[0, 0] == pytest.approx(both[0, 1], rel=1e-12)
    assert both[0, 0] == pytest.approx(np.cos(2 * np.pi * 0.7) * np.exp(0.7j), abs=5e-3)


def test_a_strip_on_no_chain_has_no_current():
    along = current_along_strips(wave(1), [chain()], 2, np.array([0.5]))
    assert np.isfinite(along[0]).all()
    assert np.isnan(along[1]).all()


def test_current_does_not_vanish_where_the_metal_goes_on():
    joined = ChainCurve(wave(1, closed=True), chain(open_start=False))
    assert joined(np.array([0.0]))[0] == pytest.approx(wave(1, closed=True)[0])
    # Zero but for the rounding of the cubics.
    assert joined(np.array([1.0]))[0] == pytest.approx(0, abs=1e-15)


def test_a_bundle_carries_the_sum_of_its_rails():
    parts = np.array([0.5, 0.2, 0.3])
    current = np.concatenate([part * wave(2) for part in parts])
    current[SEGMENTS : 2 * SEGMENTS] *= -1  # the middle rail is drawn backwards
    arcs, total = chain_current(current, bundle())
    assert arcs == pytest.approx(chain().arc_m)
    assert total == pytest.approx(wave(2))


def test_totals_matrix_gives_the_same_sums_for_all_chains_in_a_row():
    rng = np.random.default_rng(2)
    chains = bundle(), bundle(2, first=3 * SEGMENTS)
    grid = grid_of(*chains)
    current = rng.standard_normal(grid.segments) + 1j * rng.standard_normal(grid.segments)
    wanted = np.concatenate([chain_current(current, one)[1] for one in chains])
    assert totals_matrix(grid) @ current == pytest.approx(wanted)
    assert totals_matrix(grid).shape == (2 * SEGMENTS, 5 * SEGMENTS)


def test_metal_across_has_no_part_in_the_totals():
    grid = grid_of(bundle())
    grid.segments += 7
    assert np.all(totals_matrix(grid)[:, -7:] == 0)


def test_coherence_of_rails_that_agree_and_of_rails_that_oppose():
    grid = grid_of(bundle())
    shares = np.array([0.3, -0.4, 0.3])  # signs: the middle rail is drawn backwards
    alike = np.concatenate([share * wave(2) for share in shares])
    assert coherence(alike, grid) == pytest.approx(1.0)
    opposed = np.concatenate([share * wave(2) for share in (0.5, 1.0, 0.5)])
    assert coherence(opposed, grid) == pytest.approx(0.0, abs=1e-12)
    single = grid_of(chain())
    assert coherence(wave(1), single) == pytest.approx(1.0)
    assert coherence(0 * wave(1), single) == 0.0


def test_path_runs_through_pieces_of_chains_either_way():
    """From the far end of a branch back to its joint, then on along the host from its middle."""
    host, branch = chain(), replace(chain(open_end=False), segments=np.arange(SEGMENTS) + SEGMENTS)
    current = np.concatenate([wave(1), 2 * wave(1, closed=True)])
    path = (PathPiece(1, 0.0, 1.0), PathPiece(0, 0.5, 0.0))
    distance, along = current_along_path(current, grid_of(host, branch, path=path), 301)
    assert distance[[0, -1]] == pytest.approx([0.0, 1.5])
    on_branch, on_host = distance < 0.99, distance > 1.01
    # The first half segment of an open chain falls to zero; 47 points leave 0.3 % elsewhere.
    inner = on_branch & (distance > 0.02)
    assert along[inner] * np.exp(-0.7j) == pytest.approx(
        2 * np.cos(np.pi * distance[inner]), abs=8e-3
    )
    assert along[on_host] * np.exp(-0.7j) == pytest.approx(
        -np.sin(np.pi * (1.5 - distance[on_host])), abs=5e-3
    )


def test_curves_do_not_overshoot_the_step_at_a_junction():
    step = np.where(chain().arc_m < 0.5, 1.0, 0.4) + 0j
    curve = ChainCurve(step, chain(open_start=False, open_end=False))
    values = curve(np.linspace(0, 1, 2001)).real
    assert values.max() <= 1 + 1e-12
    assert values.min() >= 0.4 - 1e-12
