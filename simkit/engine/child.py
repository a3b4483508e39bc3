"""A child process that may crash or hang without harm to anything else.

The field engine is compiled code: bad luck can end its process or keep it busy for ever. It
therefore runs in a child that can be killed, and the caller learns exactly what happened.
"""

from __future__ import annotations

import contextlib
import ctypes
import importlib
import signal
import sys
import traceback
from collections.abc import Callable, Iterator
from concurrent.futures import CancelledError
from concurrent.futures import TimeoutError as FutureTimeoutError
from dataclasses import dataclass
from enum import Enum
from multiprocessing import resource_tracker
from types import TracebackType
from typing import Any

from simkit.errors import SimkitError

START_LIMIT_S = 120.0
"""Longest time a child may take to start and import what it is to run."""

_PR_SET_PDEATHSIG = 1


class Kind(Enum):
    """How a call in the child ended."""

    VALUE = "value"
    OUR_ERROR = "our error"
    CRASHED = "crashed"
    TIMED_OUT = "timed out"
    BUG = "bug"


@dataclass(frozen=True)
class Outcome:
    """End of one call in the child.

    Attributes
    ----------
    kind : Kind
        `VALUE`: the function returned. `OUR_ERROR`: it raised a `SimkitError` or ran out of memory.
        `CRASHED`: its process ended. `TIMED_OUT`: it was killed at the limit. `BUG`: it raised
        anything else.
    value : object
        What the function returned.
    reason : str
        One sentence for `OUR_ERROR`, `CRASHED`, `TIMED_OUT` and `BUG`.
    trace : str
        Traceback text for `BUG`.
    """

    kind: Kind
    value: Any = None
    reason: str = ""
    trace: str = ""


class Child:
    """One killable process that calls one function again and again.

    Parameters
    ----------
    function : str
        ``package.module:function``, imported in the child, never here.

    Notes
    -----
    The process is spawned, not forked, so it shares no threads or locks with this one. It starts
    with the first call and anew after each crash or time-out. It ends with the thread that started
    it (Linux) and at the latest somewhat after the time limit of its last call, so that killing
    this process leaves no stray behind.
    """

    def __init__(self, function: str) -> None:
        self.function = function
        self.abandoned = False
        self._pool: Any = None
        self._future: Any = None

    def __enter__(self) -> Child:
        return self

    def __exit__(
        self,
        kind: type[BaseException] | None,
        error: BaseException | None,
        trace: TracebackType | None,
    ) -> None:
        self.close()

    def call(self, *args: object, limit_s: float) -> Outcome:
        """Call the function in the child and wait for its end.

        Parameters
        ----------
        *args
            Arguments that can be pickled.
        limit_s : float
            Seconds after which the child is killed; starting the child does not count.

        Returns
        -------
        Outcome

        Raises
        ------
        SimkitError
            The process cannot be started at all.
        """
        if self.abandoned:
            return Outcome(Kind.CRASHED, reason="the engine's process was ended on request")
        if self._pool is None:
            started = self._start()
            if started.kind is not Kind.VALUE:
                return started
        return self._ask(_call_guarded, (self.function, args, limit_s), limit_s)

    def close(self) -> None:
        """End the child; the next call starts another."""
        pool, self._pool = self._pool, None
        future, self._future = self._future, None
        if future is not None:
            future.cancel()  # stopping the pool alone leaves whoever waits for it waiting
        if pool is not None:
            with contextlib.suppress(RuntimeError):  # a broken pool has nothing left to stop
                pool.stop()
                pool.join()

    def abandon(self) -> None:
        """End the child for good, from any thread; calls in hand and later ones read as crashed."""
        self.abandoned = True
        self.close()

    def _start(self) -> Outcome:
        import multiprocessing

        from pebble import ProcessPool

        self._pool = ProcessPool(max_workers=1, context=multiprocessing.get_context("spawn"))
        with interrupts_held():
            started = self._ask(_prepare, (self.function,), START_LIMIT_S)
        if started.kind is Kind.VALUE and not self.abandoned:
            return started
        self.close()
        if started.kind is Kind.BUG or self.abandoned:
            return started
        raise SimkitError(
            f"the engine's process cannot be started: {started.reason}. A script that calls "
            'simkit, it must do so under  if __name__ == "__main__":  because that process imports '
            "the script too; if not, is there memory left?"
        )

    def _ask(
        self, task: Callable[..., Outcome], args: tuple[object, ...], limit_s: float
    ) -> Outcome:
        from concurrent.futures.process import BrokenProcessPool

        from pebble import ProcessExpired

        # The pool's own time limits follow the wall clock, which can be set; waiting is monotonic.
        try:
            future = self._future = self._pool.schedule(task, args=args)
            outcome: Outcome = future.result(timeout=limit_s)
            self._future = None
        except FutureTimeoutError:
            self.close()
            return Outcome(Kind.TIMED_OUT, reason=f"stopped at the time limit of {limit_s:.3g} s")
        except ProcessExpired as error:
            self.close()
            return Outcome(Kind.CRASHED, reason=_crash_text(error.exitcode))
        except (BrokenProcessPool, CancelledError):
            self.close()
            return Outcome(Kind.CRASHED, reason="the engine's process ended")
        except BaseException:
            self.close()
            raise
        return outcome


