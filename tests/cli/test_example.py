"""The example of the README as a stranger runs it, in a process of its own with two workers."""

from __future__ import annotations

import subprocess
import sys
from pathlib import Path

import pytest

import simkit

ROOT = Path(__file__).resolve().parents[2]


@pytest.mark.long
def test_creek_gauge_from_study_to_comparison(tmp_path: Path) -> None:
    words = ["run", "studies/creek_gauge.toml", "--results", str(tmp_path), "--workers", "2"]
    command = [sys.executable, "-m", "simkit", *words]
    done = subprocess.run(command, cwd=ROOT, capture_output=True, text=True, check=False)
    assert done.returncode == 0, done.stdout + done.stderr
    assert "15 cases" in done.stderr
    results = tmp_path / "creek_gauge"
    rows = simkit.modes(results)
    assert len(rows) == 15
    for row in rows:
        # Two arms fed in the middle: the even mode is found though the feed does not excite it.
        assert [mode["half_waves"] for mode in row["modes"]][:2] == [1, 2]
        assert "dip_frequency_hz" in row["modes"][0]
        assert "dip_frequency_hz" not in row["modes"][1]
    assert "studies/creek_gauge_build_1.s1p beside case 7" in done.stdout
    assert sum(line.startswith(("1/2 wave", "3/2 wave")) for line in done.stdout.splitlines()) == 2
    names = {path.name for path in (results / "plots").glob("*.png")}
    assert names >= {
        "compare_creek_gauge_build_1.png",
        "current.png",
        "geometry.png",
        "impedance.png",
        "pattern.png",
        "reflection.png",
        "smith.png",
        "tracks.png",
    }
