"""``simkit match``: networks between the antenna and its cable, ranked."""

from __future__ import annotations

from typing import TYPE_CHECKING, Literal

import click

from simkit.cli.fitting import extension_option, port_option
from simkit.cli.matching import Origin, Written, as_data, draw_network, write_network
from simkit.cli.options import (
    PathOrAddress,
    case_option,
    csv_option,
    json_option,
    one_format,
)
from simkit.cli.output import csv_text, emit, json_text

if TYPE_CHECKING:
    from simkit.feedline import PartSupply

KINDS = ("shunt stub", "series stub", "tapped line", "L-section", "quarter wave", "single part")
"""Names of the networks, as in `simkit.feedline.candidates.MAKERS`."""

STUB = "--stub-line"


@click.command()
@click.argument("source", type=PathOrAddress(exists=True), metavar="SOURCE")
@click.option("--from", "start", required=True, metavar="FREQUENCY", help="Start of the band.")
@click.option("--to", "stop", required=True, metavar="FREQUENCY", help="End of the band.")
@case_option
@port_option
@extension_option
@click.option(
    "--plane",
    type=click.Choice(["connector", "feed"]),
    default="connector",
    show_default=True,
    help="Of results: match what the connector shows, behind the feed line that the study has "
    "already, or the antenna itself.",
)
@click.option(
    "--kind",
    "kinds",
    multiple=True,
    metavar="KIND",
    help=f"A network to try: {', '.join(KINDS)}; may be repeated; all if left out.",
)
@click.option(
    "--line",
    metavar="LINE",
    help="What sections of line are made of: '50 ohm' (with a velocity factor: '75 ohm, 0.66') or "
    "'two-strips, width=6 mm, separation=3 mm', with the keys of a [[feedline]] item; or the name "
    "of such an item in the study; the reference in air if left out.",
)
@click.option(STUB, metavar="LINE", help="What stubs are made of, if it is another line than that.")
@click.option(
    "--inductor-q", type=float, default=40.0, show_default=True, help="Q of inductors in the band."
)
@click.option(
    "--capacitor-q",
    type=float,
    default=200.0,
    show_default=True,
    help="Q of capacitors in the band.",
)
@click.option(
    "--tolerance",
    metavar="PART",
    default="5 %",
    show_default=True,
    help="Tolerance of bought parts.",
)
@click.option(
    "--values",
    "series",
    type=click.Choice(["E24", "any"], case_sensitive=False),
    default="E24",
    show_default=True,
    help="Values parts are to be had in.",
)
@click.option(
    "--exact",
    is_flag=True,
    help="Match the middle of the band exactly; do not shift lengths to the best over the band.",
)
@click.option(
    "--reference",
    metavar="RESISTANCE",
    help="What to match to, '50 ohm'; that of the study or the file if left out.",
)
@click.option(
    "--wanted",
    "wanted_db",
    type=click.FloatRange(min=0, min_open=True),
    default=15.0,
    show_default=True,
    metavar="DB",
    help="Return loss aimed at over the whole band.",
)
@click.option(
    "--most",
    type=click.IntRange(min=1),
    default=8,
    show_default=True,
    metavar="N",
    help="How many networks to show.",
)
@click.option(
    "--draw", type=click.IntRange(min=1), metavar="N", help="Draw network N; the first if left out."
)
@click.option(
    "--plots",
    type=click.Path(file_okay=False),
    metavar="FOLDER",
    help="Folder for the pictures; SOURCE/plots, or plots/ beside a file, if left out.",
)
@click.option(
    "--write",
    type=click.IntRange(min=1),
    metavar="N",
    help="Write network N as [[feedline]] items into a copy of the study, sizes to 0.1 mm; for a "
    "measured file print the items.",
)
@click.option(
    "-o",
    "--output",
    type=click.Path(dir_okay=False),
    metavar="FILE",
    help="File that --write makes, never one that exists; STUDY_matched.toml beside the study, or "
    "here for a results folder, if left out.",
)
@json_option
@csv_option
def command(
    source: str,
    start: str,
    stop: str,
    case: int | None,
    port: int | None,
    extension: str | None,
    plane: str,
    kinds: tuple[str, ...],
    line: str | None,
    stub_line: str | None,
    inductor_q: float,
    capacitor_q: float,
    tolerance: str,
    series: str,
    exact: bool,
    reference: str | None,
    wanted_db: float,
    most: int,
    draw: int | None,
    plots: str | None,
    write: int | None,
    output: str | None,
    as_json: bool,
    as_csv: bool,
) -> None:
    """Design networks that match an antenna to its cable from one frequency to another.

    SOURCE is a results folder, a study whose results are in results/, or a measured Touchstone
    file, which needs no study. Networks are ranked by the worst return loss over the band that is
    left when their most sensitive dimension is 1 % off. What a study has for a feed line already
    stays: networks come between it and the connector.

    \b
    Example:
      simkit match results/creek_gauge --from '863 MHz' --to '870 MHz'
      simkit match my_antenna.toml --from '863 MHz' --to '870 MHz' --write 1
      simkit match build_1.s1p --from '863 MHz' --to '870 MHz' --kind L-section --tolerance '2 %'
    """
    form = one_format(as_json, as_csv)
    if output is not None and write is None:
        raise click.UsageError("-o says where --write N writes to: give both, or leave -o out.")
    from simkit.feedline import find_matches
    from simkit.measured import asked

    start_hz = asked.frequency_hz("--from", start)
    stop_hz = asked.frequency_hz("--to", stop)
    origin = Origin.of(source)
    if form != "text" and write is not None and origin.study is None and output is None:
        raise click.UsageError("--write prints the items as text: give -o FILE too.")
    found = origin.terminals(
        start_hz,
        stop_hz,
        case=case,
        port=port,
        delay_s=asked.extension_s(extension) if extension else 0.0,
        plane=plane,
    )
    own = [origin.line(text, option) for text, option in ((line, "--line"), (stub_line, STUB))]
    report = find_matches(
        found.load,
        start_hz,
        stop_hz,
        reference_ohm=_resistance(reference, found.reference_ohm),
        line=own[0],
        stub_line=own[1],
        kinds=_kinds(kinds),
        supply=_supply(inductor_q, capacitor_q, tolerance, series),
        wanted_db=wanted_db,
        refine=not exact,
    )
    for option, number in (("--write", write), ("--draw", draw)):
        if number is not None and number > len(report.designs):
            raise click.UsageError(f"{option} {number}: there are {len(report.designs)} networks.")
    if form == "json":
        emit(json_text(as_data(report, found)))
    elif form == "csv":
        emit(csv_text(report.as_rows()))
    else:
        emit("\n".join([*origin.head(found, start_hz, stop_hz), report.as_text(most)]))
    chain = report.designs[(draw or write or 1) - 1].chain
    if write is not None:
        written = Written.of(report, write, found, keep=[line for line in own if line is not None])
        click.echo(written.about, err=True)
        write_network(origin, written, found, plane, output)
        chain = written.chain if draw is None else chain
    with origin.pictures(plots) as folder:
        draw_network(report, chain, found, origin, folder)


