"""Far field, directivity and gain from segment currents, in the terms of IEEE Std 145.

Theta is measured from +z, phi from +x.
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import cache, lru_cache

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


@dataclass(frozen=True)
class Directions:
    """Directions of the far field, as unit vectors.

    Attributes
    ----------
    theta_rad : (D,) float array
    outwards, along_theta, along_phi : (D, 3) float arrays
        Away from the antenna and where theta and phi grow.
    """

    theta_rad: FloatArray
    outwards: FloatArray
    along_theta: FloatArray
    along_phi: FloatArray

    @classmethod
    def of(cls, theta_rad: FloatArray, phi_rad: FloatArray) -> Directions:
        """Directions of (D,) angles."""
        sin_t, cos_t = np.sin(theta_rad), np.cos(theta_rad)
        sin_p, cos_p = np.sin(phi_rad), np.cos(phi_rad)
        return cls(
            theta_rad,
            np.array([sin_t * cos_p, sin_t * sin_p, cos_t]).T,
            np.array([cos_t * cos_p, cos_t * sin_p, -sin_t]).T,
            np.array([-sin_p, cos_p, np.zeros_like(sin_p)]).T,
        )


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
    return field_towards(radiators, current, frequency_hz, Directions.of(theta_rad, phi_rad))


def field_towards(
    radiators: Radiators, current: ComplexArray, frequency_hz: float, directions: Directions
) -> tuple[ComplexArray, ComplexArray]:
    """As `far_field`, towards directions that are at hand."""
    e_theta, e_phi = _direct_field(radiators, current, frequency_hz, directions)
    if radiators.ground is None:
        return e_theta, e_phi
    image = _direct_field(radiators.image(), current, frequency_hz, directions)
    upright, flat = reflection_coefficients(radiators.ground, frequency_hz, directions.theta_rad)
    above = directions.theta_rad <= np.pi / 2 + HORIZON_RAD
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
    radiators: Radiators, current: ComplexArray, frequency_hz: float, directions: Directions
) -> tuple[ComplexArray, ComplexArray]:
    """Without ground; even and odd in the phase are its cosine's and its sine's part."""
    k = 2 * np.pi * frequency_hz / light_speed
    # Current k-harmonic and phase across a segment, to second order in its electrical length.
    fall = directions.outwards @ radiators.direction.T
    fall *= fall
    fall += 1
    fall *= -((k * radiators.length_m) ** 2) / 24
    fall += 1
    # Sine and cosine of the phase from the tangent of half of it: one fast function for two slow
    # ones. In place, because the arrays are large.
    tangent = directions.outwards @ (k / 2 * radiators.middle_m.T)
    np.tan(tangent, out=tangent)
    share = tangent * tangent
    share += 1
    np.divide(fall, share, out=share)
    share += share
    tangent *= share
    share -= fall
    each = (current * radiators.length_m)[:, None] * radiators.direction
    parts = np.concatenate([each.real, each.imag], axis=1)
    even, odd = share @ parts, tangent @ parts
    moment = even[:, :3] - odd[:, 3:] + 1j * (even[:, 3:] + odd[:, :3])
    factor = -1j * k * WAVE_IMPEDANCE_OHM / (4 * np.pi)
    return (
        factor * np.einsum("ij,ij->i", moment, directions.along_theta),
        factor * np.einsum("ij,ij->i", moment, directions.along_phi),
    )


def intensity_w_per_sr(e_theta: ComplexArray, e_phi: ComplexArray) -> FloatArray:
    """Radiation intensity from far-field amplitudes (volts, peak), watt per steradian."""
    power = e_theta.real**2 + e_theta.imag**2 + e_phi.real**2 + e_phi.imag**2
    return np.asarray(power / (2 * WAVE_IMPEDANCE_OHM))


@cache
def _sphere(rings: int, around: int, upper: bool) -> tuple[Directions, FloatArray]:
    """Gauss-Legendre in cos(theta), equal steps in phi: directions and weights of the sphere.

    `upper`: of the half of it above the horizon.
    """
    nodes, weights = np.polynomial.legendre.leggauss(rings)
    if upper:
        nodes, weights = (nodes + 1) / 2, weights / 2
    phi = np.arange(around) * 2 * np.pi / around
    theta, azimuth = np.meshgrid(np.arccos(nodes), phi, indexing="ij")
    weight = np.repeat(weights[:, None] * 2 * np.pi / around, around, axis=1)
    return Directions.of(theta.ravel(), azimuth.ravel()), weight.ravel()


def radiated_power_w(radiators: Radiators, current: ComplexArray, frequency_hz: float) -> float:
    """Power through the sphere at infinity, watt (currents are peak values).

    Over a ground it is the power through the half above the horizon; what goes into the earth is
    not in it.

    The number of directions follows the electrical size: a radiation intensity of a source of
    radius a has angular orders up to about 2ka, which the Gauss grid integrates exactly; round an
    axis its width counts. That is the antenna's longest axis, over a ground the vertical one, where
    the source is as high as its image is deep.
    """
    centre = (radiators.middle_m.min(axis=0) + radiators.middle_m.max(axis=0)) / 2
    if radiators.ground is not None:
        centre[2] = 0.0
    away = radiators.middle_m - centre
    if radiators.ground is None:
        # Round the antenna's longest axis the intensity changes least.
        axes = np.linalg.eigh(away.T @ away)[1]
        away = away @ axes
        radiators = Radiators(away, radiators.direction @ axes, radiators.length_m)
    k = 2 * np.pi * frequency_hz / light_speed
    rings, across = (
        int(np.ceil(k * np.linalg.norm(part, axis=1).max())) + 6 for part in (away, away[:, :2])
    )
    upper = radiators.ground is not None
    if radiators.ground is not None and radiators.ground.kind == "earth":
        rings += EARTH_RINGS
    directions, weight = _sphere(rings, 2 * across, upper)
    field = field_towards(radiators, current, frequency_hz, directions)
    return float(weight @ intensity_w_per_sr(*field))


@lru_cache(maxsize=4)
def _grid(theta_deg: tuple[float, ...], phi_deg: tuple[float, ...]) -> Directions:
    theta, phi = np.meshgrid(np.deg2rad(theta_deg), np.deg2rad(phi_deg), indexing="ij")
    return Directions.of(theta.ravel(), phi.ravel())


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
    directions = _grid(tuple(theta_deg), tuple(phi_deg))
    field = field_towards(radiators, current, frequency_hz, directions)
    shape = len(theta_deg), len(phi_deg)
    gain = 4 * np.pi * intensity_w_per_sr(*field).reshape(shape) / power_w
    return np.asarray(10 * np.log10(np.maximum(gain, 1e-10)))
