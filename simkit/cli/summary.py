"""What `simkit check` says of a study: antenna, sweep, wires, convergence, cost."""

from __future__ import annotations

import math
from collections.abc import Sequence
from itertools import chain
from typing import TYPE_CHECKING, Any

from simkit.cli.antenna_text import antenna_text
from simkit.cli.output import (
    duration_text,
    frequency_text,
    labelled,
    number_text,
    quantity_text,
    size_text,
    table,
)
from simkit.cli.study_lines import with_line
from simkit.errors import GeometryError, SimkitError
from simkit.study.model import Antenna

if TYPE_CHECKING:
    from simkit.geometry import MeshPlan, WireGrid
    from simkit.runner.convergence import Convergence
    from simkit.runner.result import CaseResult
    from simkit.study import Study

_SHOWN_PROBLEMS = 10
_COMBINED = {"grid": "every value with every other", "list": "values in step"}
_MOST_LOOKED_AT = 2000
"""Cases whose wires are laid out for the check, a few milliseconds each."""
_TIMED_SOLVE_LIMIT_S = 600.0
_START_S = 4.0
"""Time the worker processes take to start, on two slow cores."""


def study_text(study: Study) -> str:
    """Return title, values, antenna, band and sweep as simkit understood them."""
    nominal = study.nominal()
    band = nominal.frequency
    values = [f"{name} {_value(study, name, value)}" for name, value in study.values.items()]
    parts = [
        f"{study.title} ({study.path})",
        labelled("Values", ", ".join(values) or "none"),
        antenna_text(nominal),
        labelled(
            "Band",
            f"{frequency_text(band.start_hz)} to {frequency_text(band.stop_hz)}, "
            f"{band.points} points",
        ),
        labelled("Sweep", sweep_text(study)),
    ]
    if study.measured:
        files = [f"{m.path}{_in_brackets(study, m.build, 'as built: ')}" for m in study.measured]
        parts.append(labelled("Measured", "\n".join(files)))
    return "\n".join(parts)


def sweep_text(study: Study) -> str:
    """Return each swept name with its values, and the number of cases."""
    if not study.swept:
        return "none, 1 case"
    lines = []
    for swept in study.swept:
        shown = [_value(study, swept.name, value) for value in swept.values]
        if len(shown) > 8:
            shown = [*shown[:3], "...", shown[-1]]
        if study.method in _COMBINED:
            lines.append(f"{swept.name}: {', '.join(shown)} ({len(swept.values)} values)")
        else:
            ends = (min(swept.values), max(swept.values))
            low, high = (_value(study, swept.name, value) for value in ends)
            lines.append(f"{swept.name}: samples from {low} to {high}")
    how = _COMBINED.get(study.method, f"{study.method} samples")
    return "\n".join([*lines, f"{study.case_count} cases, {how}"])


def _value(study: Study, name: str, value: float) -> str:
    return quantity_text(value, study.display_unit(name))


def _in_brackets(study: Study, values: dict[str, float], before: str = "") -> str:
    shown = [f"{name} {_value(study, name, value)}" for name, value in values.items()]
    return f" ({before}{', '.join(shown)})" if shown else ""


def mesh_of(study: Study) -> MeshPlan:
    """Return the mesh all cases of a study share."""
    from simkit.geometry import plan_mesh
    from simkit.runner.prepare import mesh_antennas

    return plan_mesh(mesh_antennas(study))


def looked_at(study: Study) -> range:
    """Return the cases whose geometry is checked: all, or some spread over a large sweep."""
    return range(0, study.case_count, math.ceil(study.case_count / _MOST_LOOKED_AT))


def case_problems(study: Study, plan: MeshPlan) -> list[str]:
    """Return one sentence for each case that will be refused, among those looked at."""
    from simkit.feedline import FeedlineError, build_chain
    from simkit.geometry import build_wires

    found = []
    for case in map(study.case, looked_at(study)):
        reason = case.refused
        if case.antenna is not None:
            try:
                build_wires(case.antenna, plan)
                build_chain(case.antenna)
            except (GeometryError, FeedlineError) as error:
                reason = with_line(str(error), study, case.antenna)
        if reason:
            found.append(f"case {case.index}{_in_brackets(study, case.values)}: {reason}")
    return found


def shown_antenna(study: Study, plan: MeshPlan) -> tuple[Antenna, str]:
    """Return the nominal antenna, or the first case that can be built if it cannot, and which.

    Raises
    ------
    GeometryError
        If neither the nominal antenna nor any case can be built.
    """
    from simkit.geometry import build_wires

    first: GeometryError | None = None
    cases = map(study.case, looked_at(study))
    built = (
        (case.antenna, f"case {case.index}{_in_brackets(study, case.values)}")
        for case in cases
        if case.antenna is not None
    )
    for antenna, which in chain([(study.nominal(), "the nominal antenna")], built):
        try:
            build_wires(antenna, plan)
        except GeometryError as error:
            first = first or error
        else:
            return antenna, which
    raise first or GeometryError("the study has no case that can be built")


