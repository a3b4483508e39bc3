"""Runs that are killed, poisoned, starved and doubled, and what is left of their results.

    python tests/faults/campaign.py [KILLS] [SEED]

Twenty runs by default are killed with SIGKILL at random moments: the client, a worker, the
scheduler in turn, with workers of the run's own and with a cluster of separate processes. Each is
then continued by the same command. The engine is a stand-in, which marks every attempt at a case.
"""

from __future__ import annotations

import random
import shutil
import subprocess
import sys
import tempfile
import time
from dataclasses import dataclass, field
from itertools import cycle
from pathlib import Path

import numpy as np

from simkit.store.schema import Status
from simkit.store.write import StoreFile

try:
    from . import machinery
except ImportError:  # as a script
    import machinery

BLOCK, WORKERS = machinery.BLOCK, machinery.WORKERS
Cluster, Site = machinery.Cluster, machinery.Site
CASES = 60
VICTIMS = ("client", "worker", "client of a cluster", "worker of a cluster", "scheduler")


@dataclass
class Figures:
    """What the campaign found; everything but the counts of what was done should be nought."""

    kills: dict[str, int] = field(default_factory=dict)
    stored_at_the_kill: list[int] = field(default_factory=list)
    files_unlike: int = 0
    lost: int = 0
    stored_cases_solved_again: int = 0
    solved_twice: list[int] = field(default_factory=list)
    most_in_flight: int = WORKERS * BLOCK
    notes: list[str] = field(default_factory=list)

    def lines(self) -> list[str]:
        what = ", ".join(f"{count} x {name}" for name, count in self.kills.items())
        return [
            f"runs killed with SIGKILL and continued   {sum(self.kills.values())} ({what})",
            f"cases stored at the kill, of {CASES}          "
            f"{min(self.stored_at_the_kill)} to {max(self.stored_at_the_kill)}",
            f"files unlike those of a calm run         {self.files_unlike}",
            f"stored cases lost                        {self.lost}",
            f"stored cases solved again                {self.stored_cases_solved_again}",
            f"cases in hand solved twice, in one kill  {max(self.solved_twice)}, "
            f"of {self.most_in_flight} at most",
            *self.notes,
        ]

    def sound(self) -> bool:
        bad = self.files_unlike + self.lost + self.stored_cases_solved_again
        return bad == 0 and max(self.solved_twice) <= self.most_in_flight


def calm_run(folder: Path) -> Path:
    """Store of an undisturbed run."""
    site = Site(folder, CASES, seconds=0.0)
    process = site.start("1")
    process.wait()
    assert "stopped: no" in site.output(process), site.output(process)
    return site.store


def killed_run(folder: Path, victim: str, moment: float, calm: Path, figures: Figures) -> None:
    """Kill one part of a run, continue it, and compare what is left with a calm run."""
    site = Site(folder, CASES)
    cluster = Cluster.start(site) if victim not in ("client", "worker") else None
    try:
        process = site.start(cluster.address if cluster else str(WORKERS))
        kept = _strike(site, process, cluster, victim, moment)
        figures.kills[victim] = figures.kills.get(victim, 0) + 1
        figures.stored_at_the_kill.append(len(kept))
        if "worker" in victim:
            process.wait(timeout=120)
            assert "stopped: no" in site.output(process), site.output(process)
        else:
            _continue(site, process, cluster, victim)
    finally:
        if cluster:
            cluster.close()
        site.close()
    tries = site.tries()
    now = set(site.settled())
    figures.lost += len(set(kept) - now) + (CASES - len(now))
    figures.stored_cases_solved_again += sum(tries[site.key(case)] > 1 for case in kept)
    figures.solved_twice.append(sum(tries.values()) - CASES)
    figures.files_unlike += len(machinery.differences(site.store, calm))


def _strike(
    site: Site, process: subprocess.Popen[str], cluster: Cluster | None, victim: str, moment: float
) -> list[int]:
    """Kill at a part of the run that is drawn; return what is stored then."""
    # Before the first block there is nothing to lose: moments count from it on.
    assert machinery.wait_for(lambda: site.settled() or process.poll() is not None), site.output(
        process
    )
    goal = max(1, int(moment * (CASES - 4 * BLOCK)))
    machinery.wait_for(lambda: len(site.settled()) >= goal or process.poll() is not None)
    time.sleep(moment * 0.137 % 0.05)
    if victim.startswith("worker"):
        kept = site.settled()
        machinery.kill(cluster.worker_process(0) if cluster else _own_worker(site))
    else:
        machinery.kill(cluster.scheduler.pid if cluster and victim == "scheduler" else process.pid)
        kept = site.settled()
    return kept


def _own_worker(site: Site) -> int:
    """A worker process of a run that started its own: the log names them."""
    return int(site.log.rpartition("process ")[2].split()[0])


