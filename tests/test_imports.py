"""Importing simkit and asking for help must stay quick: heavy libraries load on use only."""

from __future__ import annotations

import subprocess
import sys

import pytest

import simkit

HEAVY = ("matplotlib", "dask", "distributed", "xarray", "pint", "PyNEC", "scipy", "skrf", "zarr")

IMPORT = "import simkit"
HELP = """
from simkit.cli import main
try:
    main(["--help"], prog_name="simkit")
except SystemExit as end:
    assert end.code == 0, end.code
"""
HELP_OF_EACH = """
from simkit.cli import COMMANDS, main
for name in COMMANDS:
    try:
        main([name, "--help"], prog_name="simkit")
    except SystemExit as end:
        assert end.code == 0, (name, end.code)
"""


@pytest.mark.parametrize("code", [IMPORT, HELP, HELP_OF_EACH], ids=["import", "help", "helps"])
def test_no_heavy_library_is_loaded(code: str) -> None:
    ask = f"\nimport sys\nprint('loaded:', *[name for name in {HEAVY!r} if name in sys.modules])"
    done = subprocess.run(
        [sys.executable, "-c", code + ask], capture_output=True, text=True, check=False
    )
    assert done.returncode == 0, done.stderr
    assert done.stdout.splitlines()[-1].strip() == "loaded:"


@pytest.mark.parametrize("name", simkit.__all__)
def test_every_public_name_is_there(name: str) -> None:
    assert getattr(simkit, name) is not None


def test_unknown_name_is_an_attribute_error() -> None:
    with pytest.raises(AttributeError, match="'simkit' has no attribute 'antenna'"):
        _ = simkit.antenna  # type: ignore[attr-defined]


def test_dir_lists_the_public_names_before_they_are_loaded() -> None:
    assert {"load_study", "modes", "plot", "run"} <= set(dir(simkit))
