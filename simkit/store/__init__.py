"""The results store: what a run leaves on the disk and how it is read back."""

from simkit.store.read import (
    as_grid,
    open_results,
    status_labels,
    store_path,
    swept_names,
    swept_values,
)
from simkit.store.schema import Status
from simkit.store.size import estimate_bytes

__all__ = [
    "Status",
    "as_grid",
    "estimate_bytes",
    "open_results",
    "status_labels",
    "store_path",
    "swept_names",
    "swept_values",
]