def _kinds(wanted: tuple[str, ...]) -> tuple[str, ...]:
    """Names as the table has them; a hyphen may stand for a space, and the case is free."""
    if not wanted:
        return KINDS
    from simkit.study.units import nearest

    plain = {kind.lower().replace("-", " "): kind for kind in KINDS}
    found = []
    for word in wanted:
        kind = plain.get(word.lower().replace("-", " ").strip())
        if kind is None:
            hint = nearest(word, KINDS)
            advice = f"do you mean '{hint}'?" if hint else f"choose from {', '.join(KINDS)}"
            raise click.UsageError(f"--kind {word}: there is no such network; {advice}")
        found.append(kind)
    return tuple(dict.fromkeys(found))


def _resistance(text: str | None, default_ohm: float) -> float:
    from simkit.measured import asked
    from simkit.study.units import RESISTANCE

    return default_ohm if text is None else asked.number("--reference", text, RESISTANCE)[0]


def _supply(inductor_q: float, capacitor_q: float, tolerance: str, series: str) -> PartSupply:
    from simkit.feedline import PartSupply

    number, percent, _ = tolerance.partition("%")
    try:
        part = float(number) / (100 if percent else 1)
    except ValueError:
        raise click.UsageError(
            f"--tolerance {tolerance}: give a part or per cents, as in '2 %'"
        ) from None
    kept: Literal["E24", "any"] = "E24" if series == "E24" else "any"
    return PartSupply(inductor_q, capacitor_q, part, series=kept)
