"""What `tests/engine/test_child.py` runs in child processes."""

from __future__ import annotations

import os
import signal
import sys
import time
from pathlib import Path

from simkit.errors import EngineError, Problem, StudyError


def act(what: str, where: str = "") -> object:
    return _ACTIONS[what](where)


def _segfault(where: str) -> None:
    os.kill(os.getpid(), signal.SIGSEGV)


def _hang(where: str) -> None:
    if where:
        Path(where).write_text(str(os.getpid()))
    time.sleep(600)


def _engine_error(where: str) -> None:
    raise EngineError("the matrix is singular")


def _study_error(where: str) -> None:
    raise StudyError("ford.toml", [Problem("too wide", key="width", line=3)])


def _bug(where: str) -> None:
    raise KeyError("a name that is not there")


def _memory(where: str) -> None:
    raise MemoryError


_ACTIONS = {
    "pid": lambda where: os.getpid(),
    "exit": lambda where: os._exit(3),
    "segfault": _segfault,
    "hang": _hang,
    "engine error": _engine_error,
    "study error": _study_error,
    "bug": _bug,
    "memory": _memory,
    "leave": lambda where: sys.exit("enough"),
}
