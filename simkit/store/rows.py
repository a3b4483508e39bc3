"""Results as plain rows: one dictionary per case, for tables, JSON and scripts."""

from __future__ import annotations

import math
from os import PathLike
from typing import TYPE_CHECKING, Any

import numpy as np

from simkit.errors import StoreError
from simkit.store.schema import Status

if TYPE_CHECKING:
    import xarray as xr

Row = dict[str, Any]

OF_MODE = {
    "frequency_hz": "mode_frequency",
    "q": "mode_q",
    "frequency_error": "mode_frequency_error",
    "conductance_peak_frequency_hz": "conductance_peak_frequency",
    "conductance_peak_resistance_ohm": "conductance_peak_resistance",
    "series_resonance_frequency_hz": "series_resonance_frequency",
    "series_resonance_resistance_ohm": "series_resonance_resistance",
    "parallel_resonance_frequency_hz": "parallel_resonance_frequency",
    "parallel_resonance_resistance_ohm": "parallel_resonance_resistance",
    "dip_frequency_hz": "dip_frequency",
    "dip_return_loss_db": "dip_return_loss",
    "dip_bandwidth_hz": "dip_bandwidth",
    "impedance_q": "impedance_q",
    "pattern_frequency_hz": "pattern_frequency",
    "peak_gain_dbi": "peak_gain",
    "peak_theta_deg": "peak_theta",
    "peak_phi_deg": "peak_phi",
    "directivity_dbi": "directivity",
    "efficiency": "efficiency",
    "power_balance": "power_balance",
    "cable_current_db": "cable_current",
    "on_cable": "mode_on_cable",
    "network_efficiency": "network_efficiency",
    "mismatch_factor": "mismatch_factor",
    "total_efficiency": "total_efficiency",
    "realised_gain_dbi": "realised_gain",
}
"""Keys of a mode's row and the variables of the store behind them."""


def modes(results: xr.Dataset | str | PathLike[str]) -> list[Row]:
    """Return one row per case: how it went, natural modes, resonances and dips.

    Parameters
    ----------
    results : xarray.Dataset or path
        What `simkit.open_results` returns, some cases of it, or the results folder.

    Returns
    -------
    list of dict
        In order of cases. Keys: ``case``, ``status``, ``reason`` (only if there is one),
        ``values`` (swept values, SI), ``solves``, and three lists from the lowest frequency up:

        - ``modes``: ``half_waves`` (None if the mode has no number), ``frequency_hz`` and ``q`` of
          the natural mode, then what the mode owns; what does not exist is left out. Dips,
          ``network_efficiency``, ``mismatch_factor``, ``total_efficiency`` and
          ``realised_gain_dbi`` are at the connector, the rest at the feed. For metal that stands
          on a ground plane ``half_waves`` counts it together with its image, and ``on_plane`` is
          True. With a feed cable in the model ``on_cable`` is the part of the mode on it and
          ``cable_current_db`` the current at its start over that at the feed; modes of the cable
          have no number;
        - ``resonances``: every zero of the reactance at the feed: ``frequency_hz``, ``kind``
          ("series" or "parallel"), ``resistance_ohm``;
        - ``dips``: every minimum of the reflection at the connector: ``frequency_hz``,
          ``return_loss_db``.

        A resonance or dip that a mode owns also names the mode's ``half_waves``.

    Raises
    ------
    StoreError
        If the folder cannot be read, or the dataset has no dimension `case`.

    Examples
    --------
    >>> for row in simkit.modes("results/creek_gauge"):  # doctest: +SKIP
    ...     print(row["values"], [mode["frequency_hz"] for mode in row["modes"]])
    """
    dataset = _opened(results)
    if "case" not in dataset.coords:
        raise StoreError(
            "the dataset has no coordinate 'case': give it as simkit.open_results returns it, "
            "or cases chosen with dataset.sel(case=...)"
        )
    names = _stored_names(dataset)
    if "case" not in dataset.dims:
        dataset = dataset.expand_dims("case")
    wanted = [
        "status",
        "reason",
        "solves",
        "impedance",
        "impedance_at_connector",
        "mode_half_waves",
        "path_on_plane",
        "driven",
    ]
    kept = [name for name in (*wanted, *OF_MODE.values()) if name in dataset]
    table = dataset[kept].load()
    return [_row(table.isel(case=place), names) for place in range(table.sizes["case"])]


def column_name(name: str, unit: str) -> str:
    """Return the name of a column with its unit, as ``arm_m``; without one for pure numbers."""
    return name if unit in {"", "1"} else f"{name}_{unit.lower()}"


