"""``simkit new``: write a commented study to start from."""

from __future__ import annotations

import click

CAUTIONS = """\
Before you build and measure:
- Transmitting needs a licence or a licence-free band, and limits on field strength apply: local
  rules and qualified people decide. As an estimate, the ICNIRP 2020 reference level for the public
  is reached 0.14 m from 1 W EIRP at 868 MHz, in the far field.
- Never transmit into a network analyser.
- Keep test antennas well clear of power lines.
- Edges of sheet metal cut and solder fumes harm; solder before gluing to plastic."""


@click.command()
@click.argument("name")
def command(name: str) -> None:
    """Write a commented study file NAME.toml: a dipole of two brass strips, ready to change.

    NAME may contain a folder that exists. An existing file is never overwritten.

    \b
    Example:
      simkit new creek_gauge
    """
    from simkit.study.starter import write_starter

    path = write_starter(name)
    click.echo(f"Written: {path}\n\n{CAUTIONS}\n")
    click.echo(f"Next: edit {path}, then  simkit check {path}  and  simkit run {path}")