def wires_text(wires: WireGrid, plan: MeshPlan) -> str:
    """Return the model and why, its wires, the error to expect and the limits it exceeds."""
    lengths_mm = [wire.segment_m * 1e3 for wire in wires.wires]
    across = (
        "one wire on the centre line of each strip"
        if plan.kind == "line"
        else f"{plan.rails} rails along each strip"
    )
    lines = [
        labelled("Model", f"{plan.why}\n{across}"),
        labelled(
            "Wires",
            f"{len(wires.wires)}, radius {wires.radius_m * 1e3:.3g} mm, {wires.segments} segments "
            f"(unknowns) of {min(lengths_mm):.3g} to {max(lengths_mm):.3g} mm",
        ),
        labelled(
            "Model error", f"{wires.relative_error * 100:.2g} % of mode frequencies (1 sigma)"
        ),
    ]
    lines += [labelled("Doubtful", doubt) for doubt in wires.doubts]
    return "\n".join(lines)


def convergence_text(found: Convergence) -> str:
    """Return mode frequencies mesh by mesh, with shifts, and the error they speak for."""
    from simkit.response.labels import half_wave_label

    head = ["mode"]
    for place, level in enumerate(found.levels):
        head.append(f"{level.name} ({level.segments})")
        if place:
            head.append("shift")
    if found.other_rails is not None:
        head += [f"{found.other_rails.name} ({found.other_rails.segments})", "shift"]
    head += ["mesh", "rules", "together"]
    rows = []
    for mode, number in enumerate(found.half_waves):
        cells = [half_wave_label(number, found.on_plane)]
        before = None
        for level in found.levels:
            here = level.frequency_hz[mode]
            cells.append(_megahertz(here))
            if before is not None:
                cells.append(_percent(here / before - 1, "+"))
            before = here
        if found.other_rails is not None:
            here = found.other_rails.frequency_hz[mode]
            cells.append(_megahertz(here))
            cells.append(_percent(here / found.levels[found.planned].frequency_hz[mode] - 1, "+"))
        cells.append(f"{_percent(found.mesh_error[mode])} ({found.how[mode]})")
        cells += [_percent(found.rules_error), _percent(found.relative_error[mode])]
        rows.append(cells)
    lines = [table(head, rows)]
    if found.exhausted:
        lines.append(
            "The model cannot be refined further: the engine needs segments of about two wire "
            "radii, and the radius is a quarter of the strip's width."
        )
    lines += list(found.remarks)
    lines.append(
        "MHz, with the number of unknowns of each mesh. Finer wires come no nearer to flat metal\n"
        "than the rules behind them, so the error together is never less than theirs."
    )
    return "\n".join(lines)


def _megahertz(frequency_hz: float) -> str:
    return number_text(frequency_hz / 1e6, 2)


def _percent(part: float, sign: str = "") -> str:
    return f"{part * 100:{sign}.3f} %" if math.isfinite(part) else "-"


def problems_text(problems: Sequence[str], looked_at: int, cases: int) -> str:
    """Return how many of the cases looked at cannot be built, and why."""
    of = f"{cases}" if looked_at == cases else f"{looked_at} looked at, out of {cases},"
    if not problems:
        return labelled("Cases", f"{of.rstrip(',')}: all can be built")
    shown = list(problems[:_SHOWN_PROBLEMS])
    if len(problems) > len(shown):
        shown.append(f"... and {len(problems) - len(shown)} more")
    head = f"{len(problems)} of {of} cannot be built and will be refused:"
    return labelled("Cases", "\n".join([head, *shown]))


def timed_solve(antenna: Antenna, plan: MeshPlan) -> CaseResult:
    """Solve one antenna in a process that can be killed.

    Raises
    ------
    SimkitError
        If it has no solution.
    """
    result: CaseResult = _in_child("solve_case", antenna, plan)
    return result


def refine(antenna: Antenna, plan: MeshPlan) -> Convergence:
    """Solve one antenna on several meshes, in a process that can be killed.

    Raises
    ------
    SimkitError
        If it has no solution.
    """
    result: Convergence = _in_child("solve_convergence", antenna, plan)
    return result


def _in_child(function: str, antenna: Antenna, plan: MeshPlan) -> Any:
    from simkit.engine.child import Child, Kind

    with Child(f"simkit.runner.solve:{function}") as child:
        outcome = child.call(antenna, plan, limit_s=_TIMED_SOLVE_LIMIT_S)
    if outcome.kind is Kind.BUG:
        raise RuntimeError(outcome.trace)
    if outcome.kind is not Kind.VALUE:
        raise SimkitError(f"the antenna has no solution: {outcome.reason}")
    return outcome.value


def cost_text(study: Study, wires: WireGrid, result: CaseResult) -> str:
    """Return the estimates of time and disk from one timed solution."""
    from simkit.runner.plan import block_size_for
    from simkit.runner.pool import core_count
    from simkit.store.size import case_bytes, estimate_bytes

    workers = core_count()
    antenna = study.nominal()
    sizes = {
        "frequencies": antenna.frequency.points,
        "strips": len(antenna.strips),
        "segments": wires.segments,
    }
    cases = study.case_count
    block = block_size_for(result.seconds, cases, workers, case_bytes(**sizes))
    size = estimate_bytes(cases=cases, block_size=block, **sizes)
    total_s = _START_S + result.seconds * math.ceil(study.case_count / workers)
    one = f"{duration_text(result.seconds)}, {result.solves} engine solves: {result.status.label}"
    if result.reason:
        one += f", {result.reason}"
    return "\n".join(
        [
            labelled("One case", one),
            labelled(
                "The run",
                f"about {duration_text(total_s)} with {workers} workers, "
                f"about {size_text(size)} of disk in {math.ceil(cases / block)} blocks",
            ),
        ]
    )
