"""What flows on the feed cable: the common-mode current that a balun or a choke would stop."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import replace

import numpy as np
from scipy.constants import c as light_speed

from simkit.geometry.wires import FloatArray, WireGrid
from simkit.response.modes import NaturalMode
from simkit.response.rational import ComplexArray
from simkit.response.strip_current import chain_current
from simkit.response.terminals import feed_impedance_ohm

LEAST_RATIO = 1e-6
"""Levels are cut at -120 dB, so that a cable without current has a number too."""

OF_CABLE = 0.5
"""A mode with more than this part of its magnetic energy on the cable is the cable's, not one of
the strips."""


def cable_level_db(current: ComplexArray, grid: WireGrid, frequency_hz: float) -> float:
    """Current on the cable at its start over the current at the feed, dB.

    Parameters
    ----------
    current : (S,) complex array
        Segment currents for 1 V at the feed.
    grid : WireGrid
    frequency_hz : float

    Returns
    -------
    float
        NaN without a cable. 0 dB: as much flows on the outside of the braid as through the feed.
    """
    if grid.cable < 0:
        return float("nan")
    start = current[grid.chains[grid.cable].segments[0]]
    feed = sum((volts * current[segment] for segment, volts in grid.source), 0j)
    impedance = feed_impedance_ohm(
        np.array([feed]),
        np.array([frequency_hz]),
        grid.feed_width_m,
        grid.model_gap_m,
        grid.study_gap_m,
    )
    ratio = float(abs(start * impedance[0]))
    return float(20 * np.log10(max(ratio, LEAST_RATIO)))


def parts_on_cable(mode: NaturalMode, grid: WireGrid) -> tuple[float, float]:
    """Parts of a mode's magnetic and electric energy that the cable holds, each 0 to 1.

    Parameters
    ----------
    mode : NaturalMode
    grid : WireGrid

    Returns
    -------
    magnetic, electric : float
        By the square of the current and of its slope, which is the charge, along all chains; NaN
        without a cable.

    Notes
    -----
    On a line the slope of the current is at most its largest value times the wave number. What
    looks steeper is a step at a junction, where a branch takes its part, and counts no more.
    """
    if grid.cable < 0:
        return float("nan"), float("nan")
    current = mode.current
    steepest = 2 * np.pi * mode.frequency_hz / light_speed * float(abs(current).max())
    squares = np.zeros((len(grid.chains), 2))
    for number, chain in enumerate(grid.chains):
        arc, total = chain_current(current, chain)
        ends = np.concatenate([[0.0], (arc[1:] + arc[:-1]) / 2, [chain.length_m]])
        squares[number, 0] = np.sum(abs(total) ** 2 * np.diff(ends))
        if chain.open_end:
            arc, total = np.append(arc, chain.length_m), np.append(total, 0.0)
        if chain.open_start:
            arc, total = np.insert(arc, 0, 0.0), np.insert(total, 0, 0.0)
        step = np.maximum(np.diff(arc), 1e-12)
        squares[number, 1] = np.sum(np.minimum(abs(np.diff(total)) / step, steepest) ** 2 * step)
    magnetic, electric = squares[grid.cable] / squares.sum(axis=0)
    return float(magnetic), float(electric)


def mode_errors(modes: Sequence[NaturalMode], grid: WireGrid) -> FloatArray:
    """Relative standard error of each mode's frequency, that of the cable's thickness included.

    Notes
    -----
    A natural frequency squared is the ratio of the electric to the magnetic energy of the mode's
    current and charge (Rayleigh). On a wire whose inductance and inverse capacitance are both
    wrong by a small part d, it is therefore wrong by d/2 times the difference of the parts of the
    electric and of the magnetic energy which that wire holds: nothing where the mode lives on the
    cable or on the strips alone.
    """
    errors = np.full(len(modes), grid.relative_error)
    if grid.cable < 0:
        return errors
    parts = np.array([parts_on_cable(mode, grid) for mode in modes]).reshape(-1, 2)
    return np.asarray(np.hypot(errors, grid.cable_level_error / 2 * (parts[:, 1] - parts[:, 0])))


def told_apart(modes: Sequence[NaturalMode], grid: WireGrid) -> tuple[NaturalMode, ...]:
    """Modes with half waves counted for the strips' own alone, -1 for those of the cable.

    Notes
    -----
    Half waves are counted along the strips. A mode that lives on the cable has some there too, by
    which it would pass for one of the strips. Of several modes of one number the one with the least
    on the cable keeps it; the strips' own resonance is shared out among them.
    """
    if grid.cable < 0:
        return tuple(modes)
    parts = [parts_on_cable(mode, grid)[0] for mode in modes]
    least: dict[int, float] = {}
    for mode, part in zip(modes, parts, strict=True):
        least[mode.half_waves] = min(part, least.get(mode.half_waves, OF_CABLE))
    return tuple(
        mode if part <= least[mode.half_waves] else replace(mode, half_waves=-1)
        for mode, part in zip(modes, parts, strict=True)
    )


def most_wanted(modes: Sequence[NaturalMode], count: int) -> tuple[NaturalMode, ...]:
    """At most so many modes, in order of frequency: the strips' own before those of the cable.

    Of the latter those that the feed excites most strongly are kept.
    """
    ranked = sorted(modes, key=lambda m: (m.half_waves < 0, -m.strength_s * (m.half_waves < 0)))
    return tuple(sorted(ranked[:count], key=lambda mode: mode.frequency_hz))
