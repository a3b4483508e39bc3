"""Open results for reading."""

from __future__ import annotations

from os import PathLike
from pathlib import Path
from typing import TYPE_CHECKING, Any

import numpy as np

from simkit.errors import DamageError, StoreError
from simkit.store.files import store_exists
from simkit.store.remote import Place, place, zarr_store
from simkit.store.schema import Status

if TYPE_CHECKING:
    import xarray as xr
    from numpy.typing import NDArray

STORE_NAME = "store.zarr"
UNFINISHED_NAME = "store.new.zarr"


def store_path(path: str | PathLike[str] | Place) -> Place:
    """The store inside a results folder; a path to the store itself is taken as it is.

    Raises
    ------
    StoreError
        There is no such folder, or nothing was run into it.
    """
    folder = place(path)
    if folder.suffix == ".zarr":
        return folder
    if not folder.exists():
        raise StoreError(f"{folder}: no such results folder; `simkit run STUDY` makes one")
    if not folder.is_dir():
        raise StoreError(f"{folder}: this is a file; give the results folder that a run made")
    if not store_exists(folder / STORE_NAME):
        raise StoreError(
            f"{folder}: there is no {STORE_NAME} in this folder; `simkit run STUDY` writes one "
            "to results/NAME, NAME being that of the study file"
        )
    return folder / STORE_NAME


def open_results(path: str | PathLike[str] | Place) -> xr.Dataset:
    """Open the results of a run.

    Parameters
    ----------
    path : path or address
        Results folder, as `simkit run` prints it at the end; any fsspec address will do.

    Returns
    -------
    xarray.Dataset
        Variables and units as in `simkit.store.schema.VARIABLES`, read from the disk when they are
        used. Cases that are not solved read NaN; `status_labels` gives the words for `status`. A
        run still going may be opened; open it again to see what was added.

    Raises
    ------
    StoreError
        The folder is missing, empty, damaged or written by another version; `DamageError` if some
        cases of it can be solved anew.
    """
    import xarray as xr

    from simkit.store.write import TORN, read_attrs

    store = store_path(path)
    attrs = read_attrs(store)
    try:
        dataset = xr.open_zarr(zarr_store(store, read_only=True), consolidated=False, chunks=None)
        # Small, and wanted as plain text for selecting strips by name.
        strips = dataset["strip"]
        words = np.array([str(name) for name in strips.values])
        dataset = dataset.assign_coords(strip=("strip", words, strips.attrs))
    except (*TORN, KeyError) as error:
        raise StoreError(
            f"{store}: damaged, cannot be read: {error}; simkit run STUDY --fresh solves the study "
            "anew"
        ) from error
    missing = [name for name in attrs["variables"] if name not in dataset]
    if missing:
        raise StoreError(
            f"{store}: damaged, the arrays {', '.join(missing)} are missing; "
            "start anew with --fresh"
        )
    _check_axes(store, dataset)
    try:
        dataset["status"].load()
    except TORN as error:
        raise DamageError(
            f"{store}: the status of a block is damaged ({error}); "
            "run the study again, it solves that block anew"
        ) from error
    _check_files(store, int(attrs["block_size"]), dataset["status"].values)
    return _in_order(dataset, attrs)


def _check_axes(store: Place, dataset: xr.Dataset) -> None:
    """Read what the arrays are over, refuse a store where that is torn or reads as zeros."""
    from simkit.store.write import TORN

    for name in dataset.coords:
        try:
            values = dataset[name].variable.load().values
        except TORN as error:
            raise StoreError(
                f"{store}: damaged, the values of `{name}` cannot be read ({error}); simkit run "
                "STUDY --fresh solves the study anew"
            ) from error
        if name in ("case", "frequency") and not (np.diff(values) > 0).all():
            raise StoreError(
                f"{store}: damaged, the values of `{name}` are not there any more; simkit run "
                "STUDY --fresh solves the study anew"
            )