@contextlib.contextmanager
def interrupts_held() -> Iterator[None]:
    """Keep Ctrl-C from processes and threads started inside; this thread gets it afterwards.

    The terminal sends it to every process of the run, but only the leading one may act on it.
    """
    # Starting it later would let interrupts through again in the thread that does so.
    resource_tracker.ensure_running()
    before = signal.pthread_sigmask(signal.SIG_BLOCK, {signal.SIGINT})
    try:
        yield
    finally:
        signal.pthread_sigmask(signal.SIG_SETMASK, before)


def _crash_text(exitcode: int | None) -> str:
    if exitcode is not None and exitcode < 0:
        with contextlib.suppress(ValueError):
            name = signal.Signals(-exitcode).name
            hint = ", perhaps for want of memory" if name == "SIGKILL" else ""
            return f"the engine's process was ended by {name}{hint}"
    return f"the engine's process ended with exit code {exitcode}"


def load_function(spec: str) -> Callable[..., Any]:
    """Import ``package.module:function``.

    Raises
    ------
    ValueError
        The text is not of that form.
    """
    module, _, name = spec.partition(":")
    if not module or not name:
        raise ValueError(f"{spec!r} is not of the form package.module:function")
    function: Callable[..., Any] = getattr(importlib.import_module(module), name)
    return function


def _prepare(function: str) -> Outcome:
    """First call in a new child: tie its life to the parent's and import what it will run."""
    if sys.platform == "linux":
        ctypes.CDLL(None, use_errno=True).prctl(_PR_SET_PDEATHSIG, signal.SIGKILL)
    return _guarded(lambda: load_function(function).__name__)


def _call_guarded(function: str, args: tuple[object, ...], limit_s: float) -> Outcome:
    # An orphan that hangs in compiled code still gets the alarm, which ends the process.
    signal.signal(signal.SIGALRM, signal.SIG_DFL)
    signal.setitimer(signal.ITIMER_REAL, 2.0 * limit_s + 10.0)
    try:
        return _guarded(lambda: load_function(function)(*args))
    finally:
        signal.setitimer(signal.ITIMER_REAL, 0.0)


def _guarded(action: Callable[[], object]) -> Outcome:
    """Turn exceptions into text here: their classes need not survive pickling."""
    try:
        return Outcome(Kind.VALUE, value=action())
    except SimkitError as error:
        return Outcome(Kind.OUR_ERROR, reason=str(error))
    except MemoryError:
        return Outcome(Kind.OUR_ERROR, reason="not enough memory for this case")
    except (Exception, SystemExit) as error:
        reason = "".join(traceback.format_exception_only(error)).strip()
        return Outcome(Kind.BUG, reason=reason, trace=traceback.format_exc())
