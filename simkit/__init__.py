"""simkit: natural modes, sweeps and measured comparison for antennas made of flat metal strip.

The names below are the whole public interface. Each is imported when it is first used, so that
``import simkit`` stays quick and pulls in no plotting, cluster, storage or engine library.
"""

from __future__ import annotations

from importlib import import_module
from typing import TYPE_CHECKING

from simkit.errors import (
    ConditionError,
    EngineError,
    ExportError,
    FeedlineError,
    GeometryError,
    MeasurementError,
    SimkitError,
    StoreError,
    StudyError,
)

if TYPE_CHECKING:
    from simkit import plot
    from simkit.exports import export
    from simkit.feedline.sources import match
    from simkit.finding import query
    from simkit.measured import compare, fit, read_touchstone, trim_pair
    from simkit.measured import trim_fitted as trim
    from simkit.runner import run
    from simkit.store import as_grid, open_results
    from simkit.store.rows import modes
    from simkit.study import load_study

__version__ = "0.1.0"

__all__ = [
    "ConditionError",
    "EngineError",
    "ExportError",
    "FeedlineError",
    "GeometryError",
    "MeasurementError",
    "SimkitError",
    "StoreError",
    "StudyError",
    "__version__",
    "as_grid",
    "compare",
    "export",
    "fit",
    "load_study",
    "match",
    "modes",
    "open_results",
    "plot",
    "query",
    "read_touchstone",
    "run",
    "trim",
    "trim_pair",
]

_HOME = {
    "as_grid": "simkit.store",
    "compare": "simkit.measured",
    "export": "simkit.exports",
    "fit": "simkit.measured",
    "load_study": "simkit.study",
    "match": "simkit.feedline.sources",
    "modes": "simkit.store.rows",
    "open_results": "simkit.store",
    "query": "simkit.finding",
    "read_touchstone": "simkit.measured",
    "run": "simkit.runner",
    "trim": "simkit.measured:trim_fitted",
    "trim_pair": "simkit.measured",
}


def __getattr__(name: str) -> object:
    if name == "plot":
        return import_module("simkit.plot")
    if name in _HOME:
        module, _, other = _HOME[name].partition(":")
        return getattr(import_module(module), other or name)
    raise AttributeError(f"module 'simkit' has no attribute {name!r}")


def __dir__() -> list[str]:
    return sorted(__all__)
