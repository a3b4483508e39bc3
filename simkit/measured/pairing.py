"""Which measured dip belongs to which modelled mode.

A build differs from its model in two ways: everything is off by one factor (length, carrier), and
each mode by a little of its own (width, feed). The pairing therefore frees one common factor and
asks of the rest that it keeps the order of the modes, their ratios, and roughly the depths of the
dips. Taking the nearest frequency instead goes wrong as soon as the factor reaches half the
distance between two modes.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from simkit.measured.measurement import FloatArray

OWN_SPREAD = 0.02
"""How far a mode moves for itself (standard deviation of the logarithm of frequency): strip width,
carrier and feed pull modes by several per cent, but differently only by a part of that."""

COMMON_SPREAD = 0.08
"""How far all modes move together: a carrier or a wrong length makes ten per cent and more."""

LARGEST_SCALE = 1.35
"""Common factors beyond this, up or down, mean another antenna than the one modelled."""

DEPTH_SPREAD = 0.15
"""How far |reflection| in a dip is off: a match is far more sensitive than a frequency, and a deep
dip's decibels more than its |reflection|, so this is what is compared."""

MISSED_COST = 1.5
"""Least cost of a modelled dip that the sweep does not show, and of a measured one without mode."""

MISSED_DEPTH_COST = 8.0
"""Cost added for a perfect match; a shallow dip may well be missed, a deep one hardly. Together: a
10 dB dip is given up rather than taken 4.6 spreads from where the others say it is."""

UNEXCITED_COST = 0.5
"""Cost of giving a measured dip to a mode for which the model, with its ideal feed, shows none: as
such dips are shallow, they are taken within 1.4 spreads of where that mode would show."""


@dataclass(frozen=True)
class ModelledDip:
    """What the model says of one mode.

    Attributes
    ----------
    frequency_hz : float
        Its dip; for a mode without one the place where one would be expected.
    depth : float
        |reflection| in the dip; NaN for a mode without one.
    """

    frequency_hz: float
    depth: float


AMBIGUOUS = 2.0
"""A pair is ambiguous if doing without it costs less than this more: odds of about 7 to 1."""

IMPOSSIBLE = 1e6


@dataclass(frozen=True)
class Pairing:
    """The best assignment.

    Attributes
    ----------
    pairs : tuple of (int, int)
        Indices of modelled and measured dip, ascending in both.
    scale : float
        Common factor of the measured frequencies over the modelled ones.
    cost : float
        Half a chi-square each for frequencies, depths and what is left over; lower is better.
    misfit : float
        The same with the common factor held at 1: how well the model stands as it is.
    others : tuple of (int, int)
        Measured dips that are one which the feed line makes and no mode owns: index of that one
        and of the measured dip.
    """

    pairs: tuple[tuple[int, int], ...]
    scale: float
    cost: float
    misfit: float
    others: tuple[tuple[int, int], ...] = ()


def pair(
    modelled: Sequence[ModelledDip],
    measured: Sequence[ModelledDip],
    modelled_band_hz: tuple[float, float] = (0.0, np.inf),
    measured_band_hz: tuple[float, float] = (0.0, np.inf),
    *,
    pins: Sequence[tuple[int, int]] = (),
    forbidden: Sequence[tuple[int, int]] = (),
) -> Pairing:
    """Assign measured dips to modelled ones, both in order of frequency.

    Parameters
    ----------
    modelled, measured : sequence of ModelledDip
        Ascending in frequency.
    modelled_band_hz, measured_band_hz : (float, float), optional
        What either side covers. Dips beyond the other side's band cost nothing unpaired.
    pins : sequence of (int, int), optional
        Pairs that are certain, in the same order on both sides.
    forbidden : sequence of (int, int), optional
        Pairs not to make.

    Returns
    -------
    Pairing
        Of all common factors suggested by single pairs, and improved from there, the one with the
        least cost; for each factor the best monotone assignment by dynamic programming.
    """
    model = _Side.of(modelled, modelled_band_hz)
    bench = _Side.of(measured, measured_band_hz)
    rules = _Rules(tuple(pins), tuple(forbidden))
    best = _assign(model, bench, 0.0, rules)
    for log_scale in _candidates(model, bench):
        for _ in range(3):
            found = _assign(model, bench, log_scale, rules)
            if found.cost < best.cost:
                best = found
            improved = float(np.log(found.scale))
            if abs(improved - log_scale) < 1e-6:
                break
            log_scale = improved
    return best


def ambiguous_pairs(
    best: Pairing,
    modelled: Sequence[ModelledDip],
    measured: Sequence[ModelledDip],
    modelled_band_hz: tuple[float, float],
    measured_band_hz: tuple[float, float],
    pins: Sequence[tuple[int, int]] = (),
) -> dict[tuple[int, int], Pairing]:
    """Return for each doubtful pair the best pairing that does without it.

    Parameters are those of `pair` and what it returned; pinned pairs are never doubtful.
    """
    doubtful = {}
    for link in best.pairs:
        if link in pins:
            continue
        other = pair(
            modelled, measured, modelled_band_hz, measured_band_hz, pins=pins, forbidden=[link]
        )
        if other.cost - best.cost < AMBIGUOUS:
            doubtful[link] = other
    return doubtful


