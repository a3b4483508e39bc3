"""A small study solved once, for everything the commands say about results."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest
from click.testing import CliRunner

from simkit.cli import main
from simkit.response.features import reflection
from simkit.store import open_results

from .hook import SCALE, STUDY, Session


@pytest.fixture(scope="session")
def session(tmp_path_factory: pytest.TempPathFactory) -> Session:
    folder = tmp_path_factory.mktemp("cli")
    study = folder / "hook.toml"
    study.write_text(STUDY, "utf-8")
    parent = folder / "out"
    # One worker needs no cluster: quicker, and the same code otherwise.
    words = ["run", str(study), "--results", str(parent), "--workers", "1"]
    return Session(study, parent / "hook", CliRunner().invoke(main, words))


@pytest.fixture(scope="session")
def measured(session: Session) -> Path:
    """A one-port file: the reflection of case 1 with all frequencies 1.2 % higher."""
    case = open_results(session.results).sel(case=1)
    gamma = reflection(case["impedance"].values, 50.0)
    lines = [
        f"{hz * SCALE:.1f} {value.real:.9f} {value.imag:.9f}"
        for hz, value in zip(case["frequency"].values, gamma, strict=True)
    ]
    path = session.results.parent / "hook_build.s1p"
    path.write_text("\n".join(["# Hz S RI R 50", *lines, ""]), "utf-8")
    assert np.isfinite(gamma).all()
    return path
