"""``simkit match``: networks between the antenna and its cable, ranked."""

from __future__ import annotations

from pathlib import Path
from typing import TYPE_CHECKING, Any, Literal

import click

from simkit.cli.fitting import extension_option, port_option, save
from simkit.cli.folder import study_of
from simkit.cli.options import (
    PathOrAddress,
    case_option,
    csv_option,
    json_option,
    one_format,
)
from simkit.cli.output import csv_text, emit, json_text

if TYPE_CHECKING:
    from simkit.feedline import Design, Line, MatchReport, OnePort, PartSupply
    from simkit.feedline.sources import Terminals
    from simkit.study import Study

KINDS = ("shunt stub", "series stub", "tapped line", "L-section", "quarter wave", "single part")
"""Names of the networks, as in `simkit.feedline.candidates.MAKERS`."""

AROUND_BANDS, AROUND_CENTRE = 1.5, 0.15
"""The curve is drawn to either side by so many bands, or by so much of the centre if more."""


@click.command()
@click.argument("source", type=PathOrAddress(exists=True), metavar="SOURCE")
@click.option("--from", "start", required=True, metavar="FREQUENCY", help="Start of the band.")
@click.option("--to", "stop", required=True, metavar="FREQUENCY", help="End of the band.")
@case_option
@port_option
@extension_option
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
    "'two-strips, width=6 mm, separation=3 mm'; the reference in air if left out.",
)
@click.option(
    "--stub-line", metavar="LINE", help="What stubs are made of, if it is another line than that."
)
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
@json_option
@csv_option
def command(
    source: str,
    start: str,
    stop: str,
    case: int | None,
    port: int | None,
    extension: str | None,
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
    as_json: bool,
    as_csv: bool,
) -> None:
    """Design networks that match an antenna to its cable from one frequency to another.

    SOURCE is a results folder or a measured Touchstone file; a measured file needs no study.
    Networks are ranked by the worst return loss over the band that is left when their most
    sensitive dimension is 1 % off.

    \b
    Example:
      simkit match results/creek_gauge --from '863 MHz' --to '870 MHz'
      simkit match build_1.s1p --from '863 MHz' --to '870 MHz' --kind L-section --tolerance '2 %'
    """
    form = one_format(as_json, as_csv)
    from simkit.feedline import find_matches
    from simkit.feedline.sources import terminals
    from simkit.measured import asked

    start_hz = asked.frequency_hz("--from", start)
    stop_hz = asked.frequency_hz("--to", stop)
    study = None if Path(source).is_file() else study_of(source)
    found = terminals(
        source,
        start_hz,
        stop_hz,
        case=case,
        nominal=study.values if study is not None else None,
        port=port,
        delay_s=asked.extension_s(extension) if extension else 0.0,
    )
    report = find_matches(
        found.load,
        start_hz,
        stop_hz,
        reference_ohm=_resistance(reference, found.reference_ohm),
        line=_line(line, "--line"),
        stub_line=_line(stub_line, "--stub-line"),
        kinds=_kinds(kinds),
        supply=_supply(inductor_q, capacitor_q, tolerance, series),
        wanted_db=wanted_db,
        refine=not exact,
    )
    number = draw if draw is not None else 1
    if number > len(report.designs):
        raise click.UsageError(f"--draw {number}: there are {len(report.designs)} networks.")
    if form == "json":
        emit(json_text(as_data(report, found)))
    elif form == "csv":
        emit(csv_text(report.as_rows()))
    else:
        emit("\n".join([*_head(source, found, study, start_hz, stop_hz), report.as_text(most)]))
    _draw(report, report.designs[number - 1], found, _folder(source, plots), _stem(source))


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


def _line(text: str | None, option: str) -> Line | None:
    from simkit.feedline.line_text import read_line

    return None if text is None else read_line(text, option)


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


def _head(
    source: str, found: Terminals, study: Study | None, start_hz: float, stop_hz: float
) -> list[str]:
    """Which antenna this is, what it shows, and what is to be known of the data."""
    from simkit.study.units import as_text

    which = source
    if found.case is not None:
        which += f", case {found.case}"
        if study is not None and study.swept:
            values = study.case(found.case).values.items()
            named = [f"{name} {as_text(v, study.display_unit(name))}" for name, v in values]
            which += f": {', '.join(named)}"
    notes = [f"note: {note}" for note in found.notes]
    return [which, *notes, found.as_text(start_hz, stop_hz)]


def _draw(report: MatchReport, design: Design, found: Terminals, folder: Path, stem: str) -> None:
    """Smith path, return loss before and after, and the schematic."""
    from simkit.plot.matching import plot_match, plot_match_path
    from simkit.plot.schematic import plot_schematic

    band = (report.start_hz, report.stop_hz)
    chain, load = design.chain, found.load
    save(plot_match_path(chain, load, sum(band) / 2, band), folder, f"{stem}_path.png")
    ax = plot_match(chain, load, *band, span_hz=_span(load, band))
    save(ax, folder, f"{stem}_reflection.png")
    save(plot_schematic(chain), folder, f"{stem}_schematic.png")


def _span(load: OnePort, band_hz: tuple[float, float]) -> tuple[float, float]:
    """Frequencies around a band that show how it lies in the curve."""
    middle, width = sum(band_hz) / 2, band_hz[1] - band_hz[0]
    reach = max(AROUND_BANDS * width, AROUND_CENTRE * middle)
    low, high = float(load.frequency_hz[0]), float(load.frequency_hz[-1])
    return max(low, middle - reach), min(high, middle + reach)


def _folder(source: str, plots: str | None) -> Path:
    if plots is not None:
        return Path(plots)
    if "://" in source:
        return Path("plots")
    return (Path(source).parent if Path(source).is_file() else Path(source)) / "plots"


def _stem(source: str) -> str:
    return f"match_{Path(source).stem}" if Path(source).is_file() else "match"


def as_data(report: MatchReport, found: Terminals) -> dict[str, Any]:
    """Everything of a report as plain values, SI."""
    from simkit.feedline.items import items_of

    f = [report.start_hz, (report.start_hz + report.stop_hz) / 2, report.stop_hz]
    bound = report.bound
    return {
        "case": found.case,
        "plane": found.where,
        "start_hz": report.start_hz,
        "stop_hz": report.stop_hz,
        "reference_ohm": report.reference_ohm,
        "impedance": [
            {"frequency_hz": x, "resistance_ohm": z.real, "reactance_ohm": z.imag}
            for x, z in zip(f, found.load.at(f).impedance_ohm.tolist(), strict=True)
        ],
        "before_return_loss_db": report.before_db,
        "wanted_return_loss_db": report.wanted_db,
        "bound": {
            "return_loss_db": bound.return_loss_db,
            "kind": bound.kind,
            "resistance_ohm": bound.resistance_ohm,
            "q": bound.q_at(f[1]),
            "misfit": bound.misfit,
        },
        "designs": [
            row
            | {
                "dimensions": [
                    {"name": d.name, "value": d.value, "unit": d.unit} for d in design.dimensions
                ],
                "feedline": items_of(design.chain),
                "doubts": list(design.doubts),
            }
            for row, design in zip(report.as_rows(), report.designs, strict=True)
        ],
        "notes": list(report.notes),
    }