@dataclass(frozen=True)
class _Rules:
    """Pairs that must and that must not be."""

    pins: tuple[tuple[int, int], ...] = ()
    forbidden: tuple[tuple[int, int], ...] = ()

    def impose(self, pair_cost: FloatArray, skip_model: FloatArray, skip_bench: FloatArray) -> None:
        """Write them into the costs."""
        for i, j in self.forbidden:
            pair_cost[i, j] = IMPOSSIBLE
        for i, j in self.pins:
            kept = pair_cost[i, j]
            pair_cost[i], pair_cost[:, j] = IMPOSSIBLE, IMPOSSIBLE
            pair_cost[i, j] = min(kept, 1.0)
            skip_model[i] = skip_bench[j] = IMPOSSIBLE


@dataclass(frozen=True)
class _Side:
    log_frequency: FloatArray
    depth: FloatArray
    log_band: tuple[float, float]

    @classmethod
    def of(cls, dips: Sequence[ModelledDip], band_hz: tuple[float, float]) -> _Side:
        with np.errstate(divide="ignore"):
            low, high = np.log(band_hz)
        return cls(
            np.log([dip.frequency_hz for dip in dips]),
            np.array([dip.depth for dip in dips], dtype=float),
            (float(low), float(high)),
        )

    def missed(self, shift: float, other_band: tuple[float, float]) -> FloatArray:
        """Cost of leaving each dip unpaired when its place moves by `shift`."""
        place = self.log_frequency + shift
        cost = MISSED_COST + MISSED_DEPTH_COST * np.clip(1 - self.depth, 0.0, 1.0) ** 2
        beyond = (place < other_band[0]) | (place > other_band[1])
        return np.where(beyond | np.isnan(self.depth), 0.0, cost)


def _candidates(model: _Side, bench: _Side) -> FloatArray:
    """Logarithms of common factors worth trying: those that make one pair meet."""
    ratios = (bench.log_frequency[None, :] - model.log_frequency[:, None]).ravel()
    ratios = ratios[np.abs(ratios) <= np.log(LARGEST_SCALE)]
    return np.unique(np.round(np.append(ratios, 0.0), 4))


def _assign(model: _Side, bench: _Side, log_scale: float, rules: _Rules) -> Pairing:
    """Best monotone assignment for one common factor."""
    offset = bench.log_frequency[None, :] - model.log_frequency[:, None]
    pair_cost = _pair_cost(model, bench, offset - log_scale)
    skip_model = model.missed(log_scale, bench.log_band)
    skip_bench = bench.missed(-log_scale, model.log_band)
    rules.impose(pair_cost, skip_model, skip_bench)
    pairs = _align(pair_cost, skip_model, skip_bench)
    rows, columns = [i for i, _ in pairs], [j for _, j in pairs]
    skipped = np.delete(skip_model, rows).sum() + np.delete(skip_bench, columns).sum()
    own = offset[rows, columns]
    scale = float(own.sum() / (len(pairs) + (OWN_SPREAD / COMMON_SPREAD) ** 2)) if pairs else 0.0
    common = 0.5 * (log_scale / COMMON_SPREAD) ** 2
    unscaled = _pair_cost(model, bench, offset)[rows, columns].sum()
    return Pairing(
        pairs=tuple(pairs),
        scale=float(np.exp(np.clip(scale, -np.log(LARGEST_SCALE), np.log(LARGEST_SCALE)))),
        cost=float(pair_cost[rows, columns].sum() + skipped + common),
        misfit=float(unscaled + skipped),
    )


def _pair_cost(model: _Side, bench: _Side, own: FloatArray) -> FloatArray:
    unexcited = np.isnan(model.depth)[:, None]
    depth = (bench.depth[None, :] - model.depth[:, None]) / DEPTH_SPREAD
    extra = np.where(unexcited, UNEXCITED_COST, 0.5 * depth**2)
    return np.asarray(0.5 * (own / OWN_SPREAD) ** 2 + extra)


def _align(
    pair_cost: FloatArray, skip_model: FloatArray, skip_bench: FloatArray
) -> list[tuple[int, int]]:
    """Cheapest order-keeping assignment, each index used at most once (sequence alignment)."""
    rows, columns = pair_cost.shape
    costs, skip_row, skip_column = pair_cost.tolist(), skip_model.tolist(), skip_bench.tolist()
    total = [[0.0] * (columns + 1) for _ in range(rows + 1)]
    for j in range(columns):
        total[0][j + 1] = total[0][j] + skip_column[j]
    for i in range(rows):
        total[i + 1][0] = total[i][0] + skip_row[i]
        for j in range(columns):
            total[i + 1][j + 1] = min(
                total[i][j] + costs[i][j],
                total[i][j + 1] + skip_row[i],
                total[i + 1][j] + skip_column[j],
            )
    return _trace(total, costs, skip_row)


def _trace(
    total: list[list[float]], costs: list[list[float]], skip_row: list[float]
) -> list[tuple[int, int]]:
    i, j = len(total) - 1, len(total[0]) - 1
    pairs = []
    while i and j:
        if total[i][j] == total[i - 1][j - 1] + costs[i - 1][j - 1]:
            i, j = i - 1, j - 1
            pairs.append((i, j))
        elif total[i][j] == total[i - 1][j] + skip_row[i - 1]:
            i -= 1
        else:
            j -= 1
    return pairs[::-1]
