"""Which case of the results a measured sweep is set beside, and what that case says."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace
from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import NDArray

from simkit.errors import StoreError
from simkit.measured.measurement import ComplexArray, FloatArray
from simkit.measured.pairing import ModelledDip, Pairing, ambiguous_pairs, pair
from simkit.response.features import find_dips, reflection
from simkit.store.read import connector_impedance, has_feedline, swept_names
from simkit.store.schema import Status

if TYPE_CHECKING:
    import xarray as xr

USUAL_DIP_OVER_POLE = 1.02
"""Where to expect the dip of a mode when no mode of the case shows one: between 1 and 7 % above
the natural frequency for straight strips; only used to place what the model does not excite."""

IntArray = NDArray[np.intp]

SAME_BUILD = 1e-6
"""Relative difference up to which a swept value is the one of the build."""


@dataclass(frozen=True)
class CaseModes:
    """Natural modes of one case with the dips they own, lowest frequency first.

    All arrays have the shape (M,); NaN where a mode owns no dip. `on_plane`: the metal stands on a
    ground plane, and its half waves are counted with those of its image. `loose`: dips that a feed
    line makes where no mode takes most of the power.
    """

    half_waves: tuple[int, ...]
    natural_hz: FloatArray
    q: FloatArray
    dip_hz: FloatArray
    return_loss_db: FloatArray
    bandwidth_hz: FloatArray
    on_plane: bool = False
    loose: tuple[ModelledDip, ...] = ()

    def expected_dips(self) -> list[ModelledDip]:
        """One entry per mode; those without a dip stand where one would be expected."""
        owns = np.isfinite(self.dip_hz)
        lift = np.full(len(self.natural_hz), USUAL_DIP_OVER_POLE)
        if owns.any():
            lift = np.interp(
                np.log(self.natural_hz),
                np.log(self.natural_hz[owns]),
                self.dip_hz[owns] / self.natural_hz[owns],
            )
        place = np.where(owns, self.dip_hz, self.natural_hz * lift)
        depth = 10 ** (-self.return_loss_db / 20)
        return [ModelledDip(float(f), float(d)) for f, d in zip(place, depth, strict=True)]

    def pair(
        self,
        measured: list[ModelledDip],
        band_hz: tuple[float, float],
        measured_band_hz: tuple[float, float],
        pins: Sequence[tuple[int, int]] = (),
    ) -> Pairing:
        """Pair measured dips with the modes; indices refer to the order of the modes."""
        order, modelled = self._ordered()
        found = pair(
            modelled, measured, band_hz, measured_band_hz, pins=_sorted_places(order, pins)
        )
        return self._back(order, found)

    def doubtful(
        self,
        best: Pairing,
        measured: list[ModelledDip],
        band_hz: tuple[float, float],
        measured_band_hz: tuple[float, float],
        pins: Sequence[tuple[int, int]] = (),
    ) -> dict[tuple[int, int], Pairing]:
        """Pairs of `best` that another pairing is nearly as good without, with that pairing."""
        order, modelled = self._ordered()
        inner = replace(best, pairs=tuple(_sorted_places(order, best.pairs)))
        found = ambiguous_pairs(
            inner, modelled, measured, band_hz, measured_band_hz, _sorted_places(order, pins)
        )
        return {(order[i], j): self._back(order, other) for (i, j), other in found.items()}

    def _back(self, order: list[int], found: Pairing) -> Pairing:
        pairs, modes = sorted((order[i], j) for i, j in found.pairs), len(self.half_waves)
        return replace(
            found,
            pairs=tuple((i, j) for i, j in pairs if i < modes),
            others=tuple((i - modes, j) for i, j in pairs if i >= modes),
        )

    def _ordered(self) -> tuple[list[int], list[ModelledDip]]:
        """Two modes may own dips in the other order, when one of them is hardly excited.

        Loose dips come in between; their places are those behind the modes.
        """
        modelled = [*self.expected_dips(), *self.loose]
        order = sorted(range(len(modelled)), key=lambda i: modelled[i].frequency_hz)
        return order, [modelled[i] for i in order]


def _sorted_places(order: list[int], pairs: Sequence[tuple[int, int]]) -> list[tuple[int, int]]:
    return [(order.index(i), j) for i, j in pairs]


def as_cases(dataset: xr.Dataset) -> xr.Dataset:
    """Return the dataset with a dimension `case`, also if it holds one case only."""
    return dataset if "case" in dataset.dims else dataset.expand_dims("case")


def modes_of_cases(dataset: xr.Dataset) -> list[CaseModes]:
    """Read the modes of every case at once; unsolved cases have none."""
    columns = {
        name: np.asarray(dataset[name].values, dtype=float)
        for name in (
            "mode_frequency",
            "mode_half_waves",
            "mode_q",
            "dip_frequency",
            "dip_return_loss",
            "dip_bandwidth",
        )
    }
    stands = np.zeros(dataset.sizes["case"], dtype=bool)
    if "path_on_plane" in dataset:
        stands = dataset["path_on_plane"].values == 1
    return [
        _modes({name: table[row] for name, table in columns.items()}, bool(stands[row]))
        for row in range(dataset.sizes["case"])
    ]


def _modes(columns: dict[str, FloatArray], on_plane: bool) -> CaseModes:
    natural = columns["mode_frequency"]
    order = np.argsort(natural)
    order = order[np.isfinite(natural[order])]
    kept = {name: column[order] for name, column in columns.items()}
    return CaseModes(
        half_waves=tuple(int(n) for n in kept["mode_half_waves"]),
        natural_hz=kept["mode_frequency"],
        q=kept["mode_q"],
        dip_hz=kept["dip_frequency"],
        return_loss_db=kept["dip_return_loss"],
        bandwidth_hz=kept["dip_bandwidth"],
        on_plane=on_plane,
    )


def with_loose_dips(case: xr.Dataset, modes: CaseModes, reference_ohm: float) -> CaseModes:
    """Return the modes of one case with the dips that its feed line makes besides theirs."""
    if not has_feedline(case):
        return modes
    frequency, gamma = simulated_reflection(case, reference_ohm)
    step_hz = float(frequency[1] - frequency[0])
    loose = [
        ModelledDip(dip.frequency_hz, 10 ** (-dip.return_loss_db / 20))
        for dip in find_dips(frequency, gamma)
        if not np.any(abs(modes.dip_hz - dip.frequency_hz) <= step_hz)
    ]
    return replace(modes, loose=tuple(loose))


def simulated_reflection(case: xr.Dataset, reference_ohm: float) -> tuple[FloatArray, ComplexArray]:
    """Frequencies and reflection at the connector of one case."""
    frequency = np.asarray(case["frequency"].values, dtype=np.float64)
    return frequency, reflection(case[connector_impedance(case)].values, reference_ohm)


def is_solved(dataset: xr.Dataset) -> np.ndarray[tuple[int, ...], np.dtype[np.bool_]]:
    """Which cases hold a solution, doubtful ones included."""
    return np.isin(dataset["status"].values, (int(Status.SOLVED), int(Status.DOUBTFUL)))


def row_of_case(dataset: xr.Dataset, case: int) -> int:
    """Place of a case along its dimension.

    Raises
    ------
    StoreError
        If there is no such case, or it was not solved.
    """
    labels = np.asarray(dataset["case"].values)
    rows = np.flatnonzero(labels == case)
    if not len(rows):
        raise StoreError(
            f"case {case} is not in these results: they hold the cases {int(labels.min())} to "
            f"{int(labels.max())}"
        )
    row = int(rows[0])
    if not is_solved(dataset)[row]:
        status = Status(int(dataset["status"].values[row])).label
        reason = str(dataset["reason"].values[row]) if "reason" in dataset else ""
        raise StoreError(
            f"case {case} has no solution to compare with: {status}"
            + (f", {reason}" if reason else "")
            + "; choose another case or run the study again"
        )
    return row


def rows_of_build(dataset: xr.Dataset, build: Mapping[str, float]) -> tuple[IntArray, list[str]]:
    """Places of the solved cases that are the build, or come nearest to it, and what to note.

    There are several where the build does not name every swept value.

    Raises
    ------
    StoreError
        If the case of just this build was not solved.
    """
    swept = swept_names(dataset)
    notes = [
        f"the build's {name} is not swept in this study and does not choose the case"
        for name in build
        if name not in swept
    ]
    wanted = {name: value for name, value in build.items() if name in swept}
    off = np.zeros((dataset.sizes["case"], len(wanted)))
    span = np.ones(len(wanted))
    for place, (name, value) in enumerate(wanted.items()):
        values = np.asarray(dataset[name].values, dtype=float)
        off[:, place] = values - value
        span[place] = float(np.ptp(values)) or max(abs(value), 1e-300)
    limit = SAME_BUILD * np.abs(np.array(list(wanted.values())))
    same = np.all(np.abs(off) <= limit, axis=1)
    if same.any() and not (same & is_solved(dataset)).any():
        row_of_case(dataset, int(dataset["case"].values[int(np.argmax(same))]))
    distance = np.where(is_solved(dataset), ((off / span) ** 2).sum(axis=1), np.inf)
    rows = np.flatnonzero(distance <= distance.min() * (1 + SAME_BUILD) + SAME_BUILD**2)
    first = int(rows[0])
    if not same[first]:
        gap = _gap(wanted, off[first])
        notes.append(f"no case has the build's values; the nearest differs by {gap}")
    return rows, notes


def _gap(wanted: Mapping[str, float], off: FloatArray) -> str:
    return ", ".join(
        f"{difference / value:+.2%} in {name}" if value else f"{difference:+.4g} in {name}"
        for (name, value), difference in zip(wanted.items(), off, strict=True)
        if abs(difference) > SAME_BUILD * abs(value)
    )
