"""Run studies: blocks of cases on all cores, resumed after any interruption."""

from __future__ import annotations

from importlib import import_module
from typing import TYPE_CHECKING

from simkit.runner.result import CaseResult, InternalError, RunSummary

if TYPE_CHECKING:
    from simkit.runner.overview import RunStatus, status
    from simkit.runner.said import summary_lines
    from simkit.runner.session import run

__all__ = [
    "CaseResult",
    "InternalError",
    "RunStatus",
    "RunSummary",
    "run",
    "status",
    "summary_lines",
]

_HOME = {
    "RunStatus": "simkit.runner.overview",
    "run": "simkit.runner.session",
    "status": "simkit.runner.overview",
    "summary_lines": "simkit.runner.said",
}


def __getattr__(name: str) -> object:
    if name in _HOME:
        return getattr(import_module(_HOME[name]), name)
    raise AttributeError(f"module 'simkit.runner' has no attribute {name!r}")
