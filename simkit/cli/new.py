"""``simkit new``: write a commented study to start from."""

from __future__ import annotations

import json
import re
from importlib import resources
from pathlib import Path

import click

CAUTIONS = """\
Before you build and measure:
- Transmitting needs a licence or a licence-free band, and field-strength limits apply:
  ask the authority of your country.
- Never transmit into a network analyser.
- Keep test antennas well clear of power lines.
- Sheet edges cut and solder fumes harm; solder before you glue the strip to plastic."""


def starter_text(name: str) -> str:
    """Return the starter study for a file called `name`.toml."""
    title = re.sub(r"[_\s]+", " ", name).strip()
    template = resources.files("simkit.cli").joinpath("starter.toml").read_text("utf-8")
    return template.format(title=json.dumps(title), file=f"{name}.toml")


@click.command()
@click.argument("name")
def command(name: str) -> None:
    """Write a commented study file NAME.toml: a dipole of two brass strips, ready to change.

    NAME may contain a folder that exists. An existing file is never overwritten.

    \b
    Example:
      simkit new creek_gauge
    """
    path = Path(name if name.endswith(".toml") else f"{name}.toml")
    if not path.parent.is_dir():
        raise click.UsageError(f"the folder {path.parent} does not exist: create it first.")
    try:
        with path.open("x", encoding="utf-8") as file:
            file.write(starter_text(path.stem))
    except FileExistsError as error:
        raise click.UsageError(f"{path} exists and is left alone: choose another name.") from error
    click.echo(f"Written: {path}")
    click.echo(f"Next: edit it, then  simkit check {path}  and  simkit run {path}\n")
    click.echo(CAUTIONS)
