"""What a run costs beside the engine, and beside the script one would write instead.

    python tests/benchmarks/bench_runner.py [CASES]

A strip of 150 mm x 6 mm as one wire of 51 segments, 2801 frequencies from 0.1 to 2.9 GHz, the same
in the script, in the run and in what both are held against; then the strip as simkit itself cuts
it, into 59, and one of 600 mm, of about 240 segments. Wall times are of one session on one machine,
whatever else it does; processor times are those of all processes of a run, the start of its workers
included. The engine alone is timed in two processes at once, as it works in a run. Nothing is
asserted. Linear algebra runs on one thread, as in the workers.
"""

# ruff: noqa: E402  the number of threads is read when numpy is loaded

from __future__ import annotations

import multiprocessing
import os
import shutil
import sys
import tempfile
import time
from collections.abc import Callable, Sequence
from dataclasses import replace
from pathlib import Path

for _library in ("OMP", "OPENBLAS", "MKL"):
    os.environ[f"{_library}_NUM_THREADS"] = "1"

import numpy as np
import psutil

from simkit.engine.pynec import solve_wires
from simkit.geometry import MeshPlan, build_wires, plan_mesh
from simkit.geometry.wires import Wire
from simkit.runner import run
from simkit.runner.currents import series_loads, sweep_currents, swept_impedance
from simkit.runner.prepare import Solver, prepare
from simkit.runner.progress import QuietProgress, Tally
from simkit.runner.solve import solve_case
from simkit.store import open_results
from simkit.study import Study, load_study
from simkit.study.model import Antenna

WORKERS = 2
FREQUENCY_HZ = np.linspace(0.1e9, 2.9e9, 2801)
RADIUS_M = 0.0015
SEGMENTS = 51
BARE_CASES = 1500

TEXT = """\
title = "Bench {length}"

[values]
arm = "{length} mm"
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
arm = {{ from = "{length} mm", to = "{longest} mm", count = {cases} }}
"""


def study_of(folder: Path, length_mm: int, cases: int) -> Study:
    path = folder / f"bench_{length_mm}.toml"
    longest = length_mm * 1.05
    path.write_text(TEXT.format(length=length_mm, longest=longest, cases=cases))
    return load_study(path)


# -- the script one would write instead -----------------------------------------------------------


def script_case(job: tuple[float, str]) -> None:
    """Feed current of one strip at every frequency, each solved for, into a file."""
    length_m, path = job
    wires = (Wire((0.0, 0.0, 0.0), (length_m, 0.0, 0.0), SEGMENTS),)
    middle = SEGMENTS // 2
    feed = ((middle, 1.0),)
    current = [solve_wires(wires, RADIUS_M, f, [feed])[0, middle] for f in FREQUENCY_HZ]
    np.savez(path, frequency_hz=FREQUENCY_HZ, current=current)


def script(folder: Path, cases: int) -> float:
    """Wall time of a process pool over some cases."""
    jobs = [(0.15 + 0.0001 * k, str(folder / f"case_{k}.npz")) for k in range(cases)]
    begin = time.monotonic()
    with multiprocessing.get_context("spawn").Pool(WORKERS) as pool:
        pool.map(script_case, jobs, chunksize=1)
    return time.monotonic() - begin


def named_wires(antennas: Sequence[Antenna]) -> tuple[MeshPlan, int]:
    """The mesh of a straight strip with as many segments as the script has."""
    plan = plan_mesh(antennas)
    return replace(plan, chains=(replace(plan.chains[0], counts=(SEGMENTS,)),)), SEGMENTS


NAMED = Solver(mesh=named_wires)
OWN = Solver()


# -- a run ---------------------------------------------------------------------------------------


class Clock(QuietProgress):
    """Notes when blocks come in, and the processor time of all processes then."""

    def __init__(self) -> None:
        self.seen: list[tuple[float, int]] = []
        self.processor_s = 0.0

    def update(self, tally: Tally) -> None:
        """Note one block."""
        self.seen.append((time.monotonic(), tally.done))
        everyone = [psutil.Process(), *psutil.Process().children(recursive=True)]
        self.processor_s = sum(sum(p.cpu_times()[:2]) for p in everyone if p.is_running())

    def steady_rate(self) -> float:
        """Cases a second between the first and the last block."""
        (begin, first), (end, last) = self.seen[0], self.seen[-1]
        return (last - first) / (end - begin)


def timed_run(study: Study, folder: Path, solver: Solver) -> tuple[float, Clock]:
    """Wall time of a whole run and what its clock saw."""
    clock = Clock()
    own = sum(psutil.Process().cpu_times()[:2])
    begin = time.monotonic()
    run(study, folder / "out", workers=WORKERS, progress=clock, solver=solver, fresh=True)
    wall = time.monotonic() - begin
    clock.processor_s -= own
    return wall, clock


