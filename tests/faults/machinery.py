"""What a campaign of faults needs: studies, runs, clusters of processes, a look at the store."""

from __future__ import annotations

import os
import signal
import socket
import subprocess
import sys
import time
from collections import Counter
from collections.abc import Callable, Sequence
from dataclasses import dataclass, field
from pathlib import Path

import numpy as np
import psutil

from simkit.store.write import StoreFile

RUNNER_TESTS = Path(__file__).parent.parent / "runner"
PATHS = os.pathsep.join([str(RUNNER_TESTS), os.environ.get("PYTHONPATH", "")])
BLOCK = 3
WORKERS = 2
UNLIKE = {"worker", "seconds"}
"""Variables that two runs of one study may differ in."""

STUDY = """\
title = "Ford"

[values]
arm = "70 mm"
width = "8 mm"

[[strip]]
name = "arm"
path = [["0 mm", "0 mm"], ["arm", "0 mm"]]
width = "width"

[feed]
strip = "arm"
at = "arm/3"

[frequency]
start = "300 MHz"
stop = "3 GHz"
points = 11

[sweep]
arm = {arms}
width = {widths}

[sampling]
method = "list"
"""


def write_study(path: Path, widths_mm: Sequence[int], first_mm: int = 60) -> Path:
    """A study of one case for each width, every arm a tenth of a millimetre longer."""
    arms = ", ".join(f'"{first_mm + k / 10:.1f} mm"' for k in range(len(widths_mm)))
    widths = ", ".join(f'"{width} mm"' for width in widths_mm)
    path.write_text(STUDY.format(arms=f"[{arms}]", widths=f"[{widths}]"), encoding="utf-8")
    return path


@dataclass
class Site:
    """A folder with a study, its results, and a mark for every attempt at a case."""

    folder: Path
    cases: int
    seconds: float = 0.05
    gated: bool = False
    started: list[subprocess.Popen[str]] = field(default_factory=list)

    def __post_init__(self) -> None:
        (self.folder / "marks").mkdir(parents=True, exist_ok=True)
        self.study = write_study(self.folder / "ford.toml", [8] * self.cases)
        self.out = self.folder / "out"

    @property
    def store(self) -> Path:
        return self.out / "ford" / "store.zarr"

    @property
    def log(self) -> str:
        path = self.out / "ford" / "log.txt"
        return path.read_text() if path.exists() else ""

    def open_gate(self) -> None:
        """Let the cases go on that wait at the gate."""
        (self.folder / "gate").touch()

    def start(self, where: str, *, limit_s: str = "240", **env: str) -> subprocess.Popen[str]:
        """Start a run in its own process group; `where` is a number of workers or an address."""
        return self._popen(
            [str(RUNNER_TESTS / "drive.py"), str(self.study), str(self.out), where, limit_s], env
        )

    def serve(self, *words: str) -> subprocess.Popen[str]:
        """Start a part of a cluster."""
        return self._popen(["-m", "dask", *words], {})

    def _popen(self, words: list[str], env: dict[str, str]) -> subprocess.Popen[str]:
        settings = {
            "PYTHONPATH": PATHS,
            "FAKE_SECONDS": str(self.seconds),
            "FAKE_MARKS": str(self.folder / "marks"),
            "FAKE_BLOCK": str(BLOCK),
        }
        if self.gated:
            settings["FAKE_GATE"] = str(self.folder / "gate")
        number = len(self.started)
        with (self.folder / f"output-{number}.txt").open("w") as output:
            process = subprocess.Popen(
                [sys.executable, *words],
                env=os.environ | settings | env,
                stdout=output,
                stderr=subprocess.STDOUT,
                text=True,
                start_new_session=True,
                cwd=self.folder,
            )
        self.started.append(process)
        return process

    def output(self, process: subprocess.Popen[str]) -> str:
        return (self.folder / f"output-{self.started.index(process)}.txt").read_text()

    def tries(self) -> Counter[str]:
        """Attempts at each case."""
        return Counter(path.name.split("-")[0] for path in (self.folder / "marks").iterdir())

    def settled(self) -> list[int]:
        """Numbers of the cases that are stored."""
        if not (self.store / "zarr.json").exists():
            return []
        return [int(n) for n in np.flatnonzero(StoreFile(self.store).read_statuses())]

    def key(self, case: int) -> str:
        """How the marks call a case."""
        return f"{(60 + case / 10) / 1000:.6f}"

    def close(self) -> None:
        for process in self.started:
            end(process)


@dataclass
class Cluster:
    """A scheduler and two workers, each a process of its own."""

    scheduler: subprocess.Popen[str]
    workers: list[subprocess.Popen[str]]
    address: str

    @classmethod
    def start(cls, site: Site) -> Cluster:
        port = free_port()
        address = f"tcp://127.0.0.1:{port}"
        scheduler = site.serve(
            "scheduler", "--host", "127.0.0.1", "--port", str(port), "--dashboard-address", ":0"
        )
        workers = [cls.worker(site, address) for _ in range(WORKERS)]
        return cls(scheduler, workers, address)

    @staticmethod
    def worker(site: Site, address: str) -> subprocess.Popen[str]:
        folder = str(site.folder / "scratch")
        words = ("--nthreads", "1", "--no-dashboard", "--local-directory", folder)
        return site.serve("worker", address, "--host", "127.0.0.1", *words)

    def worker_process(self, number: int) -> int:
        """Process that works, below the one that watches over it."""
        below = psutil.Process(self.workers[number].pid).children()
        busy = [p.pid for p in below if "resource_tracker" not in " ".join(p.cmdline())]
        return busy[-1] if busy else self.workers[number].pid

    def close(self) -> None:
        for process in (*self.workers, self.scheduler):
            end(process)


def end(process: subprocess.Popen[str]) -> None:
    """End a process this campaign started, with all it has started itself."""
    if process.poll() is not None:
        return
    below = psutil.Process(process.pid).children(recursive=True)
    for victim in (psutil.Process(process.pid), *below):
        try:
            victim.kill()
        except psutil.NoSuchProcess:
            continue
    process.wait()


def kill(pid: int) -> None:
    os.kill(pid, signal.SIGKILL)


def wait_for(ready: Callable[[], object], patience_s: float = 120.0) -> bool:
    """Wait until something is so; False if it is not in time."""
    deadline = time.monotonic() + patience_s
    while time.monotonic() < deadline:
        if ready():
            return True
        time.sleep(0.02)
    return False


def free_port() -> int:
    with socket.socket() as found:
        found.bind(("127.0.0.1", 0))
        return int(found.getsockname()[1])


def differences(one: Path, other: Path) -> list[str]:
    """Files of two stores that are not the same to the last bit, times and workers aside."""

    def chunks(store: Path) -> dict[str, bytes]:
        return {
            path.relative_to(store).as_posix(): path.read_bytes()
            for path in store.rglob("c.*")
            if path.is_file() and path.parent.name not in UNLIKE
        }

    first, second = chunks(one), chunks(other)
    return sorted(
        name for name in first.keys() | second.keys() if first.get(name) != second.get(name)
    )
