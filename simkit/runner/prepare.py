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
from simkit.store.write import KEY_DTYPE
from simkit.study.model import Antenna, Case

if TYPE_CHECKING:
    from simkit.study import Study


MESH_CASES = 2000
"""Cases the mesh of a study is planned from; of larger studies these stand for the rest."""

_CORNERS = 512


def mesh_of(antennas: Sequence[Antenna]) -> tuple[Any, int]:
    """Mesh plan of a study and the largest number of segments it leads to.

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
            grid = build_wires(antenna, plan)
        except GeometryError as error:
            problem = problem or error
            continue
        segments = grid.segments
        if plan.cable is not None:
            # The cable alone takes as many as its length in each case asks for.
            segments += plan.cable.most - len(grid.chains[grid.cable].segments)
        return plan, segments
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
    """A study with mesh and keys. Its cases are resolved when they are asked for, and not kept.

    Attributes
    ----------
    keys : (N,) bytes array
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

    study: Study
    keys: NDArray[np.bytes_]
    plan: Any
    no_plan: str
    segments: int
    swept: tuple[SweptColumn, ...]
    frequency_hz: NDArray[np.float64]
    strips: tuple[str, ...]
    identity: str
    attrs: dict[str, Any]

    @property
    def title(self) -> str:
        """Title of the study."""
        return self.study.title

    @property
    def text(self) -> str:
        """The study file."""
        return self.study.text

    @property
    def count(self) -> int:
        """Number of cases."""
        return len(self.keys)

    def case(self, number: int) -> Case:
        """Resolve one case."""
        return self.study.case(number)

    def key(self, number: int) -> str:
        """Key of one case."""
        return bytes(self.keys[number]).decode()

    def layout(self, block_size: int, *, takeover: bool, limit_s: float) -> Layout:
        """Layout of a store for this study."""
        return Layout(
            cases=self.count,
            segments=self.segments,
            block_size=block_size,
            frequency_hz=self.frequency_hz,
            strips=self.strips,
            swept=self.swept,
            attrs=self.attrs | {"takeover": takeover, "time_limit_s": limit_s},
        )


def prepare(study: Study, solver: Solver) -> Prepared:
    """Plan the mesh of a study and hash its cases, holding few of them at a time.

    Raises
    ------
    StudyError
        The study has no case at all, or none whose values resolve.
    """
    columns = _columns(study)
    antennas = mesh_antennas(study, columns)
    plan, segments, no_plan = _mesh(antennas, solver)
    plan_text = canonical_json(plan.as_dict()) if plan is not None else "null"
    study_part = canonical_json([plan_text, solver.version, engine_version()])
    keys = np.zeros(study.case_count, dtype=KEY_DTYPE)
    for case in study.cases():
        keys[case.index] = case_key(case, study_part).encode()
    swept = _swept_columns(study, columns)
    band = antennas[0].frequency
    shape = [int(count) for count in study.shape]
    return Prepared(
        study=study,
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
            "feedline": [item.name for item in antennas[0].feedline],
            "sweep_method": study.method,
            "sweep_shape": shape,
        },
    )


def mesh_antennas(study: Study, columns: NDArray[np.float64] | None = None) -> list[Antenna]:
    """The antennas a mesh is planned from, at least one.

    Raises
    ------
    StudyError
        The study has no case at all, or none whose values resolve.
    """
    rows = representative(_columns(study) if columns is None else columns)
    cases = (study.case(int(row)) for row in rows)
    antennas = [case.antenna for case in cases if case.antenna is not None]
    if not antennas and len(rows) < study.case_count:
        antennas = [case.antenna for case in study.cases() if case.antenna is not None][:1]
    if not antennas:
        first = f": {study.case(0).refused}" if study.case_count else ""
        raise StudyError(str(study.path), [Problem(f"no case of the study resolves{first}")])
    return antennas


def representative(columns: NDArray[np.float64], most: int = MESH_CASES) -> NDArray[np.int64]:
    """Cases that stand for all: every one of a few, else the extremes and an even spread.

    Parameters
    ----------
    columns : (N, S) float array
        Swept values.
    most : int

    Returns
    -------
    (K,) int array
        Ascending, the same for the same columns.
    """
    count = len(columns)
    if count <= most:
        return np.arange(count)
    low, high = columns == columns.min(axis=0), columns == columns.max(axis=0)
    corners = np.flatnonzero((low | high).all(axis=1))[:_CORNERS]
    extremes = [int(np.argmax(side[:, k])) for side in (low, high) for k in range(side.shape[1])]
    # Steps of the golden ratio: no step of a grid is in tune with them.
    parts = np.modf(np.arange(most) * 0.6180339887498949)[0]
    spread = (parts * count).astype(np.int64)
    return np.unique(np.concatenate([corners, np.array(extremes, dtype=np.int64), spread]))


def _columns(study: Study) -> NDArray[np.float64]:
    """(N, S) swept values, SI."""
    columns = np.zeros((study.case_count, len(study.swept)))
    for number in range(study.case_count):
        columns[number] = list(study.sweep.point(number).values())
    return columns


def _mesh(antennas: list[Antenna], solver: Solver) -> tuple[Any, int, str]:
    try:
        plan, segments = solver.mesh(antennas)
    except GeometryError as error:
        return None, 1, str(error)
    return plan, segments, ""


def _swept_columns(study: Study, columns: NDArray[np.float64]) -> tuple[SweptColumn, ...]:
    return tuple(
        SweptColumn(
            name=value.name,
            units=value.unit_text,
            display_unit=study.display_unit(value.name),
            values=columns[:, place].copy(),
        )
        for place, value in enumerate(study.swept)
    )


def _simkit_version() -> str:
    from simkit import __version__

    return __version__