def _stored_names(dataset: xr.Dataset) -> dict[str, str]:
    """Names of the swept values in the study, each with the name of its coordinate."""
    if "swept" in dataset.attrs:
        return dict(dataset.attrs["swept"])
    along = dataset["case"].dims  # none in a single case
    return {
        str(name): str(name)
        for name, coordinate in dataset.coords.items()
        if coordinate.dims == along and name != "case"
    }


def _opened(results: xr.Dataset | str | PathLike[str]) -> xr.Dataset:
    if isinstance(results, str | PathLike):
        from simkit.store import open_results

        results = open_results(results)
    return results


def _row(case: xr.Dataset, names: dict[str, str]) -> Row:
    status = Status(int(case["status"]))
    row: Row = {"case": int(case["case"]), "status": status.label}
    if reason := str(case["reason"].values):
        row["reason"] = reason
    row["values"] = {name: float(case[stored]) for name, stored in names.items()}
    row["solves"] = int(case["solves"])
    row["modes"] = _modes(case)
    row["resonances"] = _resonances(case, row["modes"])
    row["dips"] = _dips(case, row["modes"])
    return row


def _modes(case: xr.Dataset) -> list[Row]:
    columns = {key: np.asarray(case[name].values) for key, name in OF_MODE.items() if name in case}
    found = []
    for slot in np.flatnonzero(np.isfinite(columns["frequency_hz"])):
        number = int(case["mode_half_waves"].values[slot])
        mode: Row = {"half_waves": number if number >= 0 else None}
        if "path_on_plane" in case and int(case["path_on_plane"]) == 1:
            mode["on_plane"] = True
        mode |= {
            key: float(column[slot])
            for key, column in columns.items()
            if math.isfinite(column[slot])
        }
        if "driven" in case and int(case["driven"].values[slot]) >= 0:
            mode["driven"] = bool(case["driven"].values[slot])
        found.append(mode)
    return sorted(found, key=lambda mode: float(mode["frequency_hz"]))


def _curve(case: xr.Dataset, name: str) -> tuple[np.ndarray[Any, Any], np.ndarray[Any, Any]] | None:
    if name not in case:
        return None
    impedance = np.asarray(case[name].values)
    # An open circuit is infinite, and as good as any other.
    return None if np.isnan(impedance).any() else (case["frequency"].values, impedance)


def _resonances(case: xr.Dataset, owners: list[Row]) -> list[Row]:
    from simkit.response.features import find_resonances

    owned = [
        {
            "frequency_hz": mode[f"{kind}_resonance_frequency_hz"],
            "kind": kind,
            "resistance_ohm": mode[f"{kind}_resonance_resistance_ohm"],
            "half_waves": mode["half_waves"],
        }
        for mode in owners
        for kind in ("series", "parallel")
        if f"{kind}_resonance_frequency_hz" in mode
    ]
    curve = _curve(case, "impedance")
    known = curve is not None and np.isfinite(curve[1]).all()
    seen = [vars(found) for found in find_resonances(*curve)] if curve and known else []
    return _united(owned, seen, _step_hz(case), same=("kind",))


def _dips(case: xr.Dataset, owners: list[Row]) -> list[Row]:
    from simkit.response.features import find_dips, reflection
    from simkit.store.read import connector_impedance

    owned = [
        {
            "frequency_hz": mode["dip_frequency_hz"],
            "return_loss_db": mode["dip_return_loss_db"],
            "half_waves": mode["half_waves"],
        }
        for mode in owners
        if "dip_frequency_hz" in mode
    ]
    curve = _curve(case, connector_impedance(case))
    if curve is None:
        return _united(owned, [], 0.0)
    frequency, impedance = curve
    gamma = reflection(impedance, float(case.attrs.get("reference_ohm", 50.0)))
    seen = [
        {"frequency_hz": dip.frequency_hz, "return_loss_db": dip.return_loss_db}
        for dip in find_dips(frequency, gamma)
    ]
    return _united(owned, seen, _step_hz(case))


def _step_hz(case: xr.Dataset) -> float:
    frequency = case["frequency"].values
    return float(frequency[1] - frequency[0]) if len(frequency) > 1 else 0.0


def _united(
    owned: list[Row], seen: list[Row], step_hz: float, same: tuple[str, ...] = ()
) -> list[Row]:
    """Owned features and those seen on the curve more than a step away from every owned one."""
    fresh = [
        feature
        for feature in seen
        if not any(
            abs(feature["frequency_hz"] - other["frequency_hz"]) <= step_hz
            and all(feature[key] == other[key] for key in same)
            for other in owned
        )
    ]
    return sorted(owned + fresh, key=lambda feature: float(feature["frequency_hz"]))
