"""The study the tests of the commands share: two cases with a solution, one that crosses itself."""

from __future__ import annotations

from dataclasses import dataclass
from pathlib import Path

from click.testing import CliRunner, Result

from simkit.cli import main

STUDY = """\
title = "Hook on the gauge mast"

[values]
lift = "10 mm"
width = "3 mm"

[[strip]]
name = "hook"
path = [["0 mm", "0 mm"], ["60 mm", "0 mm"], ["60 mm", "30 mm"], ["30 mm", "30 mm"],
        ["30 mm", "lift"]]
width = "width"

[feed]
strip = "hook"
at = "20 mm"

[frequency]
start = "500 MHz"
stop = "2.6 GHz"
points = 106

[sweep]
lift = ["10 mm", "14 mm", "-12 mm"] # the last one crosses the first leg
"""

SCALE = 1.012
"""Measured frequencies over simulated ones in the file made here."""


@dataclass(frozen=True)
class Session:
    """A study file, its results folder and what the first run said."""

    study: Path
    results: Path
    first: Result

    def simkit(self, *words: str | Path) -> Result:
        return CliRunner().invoke(main, [str(word) for word in words])
