"""Which quantities a study varies, and how their values combine into cases."""

from __future__ import annotations

import math
from collections.abc import Iterator, Mapping
from dataclasses import dataclass, field
from typing import Any, Literal

from simkit.study.expression import ExpressionError
from simkit.study.fields import bare_angle
from simkit.study.locate import KeyPath
from simkit.study.tables import Notes, Quantity, Table, toml_kind, written_unit
from simkit.study.units import PURE, Dimension, nearest, si_unit

Method = Literal["grid", "list", "latin-hypercube", "sobol"]

MOST_CASES = 1_000_000
_METHODS: tuple[Method, ...] = ("grid", "list", "latin-hypercube", "sobol")
_RANGE_KEYS = ("from", "to", "count")
_RANGE_EXAMPLE = '{ from = "70 mm", to = "82 mm" }'
_EXAMPLE = '{ from = "70 mm", to = "82 mm", count = 5 } or a list as ["4 mm", "8 mm"]'

RESULT_NAMES = frozenset(
    """
    case frequency mode strip position theta phi sample segment status reason case_key seconds
    solves worker impedance mode_frequency mode_q mode_half_waves mode_frequency_error mode_current
    conductance_peak_frequency conductance_peak_resistance series_resonance_frequency
    series_resonance_resistance parallel_resonance_frequency parallel_resonance_resistance
    dip_frequency dip_return_loss dip_bandwidth impedance_q pattern_frequency driven gain peak_gain
    peak_theta peak_phi directivity efficiency power_balance sample_frequency weight current
    series_resistance series_inductance loss_inductance surface_resistance conductor_factor
    source_weight probe_current x y z direction_x direction_y direction_z length
    strip_index strip_position
    cable_current mode_on_cable path_on_plane ground_permittivity ground_conductivity
    model_gap study_gap feed_width wire_radius source_segment impedance_at_connector feedline
    network_efficiency mismatch_factor total_efficiency realised_gain
    """.split()  # noqa: SIM905, seventy names are read better as text
)
"""Names the results give to something else, so that a swept value cannot have them."""


@dataclass(frozen=True)
class SweptValue:
    """One quantity a study varies.

    Attributes
    ----------
    name : str
        A name of [values] or a dotted key of the study.
    unit_text : str
        SI unit of `values`, "1" for pure numbers.
    values : tuple of float
        In SI, in the order of the study.
    """

    name: str
    unit_text: str
    values: tuple[float, ...]


@dataclass(frozen=True)
class Sweep:
    """All swept values of a study and how they combine.

    `units` holds for each name the first unit written in its entry, if there is one.
    """

    swept: tuple[SweptValue, ...] = ()
    method: Method = "grid"
    units: Mapping[str, str] = field(default_factory=dict)

    @property
    def shape(self) -> tuple[int, ...]:
        """Counts per swept value for a grid; one count, that of the cases, for all else."""
        if self.method != "grid" and self.swept:
            return (len(self.swept[0].values),)
        return tuple(len(value.values) for value in self.swept)

    @property
    def case_count(self) -> int:
        """Number of cases, 1 without a sweep."""
        return math.prod(self.shape)

    def point(self, index: int) -> dict[str, float]:
        """Return the swept values of one case; the last named varies fastest in a grid."""
        if self.method != "grid":
            return {value.name: value.values[index] for value in self.swept}
        places = []
        for count in reversed(self.shape):
            index, place = divmod(index, count)
            places.append(place)
        places.reverse()
        return {v.name: v.values[place] for v, place in zip(self.swept, places, strict=True)}


def read_sweep(
    sweep: Table | None, sampling: Table | None, notes: Notes, numbers: dict[str, float]
) -> Sweep:
    """Read [sweep] and [sampling].

    Parameters
    ----------
    sweep, sampling : Table or None
    notes : Notes
        Knows which names and keys can be varied.
    numbers : dict of str to float
        Numbers of [values], which entries of a sweep may use.
    """
    plan = _read_sampling(sampling)
    if sweep is None:
        if sampling is not None and plan.sampled:
            sampling.report("method", "there is no [sweep] to take samples of; name what to vary")
        return Sweep((), "grid" if plan.sampled else plan.method)
    reader = _SweepReader(notes, numbers, plan.method)
    for path, name, raw in entries(sweep):
        reader.entry(path, name, raw)
    if not sweep.data:
        sweep.report("", f"is empty; name what to vary, as in arm = {_EXAMPLE}, or leave it out")
    swept = tuple(reader.swept)
    if plan.sampled:
        swept = _sampled(swept, plan)
    result = Sweep(swept, plan.method, reader.units)
    _check_size(sweep, result)
    return result


