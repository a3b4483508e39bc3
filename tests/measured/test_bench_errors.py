"""Echoes of unknown delay as correlated noise."""

from __future__ import annotations

import numpy as np
import pytest

from simkit.measured.bench_errors import ECHO_DELAYS_S, Echoes, ErrorSizes

F_HZ = np.linspace(0.45e9, 3e9, 120)
GAMMA = 0.9 * np.exp(-1j * np.linspace(0.0, 9.0, 120)) * np.linspace(1.0, 0.3, 120)


def draws(count, sizes, seed=3):
    """Sums of echoes with random amplitudes, written out from their definition, (F, count)."""
    rng = np.random.default_rng(seed)
    total = np.zeros((len(F_HZ), count), dtype=complex)
    for delay_s in ECHO_DELAYS_S:
        turn = np.exp(-4j * np.pi * F_HZ * delay_s)[:, None]
        for size, shape in ((sizes.directivity, 1.0), (sizes.source_match, GAMMA[:, None] ** 2)):
            amplitude = rng.standard_normal((2, count)) * size / np.sqrt(len(ECHO_DELAYS_S))
            total += (amplitude[0] + 1j * amplitude[1]) * turn * shape
    return total


def test_echoes_and_noise_become_independent_numbers_of_size_one():
    sizes, count, noise = ErrorSizes(), 4000, 0.004
    echoes = Echoes.of(F_HZ, GAMMA, sizes)
    rng = np.random.default_rng(4)
    white = rng.standard_normal((2, len(F_HZ), count)) * noise
    off = draws(count, sizes) + white[0] + 1j * white[1]
    parts = np.array([echoes.whitened(row, 1 / noise) for row in off.T]).T
    covariance = parts @ parts.conj().T / count / 2
    # Of 120 x 120 elements from 4000 draws: 4.5 standard deviations of 1 / sqrt(4000).
    assert np.abs(covariance - np.eye(len(F_HZ))).max() < 0.075


def test_likeliest_echoes_leave_the_noise():
    echoes = Echoes.of(F_HZ, GAMMA, ErrorSizes())
    off = draws(1, ErrorSizes())[:, 0]
    left = echoes.removed(off, 1 / 1e-4)
    assert np.abs(off).max() > 5e-3
    assert np.abs(left).max() < 3e-4


def test_without_echoes_a_residual_is_only_weighed():
    echoes = Echoes.of(F_HZ, GAMMA, ErrorSizes(directivity=0.0, source_match=0.0))
    assert echoes.whitened(GAMMA, 7.0) == pytest.approx(7.0 * GAMMA)
    assert echoes.removed(GAMMA, 7.0) == pytest.approx(GAMMA)
