"""Published values: one TOML file a source, one test case a value.

A test marked ``@pytest.mark.published("nec2_example_1")`` runs once for each ``[[value]]`` of that
file and gets it as `row`; a second argument of the mark names another table of the file. Each file
says where its numbers come from and how far they are to be trusted; each tolerance says why it is
what it is.
"""

from __future__ import annotations

import tomllib
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import pytest

HERE = Path(__file__).parent


@dataclass(frozen=True)
class Row:
    """One published value, or a group that belongs together, and the file it stands in."""

    file: str
    values: dict[str, Any]
    data: dict[str, Any]

    def __getitem__(self, key: str) -> Any:
        return self.values[key]

    def check(self, key: str, found: float, tolerance: str | None = None) -> None:
        """Compare with the value `key` within the tolerance of that name (or another one)."""
        __tracebackhide__ = True
        expected = self.values[key]
        limit = self.data["tolerance"][tolerance or key]
        allowed = max(limit.get("relative", 0.0) * abs(expected), limit.get("absolute", 0.0))
        if not abs(found - expected) <= allowed:  # NaN fails too
            pytest.fail(
                f"{self.file}, {self.values['name']}: {key} = {found:.7g}, published {expected}, "
                f"off by {found - expected:.3g}, allowed {allowed:.3g} ({limit['reason']})"
            )


def load(file: str, table: str = "value") -> list[Row]:
    with (HERE / f"{file}.toml").open("rb") as stream:
        data = tomllib.load(stream)
    return [Row(file, values, data) for values in data[table]]


def pytest_configure(config: pytest.Config) -> None:
    config.addinivalue_line("markers", "published(file, table): run for each value of a data file")


def pytest_generate_tests(metafunc: pytest.Metafunc) -> None:
    for mark in metafunc.definition.iter_markers("published"):
        rows = load(*mark.args)
        metafunc.parametrize("row", rows, ids=[row["name"] for row in rows])
