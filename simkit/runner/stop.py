"""Ctrl-C: once finishes what is in hand, twice stops at once."""

from __future__ import annotations

import signal
import threading
from types import FrameType, TracebackType
from typing import Any

_SIGNALS = (signal.SIGINT, signal.SIGTERM)


class StopRequest:
    """Listen for Ctrl-C and for the polite signal to end, inside a ``with`` block.

    Attributes
    ----------
    asked : bool
        A first signal came. It does no more than set this, since it may come in the middle of
        anything; the second one raises `KeyboardInterrupt`.

    Notes
    -----
    Outside the main thread signals cannot be heard and nothing is changed.
    """

    def __init__(self) -> None:
        self.asked = False
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
