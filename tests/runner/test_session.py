from __future__ import annotations

from simkit.runner import run
from simkit.runner.progress import QuietProgress
from simkit.store import open_results
from simkit.store.schema import Status


def test_a_study_is_solved_and_kept(make_study, fake, marks, tmp_path):
    study = make_study([60, 65, 70, 75, 80], [8, 10, 12])
    summary = run(study, tmp_path / "out", workers=2, progress=QuietProgress(), solver=fake)
    print(summary)
    print((tmp_path / "out/ford/log.txt").read_text())
    assert summary.counts[Status.SOLVED] == 15
    ds = open_results(summary.results_dir)
    print(ds)
    assert len(marks()) == 15
    s2 = run(study, tmp_path / "out", workers=2, progress=QuietProgress(), solver=fake)
    assert s2.reused == 15
    assert len(marks()) == 15
