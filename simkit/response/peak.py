"""Where a pattern has its maximum."""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import dataclass
from functools import cache

import numpy as np

from simkit.geometry.wires import FloatArray
from simkit.response.pattern import Directions, Radiators, field_towards, intensity_w_per_sr
from simkit.response.rational import ComplexArray


def peak_direction(
    radiators: Radiators,
    current: ComplexArray,
    frequency_hz: float,
    first: tuple[float, float],
    step_deg: float,
) -> tuple[float, float, float]:
    """Direction of the largest intensity.

    Parameters
    ----------
    radiators, current, frequency_hz
    first : (float, float)
        theta and phi in degrees of the largest value on a coarse grid of all directions.
    step_deg : float
        Spacing of that grid.

    Returns
    -------
    theta_deg, phi_deg, intensity_w_per_sr : float

    Notes
    -----
    Many patterns have a ring of equal maxima. A maximum in a principal plane (xy, then xz, then yz)
    that is within 0.01 dB of the largest one is preferred, so that like cases give like directions.
    """

    def intensity(directions: Directions) -> FloatArray:
        return intensity_w_per_sr(*field_towards(radiators, current, frequency_hz, directions))

    found = _climbed(intensity, [*_plane_tops(intensity), _Climb(*first, step_deg, FIRST)])
    largest = max(power for _, _, power in found)
    return next(peak for peak in found if peak[2] >= largest * ALIKE)


Intensity = Callable[[Directions], FloatArray]

ALIKE = 10**-0.001
"""Intensities that differ by less, 0.01 dB, are equal: the currents are hardly better."""

PLANE_STEP_DEG = 5.0

SMOOTH_DEG = 1.5
"""So near to a maximum a pattern is a paraboloid: the narrowest lobe of an antenna four wavelengths
long is 14 degrees wide."""

LEAST_BEND = 1e-6
"""A pattern that falls by less than this part of itself on the way is level there."""


class _Moves:
    """Places to try around one, (2, N) in steps of theta and phi, and the paraboloid through them.

    The paraboloid's six factors, of 1, t, p, t^2/2, p^2/2 and tp, are `fit` times the values.
    Neighbouring places are `apart`, in steps: what to go on with.
    """

    def __init__(self, steps: FloatArray, apart: float) -> None:
        theta, phi = self.steps = steps
        self.apart = apart
        # Equal values are settled for the one that moves least.
        self.liking = 1 - 1e-9 * abs(steps).sum(axis=0)
        terms = [np.ones_like(theta), theta, phi, theta**2 / 2, phi**2 / 2, theta * phi]
        self.fit = np.linalg.pinv(np.stack(terms, axis=1))

    def vertex(self, power: FloatArray) -> tuple[float, float]:
        """Steps of theta and phi to the paraboloid's maximum, none along what does not bend down.

        One step at most. In plain numbers, because this is done often for little.
        """
        level, along_theta, along_phi, tt, pp, tp = (self.fit @ power).tolist()
        angle = math.atan2(2 * tp, tt - pp) / 2
        theta = phi = 0.0
        for u, v in ((math.cos(angle), math.sin(angle)), (-math.sin(angle), math.cos(angle))):
            bend = tt * u * u + 2 * tp * u * v + pp * v * v
            if bend < -LEAST_BEND * level:
                way = -(u * along_theta + v * along_phi) / bend
                theta, phi = theta + way * u, phi + way * v
        return min(max(theta, -1.0), 1.0), min(max(phi, -1.0), 1.0)


def _square(count: int) -> _Moves:
    side = np.linspace(-1.0, 1.0, count)
    return _Moves(np.stack([grid.ravel() for grid in np.meshgrid(side, side)]), 2 / (count - 1))


_FIVE = np.linspace(-1.0, 1.0, 5)
ALONG_PHI = _Moves(np.stack([0 * _FIVE, _FIVE]), 0.5)
ALONG_THETA = _Moves(np.stack([_FIVE, 0 * _FIVE]), 0.5)
FIRST, THEN = _square(9), _square(5)
"""In all directions: round the largest value of a coarse grid, and later."""


