"""Run a study in a process that may be killed: drive.py STUDY RESULTS WORKERS."""

from __future__ import annotations

import sys

import fake_solver

from simkit.runner import run
from simkit.runner.prepare import Solver
from simkit.runner.progress import LineProgress
from simkit.study import load_study


def main() -> None:
    study, results, workers = sys.argv[1:]
    summary = run(
        load_study(study),
        results,
        workers=int(workers),
        block_size=2,
        progress=LineProgress(sys.stdout),
        solver=Solver("fake_solver:solve", fake_solver.mesh, "test"),
    )
    print("stopped:", summary.stopped or "no")


if __name__ == "__main__":
    main()
