"""Which build a measured file stands for, from the copy of the study in the results folder."""

from __future__ import annotations

from pathlib import Path

import pytest

from simkit.cli.folder import build_of, study_of

from .hook import STUDY

MORE = """
width = ["2 mm", "3 mm", "5 mm"]

[[measured]]
file = "far/away/build_1.s1p"
lift = "13.5 mm"
"""


def test_a_build_is_found_by_file_name_and_completed_by_nominal_values(tmp_path: Path) -> None:
    (tmp_path / "study.toml").write_text(STUDY + MORE, "utf-8")
    study = study_of(tmp_path)
    assert build_of(study, "here/build_1.s1p") == pytest.approx({"lift": 0.0135, "width": 0.003})
    assert build_of(study, "here/build_2.s1p") is None


def test_a_folder_without_the_copy_knows_no_build(tmp_path: Path) -> None:
    assert study_of(tmp_path) is None
    assert build_of(None, "build_1.s1p") is None
