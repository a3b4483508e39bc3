from __future__ import annotations

import os
import signal
import subprocess
import sys
import threading
import time
from collections.abc import Iterator
from pathlib import Path

import psutil
import pytest

from simkit.engine.child import Child, Kind, load_function

HERE = Path(__file__).parent
AMPLE_S = 60.0
"""A limit that no call here reaches unless it is meant to."""


@pytest.fixture
def child(monkeypatch: pytest.MonkeyPatch) -> Iterator[Child]:
    monkeypatch.syspath_prepend(HERE)
    with Child("child_functions:act") as child:
        yield child


def test_calls_go_to_one_other_process(child):
    first, second = (child.call("pid", limit_s=AMPLE_S) for _ in range(2))
    assert first.kind is Kind.VALUE
    assert first.value == second.value != os.getpid()


@pytest.mark.parametrize(
    ("what", "kind", "reason"),
    [
        ("exit", Kind.CRASHED, "exit code 3"),
        ("segfault", Kind.CRASHED, "SIGSEGV"),
        ("hang", Kind.TIMED_OUT, "time limit of 0.5 s"),
        ("engine error", Kind.OUR_ERROR, "the matrix is singular"),
        ("study error", Kind.OUR_ERROR, "ford.toml:3: width: too wide"),
        ("memory", Kind.OUR_ERROR, "not enough memory"),
        ("bug", Kind.BUG, "KeyError: 'a name that is not there'"),
        ("leave", Kind.BUG, "SystemExit: enough"),
    ],
)
def test_every_end_is_told_apart_and_the_next_call_works(child, what, kind, reason):
    outcome = child.call(what, limit_s=0.5 if what == "hang" else AMPLE_S)
    assert outcome.kind is kind
    assert reason in outcome.reason
    assert ("child_functions.py" in outcome.trace) == (kind is Kind.BUG)
    assert child.call("pid", limit_s=AMPLE_S).kind is Kind.VALUE


@pytest.mark.parametrize("function", ["no_such_module:act", "child_functions:no_such_function"])
def test_a_function_that_cannot_be_imported_is_a_bug_not_a_crash(child, function):
    child.function = function
    outcome = child.call("pid", limit_s=AMPLE_S)
    assert outcome.kind is Kind.BUG
    assert "no_such" in outcome.reason
    assert "Traceback" in outcome.trace


def test_a_script_without_a_guard_is_told_what_to_do(tmp_path):
    script = tmp_path / "unguarded.py"
    script.write_text(
        "from simkit.engine.child import Child\n"
        "Child('child_functions:act').call('pid', limit_s=60)\n"
    )
    ended = subprocess.run(
        [sys.executable, script],
        env=os.environ | {"PYTHONPATH": str(HERE)},
        capture_output=True,
        text=True,
        timeout=100,
    )
    assert ended.returncode == 1
    assert 'must do so under  if __name__ == "__main__":' in ended.stderr


def test_a_text_without_a_function_is_refused():
    with pytest.raises(ValueError, match=r"package\.module:function"):
        load_function("child_functions")


def test_an_abandoned_child_ends_the_call_in_hand_and_takes_no_other(child, tmp_path):
    sign = tmp_path / "pid"
    outcomes = []
    caller = threading.Thread(
        target=lambda: outcomes.append(child.call("hang", str(sign), limit_s=AMPLE_S))
    )
    caller.start()
    pid = _wait_for_pid(sign)
    child.abandon()
    caller.join()
    assert outcomes[0].kind is Kind.CRASHED
    assert child.call("pid", limit_s=AMPLE_S).kind is Kind.CRASHED
    assert not psutil.pid_exists(pid)


@pytest.mark.skipif(sys.platform != "linux", reason="elsewhere the orphan ends at its alarm only")
def test_a_hanging_child_dies_with_a_killed_parent(tmp_path):
    sign = tmp_path / "pid"
    script = (
        "from simkit.engine.child import Child\n"
        f"Child('child_functions:act').call('hang', {str(sign)!r}, limit_s=600)\n"
    )
    parent = subprocess.Popen(
        [sys.executable, "-c", script], env=os.environ | {"PYTHONPATH": str(HERE)}
    )
    orphan = psutil.Process(_wait_for_pid(sign))
    parent.send_signal(signal.SIGKILL)
    parent.wait()
    psutil.wait_procs([orphan], timeout=30)
    assert not orphan.is_running()


def _wait_for_pid(sign: Path) -> int:
    for _ in range(600):
        if sign.exists() and sign.read_text():
            return int(sign.read_text())
        time.sleep(0.05)
    raise AssertionError("the child never began")
