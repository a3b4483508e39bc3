"""Anything at any frequency of the band, from what the store keeps of one case.

A case is one entry of an opened store, ``dataset.isel(case=k)``. Nothing is solved here: currents
come from the case's rational model, the rest from the currents.
"""

from __future__ import annotations

from typing import TYPE_CHECKING, Any, Literal

import numpy as np
from numpy.typing import ArrayLike, NDArray

from simkit.errors import StoreError
from simkit.geometry.wires import FloatArray
from simkit.response.pattern import Radiators, far_field, intensity_w_per_sr, radiated_power_w
from simkit.response.rational import ComplexArray, RationalModel
from simkit.response.terminals import feed_impedance_ohm
from simkit.study.model import Ground

if TYPE_CHECKING:
    import xarray as xr

    from simkit.feedline.chain import Chain

Plane = Literal["feed", "connector"]

BAND_SLACK = 1e-9
"""A frequency may leave the band by this part of it, for the rounding of unit conversions."""


def model_of(case: xr.Dataset) -> RationalModel:
    """The rational model of the segment currents for 1 V at the feed.

    Parameters
    ----------
    case : xarray.Dataset
        One case of an opened store.

    Returns
    -------
    RationalModel
        Its values are (M, S) currents in ampere.

    Raises
    ------
    StoreError
        The case has no solution.
    ValueError
        The dataset holds more than one case.
    """
    samples = np.asarray(_values(case, "sample_frequency"), dtype=float)
    taken = np.isfinite(samples)
    if not taken.any():
        reason = str(case["reason"].values) or "it is not solved"
        raise StoreError(f"{_name(case)} holds no currents: {reason}")
    used = _segments(case)
    current = np.asarray(_values(case, "current"), dtype=np.complex128)[taken][:, used]
    weight = np.asarray(_values(case, "weight"), dtype=np.complex128)[taken]
    return RationalModel(samples[taken], weight, current)


def radiators_of(case: xr.Dataset) -> Radiators:
    """Segments of a case as short straight currents."""
    used = _segments(case)
    middle = np.stack([_values(case, axis)[used] for axis in "xyz"], axis=1)
    along = np.stack([_values(case, f"direction_{axis}")[used] for axis in "xyz"], axis=1)
    return Radiators(middle, along, _values(case, "length")[used], ground_of(case))


def ground_of(case: xr.Dataset) -> Ground | None:
    """What lies below z = 0 in a case; None for free space, and in stores that keep no ground."""
    if "ground_conductivity" not in case:
        return None
    conductivity = float(_values(case, "ground_conductivity"))
    if np.isnan(conductivity):
        return None
    if np.isinf(conductivity):
        return Ground("plane")
    return Ground("earth", float(_values(case, "ground_permittivity")), conductivity)


def current_at(case: xr.Dataset, frequency_hz: ArrayLike) -> ComplexArray:
    """Segment currents for 1 V at the feed.

    Parameters
    ----------
    case : xarray.Dataset
        One case of an opened store.
    frequency_hz : (F,) array_like
        Within the band of the study.

    Returns
    -------
    (F, S) complex array
        Ampere, positive along ``direction_x``, ``_y``, ``_z``; segments in the store's order.

    Raises
    ------
    StoreError
        The case has no solution.
    ValueError
        A frequency lies outside the band.
    """
    model = model_of(case)
    return model(_in_band(model, frequency_hz))


def impedance_at(case: xr.Dataset, frequency_hz: ArrayLike, plane: Plane = "feed") -> ComplexArray:
    """Impedance at the feed gap of the study, or behind its feed line.

    Parameters
    ----------
    case : xarray.Dataset
    frequency_hz : (F,) array_like
    plane : {"feed", "connector"}

    Returns
    -------
    (F,) complex array
        Ohm; infinite for an open circuit.

    Raises
    ------
    StoreError, ValueError
        As `current_at`.
    """
    frequency = np.atleast_1d(np.asarray(frequency_hz, dtype=float))
    weight = _values(case, "source_weight")[_segments(case)]
    at_feed = feed_impedance_ohm(
        current_at(case, frequency) @ weight,
        frequency,
        float(case["feed_width"]),
        float(case["model_gap"]),
        float(case["study_gap"]),
    )
    chain = chain_of_case(case)
    if plane == "feed" or not chain.elements:
        return at_feed
    from simkit.feedline.oneport import OnePort, impedance_of

    ascending, first, back = np.unique(frequency, return_index=True, return_inverse=True)
    load = OnePort.from_impedance(ascending, at_feed[first], chain.reference_ohm)
    return impedance_of(chain.reflection(load), chain.reference_ohm)[back]


def chain_of_case(case: xr.Dataset) -> Chain:
    """What lies between feed and connector of a case; without elements if nothing does.

    Parameters
    ----------
    case : xarray.Dataset
        One case of an opened store.
    """
    from simkit.feedline.build import chain_of
    from simkit.study.feedline_text import feedline_of_text

    text = str(_values(case, "feedline")) if "feedline" in case else ""
    return chain_of(feedline_of_text(text), float(case.attrs.get("reference_ohm", 50.0)))


