"""Run a study in a process that may be killed: drive.py STUDY RESULTS WORKERS [LIMIT_S].

WORKERS is a number of processes here or the address of a scheduler. With FAKE_RESERVE set no disk
is kept free, so that it can really run full.
"""

from __future__ import annotations

import os
import sys

import fake_solver

from simkit.errors import SimkitError
from simkit.runner import loop, run, session
from simkit.runner.prepare import Solver
from simkit.runner.progress import LineProgress
from simkit.study import load_study


def main() -> None:
    study, results, workers, *limit = sys.argv[1:]
    if "FAKE_RESERVE" in os.environ:
        loop.LEAST_FREE_BYTES = session.RESERVE_BYTES = 0
    where = {"scheduler": workers} if "://" in workers else {"workers": int(workers)}
    try:
        summary = run(
            load_study(study),
            results,
            block_size=int(os.environ.get("FAKE_BLOCK", "2")),
            progress=LineProgress(sys.stdout),
            solver=Solver("fake_solver:solve", fake_solver.mesh, "test"),
            time_limit_s=float(limit[0]) if limit else None,
            **where,
        )
    except SimkitError as error:
        print("refused:", error)
        sys.exit(1)
    print("stopped:", summary.stopped or "no")


if __name__ == "__main__":
    main()
