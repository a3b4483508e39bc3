"""A run of 100,000 cases with a stand-in for the engine: memory, files, opening, reading.

    python tests/benchmarks/bench_runner_large.py [CASES] [WORKERS]

A strip of 150 mm x 6 mm with 51 segments and 2801 frequencies; the stand-in fills the large
variables and costs next to nothing. Memory is sampled while the run goes on, in the process that
leads it and in the workers; nothing is asserted.
"""

from __future__ import annotations

import os
import shutil
import sys
import tempfile
import threading
import time
from pathlib import Path

HERE = Path(__file__).parent
os.environ["PYTHONPATH"] = os.pathsep.join([str(HERE), os.environ.get("PYTHONPATH", "")])
for _library in ("OMP", "OPENBLAS", "MKL"):
    os.environ[f"{_library}_NUM_THREADS"] = "1"

import fast_engine  # noqa: E402
import psutil  # noqa: E402

TEXT = """\
title = "A hundred thousand"

[values]
arm = "150 mm"
width = "6 mm"

[[strip]]
name = "arm"
path = [["0 mm", "0 mm"], ["arm", "0 mm"]]
width = "width"

[feed]
strip = "arm"
at = "arm/2"

[frequency]
start = "0.1 GHz"
stop = "2.9 GHz"
points = 2801

[sweep]
arm = {{ from = "140 mm", to = "160 mm" }}
width = {{ from = "5 mm", to = "7 mm" }}

[sampling]
method = "latin-hypercube"
samples = {cases}
seed = 1
"""


class Memory:
    """Samples resident memory of this process and of those below it."""

    def __init__(self) -> None:
        self.own: list[float] = []
        self.workers: list[float] = []
        self._end = threading.Event()
        self._thread = threading.Thread(target=self._watch)
        self._thread.start()

    def _watch(self) -> None:
        me = psutil.Process()
        while not self._end.wait(1.0):
            self.own.append(me.memory_info().rss / 1e6)
            below = []
            for process in me.children(recursive=True):
                try:
                    below.append(process.memory_info().rss / 1e6)
                except psutil.NoSuchProcess:
                    continue
            self.workers.append(max(below, default=0.0))

    def close(self) -> None:
        self._end.set()
        self._thread.join()


def half(values: list[float], part: int) -> float:
    """Mean of the second or the last quarter of a run."""
    quarter = max(1, len(values) // 4)
    return sum(values[part * quarter : (part + 1) * quarter]) / quarter


def main() -> None:
    cases, workers = (int(word) for word in [*sys.argv[1:], "100000", "2"][:2])
    from simkit.runner import run
    from simkit.runner.prepare import Solver
    from simkit.runner.progress import LineProgress
    from simkit.study import load_study

    folder = Path(tempfile.mkdtemp(prefix="simkit-bench-"))
    try:
        (folder / "large.toml").write_text(TEXT.format(cases=cases))
        study = load_study(folder / "large.toml")
        solver = Solver("fast_engine:solve", fast_engine.mesh, "bench")
        memory = Memory()
        begin, busy = time.monotonic(), time.process_time()
        summary = run(
            study, folder / "out", workers=workers, solver=solver,
            progress=LineProgress(sys.stdout, 30.0),
        )  # fmt: skip
        wall, busy = time.monotonic() - begin, time.process_time() - busy
        memory.close()
        print(f"{cases} cases, {workers} workers: {wall:.0f} s, {cases / wall:.0f} cases a second")
        print(f"processor time of the leading process  {busy / cases * 1e3:.2f} ms a case")
        print(
            f"memory of the leading process, MB       {max(memory.own):.0f} at most; second "
            f"quarter {half(memory.own, 1):.0f}, last quarter {half(memory.own, 3):.0f}"
        )
        print(
            f"memory of the largest process below, MB {max(memory.workers):.0f} at most; second "
            f"quarter {half(memory.workers, 1):.0f}, last quarter {half(memory.workers, 3):.0f}"
        )
        look(summary.results_dir, cases)
        begin = time.monotonic()
        again = run(
            study,
            folder / "out",
            workers=workers,
            solver=solver,
            progress=LineProgress(sys.stdout, 1e9),
        )
        print(f"the same command again: {again.reused} reused, {time.monotonic() - begin:.1f} s")
    finally:
        shutil.rmtree(folder, ignore_errors=True)


def look(results: Path, cases: int) -> None:
    """Print what it takes to open the results and to read a case."""
    from simkit.store import open_results

    files = [path for path in results.rglob("*") if path.is_file()]
    size = sum(path.stat().st_size for path in files)
    print(f"files {len(files)}, {size / 1e6:.0f} MB")
    open_results(results)  # imports count once
    begin = time.monotonic()
    dataset = open_results(results)
    print(f"open                  {time.monotonic() - begin:.2f} s")
    names = list(dataset.data_vars)
    for what, chosen in (("every variable", names), ("impedance", ["impedance"])):
        took = []
        for case in range(17, cases, cases // 23):
            begin = time.monotonic()
            dataset[chosen].isel(case=case).load()
            took.append(time.monotonic() - begin)
        print(f"one case, {what:14s}  {sorted(took)[len(took) // 2] * 1e3:.0f} ms")


if __name__ == "__main__":
    main()
