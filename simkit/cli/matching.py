"""What ``simkit match`` works on and what it leaves: the source, the tables, pictures and files."""

from __future__ import annotations

from collections.abc import Collection, Iterator
from contextlib import contextmanager, nullcontext, suppress
from dataclasses import dataclass
from pathlib import Path
from typing import TYPE_CHECKING, Any, Literal

import click

from simkit.cli.fitting import save
from simkit.cli.folder import damage_said, drawing_folder, study_of
from simkit.cli.output import emit
from simkit.errors import FeedlineError, Problem, StudyError

if TYPE_CHECKING:
    from simkit.feedline import Chain, Design, Line, MatchReport, OnePort
    from simkit.feedline.sources import Terminals
    from simkit.study import Study
    from simkit.study.model import Antenna

AROUND_BANDS, AROUND_CENTRE = 1.5, 0.15
"""The curve is drawn to either side by so many bands, or by so much of the centre if more."""


@dataclass(frozen=True)
class Origin:
    """What the command line names.

    Attributes
    ----------
    name : str
        As the user has it.
    data : str
        Results folder or Touchstone file.
    study : Study or None
        Behind the results.
    file : Path or None
        The study's own file, if the user names it.
    """

    name: str
    data: str
    study: Study | None
    file: Path | None = None

    @classmethod
    def of(cls, source: str) -> Origin:
        """Find out what a source is.

        Raises
        ------
        StudyError
            If a study has changed since it was solved.
        """
        if Path(source).suffix == ".toml" and Path(source).is_file():
            return cls._of_study(Path(source))
        if "://" not in source and Path(source).is_file():
            return cls(source, source, None)
        return cls(source, source, study_of(source))

    @classmethod
    def _of_study(cls, file: Path) -> Origin:
        from simkit.study import load_study

        study = load_study(file)
        results = Path("results") / file.stem
        solved = study_of(results)
        if solved is None:
            what = f"is not solved: {results} holds no results; run it first, or name its results"
            raise StudyError(str(file), [Problem(what)])
        if solved.text != study.text:
            what = f"has changed since {results} was made; run it again, which is quick"
            raise StudyError(str(file), [Problem(what)])
        return cls(str(file), str(results), study, file)

    def terminals(
        self,
        start_hz: float,
        stop_hz: float,
        *,
        case: int | None,
        port: int | None,
        delay_s: float,
        plane: str,
    ) -> Terminals:
        """Read the load."""
        from simkit.feedline.sources import terminals

        chosen: Literal["feed", "connector"] = "feed" if plane == "feed" else "connector"
        measured = self.study is None and Path(self.data).is_file()
        with nullcontext() if measured else damage_said(self.data):
            return terminals(
                self.data,
                start_hz,
                stop_hz,
                case=case,
                nominal=self.study.values if self.study is not None else None,
                port=port,
                delay_s=delay_s,
                plane=chosen,
            )

    def line(self, text: str | None, option: str) -> Line | None:
        """Return the line a text means, or that of the study's item of this name."""
        from simkit.feedline.line_text import read_line

        if text is None:
            return None
        if self.study is None:
            return read_line(text, option)
        nominal = self.study.nominal()
        named = {name: line for line, name in lines_of(nominal).items()}
        if text in named:
            return named[text]
        return read_line(text, option, nominal.metal)

    def head(self, found: Terminals, start_hz: float, stop_hz: float) -> list[str]:
        """Which antenna this is, what it shows, and what is to be known of the data."""
        notes = [f"note: {note}" for note in found.notes]
        return [self.which(found.case), *notes, found.as_text(start_hz, stop_hz)]

    def which(self, case: int | None) -> str:
        """Name of the source with the case and its values."""
        if case is None:
            return self.name
        values = self.values(case)
        return f"{self.name}, case {case}" + (f": {values}" if values else "")

    def values(self, case: int | None) -> str:
        """Swept values of a case in words, empty without any."""
        from simkit.study.units import as_text

        if self.study is None or case is None:
            return ""
        numbers = self.study.case(case).values
        return ", ".join(
            f"{swept.name} {as_text(numbers[swept.name], self.study.display_unit(swept.name))}"
            for swept in self.study.swept
        )

    @property
    def stem(self) -> str:
        """First part of the pictures' names."""
        return "match" if self.study is not None else f"match_{Path(self.data).stem}"

    @contextmanager
    def pictures(self, plots: str | None) -> Iterator[Path]:
        """Give the folder for pictures; those of results at an address are sent there."""
        if plots is not None:
            yield Path(plots)
        elif self.study is None and Path(self.data).is_file():
            yield Path(self.data).parent / "plots"
        else:
            with drawing_folder(self.data) as folder:
                yield folder / "plots"

    def target(self, output: str | None) -> Path:
        """Return the file for the matched study."""
        if output is not None:
            return Path(output)
        place = self.file if self.file is not None else Path(Path(self.data).name)
        return place.with_name(f"{place.stem}_matched.toml")


def lines_of(antenna: Antenna) -> dict[Line, str]:
    """Lines of a study's feed line, each with the name of the first item made of it."""
    from simkit.feedline.build import line_of

    found: dict[Line, str] = {}
    for item in antenna.feedline:
        if hasattr(item, "line"):
            found.setdefault(line_of(item.line), item.name)
    return found


