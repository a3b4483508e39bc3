"""The command group itself: help, errors, exit status."""

from __future__ import annotations

import click
import pytest
from click.testing import CliRunner

import simkit
from simkit.cli import COMMANDS, LazyGroup, main
from simkit.errors import Problem, StoreError, StudyError


@pytest.mark.parametrize("name", COMMANDS)
def test_help_of_each_command_has_an_example(name: str) -> None:
    result = CliRunner().invoke(main, [name, "--help"])
    assert result.exit_code == 0
    assert "Example:" in result.output
    assert f"simkit {name} " in result.output.split("Example:")[1]


def test_help_lists_every_command_with_a_line() -> None:
    result = CliRunner().invoke(main, ["--help"])
    assert result.exit_code == 0
    listed = result.output.split("Commands:")[1].splitlines()
    lines = [line.split(maxsplit=1) for line in listed if line.strip()]
    assert [words[0] for words in lines] == list(COMMANDS)
    assert all(len(words) == 2 for words in lines)


def test_version() -> None:
    result = CliRunner().invoke(main, ["--version"])
    assert result.output.strip().endswith(simkit.__version__)


def test_unknown_command_is_an_error_of_usage() -> None:
    result = CliRunner().invoke(main, ["solve"])
    assert result.exit_code == 2
    assert "No such command 'solve'" in result.stderr


def failing(error: Exception) -> click.Group:
    group = LazyGroup("simkit")

    @click.command()
    def command() -> None:
        raise error

    group.get_command = lambda ctx, name: command  # type: ignore[method-assign]
    return group


@pytest.mark.parametrize(
    ("error", "status"),
    [
        (StudyError("a.toml", [Problem("is not a length", "values.arm", '"3"', 7)]), 2),
        (StoreError("no store in results/a"), 1),
    ],
    ids=["study", "store"],
)
def test_own_errors_are_text_on_stderr(error: Exception, status: int) -> None:
    result = CliRunner().invoke(failing(error), ["any"])
    assert result.exit_code == status
    assert result.stdout == ""
    assert result.stderr == f"simkit: {error}\n"


def test_other_errors_are_bugs_and_keep_their_traceback() -> None:
    result = CliRunner().invoke(failing(ZeroDivisionError("ours")), ["any"])
    assert isinstance(result.exception, ZeroDivisionError)
