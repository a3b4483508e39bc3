"""One measured file beside a stored sweep of 1000 cases: seconds of the command, from its start.

    python tests/benchmarks/bench_compare.py [CASES] [ROUNDS]

The creek-gauge study with a sweep of that many arm lengths and widths. Each worker solves the
nominal antenna once through the engine; the other cases are that solution stretched to their arm,
so that the store holds what a real sweep leaves: modes, dips and 1351 impedances a case, written by
the run itself in its usual blocks. Then the commands are started anew as a user would, each several
times: the first start also compiles the libraries where Python kept no byte code of them, as after
a fresh installation. Seconds of the processor stand beside those of the clock, which grow with
whatever else the machine does. Nothing is asserted.
"""

from __future__ import annotations

import os
import resource
import shutil
import subprocess
import sys
import tempfile
import time
from dataclasses import replace
from functools import lru_cache
from pathlib import Path

HERE = Path(__file__).parent
os.environ["PYTHONPATH"] = os.pathsep.join([str(HERE), os.environ.get("PYTHONPATH", "")])
for _library in ("OMP", "OPENBLAS", "MKL"):
    os.environ[f"{_library}_NUM_THREADS"] = "1"

import numpy as np  # noqa: E402

STUDIES = HERE.parents[1] / "studies"
SWEEP = """\
[sweep]
arm   = { from = "70 mm", to = "82 mm", count = %d }
width = { from = "4 mm", to = "12 mm", count = 25 }
"""
ARM_M = 76e-3
PULL = 0.03
"""Part by which the modes fall when the width doubles, so that cases differ in two ways."""


@lru_cache(maxsize=1)
def _nominal(plan):
    from simkit.runner.solve import solve_case
    from simkit.study import load_study

    antenna = load_study(STUDIES / "creek_gauge.toml").nominal()
    return antenna, solve_case(antenna, plan)


def solve(antenna, plan):
    """The nominal solution stretched to another arm and width."""
    nominal, solved = _nominal(plan)
    strip, first = antenna.strips[0], nominal.strips[0]
    longer = (strip.path_m[-1][0] - strip.path_m[0][0]) / ARM_M
    wider = strip.widths[0] / first.widths[0]
    factor = longer * wider**PULL
    frequency = np.linspace(
        antenna.frequency.start_hz, antenna.frequency.stop_hz, antenna.frequency.points
    )
    arrays = {}
    for name, value in solved.arrays.items():
        moved = value
        if name == "impedance":
            moved = np.interp(frequency * factor, frequency, value)
        elif "frequency" in name and name != "mode_frequency_error":
            moved = value / factor
        arrays[name] = moved
    return replace(solved, seconds=0.3, arrays=arrays)


def timed(words: list[str], rounds: int, byte_code: Path) -> list[tuple[float, float]]:
    """Seconds by the clock and of the processor, the process's start and the pictures included.

    Byte code is kept in a folder of our own, so that it is kept whatever the surroundings say.
    """
    surroundings = os.environ | {"PYTHONPYCACHEPREFIX": str(byte_code)}
    surroundings.pop("PYTHONDONTWRITEBYTECODE", None)
    took = []
    for _ in range(rounds):
        begin, busy = time.perf_counter(), _busy()
        done = subprocess.run(
            [sys.executable, "-m", "simkit", *words],
            capture_output=True,
            text=True,
            check=False,
            env=surroundings,
        )
        took.append((time.perf_counter() - begin, _busy() - busy))
        if done.returncode:
            sys.exit(f"{' '.join(words)}: {done.stderr}")
    return took


def _busy() -> float:
    """Seconds of the processor that ended children have used."""
    used = resource.getrusage(resource.RUSAGE_CHILDREN)
    return used.ru_utime + used.ru_stime


def main() -> None:
    cases, rounds = (int(word) for word in [*sys.argv[1:], "1000", "3"][:2])
    from simkit.runner import run
    from simkit.runner.prepare import Solver
    from simkit.study import load_study

    folder = Path(tempfile.mkdtemp(prefix="simkit-bench-"))
    try:
        text = (STUDIES / "creek_gauge.toml").read_text()
        head, tail = text.index("[sweep]"), text.index("# Build 1 was meant")
        (folder / "thousand.toml").write_text(
            text[:head] + SWEEP % max(cases // 25, 2) + text[tail:]
        )
        shutil.copy(STUDIES / "creek_gauge_build_1.s1p", folder / "build.s1p")
        begin = time.perf_counter()
        study = load_study(folder / "thousand.toml")
        summary = run(
            study, folder / "out", solver=Solver("bench_compare:solve", version="stretched")
        )
        counted = sum(summary.counts.values())
        print(f"{counted} cases written by the run in {time.perf_counter() - begin:.0f} s")
        results = str(summary.results_dir)
        size = sum(path.stat().st_size for path in Path(results).rglob("*") if path.is_file())
        print(f"store {size / 1e6:.0f} MB")
        for words in (["compare"], ["compare", "--nearest"]):
            took = timed([*words, results, str(folder / "build.s1p")], rounds, folder / "pyc")
            shown = ", ".join(f"{clock:.1f} ({busy:.1f})" for clock, busy in took)
            best, least = (min(column) for column in zip(*took, strict=True))
            print(
                f"simkit {' '.join(words):18s} {best:.1f} s, {least:.1f} s of the processor, at "
                f"best of {shown} (wanted: 5)",
                flush=True,
            )
    finally:
        shutil.rmtree(folder, ignore_errors=True)


if __name__ == "__main__":
    main()