def _check_files(store: Place, block_size: int, statuses: NDArray[np.int8]) -> None:
    """Refuse a store that has lost a file without which solved cases would read as empty.

    At an address, where each look costs time, a lost file shows only where cases are solved anew.
    """
    from simkit.store.write import is_complete

    if not isinstance(store, Path):
        return
    for start in range(0, len(statuses), block_size):
        stop = min(start + block_size, len(statuses))
        if not is_complete(store, start // block_size, statuses[start:stop]):
            raise DamageError(
                f"{store}: damaged, the curves of the solved cases from {start} to {stop - 1} are "
                "not there any more; simkit run STUDY --retry solves them anew"
            )


def damaged_cases(path: str | PathLike[str] | Place) -> list[range]:
    """Cases whose results cannot be read, block by block; every array of the store is read.

    Parameters
    ----------
    path : path or address
        Results folder, or the store itself.

    Returns
    -------
    list of range
    """
    from simkit.store.write import StoreFile

    store = StoreFile(store_path(path))
    rows = [store.rows(block) for block in range(store.blocks) if store.is_damaged(block)]
    return [range(block.start, block.stop) for block in rows]


def _in_order(dataset: xr.Dataset, attrs: dict[str, Any]) -> xr.Dataset:
    """Coordinates and variables in the order of study and schema, not of the disk."""
    import xarray as xr

    swept, variables = list(attrs["swept"]), list(attrs["variables"])
    others = [str(name) for name in dataset.variables if name not in {*swept, *variables, "case"}]
    coords = {name: dataset[name].variable for name in ("case", *swept, *sorted(others))}
    data = {name: dataset[name].variable for name in variables}
    if not attrs.get("feedline"):
        data = _connector_is_feed(data)
    return xr.Dataset(data, coords, dataset.attrs)


def _connector_is_feed(data: dict[str, xr.Variable]) -> dict[str, xr.Variable]:
    """Without a feed line both planes are one, and the impedance is stored once."""
    found: dict[str, xr.Variable] = {}
    for name, variable in data.items():
        if name == "impedance":
            found[name] = variable
            found["impedance_at_connector"] = variable.copy(deep=False)
            found["impedance_at_connector"].attrs = variable.attrs | {
                "long_name": "impedance at the connector, which is the feed"
            }
        elif name != "impedance_at_connector":
            found[name] = variable
    return found


def has_feedline(dataset: xr.Dataset) -> bool:
    """Return whether results, or one case of them, are of a study with a feed line."""
    return bool(dataset.attrs.get("feedline"))


def connector_impedance(dataset: xr.Dataset) -> str:
    """Return the name of the variable that holds the impedance at the connector.

    It is that of the feed where nothing lies between.
    """
    between = dataset.attrs.get("feedline", "impedance_at_connector" in dataset)
    return "impedance_at_connector" if between else "impedance"


def status_labels(dataset: xr.Dataset) -> xr.DataArray:
    """The status of every case as a word: ``solved``, ``timed-out`` ...

    Returns
    -------
    xarray.DataArray
        Text, with the dimensions of ``status``.
    """
    status = dataset["status"]
    words = np.array([code.label for code in Status])
    return status.copy(data=words[status.values.astype(int)]).drop_attrs()


def swept_names(dataset: xr.Dataset) -> dict[str, str]:
    """Name in the study -> name of the coordinate along `case`, in the order of the study.

    The two are the same: a study that sweeps a name the store needs itself is refused.
    """
    return dict(dataset.attrs["swept"])


def swept_values(dataset: xr.Dataset, case: int) -> dict[str, float]:
    """Swept values of one case, SI."""
    return {name: float(dataset[name].values[case]) for name in swept_names(dataset)}


def as_grid(dataset: xr.Dataset) -> xr.Dataset:
    """Unstack a grid sweep: one dimension per swept value in place of ``case``.

    Parameters
    ----------
    dataset : xarray.Dataset
        From `open_results`.

    Returns
    -------
    xarray.Dataset
        Loaded into memory; without a sweep the ``case`` dimension is simply dropped. `case` becomes
        a coordinate over the grid.

    Raises
    ------
    StoreError
        The study takes its swept values in step (``method = "list"``), so that they span no grid.
    """
    import xarray as xr

    method = dataset.attrs.get("sweep_method")
    if method != "grid":
        raise StoreError(
            f"the cases of {dataset.attrs.get('title', 'this study')!r} were made by the sweep "
            f"method {method!r} and span no grid; select them along `case` instead, as in "
            'dataset.isel(case=0), or use `method = "grid"`'
        )
    stored = list(swept_names(dataset))
    shape = [int(count) for count in dataset.attrs["sweep_shape"]]
    if not stored:
        return dataset.isel(case=0)
    sizes = dict(zip(stored, shape, strict=True))
    if dataset.sizes["case"] != int(np.prod(shape)):
        raise StoreError(
            f"a part of the cases ({dataset.sizes['case']} of {int(np.prod(shape))}) spans no "
            "grid; unstack the whole dataset first, then select"
        )
    variables = {
        name: _on_grid(str(name), variable, sizes) for name, variable in dataset.variables.items()
    }
    coords = {name: variables.pop(name) for name in dataset.coords}
    return xr.Dataset(variables, coords, dataset.attrs).transpose(*stored, ...)


def _on_grid(name: str, variable: xr.Variable, sizes: dict[str, int]) -> xr.Variable:
    """One variable with the swept dimensions `sizes`, in their order, in place of ``case``."""
    import xarray as xr

    if "case" not in variable.dims:
        return variable
    if name == "case":
        return xr.Variable(tuple(sizes), variable.values.reshape(*sizes.values()), variable.attrs)
    grid = variable.unstack(case=sizes)
    if name in sizes:  # the same along every other swept value
        return grid.isel({other: 0 for other in sizes if other != name})
    return grid
