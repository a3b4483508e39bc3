"""Measured files named in a study."""

from __future__ import annotations

from collections.abc import Callable
from pathlib import Path

import pytest

from simkit.study import Study
from simkit.study.model import MeasuredFile

Loader = Callable[..., Study]
Complaints = Callable[..., list[str]]

SWEEP = '\n[sweep]\nmetal.thickness = ["0.1 mm", "0.2 mm"]\n'


def test_files_count_from_the_study_and_need_not_exist(load: Loader) -> None:
    study = load(
        added=SWEEP
        + '[[measured]]\nfile = "one.s1p"\narm = "70.5 mm"\nmetal.thickness = "0.1 mm"\n'
        '[[measured]]\nfile = "builds/two.s1p"\ngap = "gap*2"\n'
    )
    assert study.measured == (
        MeasuredFile(Path("one.s1p"), {"arm": 0.0705, "metal.thickness": 1e-4}),
        MeasuredFile(Path("builds/two.s1p"), {"gap": 0.006}),
    )


@pytest.mark.parametrize(
    ("entry", "sentence"),
    [
        ('arm = "70 mm"', "measured[1].file: is missing; name the measured file"),
        ("file = 3", "measured[1].file = 3: text is needed"),
        ('file = "a.s1p"\narn = "70 mm"', "measured[1].arn"),
        ('file = "a.s1p"\narn = "70 mm"', "nor a swept key; do you mean `arm`?"),
        ('file = "a.s1p"\nfeed.at = "70 mm"', "nor a swept key"),
        ('file = "a.s1p"\nstrip.upper.width = "4 mm"', "nor a swept key"),
        ('file = "a.s1p"\narm = "70"', "a length is needed, but this is a pure number"),
        ('file = "a.s1p"\narm = "arm*arm/(gap - gap)"', "divides by zero"),
    ],
)
def test_entries_that_are_refused(complaints: Complaints, entry: str, sentence: str) -> None:
    (line,) = complaints(added=SWEEP + "[[measured]]\n" + entry)
    assert sentence in line
