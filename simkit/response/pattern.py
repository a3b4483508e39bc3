"""Far field, directivity and gain from segment currents, in the terms of IEEE Std 145.

Theta is measured from +z, phi from +x.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, replace
from functools import cache

import numpy as np
from scipy.constants import c as light_speed
from scipy.constants import epsilon_0, mu_0

from simkit.geometry.wires import FloatArray, WireGrid
from simkit.response.rational import ComplexArray
from simkit.study.model import Ground

WAVE_IMPEDANCE_OHM = float(np.sqrt(mu_0 / epsilon_0))

HORIZON_RAD = 1e-9
"""Directions so little below the horizon are on it, for the rounding of angles."""

EARTH_RINGS = 24
"""Directions more for the reflection coefficients of earth, which change fast near the horizon."""


@dataclass(frozen=True)
class Radiators:
    """Segments as short straight currents.

    Attributes
    ----------
    middle_m : (S, 3) float array
    direction : (S, 3) float array
        Unit vectors along positive current.
    length_m : (S,) float array
    ground : Ground or None
        What lies below z = 0; the segments lie above it.
    """

    middle_m: FloatArray
    direction: FloatArray
    length_m: FloatArray
    ground: Ground | None = None

    @classmethod
    def of(cls, grid: WireGrid, ground: Ground | None = None) -> Radiators:
        """Segments of a wire grid."""
        starts, ends = grid.ends_m()
        along = ends - starts
        length = np.linalg.norm(along, axis=1)
        return cls((starts + ends) / 2, along / length[:, None], length, ground)

    def image(self) -> Radiators:
        """The segments as a perfect plane at z = 0 mirrors them, with their currents."""
        up = np.array([1.0, 1.0, -1.0])
        return Radiators(self.middle_m * up, -self.direction * up, self.length_m)


def far_field(
    radiators: Radiators,
    current: ComplexArray,
    frequency_hz: float,
    theta_rad: FloatArray,
    phi_rad: FloatArray,
) -> tuple[ComplexArray, ComplexArray]:
    """E_theta and E_phi times distance, the factor exp(-jkr) left out.

    Parameters
    ----------
    radiators : Radiators
    current : (S,) complex array
        Peak values at the segment middles, ampere.
    frequency_hz : float
    theta_rad, phi_rad : (D,) float arrays
        Directions.

    Returns
    -------
    e_theta, e_phi : (D,) complex arrays
        Volts.

    Notes
    -----
    Over a ground, the wave that it reflects is that of the image in a perfect plane times Fresnel's
    reflection coefficient of each polarisation: exact for the far field of a perfect plane and, but
    for the ground wave, which dies out faster than 1/r, of flat earth. Below the horizon there is
    nothing.
    """
    e_theta, e_phi = _direct_field(radiators, current, frequency_hz, theta_rad, phi_rad)
    if radiators.ground is None:
        return e_theta, e_phi
    image = _direct_field(radiators.image(), current, frequency_hz, theta_rad, phi_rad)
    upright, flat = reflection_coefficients(radiators.ground, frequency_hz, theta_rad)
    above = theta_rad <= np.pi / 2 + HORIZON_RAD
    return (
        np.where(above, e_theta + upright * image[0], 0),
        np.where(above, e_phi + flat * image[1], 0),
    )


def reflection_coefficients(
    ground: Ground, frequency_hz: float, theta_rad: FloatArray
) -> tuple[ComplexArray, ComplexArray]:
    """Fresnel's reflection coefficients, over those of a perfect plane.

    Parameters
    ----------
    ground : Ground
    frequency_hz : float
    theta_rad : (D,) float array
        Direction of the reflected wave from +z; beyond the horizon as on it.

    Returns
    -------
    upright, flat : (D,) complex arrays
        For the electric field in and across the plane of incidence; both 1 for a perfect plane,
        both -1 at grazing incidence on earth.
    """
    if ground.kind == "plane":
        ones = np.ones(theta_rad.shape, dtype=np.complex128)
        return ones, ones
    omega = 2 * np.pi * frequency_hz
    loss = ground.conductivity_s_per_m / (omega * epsilon_0)
    permittivity = ground.relative_permittivity - 1j * loss
    cosine = np.maximum(np.cos(theta_rad), 0.0)
    refracted = np.sqrt(permittivity - np.sin(theta_rad) ** 2)
    upright = (permittivity * cosine - refracted) / (permittivity * cosine + refracted)
    flat = (refracted - cosine) / (refracted + cosine)
    return np.asarray(upright), np.asarray(flat)


def _direct_field(
    radiators: Radiators,
    current: ComplexArray,
    frequency_hz: float,
    theta_rad: FloatArray,
    phi_rad: FloatArray,
) -> tuple[ComplexArray, ComplexArray]:
    """Without ground; even and odd in the phase are its cosine's and its sine's part."""
    k = 2 * np.pi * frequency_hz / light_speed
    sin_t, cos_t = np.sin(theta_rad), np.cos(theta_rad)
    sin_p, cos_p = np.sin(phi_rad), np.cos(phi_rad)
    outwards = np.stack([sin_t * cos_p, sin_t * sin_p, cos_t], axis=1)
    # Current k-harmonic and phase across a segment, to second order in its electrical length.
    fall = outwards @ radiators.direction.T
    fall *= fall
    fall += 1
    fall *= -((k * radiators.length_m) ** 2) / 24
    fall += 1
    # Sine and cosine of the phase from the tangent of half of it: one fast function for two slow
    # ones. In place, because the arrays are large.
    tangent = outwards @ (k / 2 * radiators.middle_m.T)
    np.tan(tangent, out=tangent)
    share = tangent * tangent
    share += 1
    np.divide(fall, share, out=share)
    tangent *= share
    each = (current * radiators.length_m)[:, None] * radiators.direction
    parts = np.concatenate([each.real, each.imag], axis=1)
    even, odd = 2 * (share @ parts) - fall @ parts, 2 * (tangent @ parts)
    moment = even[:, :3] - odd[:, 3:] + 1j * (even[:, 3:] + odd[:, :3])
    factor = -1j * k * WAVE_IMPEDANCE_OHM / (4 * np.pi)
    along_theta = np.stack([cos_t * cos_p, cos_t * sin_p, -sin_t], axis=1)
    along_phi = np.stack([-sin_p, cos_p, np.zeros_like(sin_p)], axis=1)
    return (
        np.asarray(factor * np.sum(moment * along_theta, axis=1)),
        np.asarray(factor * np.sum(moment * along_phi, axis=1)),
    )


def intensity_w_per_sr(e_theta: ComplexArray, e_phi: ComplexArray) -> FloatArray:
    """Radiation intensity from far-field amplitudes (volts, peak), watt per steradian."""
    return np.asarray((abs(e_theta) ** 2 + abs(e_phi) ** 2) / (2 * WAVE_IMPEDANCE_OHM))


@cache
def _sphere(rings: int, around: int, upper: bool) -> tuple[FloatArray, FloatArray, FloatArray]:
    """Gauss-Legendre in cos(theta), equal steps in phi: directions and weights of the sphere.

    `upper`: of the half of it above the horizon.
    """
    nodes, weights = np.polynomial.legendre.leggauss(rings)
    if upper:
        nodes, weights = (nodes + 1) / 2, weights / 2
    phi = np.arange(around) * 2 * np.pi / around
    theta, azimuth = np.meshgrid(np.arccos(nodes), phi, indexing="ij")
    weight = np.repeat(weights[:, None] * 2 * np.pi / around, around, axis=1)
    return theta.ravel(), azimuth.ravel(), weight.ravel()


def radiated_power_w(radiators: Radiators, current: ComplexArray, frequency_hz: float) -> float:
    """Power through the sphere at infinity, watt (currents are peak values).

    Over a ground it is the power through the half above the horizon; what goes into the earth is
    not in it.

    The number of directions follows the electrical size: a radiation intensity of a source of
    radius a has angular orders up to about 2ka, which the Gauss grid integrates exactly. Over a
    ground the source is as high as its image is deep; round the vertical axis its width counts.
    """
    centre = (radiators.middle_m.min(axis=0) + radiators.middle_m.max(axis=0)) / 2
    if radiators.ground is not None:
        centre[2] = 0.0
    away = radiators.middle_m - centre
    k = 2 * np.pi * frequency_hz / light_speed
    rings, across = (
        int(np.ceil(k * np.linalg.norm(part, axis=1).max())) + 6 for part in (away, away[:, :2])
    )
    upper = radiators.ground is not None
    if radiators.ground is not None and radiators.ground.kind == "earth":
        rings += EARTH_RINGS
    theta, phi, weight = _sphere(rings, 2 * (across if upper else rings), upper)
    field = far_field(radiators, current, frequency_hz, theta, phi)
    return float(weight @ intensity_w_per_sr(*field))


def gain_grid_dbi(
    radiators: Radiators,
    current: ComplexArray,
    frequency_hz: float,
    power_w: float,
    theta_deg: FloatArray,
    phi_deg: FloatArray,
) -> FloatArray:
    """Gain over a power on a grid of directions, (theta, phi), dBi; nulls are cut at -100 dBi.

    So are directions below a ground.
    """
    theta, phi = np.meshgrid(np.deg2rad(theta_deg), np.deg2rad(phi_deg), indexing="ij")
    field = far_field(radiators, current, frequency_hz, theta.ravel(), phi.ravel())
    gain = 4 * np.pi * intensity_w_per_sr(*field).reshape(theta.shape) / power_w
    return np.asarray(10 * np.log10(np.maximum(gain, 1e-10)))


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

    def intensity(theta_deg: FloatArray, phi_deg: FloatArray) -> FloatArray:
        angles = np.deg2rad(theta_deg), np.deg2rad(phi_deg)
        return intensity_w_per_sr(*far_field(radiators, current, frequency_hz, *angles))

    found = _climbed(intensity, [*_plane_tops(intensity), _Climb(*first, step_deg, EVERYWHERE)])
    largest = max(power for _, _, power in found)
    return next(peak for peak in found if peak[2] >= largest * ALIKE)


Intensity = Callable[[FloatArray, FloatArray], FloatArray]

ALIKE = 10**-0.001
"""Intensities that differ by less, 0.01 dB, are equal: the currents are hardly better."""

PLANE_STEP_DEG = 3.0

SMOOTH_DEG = 1.5
"""So near to a maximum a pattern is a paraboloid: the narrowest lobe of an antenna four wavelengths
long is 14 degrees wide."""

LEAST_BEND = 1e-6
"""A pattern that falls by less than this part of itself on the way is level there."""


class _Moves:
    """Places to try around one, (2, N) in steps of theta and phi, and the paraboloid through them.

    The paraboloid's six factors, of 1, t, p, t^2/2, p^2/2 and tp, are `fit` times the values.
    """

    def __init__(self, steps: FloatArray) -> None:
        theta, phi = self.steps = steps
        self.away = abs(steps).sum(axis=0)
        terms = [np.ones_like(theta), theta, phi, theta**2 / 2, phi**2 / 2, theta * phi]
        self.fit = np.linalg.pinv(np.stack(terms, axis=1))

    def vertex(self, power: FloatArray) -> FloatArray:
        """(2,) steps to the maximum of the paraboloid, none along what does not bend down."""
        level, along_theta, along_phi, tt, pp, tp = self.fit @ power
        bend, axes = np.linalg.eigh(np.array([[tt, tp], [tp, pp]]))
        down = bend < -LEAST_BEND * level
        uphill = axes[:, down].T @ np.array([along_theta, along_phi])
        return np.asarray(np.clip(axes[:, down] @ (uphill / -bend[down]), -1.0, 1.0))


_FIVE = np.linspace(-1.0, 1.0, 5)
ALONG_PHI = _Moves(np.stack([0 * _FIVE, _FIVE]))
ALONG_THETA = _Moves(np.stack([_FIVE, 0 * _FIVE]))
EVERYWHERE = _Moves(np.stack([grid.ravel() for grid in np.meshgrid(_FIVE, _FIVE)]))


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
        """Go on from the largest value with half the step."""
        reachable = np.where((directions[0] >= 0) & (directions[0] <= 180), power, -np.inf)
        # Equal values are settled for the one that moves least.
        best = reachable >= reachable.max() * (1 - 1e-9)
        top = int(np.argmin(np.where(best, self.moves.away, np.inf)))
        return self.at(directions[:, top], float(power[top]))

    def at(self, direction: FloatArray, power: float) -> _Climb:
        """The same with half the step from another direction, whose intensity is known."""
        theta, phi = (float(angle) for angle in direction.ravel())
        return replace(self, theta_deg=theta, phi_deg=phi, step_deg=self.step_deg / 2, power=power)

    def vertex(self, power: FloatArray) -> FloatArray:
        """(2, 1) direction of the maximum by the intensities around."""
        theta, phi = self.step_deg * self.moves.vertex(power)
        return np.array([[np.clip(self.theta_deg + theta, 0.0, 180.0)], [self.phi_deg + phi]])


@cache
def _planes() -> tuple[tuple[FloatArray, _Moves], ...]:
    """Directions in the xy, the xz and the yz plane: (2, N) degrees, and how they may move."""
    phi = np.arange(0.0, 360.0, PLANE_STEP_DEG)
    half = np.arange(0.0, 180.0 + PLANE_STEP_DEG, PLANE_STEP_DEG)
    upright = np.stack([np.tile(half, 2), np.repeat([0.0, 180.0], len(half))])
    turned = upright + np.array([[0.0], [90.0]])
    level = np.stack([np.full_like(phi, 90.0), phi])
    return (level, ALONG_PHI), (upright, ALONG_THETA), (turned, ALONG_THETA)


def _plane_tops(intensity: Intensity) -> list[_Climb]:
    """Start from the largest intensity in each principal plane; of equal ones from the first."""
    planes = _planes()
    powers = _apart(intensity, [directions for directions, _ in planes])
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
    ends = np.cumsum([group.shape[1] for group in groups])[:-1]
    return np.split(intensity(*np.concatenate(groups, axis=1)), ends)
