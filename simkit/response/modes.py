"""Natural modes: the poles of the current response, with their current shapes."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from simkit.geometry.wires import FloatArray, WireGrid
from simkit.response.rational import ComplexArray, Sweep
from simkit.response.strip_current import (
    coherence,
    current_along_path,
    path_turns_m,
    totals_matrix,
)

BoolArray = NDArray[np.bool_]

LEAST_RESIDUE = 1e-3
"""Poles whose residue is smaller than this part of the largest are noise of the fit."""

SURVIVAL = 0.05
"""A real pole moves by less than this part of its half width when a sample is left out.

Of 540 poles of strips up to six wavelengths long, real ones move by 2 % at most in two of three
fits. In the third the sample that is left out may be the one that shows a narrow mode.
"""

WIDE_Q = 2.3
WIDE_SURVIVAL = 0.01
"""Poles below that Q must survive in every fit, and so much better. Natural modes of strips, bent
or not, have 2.4 and more. What a fit paints its background with has 2.1 and less, and one in fifty
of those moves by less than 5 % in all fits."""

LEAST_Q = 1.5
"""Below this a pole is about as wide as its own frequency: no resonance anybody could see. A fit
paints the background of a whole band with poles of 0.5 to 1.3, which may survive all else."""

LEAST_COHERENCE = 0.5
LEAST_TOTAL = 0.03
"""A pole is an artefact of the model if its current flows between the rails of a bundle, not along
the strip: coherence below the first, and a residue of the strips' total current below this part of
the largest. Coherence alone would not do: the sweep is judged by total currents, so a sharp pole
between rails that it left aside spoils the currents of single rails, and modes of strips come out
with anything from 0.09. Their totals are 0.35 and more, those between rails under 0.005."""

ECHO_LIKENESS = 0.6
ECHO_STRENGTH = 0.15
"""Two modes of one number are one mode and a ground's echo of it if their currents overlap so much,
or if one is so much weaker. A dipole's echoes near its mode have 0.9 and more; those between two
modes have 0.3 to 0.7 and a tenth of the strength."""

TURN_WIDTHS = 1.2
"""Reach of a junction figure along the strips, in widths."""

QUIET = 0.05
"""Currents under this part of the largest do not count when phase reversals are counted."""


@dataclass(frozen=True)
class NaturalMode:
    """One pole of the antenna.

    Attributes
    ----------
    pole_hz : complex
        Complex natural frequency; its imaginary part, positive, is the decay rate over 2 pi.
    half_waves : int
        Half waves of current along the tip-to-tip path (whole periods times two on a loop); for a
        path that stands on a ground plane, along it and its image, so that quarter waves of the
        path itself.
    current : (S,) complex array
        Segment currents, the largest being 1 and real.
    feed_residue_hz : complex
        Residue of the feed admittance, siemens times Hz: how strongly the feed excites the mode.
    strength_s : float
        Size of the currents at the mode's resonance for 1 V at either source, siemens.
    """

    pole_hz: complex
    half_waves: int
    current: ComplexArray
    feed_residue_hz: complex
    strength_s: float = 0.0

    @property
    def frequency_hz(self) -> float:
        """Natural frequency, real part of the pole."""
        return self.pole_hz.real

    @property
    def q(self) -> float:
        """Quality factor Re/(2 Im) of the pole."""
        return self.pole_hz.real / (2 * self.pole_hz.imag)

    def feed_admittance(self, frequency_hz: FloatArray) -> ComplexArray:
        """The mode's own part of the feed admittance, siemens."""
        return np.asarray(self.feed_residue_hz / (frequency_hz - self.pole_hz))


def find_modes(
    sweep: Sweep, grid: WireGrid, start_hz: float, stop_hz: float
) -> tuple[NaturalMode, ...]:
    """Natural modes of a band from a sweep with two sources.

    Parameters
    ----------
    sweep : Sweep
        Its values are the segment currents for the feed followed by those for the second source.
    grid : WireGrid
    start_hz, stop_hz : float
        Band of the sweep. A pole somewhat below it is kept if the band holds its upper half width,
        because the dip it owns lies above it.

    Returns
    -------
    tuple of NaturalMode
        In ascending order of frequency.

    Notes
    -----
    The response is the current for an impressed voltage, so the poles depend neither on the place
    nor on the gap of the feed. A mode's residues for both sources are one shape times two coupling
    factors; the shape is taken from both by singular values, so that a mode at whose node one of
    the sources sits is found from the other.
    """
    poles = sweep.model.poles_hz()
    keep = (poles.imag > 0) & (poles.real <= stop_hz) & (poles.real + poles.imag >= start_hz)
    keep &= poles.real > 2 * LEAST_Q * poles.imag
    poles = poles[keep]
    poles = poles[_surviving(poles, [spare.poles_hz() for spare in sweep.spare_models])]
    if not poles.size:
        return ()
    residues = sweep.model.residues(poles)
    size = np.linalg.norm(residues, axis=1)
    strong = size > LEAST_RESIDUE * size.max()
    poles, residues = poles[strong], residues[strong]
    order = np.argsort(poles.real)
    modes = _modes(poles[order], residues[order], grid)
    alike = np.array([coherence(mode.current, grid) for mode in modes])
    if alike.min() <= LEAST_COHERENCE:
        total = _total_strength(residues[order], grid)
        alike[total > LEAST_TOTAL * total.max()] = 1.0
    return tuple(mode for mode, a in zip(modes, alike, strict=True) if a > LEAST_COHERENCE)


