"""Gain of a stored mode in any direction, from the currents the store keeps of one case."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import ArrayLike

from simkit.geometry.wires import FloatArray
from simkit.response.evaluate import current_at, model_of, radiators_of
from simkit.response.pattern import far_field, intensity_w_per_sr
from simkit.response.rational import ComplexArray, RationalModel

if TYPE_CHECKING:
    import xarray as xr

AGREEMENT_DB = 0.3
"""A pattern of the currents alone may differ by this much from the stored gain, within `STRONG_DB`
of its peak, before it is not trusted."""

STRONG_DB = 15.0


def mode_current(case: xr.Dataset, slot: int) -> ComplexArray:
    """Segment currents of one natural mode, the largest being 1 and real.

    Parameters
    ----------
    case : xarray.Dataset
        One case of an opened store.
    slot : int
        Place along the store's mode dimension.

    Returns
    -------
    (S,) complex array
        The residue of the case's rational model at the mode's pole: of the currents for the feed
        and for the second source what both have in common.

    Raises
    ------
    StoreError
        The case has no solution.
    """
    model = model_of(case)
    taken = np.isfinite(case["sample_frequency"].values)
    used = np.isfinite(case["length"].values)
    probe = np.asarray(case["probe_current"].values, dtype=np.complex128)[taken][:, used]
    both = RationalModel(model.frequency_hz, model.weight, np.hstack([model.values, probe]))
    frequency, q = float(case["mode_frequency"][slot]), float(case["mode_q"][slot])
    pole = np.array([frequency * (1 + 0.5j / q)])
    residue = both.residues(pole)[0].reshape(2, -1)
    shape = np.linalg.svd(residue, full_matrices=False)[2][0]
    return np.asarray(shape / shape[int(np.argmax(abs(shape)))], dtype=np.complex128)


class ModePattern:
    """Gain of one mode of one case, as the store has it, but in any direction.

    Parameters
    ----------
    case : xarray.Dataset
        One case of an opened store, with a solution.
    slot : int
        Place along the store's mode dimension.

    Raises
    ------
    StoreError
        The case keeps no currents.

    Notes
    -----
    The shape comes from the currents (driven at the feed, or the mode's own, as for the stored
    gain), the level from the stored gain; where the two do not agree, as above a ground that the
    currents alone know nothing of, `trusted` is False.
    """

    def __init__(self, case: xr.Dataset, slot: int) -> None:
        self._frequency_hz = float(case["pattern_frequency"][slot])
        self._radiators = radiators_of(case)
        driven = int(case["driven"][slot]) == 1
        self._current = (
            current_at(case, self._frequency_hz)[0] if driven else mode_current(case, slot)
        )
        stored = case["gain"].isel(mode=slot).transpose("theta", "phi").values.astype(float)
        theta, phi = np.meshgrid(case["theta"].values, case["phi"].values, indexing="ij")
        own = self._level_db(theta, phi)
        strong = np.isfinite(stored) & (stored > np.nanmax(stored) - STRONG_DB)
        apart = (stored - own)[strong]
        self._offset_db = float(np.median(apart))
        self.trusted = bool(np.max(abs(apart - self._offset_db)) < AGREEMENT_DB)

    def gain_dbi(self, theta_deg: ArrayLike, phi_deg: ArrayLike) -> FloatArray:
        """Gain in dBi in the directions, which are broadcast against each other."""
        return self._level_db(theta_deg, phi_deg) + self._offset_db

    def _level_db(self, theta_deg: ArrayLike, phi_deg: ArrayLike) -> FloatArray:
        theta, phi = np.broadcast_arrays(np.deg2rad(theta_deg), np.deg2rad(phi_deg))
        field = far_field(
            self._radiators, self._current, self._frequency_hz, theta.ravel(), phi.ravel()
        )
        power = np.maximum(intensity_w_per_sr(*field).reshape(theta.shape), 1e-300)
        return np.asarray(10 * np.log10(power))
