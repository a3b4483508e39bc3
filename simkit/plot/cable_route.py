"""The feed cable as one more branch in pictures along the strips."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import NDArray
from scipy.interpolate import PchipInterpolator

from simkit.geometry.cable import ON_CABLE
from simkit.plot.cases import Mode
from simkit.response.mode_pattern import mode_current
from simkit.response.strip_route import Joining, Leg, Route

if TYPE_CHECKING:
    import xarray as xr

FloatArray = NDArray[np.float64]
IntArray = NDArray[np.int64]
ComplexArray = NDArray[np.complex128]

NAME = "feed cable"


def has_cable(case: xr.Dataset) -> bool:
    """Whether the model of a case holds the feed cable."""
    return bool(np.any(case["strip_index"].values == ON_CABLE))


def cable_route(case: xr.Dataset) -> Route:
    """The cable from the feed to its end, as a leg on a strip more than the case has."""
    own, lengths = _own(case)
    length = float(lengths.sum())
    reach = float(lengths[0]) / 2  # nearer to the joint no segment tells the current
    leg = Leg(case.sizes["strip"], length, 0.0, length, 0.0)
    return Route(
        (leg,),
        length,
        start="joint",
        open_end=not _grounded(case, own),
        joinings=(Joining(0.0, reach),),
    )


def segments_of(case: xr.Dataset) -> tuple[IntArray, FloatArray]:
    """Strip of every segment and its place 0..1 along it, those of the cable included."""
    index = np.asarray(case["strip_index"].values, dtype=int)
    position = np.asarray(case["strip_position"].values, dtype=float)
    if has_cable(case):
        own, lengths = _own(case)
        index, position = index.copy(), position.copy()
        index[own] = case.sizes["strip"]
        position[own] = _middles(lengths) / lengths.sum()
    return index, position


def with_cable(
    case: xr.Dataset, mode: Mode, current: ComplexArray, position: FloatArray
) -> ComplexArray:
    """Currents along the strips with that along the cable as one more row; the largest is 1.

    Parameters
    ----------
    case : xarray.Dataset
        One case with a cable.
    mode : Mode
    current : (strip, P) complex array
        From the store.
    position : (P,) float array
        0..1 along each strip.
    """
    own, lengths = _own(case)
    shape = mode_current(case, mode.slot)
    known = shape * _scale(case, shape, current, position)
    at = np.concatenate([[0.0], _middles(lengths)])
    value = np.concatenate([known[own[:1]], known[own]])
    if not _grounded(case, own):
        at, value = np.append(at, lengths.sum()), np.append(value, 0.0)
    places = position * lengths.sum()
    row = PchipInterpolator(at, value.real)(places) + 1j * PchipInterpolator(at, value.imag)(places)
    rows = np.vstack([current, row[np.newaxis]])
    return np.asarray(rows / rows.flat[int(np.nanargmax(abs(rows)))])


def _own(case: xr.Dataset) -> tuple[IntArray, FloatArray]:
    own = np.flatnonzero(case["strip_index"].values == ON_CABLE)
    return own, np.asarray(case["length"].values, dtype=float)[own]


def _middles(lengths_m: FloatArray) -> FloatArray:
    return np.asarray(np.cumsum(lengths_m) - lengths_m / 2)


def _grounded(case: xr.Dataset, own: IntArray) -> bool:
    """The cable ends on a perfect plane, into which its current flows."""
    if "ground_conductivity" not in case or not np.isinf(float(case["ground_conductivity"])):
        return False
    half = float(case["length"][own[-1]]) / 2
    end = float(case["z"][own[-1]]) + half * float(case["direction_z"][own[-1]])
    return abs(end) < 1e-6


def _scale(
    case: xr.Dataset, shape: ComplexArray, current: ComplexArray, position: FloatArray
) -> complex:
    """Factor from the segments' currents of a mode to those along the strips."""
    index = np.asarray(case["strip_index"].values, dtype=int)
    place = np.asarray(case["strip_position"].values, dtype=float)
    segments, strips = [], []
    for strip, stored in enumerate(current):
        own = np.flatnonzero((index == strip) & np.isfinite(place))
        if own.size < 2:
            continue
        # A strip run against its own direction in the model has its currents reversed.
        way = np.sign(place[own[-1]] - place[own[0]])
        segments.append(way * shape[own])
        strips.append(np.interp(place[own], position, stored))
    own_current, along = np.concatenate(segments), np.concatenate(strips)
    return complex(np.vdot(own_current, along) / np.vdot(own_current, own_current))