def _total_strength(residues: ComplexArray, grid: WireGrid) -> FloatArray:
    """How much of each residue is current along the strips, rails taken together."""
    by_source = residues.reshape(len(residues), 2, -1)
    return np.asarray(np.linalg.norm(by_source @ totals_matrix(grid).T, axis=(1, 2)))


def _surviving(poles: ComplexArray, others: Sequence[ComplexArray]) -> BoolArray:
    """Which poles are found again by enough of the fits that lack a sample."""
    wide = poles.real < 2 * WIDE_Q * poles.imag
    limit = np.where(wide, WIDE_SURVIVAL, SURVIVAL) * poles.imag
    found = np.zeros(poles.shape, dtype=int)
    for spare in others:
        found += np.min(abs(poles[:, None] - spare), axis=1, initial=np.inf) < limit
    return np.asarray(found >= np.where(wide, len(others), len(others) - len(others) // 3))


def _modes(poles_hz: ComplexArray, residues: ComplexArray, grid: WireGrid) -> list[NaturalMode]:
    by_source = residues.reshape(len(residues), 2, -1)
    shapes = np.linalg.svd(by_source, full_matrices=False)[2][:, 0]
    largest = np.argmax(abs(shapes), axis=1)[:, None]
    shapes = shapes / np.take_along_axis(shapes, largest, axis=1)
    feed = sum((volts * by_source[:, 0, segment] for segment, volts in grid.source), 0j)
    strength = np.linalg.norm(residues, axis=1) / poles_hz.imag
    return [
        NaturalMode(complex(pole), number, shape, complex(admittance), float(size))
        for pole, number, shape, admittance, size in zip(
            poles_hz, _half_waves_of(shapes, grid), shapes, np.asarray(feed), strength, strict=True
        )
    ]


def without_echoes(modes: Sequence[NaturalMode]) -> tuple[NaturalMode, ...]:
    """Of modes of one number, those alike the strongest or much weaker than it are left out.

    Notes
    -----
    From half a wavelength above a ground up, waves run to the ground and back while a mode dies
    away. Antenna and ground then resonate together, as two or more poles where the antenna alone
    has one.
    """
    kept: list[NaturalMode] = []
    for mode in sorted(modes, key=lambda mode: -mode.strength_s):
        if not any(
            mode.half_waves == other.half_waves
            and (
                alike(mode.current, other.current) > ECHO_LIKENESS
                or mode.strength_s < ECHO_STRENGTH * other.strength_s
            )
            for other in kept
        ):
            kept.append(mode)
    return tuple(sorted(kept, key=lambda mode: mode.frequency_hz))


def alike(first: ComplexArray, other: ComplexArray) -> float:
    """Overlap of two current shapes, 0 to 1."""
    return float(abs(np.vdot(first, other)) / (np.linalg.norm(first) * np.linalg.norm(other)))


def half_waves(current: ComplexArray, grid: WireGrid) -> int:
    """Count the half waves of a mode current along the tip-to-tip path.

    Parameters
    ----------
    current : (S,) complex array
        Segment currents.
    grid : WireGrid

    Returns
    -------
    int
        Phase reversals plus one from tip to tip; phase reversals once round a loop. A path that
        stands on a ground plane goes on into its image, from tip to tip or once round: the number
        then counts quarter waves of the path itself.
    """
    return _half_waves_of(current[None], grid)[0]


def _half_waves_of(currents: ComplexArray, grid: WireGrid) -> list[int]:
    """As `half_waves`, of (N, S) currents."""
    distance, along_path = current_along_path(currents, grid)
    # Where the path turns from one chain into another the current belongs to neither.
    turning = np.min(abs(distance[:, None] - path_turns_m(grid)[None]), axis=1, initial=np.inf)
    counts = turning > TURN_WIDTHS * grid.feed_width_m
    return [_signs_counted(turned_to_real(one).real, counts, grid) for one in along_path]


def _signs_counted(along: FloatArray, counts: BoolArray, grid: WireGrid) -> int:
    loud = along[counts & (abs(along) > QUIET * abs(along).max())]
    signs = np.sign(loud)
    if grid.path_closed:
        return int(np.sum(signs != np.roll(signs, 1)))
    reversals = int(np.sum(signs[1:] != signs[:-1]))
    feet = sum(grid.path_on_plane)
    # The image carries the current on through the foot without a reversal there.
    return reversals + 1 if not feet else 2 * reversals + (feet == 1)


def turned_to_real(current: ComplexArray) -> ComplexArray:
    """Rotate the common phase so that the sum of squared real parts is largest."""
    turned = current * np.exp(-0.5j * np.angle(np.sum(current**2)))
    return np.asarray(turned, dtype=np.complex128)
