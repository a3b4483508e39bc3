"""From a study to everything a run needs to know before the first block."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

import numpy as np
from numpy.typing import NDArray

from simkit.errors import GeometryError, Problem, StudyError
from simkit.runner.identity import (
    MODEL_VERSION,
    canonical_json,
    case_key,
    engine_version,
    sha256,
    study_identity,
)
from simkit.store.layout import Layout, SweptColumn
from simkit.study.model import Antenna, Case

if TYPE_CHECKING:
    from simkit.study import Study


def mesh_of(antennas: Sequence[Antenna]) -> tuple[Any, int]:
    """Mesh plan of a study and the number of segments it leads to.

    Raises
    ------
    GeometryError
        No case can be laid out.
    """
    from simkit.geometry import build_wires, plan_mesh

    plan = plan_mesh(antennas)
    problem: GeometryError | None = None
    for antenna in antennas:
        try:
            return plan, build_wires(antenna, plan).segments
        except GeometryError as error:
            problem = problem or error
    raise problem or GeometryError("the study has no case that can be laid out")


@dataclass(frozen=True)
class Solver:
    """How cases are solved. The default is simkit's own; others serve tests and benchmarks.

    Attributes
    ----------
    function : str
        ``package.module:function`` of (antenna, plan), returning a `CaseResult`; imported and
        called in the child process only.
    mesh : callable
        (antennas) -> (plan, segments).
    version : str
        Model version.
    """

    function: str = "simkit.runner.solve:solve_case"
    mesh: Callable[[Sequence[Antenna]], tuple[Any, int]] = mesh_of
    version: str = MODEL_VERSION


@dataclass(frozen=True)
class Prepared:
    """A study resolved into cases, with mesh, keys and what the store says about them.

    Attributes
    ----------
    cases : tuple of Case
    keys : tuple of str
        Hash of each case.
    plan : object or None
        Mesh plan; None if no case can be laid out.
    no_plan : str
        Why there is no plan.
    segments : int
        Unknowns of the engine, the same in every case.
    identity : str
        Hash of the run, see `study_identity`.
    """

    title: str
    text: str
    cases: tuple[Case, ...]
    keys: tuple[str, ...]
    plan: Any
    no_plan: str
    segments: int
    swept: tuple[SweptColumn, ...]
    frequency_hz: NDArray[np.float64]
    strips: tuple[str, ...]
    identity: str
    attrs: dict[str, Any]

    def layout(self, block_size: int, *, takeover: bool) -> Layout:
        """Layout of a store for this study."""
        return Layout(
            cases=len(self.cases),
            segments=self.segments,
            block_size=block_size,
            frequency_hz=self.frequency_hz,
            strips=self.strips,
            swept=self.swept,
            attrs=self.attrs | {"takeover": takeover},
        )


def prepare(study: Study, solver: Solver) -> Prepared:
    """Resolve every case of a study, plan the mesh and hash.

    Raises
    ------
    StudyError
        The study has no case at all, or none whose values resolve.
    """
    cases = tuple(study.cases())
    antennas = [case.antenna for case in cases if case.antenna is not None]
    if not antennas:
        first = f": {cases[0].refused}" if cases else ""
        raise StudyError(str(study.path), [Problem(f"no case of the study resolves{first}")])
    plan, segments, no_plan = _mesh(antennas, solver)
    plan_text = canonical_json(plan.as_dict()) if plan is not None else "null"
    study_part = canonical_json([plan_text, solver.version, engine_version()])
    keys = tuple(case_key(case, study_part) for case in cases)
    swept = _swept_columns(study, cases)
    band = antennas[0].frequency
    shape = [int(count) for count in study.shape]
    return Prepared(
        title=study.title,
        text=study.text,
        cases=cases,
        keys=keys,
        plan=plan,
        no_plan=no_plan,
        segments=segments,
        swept=swept,
        frequency_hz=np.linspace(band.start_hz, band.stop_hz, band.points),
        strips=tuple(strip.name for strip in antennas[0].strips),
        identity=(identity := study_identity(keys, swept, shape)),
        attrs={
            "title": study.title,
            "study_text": study.text,
            "study_hash": sha256(study.text),
            "identity": identity,
            "model_version": solver.version,
            "engine_version": engine_version(),
            "simkit_version": _simkit_version(),
            "mesh_plan": plan_text,
            "reference_ohm": antennas[0].reference_ohm,
            "sweep_method": study.method,
            "sweep_shape": shape,
        },
    )


def _mesh(antennas: list[Antenna], solver: Solver) -> tuple[Any, int, str]:
    try:
        plan, segments = solver.mesh(antennas)
    except GeometryError as error:
        return None, 1, str(error)
    return plan, segments, ""


def _swept_columns(study: Study, cases: tuple[Case, ...]) -> tuple[SweptColumn, ...]:
    return tuple(
        SweptColumn(
            name=value.name,
            units=value.unit_text,
            display_unit=study.display_unit(value.name),
            values=np.array([case.values[value.name] for case in cases], dtype=float),
        )
        for value in study.swept
    )


def _simkit_version() -> str:
    from simkit import __version__

    return __version__