@dataclass(frozen=True)
class _Climb:
    """Where a maximum is sought, and with what step."""

    theta_deg: float
    phi_deg: float
    step_deg: float
    moves: _Moves
    power: float = 0.0

    def directions(self) -> FloatArray:
        """(2, N) theta and phi to try next, degrees."""
        centre = np.array([[self.theta_deg], [self.phi_deg]])
        return np.asarray(centre + self.step_deg * self.moves.steps)

    def finer(self, directions: FloatArray, power: FloatArray) -> _Climb:
        """Go on from the largest value: the maximum lies between its neighbours."""
        liked = power * self.moves.liking
        if not self.step_deg <= self.theta_deg <= 180 - self.step_deg:
            liked[(directions[0] < 0) | (directions[0] > 180)] = -np.inf
        top = int(np.argmax(liked))
        return self.at(directions[:, top], float(power[top]))

    def at(self, direction: FloatArray, power: float) -> _Climb:
        """The same from another direction, whose intensity is known, and with smaller steps."""
        theta, phi = (float(angle) for angle in direction.ravel())
        moves = THEN if self.moves is FIRST else self.moves
        return _Climb(theta, phi, self.step_deg * self.moves.apart, moves, power)

    def vertex(self, power: FloatArray) -> FloatArray:
        """(2, 1) direction of the maximum by the intensities around."""
        theta, phi = self.moves.vertex(power)
        theta = min(max(self.theta_deg + self.step_deg * theta, 0.0), 180.0)
        return np.array([[theta], [self.phi_deg + self.step_deg * phi]])


@cache
def _planes() -> tuple[tuple[FloatArray, _Moves], ...]:
    """Directions in the xy, the xz and the yz plane: (2, N) degrees, and how they may move."""
    phi = np.arange(0.0, 360.0, PLANE_STEP_DEG)
    half = np.arange(0.0, 180.0 + PLANE_STEP_DEG, PLANE_STEP_DEG)
    upright = np.stack([np.tile(half, 2), np.repeat([0.0, 180.0], len(half))])
    turned = upright + np.array([[0.0], [90.0]])
    level = np.stack([np.full_like(phi, 90.0), phi])
    return (level, ALONG_PHI), (upright, ALONG_THETA), (turned, ALONG_THETA)


@cache
def _all_planes() -> Directions:
    return _towards([angles for angles, _ in _planes()])


def _plane_tops(intensity: Intensity) -> list[_Climb]:
    """Start from the largest intensity in each principal plane; of equal ones from the first."""
    planes = _planes()
    powers = np.split(intensity(_all_planes()), _ends([angles for angles, _ in planes]))
    tops = [int(np.argmax(power >= power.max() * ALIKE)) for power in powers]
    return [
        _Climb(float(theta[top]), float(phi[top]), PLANE_STEP_DEG, moves)
        for ((theta, phi), moves), top in zip(planes, tops, strict=True)
    ]


def _climbed(intensity: Intensity, climbs: list[_Climb]) -> list[tuple[float, float, float]]:
    """Climb on ever finer steps, all climbs at once: theta, phi in degrees and intensity."""
    while going := [n for n, climb in enumerate(climbs) if climb.step_deg > SMOOTH_DEG]:
        directions = [climbs[n].directions() for n in going]
        powers = _apart(intensity, directions)
        for n, around, power in zip(going, directions, powers, strict=True):
            climbs[n] = climbs[n].finer(around, power)
    directions = [climb.directions() for climb in climbs]
    powers = _apart(intensity, directions)
    tops = [climb.vertex(power) for climb, power in zip(climbs, powers, strict=True)]
    found = []
    for n, height in enumerate(_apart(intensity, tops)):
        climb, top = climbs[n], float(height[0])
        higher = top >= powers[n].max() * (1 - 1e-9)
        end = climb.at(tops[n], top) if higher else climb.finer(directions[n], powers[n])
        found.append((end.theta_deg, end.phi_deg % 360.0, end.power))
    return found


def _apart(intensity: Intensity, groups: list[FloatArray]) -> list[FloatArray]:
    """Intensities of several groups of directions, (2, N) each, in one go."""
    return np.split(intensity(_towards(groups)), _ends(groups))


def _towards(groups: list[FloatArray]) -> Directions:
    theta, phi = np.deg2rad(np.concatenate(groups, axis=1))
    return Directions.of(theta, phi)


def _ends(groups: list[FloatArray]) -> list[int]:
    return [int(end) for end in np.cumsum([group.shape[1] for group in groups])[:-1]]