def engine_part(
    study_path: str,
    results: str,
    solver: Solver,
    cases: range,
    ready: Callable[[], None],
    out: object,
) -> None:
    """For some cases of a run: seconds and number of solves by the engine alone, then by sweeps."""
    study = load_study(study_path)
    plan = prepare(study, solver).plan
    samples = open_results(results)["sample_frequency"].values
    antennas = [antenna for case in cases if (antenna := study.case(case).antenna) is not None]
    grids = [build_wires(antenna, plan) for antenna in antennas]
    jobs = [
        (grid, frequency, series_loads(antenna, grid, frequency))
        for case, antenna, grid in zip(cases, antennas, grids, strict=True)
        for frequency in samples[case][np.isfinite(samples[case])]
    ]
    ready()
    begin = time.monotonic()
    for grid, frequency, series in jobs:
        both = [grid.source, grid.probe]
        solve_wires(grid.wires, grid.radius_m, frequency, both, series=series)
    alone_s = time.monotonic() - begin
    ready()
    begin = time.monotonic()
    for antenna in antennas:
        grid = build_wires(antenna, plan)
        swept_impedance(grid, sweep_currents(antenna, grid).model, FREQUENCY_HZ)
    out.put((alone_s, time.monotonic() - begin, len(jobs)))  # type: ignore[attr-defined]


def engine_s(study: Study, results: Path, solver: Solver, part: int) -> tuple[float, float]:
    """Time of the engine alone for every solve of a run, and what sweeps without patterns take.

    The latter from wires to impedance, as a multiple; both from some cases.
    """
    context = multiprocessing.get_context("spawn")
    barrier, parts = context.Barrier(WORKERS), context.Queue()
    several = []
    for first in range(WORKERS):
        cases = range(first * part, study.case_count, WORKERS * part)
        arguments = str(study.path), str(results), solver, cases, barrier.wait, parts
        several.append(context.Process(target=engine_part, args=arguments))
    for process in several:
        process.start()
    found = [parts.get() for _ in several]
    for process in several:
        process.join()
    alone, swept, solves = (sum(column) for column in zip(*found, strict=True))
    return alone / solves * float(open_results(results)["solves"].values.sum()), swept / alone


# -- two bare processes ---------------------------------------------------------------------------


def bare_cases(study_path: str, first: int, ready: Callable[[], None], out: object) -> None:
    """Solve every second case without a store."""
    study = load_study(study_path)
    plan = prepare(study, NAMED).plan
    ready()  # both begin together
    begin = time.monotonic()
    count = 0
    for case in range(first, min(study.case_count, BARE_CASES), WORKERS):
        antenna = study.case(case).antenna
        assert antenna is not None
        solve_case(antenna, plan)
        count += 1
    out.put(count / (time.monotonic() - begin))  # type: ignore[attr-defined]


def bare_rate(study: Study) -> float:
    """Cases a second of two processes that only solve."""
    context = multiprocessing.get_context("spawn")
    barrier, rates = context.Barrier(WORKERS), context.Queue()
    several = [
        context.Process(target=bare_cases, args=(str(study.path), first, barrier.wait, rates))
        for first in range(WORKERS)
    ]
    for process in several:
        process.start()
    total = sum(rates.get() for _ in several)
    for process in several:
        process.join()
    return total


def main() -> None:
    cases = int(sys.argv[1]) if len(sys.argv) > 1 else 12000
    folder = Path(tempfile.mkdtemp(prefix="simkit-bench-"))
    try:
        print(f"load of the machine before: {os.getloadavg()[0]:.1f}")
        small = study_of(folder, 150, cases)
        few = 8
        script_s = script(folder, few)
        wall, clock = timed_run(small, folder, NAMED)
        script_s = (script_s + script(folder, few)) / 2
        ratio = (cases / wall) / (few / script_s)
        steady = clock.steady_rate() / (few / script_s)
        print(
            f"script: {few / script_s:.2f} cases a second; run of {cases}: {cases / wall:.1f}, "
            f"{clock.steady_rate():.1f} between its first and last block"
        )
        print(f"end to end over the script        {ratio:.0f}, {steady:.0f} without the start")
        bare = bare_rate(small)
        print(f"two workers over two bare processes  {clock.steady_rate() / bare:.2f}")
        report(small, folder, NAMED, clock, wall, 20)
        for length, count, part in ((150, cases // 4, 20), (600, max(20, cases // 20), 5)):
            study = study_of(folder, length, count)
            wall, clock = timed_run(study, folder, OWN)
            report(study, folder, OWN, clock, wall, part)
        print(f"load of the machine after: {os.getloadavg()[0]:.1f}")
    finally:
        shutil.rmtree(folder, ignore_errors=True)


def report(
    study: Study, folder: Path, solver: Solver, clock: Clock, wall: float, part: int
) -> None:
    """Print a run's time over that of the engine alone."""
    results = folder / "out" / study.path.stem
    engine, swept = engine_s(study, results, solver, part)
    segments = open_results(results).sizes["segment"]
    solving = float(open_results(results)["seconds"].values.sum())
    print(
        f"{segments} segments, {study.case_count} cases: engine {engine:.1f} s; over it: "
        f"sweeps without patterns {swept:.2f}, "
        f"wall x workers {wall * WORKERS / engine:.2f}, between first and last block "
        f"{WORKERS * study.case_count / clock.steady_rate() / engine:.2f}, inside the cases "
        f"{solving / engine:.2f}; processor time of all processes {clock.processor_s / engine:.2f}"
    )


if __name__ == "__main__":
    main()