def _continue(
    site: Site, process: subprocess.Popen[str], cluster: Cluster | None, victim: str
) -> None:
    if victim == "scheduler":
        process.wait(timeout=180)
        said = site.output(process)
        assert "the scheduler of the run is gone; what is stored is kept" in said, said
        assert cluster is not None
        cluster.close()
        fresh = Cluster.start(site)
        cluster.scheduler, cluster.workers, cluster.address = (
            fresh.scheduler, fresh.workers, fresh.address,
        )  # fmt: skip
    process.wait()
    again = site.start(cluster.address if cluster else str(WORKERS))
    again.wait(timeout=180)
    assert "stopped: no" in site.output(again), site.output(again)


def poisoned(folder: Path) -> str:
    """Crash, fault, hang and engine error among a hundred good cases."""
    site = Site(folder, 1, seconds=0.0)
    widths = [8] * 110
    bad = {7: 3, 20: 5, 33: 7, 34: 9, 50: 3, 61: 5, 62: 7, 80: 9, 95: 3, 109: 9}
    for case, width in bad.items():
        widths[case] = width
    machinery.write_study(site.study, widths)
    process = site.start(str(WORKERS), limit_s="3")
    process.wait()
    assert "stopped: no" in site.output(process), site.output(process)
    codes = StoreFile(site.store).read_statuses()
    marked = {int(case) for case in np.flatnonzero(codes != Status.SOLVED)}
    wrong = marked ^ set(bad)
    hung = sum(width == 7 for width in bad.values())
    assert int(np.count_nonzero(codes == Status.TIMED_OUT)) == hung
    return (
        f"poisoned cases among 100 good ones       {len(bad)} (crash, fault, hang, error), "
        f"wrongly marked or missed {len(wrong)}"
    )


def two_clients(folder: Path) -> str:
    """Two runs on one folder at once: one is refused and told who holds it."""
    site = Site(folder, CASES)
    runs = [site.start("1"), site.start("1")]
    for process in runs:
        process.wait()
    said = [site.output(process) for process in runs]
    refused = [text for text in said if "another run is writing here: process" in text]
    done = [text for text in said if "stopped: no" in text]
    return (
        f"two clients on one folder                {len(done)} completed, {len(refused)} refused; "
        f"cases solved twice {sum(site.tries().values()) - CASES}"
    )


def full_disk(folder: Path, calm: Path) -> str:
    """A small tmpfs that runs full, is then enlarged, and a folder that cannot be written."""
    site = Site(folder, CASES, seconds=0.0)
    site.out.mkdir()
    mounted = subprocess.run(
        ["mount", "-t", "tmpfs", "-o", "size=3m", "none", str(site.out)], capture_output=True
    )
    if mounted.returncode:
        return "full disk                                not tried: no right to mount"
    try:
        process = site.start("1", FAKE_RESERVE="1")
        process.wait()
        said, kept = site.output(process), site.settled()
        assert "No space left on device" in said, said
        assert "stored and kept" in said, said
        subprocess.run(["mount", "-o", "remount,ro", str(site.out)], check=True)
        process = site.start("1")
        process.wait()
        assert "cannot be written: Read-only file system" in site.output(process)
        subprocess.run(["mount", "-o", "remount,rw,size=200m", str(site.out)], check=True)
        process = site.start("1", FAKE_RESERVE="1")
        process.wait()
        assert "stopped: no" in site.output(process), site.output(process)
        again = sum(site.tries()[site.key(case)] > 1 for case in kept)
        unlike = len(machinery.differences(site.store, calm))
    finally:
        subprocess.run(["umount", str(site.out)], check=True)
    return (
        f"disk of 3 MB full, then read-only        {len(kept)} of {CASES} cases kept, {again} of "
        f"them solved again; files unlike a calm run {unlike}"
    )


def campaign(folder: Path, kills: int, seed: int, victims: tuple[str, ...] = VICTIMS) -> Figures:
    """All of it; `kills` runs are killed, one victim after the other."""
    rng = random.Random(seed)
    figures = Figures()
    calm = calm_run(folder / "calm")
    for number, victim in zip(range(kills), cycle(victims), strict=False):
        place = folder / f"kill-{number}"
        killed_run(place, victim, rng.random(), calm, figures)
        shutil.rmtree(place)
    figures.notes += [
        poisoned(folder / "poisoned"),
        two_clients(folder / "two"),
        full_disk(folder / "full", calm),
    ]
    return figures


def main() -> None:
    kills, seed = (int(word) for word in [*sys.argv[1:], "20", "1"][:2])
    folder = Path(tempfile.mkdtemp(prefix="simkit-faults-"))
    begin = time.monotonic()
    try:
        figures = campaign(folder, kills, seed)
    finally:
        shutil.rmtree(folder, ignore_errors=True)
    print("\n".join(figures.lines()))
    print(f"time                                     {time.monotonic() - begin:.0f} s")
    sys.exit(0 if figures.sound() else 1)


if __name__ == "__main__":
    main()