def entries(table: Table) -> Iterator[tuple[KeyPath, str, Any]]:
    """Yield path, dotted name and raw value; ``metal.thickness`` may be written bare or quoted."""
    todo: list[tuple[KeyPath, str, Any]] = [
        ((*table.path, name), name, table.raw(name)) for name in table.data
    ]
    while todo:
        path, name, raw = todo.pop(0)
        if isinstance(raw, dict) and raw and all(_is_nested(key, raw[key]) for key in raw):
            todo[:0] = [((*path, key), f"{name}.{key}", item) for key, item in raw.items()]
        else:
            yield path, name, raw


def _is_nested(key: str, item: Any) -> bool:
    return isinstance(item, dict) or key not in _RANGE_KEYS


@dataclass(frozen=True)
class _Sampling:
    """The table [sampling]; `samples` and `seed` belong to the two methods that take samples."""

    method: Method = "grid"
    samples: int = 0
    seed: int = 0

    @property
    def sampled(self) -> bool:
        """Whether swept values are drawn from ranges."""
        return self.method in ("latin-hypercube", "sobol")


def _read_sampling(table: Table | None) -> _Sampling:
    if table is None:
        return _Sampling()
    chosen = table.choice("method", _METHODS, "grid")
    method: Method = next((name for name in _METHODS if name == chosen), "grid")
    plan = _Sampling(method)
    if not plan.sampled:
        for key in ("samples", "seed"):
            if table.has(key):
                table.report(key, f'has no meaning for the method "{method}"; leave it out')
    else:
        missing = "say how many cases to take, as in samples = 64"
        samples = _whole(table, "samples", 1, MOST_CASES, missing)
        plan = _Sampling(method, samples or 1, _whole(table, "seed", 0, 2**32 - 1) or 0)
    table.close()
    return plan


def _whole(table: Table, key: str, lowest: int, highest: int, missing: str = "") -> int | None:
    raw = table.raw(key)
    if not table.has(key):
        if missing:
            table.report(key, f"is missing; {missing}")
        return None
    if not isinstance(raw, int) or isinstance(raw, bool) or not lowest <= raw <= highest:
        table.report(key, f"must be a whole number from {lowest:,} to {highest:,}")
        return None
    return raw


def _sampled(swept: tuple[SweptValue, ...], plan: _Sampling) -> tuple[SweptValue, ...]:
    """Replace the ends of each range by samples between them.

    The same seed gives the same samples. More samples of the Sobol sequence continue it, so that
    a study extended this way keeps its cases; a Latin hypercube is drawn anew.
    """
    if not swept:
        return ()
    points = _unit_points(len(swept), plan)
    return tuple(
        SweptValue(
            value.name,
            value.unit_text,
            tuple(
                float(f"{value.values[0] + (value.values[-1] - value.values[0]) * part:.14g}")
                for part in column
            ),
        )
        for value, column in zip(swept, points.T.tolist(), strict=True)
    )


def _unit_points(dimensions: int, plan: _Sampling) -> Any:
    """(samples, dimensions) numbers from 0 to 1."""
    from scipy.stats import qmc

    if plan.method == "sobol":
        power = math.ceil(math.log2(plan.samples))
        sobol = qmc.Sobol(dimensions, scramble=True, rng=plan.seed)
        return sobol.random_base2(power)[: plan.samples]
    return qmc.LatinHypercube(dimensions, rng=plan.seed).random(plan.samples)


def _check_size(table: Table, sweep: Sweep) -> None:
    counts = {value.name: len(value.values) for value in sweep.swept}
    listed = ", ".join(f"{name} {count}" for name, count in counts.items())
    if sweep.method == "list" and len(set(counts.values())) > 1:
        table.notes.report(
            table.path,
            table.label,
            f'the method "list" takes values in step, so all need the same count, not {listed}',
        )
    elif sweep.method == "grid" and sweep.case_count > MOST_CASES:
        table.notes.report(
            table.path,
            table.label,
            f"this makes {sweep.case_count:,} cases ({listed}); at most {MOST_CASES:,} are "
            "allowed: lower the counts or split the study",
        )


