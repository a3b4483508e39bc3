"""Ctrl-C: once finishes what is in hand, twice stops at once."""

from __future__ import annotations

import signal
import threading
from collections.abc import Callable
from types import FrameType, TracebackType
from typing import Any

_SIGNALS = (signal.SIGINT, signal.SIGTERM)


class StopRequest:
    """Listen for Ctrl-C and for the polite signal to end, inside a ``with`` block.

    Parameters
    ----------
    on_first : callable
        Called once, at the first signal. The second one raises `KeyboardInterrupt`.

    Notes
    -----
    Outside the main thread signals cannot be heard and nothing is changed.
    """

    def __init__(self, on_first: Callable[[], None]) -> None:
        self.asked = False
        self._on_first = on_first
        self._before: dict[signal.Signals, Any] = {}

    def __enter__(self) -> StopRequest:
        if threading.current_thread() is threading.main_thread():
            for number in _SIGNALS:
                self._before[number] = signal.signal(number, self._hear)
        return self

    def __exit__(
        self,
        kind: type[BaseException] | None,
        error: BaseException | None,
        trace: TracebackType | None,
    ) -> None:
        for number, handler in self._before.items():
            signal.signal(number, handler)

    def _hear(self, number: int, frame: FrameType | None) -> None:
        if self.asked:
            raise KeyboardInterrupt
        self.asked = True
        self._on_first()
