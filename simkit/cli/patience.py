"""A display of progress for what is usually over before anybody wonders."""

from __future__ import annotations

import time
from collections.abc import Callable, Iterator
from contextlib import contextmanager

PATIENCE_S = 2.0
"""How long nothing is said."""


@contextmanager
def patiently(total: int, *, after_s: float = PATIENCE_S) -> Iterator[Callable[[int], None]]:
    """Give a function to be told how many cases are done; it begins to speak after a while.

    Parameters
    ----------
    total : int
        Cases there are.
    after_s : float
        Time after which a bar is shown on a terminal, or plain lines elsewhere.
    """
    from simkit.runner.progress import Tally, choose_progress

    progress = choose_progress()
    begin = time.monotonic()
    started = 0

    def seen(done: int) -> None:
        nonlocal started
        if not started:
            if time.monotonic() - begin < after_s or done >= total:
                return
            started = done
            progress.start(Tally(total, done, to_solve=total - done))
        progress.update(Tally(total, done, to_solve=total - started, solved=done - started))

    try:
        yield seen
    finally:
        progress.close()
