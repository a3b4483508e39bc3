"""Studies and solvers for the runner's tests."""

from __future__ import annotations

import sys
from collections.abc import Callable, Sequence
from pathlib import Path

import pytest

from simkit.engine.child import Kind, Outcome, load_function
from simkit.runner.prepare import Solver
from simkit.study import Study, load_study

HERE = Path(__file__).parent

TEXT = """\
title = "{title}"

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
method = "{method}"
"""


def study_text(
    arms: Sequence[float], widths: Sequence[float] = (8,), title: str = "Ford", method: str = "grid"
) -> str:
    def listed(values: Sequence[float]) -> str:
        return "[" + ", ".join(f'"{value} mm"' for value in values) + "]"

    return TEXT.format(title=title, arms=listed(arms), widths=listed(widths), method=method)


MakeStudy = Callable[..., Study]


@pytest.fixture
def make_study(tmp_path: Path) -> MakeStudy:
    """Write and load a study named ``ford.toml``: arms and widths in mm, title, method."""

    def make(*args: object, **kwargs: object) -> Study:
        path = tmp_path / "ford.toml"
        path.write_text(study_text(*args, **kwargs), encoding="utf-8")  # type: ignore[arg-type]
        return load_study(path)

    return make


@pytest.fixture
def fake(monkeypatch: pytest.MonkeyPatch) -> Solver:
    """The stand-in solver, importable here and in child processes."""
    monkeypatch.syspath_prepend(HERE)
    import fake_solver

    return Solver(function="fake_solver:solve", mesh=fake_solver.mesh, version="test")


class DirectChild:
    """Calls the solver in this process: for tests that are not about crashes."""

    def __init__(self, function: str) -> None:
        self._function = load_function(function)
        self.abandoned = False

    def call(self, *args: object, limit_s: float) -> Outcome:
        return Outcome(Kind.VALUE, self._function(*args))

    def close(self) -> None:
        pass

    def abandon(self) -> None:
        self.abandoned = True


@pytest.fixture
def direct(monkeypatch: pytest.MonkeyPatch) -> None:
    """Start no child processes."""
    monkeypatch.setattr("simkit.runner.work.Child", DirectChild)


@pytest.fixture
def marks(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> Callable[[], list[str]]:
    """Lengths of all cases given to the solver so far, one entry for each attempt."""
    folder = tmp_path / "marks"
    folder.mkdir()
    monkeypatch.setenv("FAKE_MARKS", str(folder))
    return lambda: sorted(path.name.split("-")[0] for path in folder.iterdir())


@pytest.fixture(autouse=True)
def _no_stray_modules() -> object:
    yield
    sys.modules.pop("fake_solver", None)
