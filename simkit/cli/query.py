"""``simkit query``: find cases."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

import click

from simkit.cli.folder import says_damage
from simkit.cli.options import RESULTS, csv_option, json_option, one_format
from simkit.cli.output import (
    csv_text,
    emit,
    frequency_text,
    json_text,
    number_text,
    quantity_text,
    table,
)
from simkit.finding.quantities import quantity_rows

if TYPE_CHECKING:
    import numpy as np
    import xarray as xr
    from numpy.typing import NDArray

    from simkit.finding.condition import Term
    from simkit.finding.select import Selection

Row = dict[str, Any]


def quantities_text() -> str:
    """Return the list of quantities as a table."""
    rows = [[row["quantity"], row["unit"], row["meaning"]] for row in quantity_rows()]
    return table(["quantity", "unit", "meaning"], rows)


def _show_quantities(ctx: click.Context, param: click.Parameter, value: bool) -> None:
    if value:
        emit(quantities_text())
        ctx.exit()


_HELP = f"""Find the cases of the results in DIR that satisfy CONDITION.

A test is a quantity, a comparison (<  <=  >  >=  =  !=) and a value with its unit; or within, with
a range LOW .. HIGH or a value and a tolerance, VALUE +- TOLERANCE, which may be in per cent of the
value. Tests are joined by and, or, not and parentheses. Quote the condition for the shell. Without
one every case is listed.

A mode is named by its length, as in dip of 1/2 wave, dip of 1 wave, dip of 3/2 wave, a band by its
ends, as in worst_return_loss in 863 MHz .. 870 MHz. A quantity a case does not have satisfies no
comparison and no negation of one; "is missing" and "is known" ask for just that.

\b
{chr(10).join("  " + line for line in quantities_text().splitlines())}

\b
Example:
  simkit query results/creek_gauge 'dip of 1/2 wave within 868 MHz +- 1 %'
  simkit query results/creek_gauge 'worst_return_loss in 863 MHz .. 870 MHz >= 10 dB'
  simkit query results/creek_gauge 'status != solved or dip of 3/2 wave is missing' --csv
  simkit query results/creek_gauge --show 'q of 1/2 wave' --sort 'q of 1/2 wave' --first 5