def far_field_at(
    case: xr.Dataset, frequency_hz: float, theta_deg: ArrayLike, phi_deg: ArrayLike
) -> tuple[ComplexArray, ComplexArray]:
    """E_theta and E_phi times distance for 1 V (peak) at the feed.

    Parameters
    ----------
    case : xarray.Dataset
    frequency_hz : float
    theta_deg, phi_deg : array_like
        Directions, theta from +z and phi from +x; broadcast against each other.

    Returns
    -------
    e_theta, e_phi : complex arrays
        Volts (peak), the factor exp(-jkr) left out, in the shape of the directions.

    Raises
    ------
    StoreError, ValueError
        As `current_at`.
    """
    return _field(radiators_of(case), _drive(case, frequency_hz), frequency_hz, theta_deg, phi_deg)


def gain_at(
    case: xr.Dataset, frequency_hz: float, theta_deg: ArrayLike, phi_deg: ArrayLike
) -> FloatArray:
    """Gain of the antenna driven at its feed, IEEE Std 145: losses of the metal counted.

    So are those in real earth.

    Parameters
    ----------
    case : xarray.Dataset
    frequency_hz : float
    theta_deg, phi_deg : array_like
        As in `far_field_at`.

    Returns
    -------
    float array
        dBi, in the shape of the directions; nulls are cut at -100 dBi.

    Raises
    ------
    StoreError, ValueError
        As `current_at`.

    Notes
    -----
    The power it refers to is that radiated and lost by the currents, as for the stored `gain`;
    `power_balance` says how far that is from the power at the feed. Over real earth, where nothing
    tells what the earth takes, it is the power at the feed.
    """
    current, radiators = _drive(case, frequency_hz), radiators_of(case)
    field = _field(radiators, current, frequency_hz, theta_deg, phi_deg)
    if radiators.ground is not None and radiators.ground.kind == "earth":
        weight = _values(case, "source_weight")[_segments(case)]
        return _dbi(field, 0.5 * float(current.real @ weight))
    lost_w = 0.5 * np.sum(
        _resistance_ohm_per_m(case, frequency_hz) * abs(current) ** 2 * radiators.length_m
    )
    power_w = radiated_power_w(radiators, current, frequency_hz) + lost_w
    return _dbi(field, power_w)


def _dbi(field: tuple[ComplexArray, ComplexArray], power_w: float) -> FloatArray:
    gain = 4 * np.pi * intensity_w_per_sr(*field) / power_w
    return np.asarray(10 * np.log10(np.maximum(gain, 1e-10)))


def _values(case: xr.Dataset, name: str) -> NDArray[Any]:
    if "case" in case.dims:
        raise ValueError(
            f"one case is wanted, got {case.sizes['case']}: select one, as in dataset.isel(case=0)"
        )
    return np.asarray(case[name].values)


def _name(case: xr.Dataset) -> str:
    return f"case {int(case['case'])}" if "case" in case.coords else "this case"


def _segments(case: xr.Dataset) -> NDArray[np.bool_]:
    """Mask of the segments this case has; the rest is padding."""
    return np.asarray(np.isfinite(_values(case, "length")))


def _in_band(model: RationalModel, frequency_hz: ArrayLike) -> FloatArray:
    frequency = np.atleast_1d(np.asarray(frequency_hz, dtype=float))
    low, high = float(model.frequency_hz[0]), float(model.frequency_hz[-1])
    slack = BAND_SLACK * high
    # Written so that NaN is refused too.
    inside = (frequency >= low - slack) & (frequency <= high + slack)
    if not inside.all():
        raise ValueError(
            f"{frequency[~inside][0] / 1e6:.6g} MHz is outside the solved band, {low / 1e6:.6g} "
            f"to {high / 1e6:.6g} MHz: widen [frequency] in the study and run it again"
        )
    return frequency


def _drive(case: xr.Dataset, frequency_hz: float) -> ComplexArray:
    current: ComplexArray = current_at(case, frequency_hz)[0]
    return current


def _field(
    radiators: Radiators,
    current: ComplexArray,
    frequency_hz: float,
    theta_deg: ArrayLike,
    phi_deg: ArrayLike,
) -> tuple[ComplexArray, ComplexArray]:
    theta, phi = np.broadcast_arrays(np.deg2rad(theta_deg), np.deg2rad(phi_deg))
    e_theta, e_phi = far_field(radiators, current, frequency_hz, theta.ravel(), phi.ravel())
    return e_theta.reshape(theta.shape), e_phi.reshape(theta.shape)


def _resistance_ohm_per_m(case: xr.Dataset, frequency_hz: float) -> FloatArray:
    """Series resistance of each segment; the metal's part by its skin effect."""
    samples, stored = _values(case, "sample_frequency"), _values(case, "surface_resistance")
    taken = np.isfinite(samples)
    face = 0.0
    if np.any(stored[taken]):
        # On logarithmic axes the skin effect is all but straight.
        known = np.log(stored[taken])
        face = float(np.exp(np.interp(np.log(frequency_hz), np.log(samples[taken]), known)))
    here = _segments(case)
    conductor = _values(case, "conductor_factor")[here]
    plastic = _values(case, "loss_inductance")[here]
    return np.asarray(face * conductor + 2 * np.pi * frequency_hz * plastic)