class _SweepReader:
    def __init__(self, notes: Notes, numbers: dict[str, float], method: Method) -> None:
        self.notes = notes
        self.numbers = numbers
        self.sampled = method in ("latin-hypercube", "sobol")
        self.method = method
        self.swept: list[SweptValue] = []
        self.name = ""
        self.units: dict[str, str] = {}

    def entry(self, path: KeyPath, name: str, raw: Any) -> None:
        key = f"sweep.{name}"
        dimension = self.target(path, key, name, raw)
        if dimension is None:
            return
        before = len(self.notes.problems)
        self.name = name
        if isinstance(raw, list) and not self.sampled:
            values = self.listed(path, key, raw, dimension)
        elif isinstance(raw, dict):
            values = self.range(path, key, raw, dimension)
        else:
            values = None
            example = _EXAMPLE
            if self.sampled:
                example = f'{_RANGE_EXAMPLE}, between which "{self.method}" takes its samples'
            self.notes.report(path, key, f"this is {toml_kind(raw)}; write {example}", raw)
        if values is None or len(self.notes.problems) > before:
            return
        if self.method == "grid" and len(set(values)) < len(values):
            self.notes.report(path, key, "a value occurs twice; each must differ in a grid", raw)
            return
        self.swept.append(SweptValue(name, si_unit(dimension), tuple(values)))

    def target(self, path: KeyPath, key: str, name: str, raw: Any) -> Dimension | None:
        """Return the dimension of what a sweep varies; None after a problem."""
        notes = self.notes
        if name in notes.broken:
            return None
        if name in notes.fixed:
            notes.report(path, key, f"cannot be swept: {notes.fixed[name]}", raw)
        elif name in RESULT_NAMES:
            notes.report(
                path,
                key,
                f"the results use `{name}` for something else; rename the value, as {name}_1",
                raw,
            )
        elif name in notes.names or name in notes.slots:
            return notes.names.get(name) or notes.slots[name]
        else:
            hint = nearest(name, [*notes.names, *notes.slots])
            advice = f"do you mean `{hint}`?" if hint else "name one of those"
            notes.report(
                path,
                key,
                f"is neither a name of [values] nor a quantity of the study; {advice}",
                raw,
            )
        return None

    def listed(
        self, path: KeyPath, key: str, raw: list[Any], dimension: Dimension
    ) -> list[float] | None:
        if not raw:
            self.notes.report(path, key, f"the list is empty; write {_EXAMPLE}", raw)
            return None
        if len(raw) > MOST_CASES:
            self.notes.report(path, key, f"has {len(raw):,} values; at most {MOST_CASES:,}", raw)
            return None
        numbers = [
            self.number(item, dimension, (*path, i), f"{key}[{i + 1}]")
            for i, item in enumerate(raw)
        ]
        return [number for number in numbers if number is not None]

    def range(
        self, path: KeyPath, key: str, raw: dict[str, Any], dimension: Dimension
    ) -> list[float] | None:
        table = Table(raw, path, key, self.notes)
        ends = []
        for end in ("from", "to"):
            if table.has(end):
                number = self.number(raw[end], dimension, (*path, end), f"{key}.{end}")
                ends.append(number)
            else:
                example = _RANGE_EXAMPLE if self.sampled else _EXAMPLE
                table.report(end, f"is missing; write {example}")
        count = self.count(table)
        table.close("a range")
        if count is None or len(ends) < 2 or ends[0] is None or ends[1] is None:
            return None
        if self.sampled and ends[0] == ends[1]:
            table.report("to", "equals `from`, so there is nothing to take samples between")
            return None
        return spread(ends[0], ends[1], count)

    def count(self, table: Table) -> int | None:
        if self.sampled:
            if table.has("count"):
                what = f'`samples` says how many cases "{self.method}" takes; leave it out'
                table.report("count", what)
            return 2
        if not table.has("count"):
            table.report("count", f"is missing; write {_EXAMPLE}")
            return None
        path = (*table.path, "count")
        raw = table.data["count"]
        quantity = self.notes.expression(raw, PURE, path, table.key("count"))
        number = None if quantity is None else self.evaluated(quantity, path, raw)
        if number is None:
            return None
        if number != round(number) or not 1 <= number <= MOST_CASES:
            table.report("count", f"must be a whole number from 1 to {MOST_CASES:,}")
            return None
        return round(number)

    def number(self, raw: Any, dimension: Dimension, path: KeyPath, key: str) -> float | None:
        """Read one swept value."""
        quantity = self.notes.expression(raw, dimension, path, key)
        if quantity is None:
            return None
        complaint = bare_angle(quantity) if self.name in self.notes.angles else ""
        if complaint:
            self.notes.report(path, key, complaint, raw)
            return None
        unit = written_unit(quantity)
        if unit is not None:
            self.units.setdefault(self.name, unit)
        return self.evaluated(quantity, path, raw)

    def evaluated(self, quantity: Quantity, path: KeyPath, raw: Any) -> float | None:
        try:
            return quantity.expression.evaluate(self.numbers)
        except ExpressionError as error:
            self.notes.report(path, quantity.key, str(error), raw)
            return None


def spread(first: float, last: float, count: int) -> list[float]:
    """Return `count` equally spaced numbers, both ends included; only `first` if `count` is 1.

    Each is rounded to 14 digits: a step of a range then equals the same number written out, and a
    case keeps its identity when a range is replaced by a list.
    """
    if count == 1:
        return [first]
    step = (last - first) / (count - 1)
    inner = [float(f"{first + step * i:.14g}") for i in range(1, count - 1)]
    return [first, *inner, last]