"""


@click.command(help=_HELP)
@click.argument("results", type=RESULTS, metavar="DIR")
@click.argument("words", metavar="[CONDITION]", nargs=-1)
@click.option("--show", multiple=True, metavar="QUANTITY", help="One more column; may be repeated.")
@click.option("--sort", metavar="QUANTITY", help="Smallest first; cases without it come last.")
@click.option("--descending", is_flag=True, help="With --sort: largest first.")
@click.option("--first", type=click.IntRange(min=1), metavar="N", help="Print at most N cases.")
@click.option(
    "--quantities",
    is_flag=True,
    is_eager=True,
    expose_value=False,
    callback=_show_quantities,
    help="Print the quantities a condition may name, and nothing else.",
)
@json_option
@csv_option
@says_damage
def command(
    results: str,
    words: tuple[str, ...],
    show: tuple[str, ...],
    sort: str | None,
    descending: bool,
    first: int | None,
    as_json: bool,
    as_csv: bool,
) -> None:
    """Find cases; its help is put together from the list of quantities."""
    form = one_format(as_json, as_csv)
    if descending and sort is None:
        raise click.UsageError("--descending belongs to --sort QUANTITY.")
    from simkit.cli.patience import patiently
    from simkit.finding.condition import terms_of
    from simkit.finding.parser import parse_condition, parse_term
    from simkit.finding.reading import known_in
    from simkit.finding.select import select
    from simkit.store import open_results

    dataset = open_results(results)
    known = known_in(dataset)
    condition = parse_condition(" ".join(words), known) if words else None
    more = [parse_term(text, known) for text in show]
    key = [parse_term(sort, known)] if sort is not None else []
    status, *swept = (parse_term(name, known) for name in ("status", *_quoted(known.swept)))
    shown = [t for t in dict.fromkeys([*terms_of(condition), *more, *key]) if not _in_row(t)]
    with patiently(dataset.sizes["case"]) as seen:
        found = select(dataset, condition, [status, *swept, *shown], seen)
    order = _order(found, key[0] if key else None, descending)[:first]
    numbers = dataset["case"].values[found.places]
    listed = _Listed(numbers, found, status, swept, shown)
    if form == "json":
        emit(json_text([listed.row(i) for i in order]))
    elif form == "csv":
        emit(csv_text([listed.flat(i) for i in order]) if len(order) else listed.head())
    else:
        emit(listed.text(order))
        click.echo(f"\n{_count_text(len(order), len(found.places), dataset)}")


def _quoted(names: Any) -> list[str]:
    return [f'"{name}"' for name in names]


def _in_row(term: Term) -> bool:
    """Whether every row shows it anyway."""
    return term.quantity.kind == "swept" or term.quantity.name in ("case", "status")


def _order(found: Selection, key: Term | None, descending: bool) -> NDArray[np.int64]:
    """Places in the selection, sorted; stable, and cases without the quantity at last."""
    import numpy as np

    if key is None:
        return np.arange(len(found.places))
    column = found.values[key]
    return np.argsort(-column if descending else column, kind="stable")


def _count_text(printed: int, selected: int, dataset: xr.Dataset) -> str:
    text = f"{selected} of {dataset.sizes['case']} cases"
    return text if printed == selected else f"{text}; {printed} shown"


class _Listed:
    """Selected cases as rows for people and programs."""

    def __init__(
        self,
        numbers: NDArray[np.int64],
        found: Selection,
        status: Term,
        swept: list[Term],
        shown: list[Term],
    ) -> None:
        self.numbers = numbers
        self.values = found.values
        self.status = status
        self.swept = swept
        self.shown = shown

    def _label(self, place: int) -> str:
        from simkit.store.schema import Status

        return Status(int(self.values[self.status][place])).label

    def row(self, place: int) -> Row:
        """One case for JSON."""
        return {
            "case": int(self.numbers[place]),
            "status": self._label(place),
            "values": {term.text: self._number(term, place) for term in self.swept},
            "quantities": {_key(term): self._number(term, place) for term in self.shown},
        }

    def flat(self, place: int) -> Row:
        """One case for CSV, the unit in each name."""
        row: Row = {"case": int(self.numbers[place])}
        row |= {_key(term): self._number(term, place) for term in self.swept}
        row |= {"status": self._label(place)}
        return row | {_key(term): self._number(term, place) for term in self.shown}

    def head(self) -> str:
        """The names alone, for an empty selection."""
        return ",".join(["case", *map(_key, self.swept), "status", *map(_key, self.shown)])

    def text(self, order: NDArray[np.int64]) -> str:
        """The table for people."""
        head = ["case", *(t.text for t in self.swept), "status", *(t.text for t in self.shown)]
        rows = [
            [
                str(int(self.numbers[place])),
                *(_cell(term, self._number(term, place)) for term in self.swept),
                self._label(place),
                *(_cell(term, self._number(term, place)) for term in self.shown),
            ]
            for place in order
        ]
        return table(head, rows)

    def _number(self, term: Term, place: int) -> float:
        return float(self.values[term][place])


def _key(term: Term) -> str:
    from simkit.store.rows import column_name

    return column_name(term.text.replace(" ", "_"), term.quantity.unit)


def _cell(term: Term, value: float) -> str:
    quantity = term.quantity
    if value != value:
        return "-"
    if quantity.shown == "":
        return frequency_text(value)
    if quantity.digits < 0:
        return quantity_text(value, quantity.shown)
    if value == float("inf"):
        return "inf"
    unit = "" if quantity.shown == "1" else quantity.shown
    return number_text(value * (100 if unit == "%" else 1), quantity.digits, unit)
