"""A stored sweep as the model of a fit: nothing is solved if it covers the bounds."""

from __future__ import annotations

import itertools
from collections.abc import Mapping
from typing import TYPE_CHECKING

import numpy as np
from scipy.interpolate import CubicSpline

from simkit.errors import StoreError
from simkit.measured.connector import FeedLineModel, values_of_line_alone
from simkit.measured.measurement import ComplexArray, FloatArray
from simkit.measured.selection import as_cases, is_solved, modes_of_cases
from simkit.measured.simulator import REFERENCE_OHM, Axis, Node, Surrogate
from simkit.measured.variation import SCALE, Variation
from simkit.response.features import reflection
from simkit.store.read import swept_names

if TYPE_CHECKING:
    import xarray as xr

FEWEST_NODES = 3
"""Values along a swept quantity; with fewer its curve is anybody's guess."""

ENOUGH_NODES = 4
"""Values around the bounds that make a fair curve; more are only taken where the bounds reach."""


def surrogate_of_results(
    dataset: xr.Dataset,
    bounds: Mapping[str, tuple[float, float]],
    variation: Variation | None = None,
) -> Surrogate:
    """Interpolate the cases of a grid sweep at the feed, and put the feed line before them.

    Parameters
    ----------
    dataset : xarray.Dataset
        Results.
    bounds : mapping of str to (float, float)
        What must be covered, SI; `scale`, and what changes the feed line alone, needs no cases.
    variation : Variation, optional
        The study to be fitted, if it has a feed line.

    Returns
    -------
    Surrogate

    Raises
    ------
    StoreError
        If a value is not swept, the sweep does not cover its bounds, is no full grid, or has
        cases without a solution.
    """
    dataset, swept = as_cases(dataset), list(swept_names(dataset))
    feedline: FeedLineModel | None = None
    line_names: tuple[str, ...] = ()
    if variation is not None and variation.study.nominal().feedline:
        feedline = FeedLineModel(variation, {})
        ends = {name: _ends(dataset, name) for name in swept} | dict(bounds)
        ends.pop(SCALE, None)
        line_names = values_of_line_alone(variation, {}, ends)
        dataset = _at_first(dataset, [name for name in swept if name in line_names])
    axes = [
        Axis(name, np.unique(np.asarray(dataset[name].values, dtype=float)))
        for name in swept
        if name not in line_names
    ]
    _check_cover(axes, {name: pair for name, pair in bounds.items() if name not in line_names})
    axes = [_around(axis, bounds.get(axis.name)) for axis in axes]
    rows = _rows(dataset, axes)
    if not is_solved(dataset)[rows].all():
        bad = int(dataset["case"].values[rows[~is_solved(dataset)[rows]][0]])
        raise StoreError(
            f"case {bad} of the stored sweep has no solution, so it cannot be interpolated; leave "
            "--results out to solve through the engine"
        )
    frequency = np.asarray(dataset["frequency"].values, dtype=float)
    band = (float(frequency[0]), float(frequency[-1]))
    nodes = _nodes(dataset, rows, frequency)
    return Surrogate(axes, nodes, band, feedline, line_names)


def _ends(dataset: xr.Dataset, name: str) -> tuple[float, float]:
    values = np.asarray(dataset[name].values, dtype=float)
    return float(values.min()), float(values.max())


def _at_first(dataset: xr.Dataset, names: list[str]) -> xr.Dataset:
    """The cases at the first value of some swept quantities: the antenna is the same at others."""
    for name in names:
        values = np.asarray(dataset[name].values, dtype=float)
        dataset = dataset.isel(case=np.flatnonzero(values == values[0]))
    return dataset


def _nodes(
    dataset: xr.Dataset, rows: np.ndarray[tuple[int, ...], np.dtype[np.intp]], frequency: FloatArray
) -> list[Node]:
    gamma = reflection(dataset["impedance"].values, REFERENCE_OHM)
    modes = modes_of_cases(dataset)
    nodes = []
    for row in rows:
        found = modes[row]
        table = zip(
            found.half_waves,
            zip(found.dip_hz, found.natural_hz, found.q, found.return_loss_db, strict=True),
            strict=True,
        )
        owned: dict[int, tuple[float, float, float, float]] = {}
        for half_waves, (dip, natural, q, loss) in table:
            owned.setdefault(half_waves, (float(dip), float(natural), float(q), float(loss)))
        peaks = _peaks(dataset.isel(case=int(row)))
        nodes.append(Node(_curve(frequency, gamma[row]), owned, found.on_plane, peaks))
    return nodes


