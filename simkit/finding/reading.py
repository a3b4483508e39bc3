"""Reading the quantities of a condition from a few cases of a results dataset."""

from __future__ import annotations

import contextlib
from collections.abc import Iterator
from typing import TYPE_CHECKING, Any

import numpy as np
from numpy.typing import NDArray

from simkit.errors import DamageError, SimkitError
from simkit.finding.condition import Term
from simkit.finding.quantities import Quantity
from simkit.store.read import connector_impedance, swept_names

if TYPE_CHECKING:
    import xarray as xr

    from simkit.finding.parser import Known

FloatArray = NDArray[np.float64]

FINER = 33
"""Frequencies looked at in a band besides the stored ones, so that narrow bands are seen too."""


def known_in(dataset: xr.Dataset) -> Known:
    """Return what a condition on these results may name."""
    from simkit.finding.parser import Known

    frequency = dataset["frequency"].values
    return Known(
        {name: swept_quantity(dataset, name) for name in swept_names(dataset)},
        (float(frequency[0]), float(frequency[-1])),
    )


def swept_quantity(dataset: xr.Dataset, name: str) -> Quantity:
    """Return a swept value as a quantity, in the unit the study wrote."""
    stored = swept_names(dataset)[name]
    attrs = dataset[stored].attrs
    unit = str(attrs.get("units", "1"))
    return Quantity(
        name, "swept", unit, stored, "swept value", str(attrs.get("display_unit", unit))
    )


def read_term(part: xr.Dataset, term: Term) -> FloatArray:
    """Return one quantity of every case of a part of a dataset, NaN where a case has none.

    Parameters
    ----------
    part : xarray.Dataset
        A few cases: all of what is read is held in memory.
    term : Term

    Returns
    -------
    (N,) float array
        SI; for ``status`` the codes.

    Raises
    ------
    DamageError
        A block that is needed is damaged.
    """
    with damage_in_words(part):
        return _read(part, term)


@contextlib.contextmanager
def damage_in_words(part: xr.Dataset) -> Iterator[None]:
    """Turn what reading a damaged block raises into one sentence that names its cases."""
    from simkit.store.write import TORN

    try:
        yield
    except TORN as error:
        cases = part["case"].values
        if isinstance(error, SimkitError):
            raise
        raise DamageError(
            f"cases {cases[0]} to {cases[-1]}: damaged, cannot be read ({error}); "
            "simkit run STUDY --retry solves them anew"
        ) from error


def _read(part: xr.Dataset, term: Term) -> FloatArray:
    if term.wavelengths is not None:
        return _of_mode(part, term)
    if term.band_hz is not None:
        return _in_band(part, term.quantity.name, term.band_hz)
    return np.asarray(part[term.quantity.source].values, dtype=float)


def _of_mode(part: xr.Dataset, term: Term) -> FloatArray:
    """The lowest mode of that many half waves; several bear one number on some branched strips."""
    assert term.wavelengths is not None
    halves = np.asarray(part["mode_half_waves"].values, dtype=float)
    on_plane = part["path_on_plane"].values == 1 if "path_on_plane" in part else np.zeros(1, bool)
    wanted = float(term.wavelengths) * np.where(on_plane, 4.0, 2.0)
    fits = halves == wanted[:, None]
    if term.quantity.source not in part:  # results of an earlier simkit
        return np.full(len(halves), np.nan)
    values = np.asarray(part[term.quantity.source].values, dtype=float)
    first = np.take_along_axis(values, fits.argmax(axis=1)[:, None], axis=1)[:, 0]
    return np.where(fits.any(axis=1), first, np.nan)


def _in_band(part: xr.Dataset, name: str, band_hz: tuple[float, float]) -> FloatArray:
    size = np.abs(reflection_in_band(part, band_hz))
    extreme = size.max(axis=1) if name.startswith("worst") else size.min(axis=1)
    with np.errstate(divide="ignore"):  # a perfect match has an infinite return loss
        if name.endswith("return_loss"):
            return np.asarray(-20 * np.log10(extreme))
        vswr = (1 + extreme) / (1 - extreme)
    return np.where(extreme >= 1, np.inf, vswr)


def reflection_in_band(part: xr.Dataset, band_hz: tuple[float, float]) -> NDArray[np.complex128]:
    """Return the reflection at the connector at the stored and some more frequencies of a band.

    Between stored frequencies it is interpolated by a cubic through the four nearest: reflection,
    unlike impedance, has no poles near the real axis and turns by a fraction of a radian a step.

    Returns
    -------
    (N, F) complex array
    """
    from simkit.response.features import reflection

    frequency = part["frequency"].values
    low, high = band_hz
    margin = 3  # for the cubics at the ends
    begin = max(0, int(np.searchsorted(frequency, low)) - margin)
    end = int(np.searchsorted(frequency, high, side="right")) + margin
    seen = part[connector_impedance(part)].isel(frequency=slice(begin, end)).values
    near = frequency[begin:end]
    gamma = reflection(seen, float(part.attrs.get("reference_ohm", 50.0)))
    inside = gamma[:, (near >= low) & (near <= high)]
    return np.concatenate([inside, _between(near, gamma, np.linspace(low, high, FINER))], axis=1)


def _between(at_hz: FloatArray, gamma: NDArray[Any], wanted_hz: FloatArray) -> NDArray[Any]:
    """Values at `wanted_hz` by Lagrange polynomials through the nearest points, at most four."""
    count = min(4, len(at_hz))
    first = np.clip(np.searchsorted(at_hz, wanted_hz) - count // 2, 0, len(at_hz) - count)
    total = np.zeros((len(gamma), len(wanted_hz)), dtype=complex)
    for j in range(count):
        weight = np.ones(len(wanted_hz))
        for k in range(count):
            if k != j:
                here, other = at_hz[first + j], at_hz[first + k]
                weight *= (wanted_hz - other) / (here - other)
        total += gamma[:, first + j] * weight
    return total