@dataclass(frozen=True)
class Written:
    """A network with the sizes that are written.

    Attributes
    ----------
    design : Design
    chain : Chain
        Rounded.
    worst_db : float
        Smallest return loss over the band with these sizes.
    band_hz : (float, float)
    """

    design: Design
    chain: Chain
    worst_db: float
    band_hz: tuple[float, float]

    @classmethod
    def of(
        cls, report: MatchReport, number: int, found: Terminals, keep: Collection[Line]
    ) -> Written:
        """Round network `number`, counted from 1, and judge it again."""
        import numpy as np

        from simkit.feedline import worst_return_loss_db
        from simkit.feedline.items import rounded

        design = report.designs[number - 1]
        chain = rounded(design.chain, keep)
        band = (report.start_hz, report.stop_hz)
        worst = worst_return_loss_db(chain, found.load.at(np.linspace(*band, 101)))
        return cls(design, chain, worst, band)

    @property
    def about(self) -> str:
        """What rounding did."""
        return (
            f"with the sizes as written: at least {self.worst_db:.1f} dB return loss over the "
            f"band, {self.design.worst_db:.1f} dB before rounding"
        )

    def comments(self, origin: Origin, case: int | None) -> list[str]:
        """Say above the items where they come from."""
        from simkit.feedline.checks import quantity as q

        low, high = (q(f, "Hz") for f in self.band_hz)
        where = f"as measured in {Path(origin.data).name}"
        if origin.study is not None:
            values = origin.values(case)
            where = f"in the model for {values}" if values else "in the model"
        return [
            f"Matching network ({self.design.kind}) by `simkit match`: at least "
            f"{self.worst_db:.1f} dB return loss",
            f"against {self.chain.reference_ohm:g} ohm from {low} to {high}, {where}.",
        ]


def write_network(
    origin: Origin, written: Written, found: Terminals, plane: str, output: str | None
) -> None:
    """Write the network into a new study, or print its items where there is no study.

    Raises
    ------
    StudyError
        If the file exists, cannot be written, or the new study would not be understood.
    FeedlineError
        If the study has a feed line already and the network was made for the antenna itself.
    """
    from simkit.feedline.items import items_of, toml_text

    study = origin.study
    comments = written.comments(origin, found.case)
    if study is None:
        text = toml_text(items_of(written.chain), comments)
        if output is None:
            emit(f"\n{text}")
        else:
            create(Path(output), text)
        return
    from simkit.feedline.written import with_network

    nominal = study.nominal()
    if nominal.feedline and plane == "feed":
        raise FeedlineError(
            f"{origin.name}: the study has a feed line already, and this network was made for the "
            "antenna without it: take its [[feedline]] items out, or leave --plane out to add to it"
        )
    taken = {plan.name for plan in study.blueprint.feedline}
    items = items_of(written.chain, taken, lines_of(nominal), nominal.metal)
    text = with_network(study, items, comments, changed_values(study, found.case))
    target = origin.target(output)
    check_study(target, text)
    create(target, text)
    for doubt in _doubts(written.chain, nominal):
        click.echo(f"note: a case with a mode there will be doubtful: {doubt}", err=True)
    click.echo(f"next: simkit run {target}", err=True)


def _doubts(chain: Chain, antenna: Antenna) -> list[str]:
    """What to distrust in a network over the whole band of a study."""
    band = [antenna.frequency.start_hz, antenna.frequency.stop_hz]
    return list(dict.fromkeys(d for element in chain.elements for d in element.doubts(band)))


def changed_values(study: Study, case: int | None) -> dict[str, float]:
    """Values of a case that differ from those in the file."""
    if case is None:
        return {}
    from simkit.measured.variation import Variation

    variation = Variation(study)
    numbers = study.case(case).values
    return {
        swept.name: numbers[swept.name]
        for swept in study.swept
        if abs(numbers[swept.name] - variation.nominal(swept.name))
        > 1e-9 * abs(numbers[swept.name])
    }


def check_study(target: Path, text: str) -> None:
    """Refuse a text that is no study.

    Raises
    ------
    StudyError
    """
    from simkit.study.load import parse_study

    parse_study(target, text)


def create(target: Path, text: str) -> None:
    """Write a new file; never over one that exists.

    Raises
    ------
    StudyError
    """
    try:
        with target.open("x", encoding="utf-8", newline="\n") as file:
            file.write(text)
    except FileExistsError:
        what = "exists already and is left as it is; give another name with -o"
        raise StudyError(str(target), [Problem(what)]) from None
    except OSError as error:
        with suppress(OSError):  # what was begun, on a disk that is full
            target.unlink(missing_ok=True)
        what = f"cannot be written: {error.strerror}; give a file that can be with -o"
        raise StudyError(str(target), [Problem(what)]) from error
    click.echo(f"written: {target}", err=True)


def draw_network(
    report: MatchReport, chain: Chain, found: Terminals, origin: Origin, folder: Path
) -> None:
    """Draw the Smith path, the return loss before and after, and the schematic."""
    from simkit.plot.matching import plot_match, plot_match_path
    from simkit.plot.schematic import plot_schematic
    from simkit.plot.style import put_title

    band, load = (report.start_hz, report.stop_hz), found.load
    pictures = {
        "path": plot_match_path(chain, load, sum(band) / 2, band),
        "reflection": plot_match(chain, load, *band, span_hz=_span(load, band)),
        "schematic": plot_schematic(chain),
    }
    for name, ax in pictures.items():
        put_title(ax, f"{origin.which(found.case)}\n{ax.get_title(loc='left')}")
        save(ax, folder, f"{origin.stem}_{name}.png")


def _span(load: OnePort, band_hz: tuple[float, float]) -> tuple[float, float]:
    """Frequencies around a band that show how it lies in the curve."""
    middle, width = sum(band_hz) / 2, band_hz[1] - band_hz[0]
    reach = max(AROUND_BANDS * width, AROUND_CENTRE * middle)
    low, high = float(load.frequency_hz[0]), float(load.frequency_hz[-1])
    return max(low, middle - reach), min(high, middle + reach)


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