def _peaks(case: xr.Dataset) -> dict[int, tuple[float, float]]:
    """Conductance peaks of one case by half waves."""
    if "conductance_peak_frequency" not in case:
        return {}
    found: dict[int, tuple[float, float]] = {}
    for number, place, ohm in zip(
        case["mode_half_waves"].values,
        case["conductance_peak_frequency"].values,
        case["conductance_peak_resistance"].values,
        strict=True,
    ):
        if number >= 0 and np.isfinite(place):
            found.setdefault(int(number), (float(place), float(ohm)))
    return found


def _curve(frequency: FloatArray, gamma: ComplexArray) -> CubicSpline:
    return CubicSpline(frequency, gamma)


def _around(axis: Axis, bounds: tuple[float, float] | None) -> Axis:
    """The nodes that enclose the bounds, and the nearest others up to `ENOUGH_NODES`.

    Nodes far away only narrow the band in which all of them can be compared. A value held at a node
    needs no other; one that is not asked for keeps them all.
    """
    if bounds is None:
        return axis
    nodes = axis.nodes
    if _is_held(axis, bounds):
        return Axis(axis.name, nodes[np.argmin(np.abs(nodes - bounds[0]))][None])
    first = max(int(np.searchsorted(nodes, bounds[0], side="right")) - 1, 0)
    last = min(int(np.searchsorted(nodes, bounds[1], side="left")), len(nodes) - 1)
    middle = (bounds[0] + bounds[1]) / 2
    order = np.argsort(np.abs(nodes - middle), kind="stable")[:ENOUGH_NODES]
    return Axis(axis.name, nodes[min(first, order.min()) : max(last, order.max()) + 1])


def _is_held(axis: Axis, bounds: tuple[float, float]) -> bool:
    """The bounds are one value, and it is a node."""
    near = np.abs(axis.nodes - bounds[0]).min()
    return bounds[0] == bounds[1] and bool(near <= 1e-9 * abs(bounds[0]))


def _check_cover(axes: list[Axis], bounds: Mapping[str, tuple[float, float]]) -> None:
    swept = {axis.name: axis.nodes for axis in axes}
    for name, (low, high) in bounds.items():
        if name == SCALE:
            continue
        if name not in swept:
            raise StoreError(
                f"the stored sweep does not vary `{name}`, but {', '.join(swept) or 'nothing'}; "
                "sweep it too, or leave --results out"
            )
        nodes = swept[name]
        if _is_held(Axis(name, nodes), (low, high)):
            continue
        if len(nodes) < FEWEST_NODES:
            raise StoreError(
                f"the stored sweep has only {len(nodes)} values of `{name}`, at least "
                f"{FEWEST_NODES} are needed to interpolate; leave --results out"
            )
        slack = 1e-9 * abs(high - low)
        if low < nodes[0] - slack or high > nodes[-1] + slack:
            raise StoreError(
                f"the stored sweep holds `{name}` from {nodes[0]:.6g} to {nodes[-1]:.6g} (SI), the "
                f"bounds go from {low:.6g} to {high:.6g}: narrow them, or leave --results out"
            )


def _rows(dataset: xr.Dataset, axes: list[Axis]) -> np.ndarray[tuple[int, ...], np.dtype[np.intp]]:
    """Place of the case at every node, in the order of the nodes."""
    columns = [np.asarray(dataset[axis.name].values, dtype=float) for axis in axes]
    place = {values: row for row, values in enumerate(zip(*columns, strict=True))}
    points = itertools.product(*(map(float, axis.nodes) for axis in axes))
    try:
        return np.array([place[point] for point in points], dtype=np.intp)
    except KeyError:
        raise StoreError(
            "the stored sweep is no full grid, so it cannot be interpolated; leave --results out "
            "to solve through the engine"
        ) from None
