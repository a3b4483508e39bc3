"""The ``simkit`` command: one module per subcommand, each imported when it is asked for.

Exit status: 0 all is well; 1 something went wrong or a case of the run has no solution; 2 the
command line or an input file cannot be used.
"""

from __future__ import annotations

import os
from importlib import import_module
from typing import IO, Any

import click

from simkit import __version__
from simkit.errors import ConditionError, FeedlineError, MeasurementError, SimkitError, StudyError

COMMANDS = (
    "new",
    "check",
    "run",
    "status",
    "list",
    "modes",
    "query",
    "plot",
    "compare",
    "match",
    "fit",
    "trim",
    "export",
)
"""Subcommands in the order in which one uses them; each is `command` in a module of its name."""


ONE_THREAD = ("OMP_NUM_THREADS", "OPENBLAS_NUM_THREADS", "MKL_NUM_THREADS")
"""The matrices here are small: spread over busy cores they take up to ten times as long. Read when
numpy is loaded, which no command has done yet; what the user has set stays."""


class CommandFailure(click.ClickException):
    """An error simkit raises on purpose, shown as its text alone."""

    def show(self, file: IO[Any] | None = None) -> None:
        """Print the text, on standard error unless a file is given."""
        click.echo(f"simkit: {self.message}", file=file, err=True)


class InputFailure(CommandFailure):
    """The same for a file the user hands in that cannot be used."""

    exit_code = 2


class LazyGroup(click.Group):
    """Finds subcommands by name; prints simkit's own errors as text and lets bugs show."""

    def list_commands(self, ctx: click.Context) -> list[str]:
        """Names of all subcommands."""
        # Not list(): once its module is imported, that name stands for the command here.
        return [*COMMANDS]

    def get_command(self, ctx: click.Context, cmd_name: str) -> click.Command | None:
        """Import one subcommand."""
        if cmd_name not in COMMANDS:
            return None
        command: click.Command = import_module(f"simkit.cli.{cmd_name}").command
        return command

    def invoke(self, ctx: click.Context) -> Any:
        """Run the subcommand."""
        for name in ONE_THREAD:
            os.environ.setdefault(name, "1")
        try:
            return super().invoke(ctx)
        except (StudyError, MeasurementError, ConditionError, FeedlineError) as error:
            raise InputFailure(str(error)) from error
        except SimkitError as error:
            raise CommandFailure(str(error)) from error


@click.group(cls=LazyGroup, context_settings={"help_option_names": ["-h", "--help"]})
@click.version_option(__version__, prog_name="simkit")
def main() -> None:
    """Antennas made of flat metal strip: say what you want to build, see where every current mode
    lands before you cut, and set your measured sweep beside it.

    \b
    A first session:
      simkit new my_antenna             write a commented study file
      simkit check my_antenna.toml      see what simkit understood
      simkit run my_antenna.toml        solve all cases and draw the plots
      simkit modes results/my_antenna   list the natural modes
    """
