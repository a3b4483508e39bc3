"""Picking one case out of the results, and saying in words which one it is."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from simkit.plot.style import DisplayUnit, written_unit
from simkit.response.labels import half_wave_label
from simkit.store.cases import has_data, is_solved, nearest_case, one_case
from simkit.store.read import swept_names
from simkit.store.schema import Status

if TYPE_CHECKING:
    import xarray as xr

__all__ = [
    "Mode",
    "describe_case",
    "has_data",
    "is_solved",
    "nearest_case",
    "numbered_modes",
    "on_plane",
    "one_case",
    "reference_ohm",
    "swept_unit",
    "title_of",
    "why_empty",
]


@dataclass(frozen=True)
class Mode:
    """One natural mode of one case; `slot` is its place along the store's mode dimension."""

    slot: int
    half_waves: int
    frequency_hz: float
    q: float
    on_plane: bool = False

    @property
    def label(self) -> str:
        """The mode's length, as in ``3/2 wave``; ``3/4 wave`` where it stands on a plane."""
        return half_wave_label(self.half_waves, self.on_plane)


def reference_ohm(case: xr.Dataset) -> float:
    """Return the connector's reference resistance in ohm, 50 if the results do not say."""
    return float(case.attrs.get("reference_ohm", 50.0))


def why_empty(case: xr.Dataset) -> str:
    """Return the status of an unsolved case and its reason, for the middle of an empty picture."""
    status = Status(int(case["status"])).label
    reason = str(case["reason"].values) if "reason" in case else ""
    return f"{status}: {reason}" if reason else status


def swept_unit(dataset: xr.Dataset, name: str) -> DisplayUnit:
    """Return the unit in which to show a swept value, from its attributes."""
    attrs = dataset[name].attrs
    return written_unit(str(attrs.get("units", "1")), str(attrs.get("display_unit", "")))


def describe_case(case: xr.Dataset) -> str:
    """Return number and swept values of one case: ``case 7: arm 76 mm, width 8 mm``."""
    if "case" not in case.coords:
        return ""
    values = [
        f"{name} {swept_unit(case, name).value(float(case[name]))}" for name in swept_names(case)
    ]
    text = f"case {int(case['case'])}" + (": " + ", ".join(values) if values else "")
    if int(case["status"]) == Status.DOUBTFUL:
        text += " (doubtful)"
    return text


def title_of(case: xr.Dataset, what: str) -> str:
    """Return two lines: the study with what the picture shows, and which case it is."""
    study = str(case.attrs.get("title", ""))
    first = f"{study}: {what}" if study else what
    second = describe_case(case)
    return f"{first}\n{second}" if second else first


def on_plane(dataset: xr.Dataset) -> bool:
    """Return whether metal of any case stands on a ground plane, so that modes count quarters."""
    return "path_on_plane" in dataset and bool((dataset["path_on_plane"].values == 1).any())


def numbered_modes(case: xr.Dataset) -> list[Mode]:
    """Return the natural modes of one case from the lowest frequency up, empty slots left out."""
    frequency = np.asarray(case["mode_frequency"].values, dtype=float)
    half_waves = np.asarray(case["mode_half_waves"].values)
    q = np.asarray(case["mode_q"].values, dtype=float)
    found = [
        Mode(slot, int(half_waves[slot]), float(frequency[slot]), float(q[slot]), on_plane(case))
        for slot in range(frequency.size)
        if np.isfinite(frequency[slot])
    ]
    return sorted(found, key=lambda mode: mode.frequency_hz)
