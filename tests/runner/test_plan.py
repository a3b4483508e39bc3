from __future__ import annotations

import dataclasses
from pathlib import Path

import numpy as np
import pytest

from simkit.runner.identity import case_key, study_identity
from simkit.runner.plan import Index, block_size_for, limit_for
from simkit.runner.prepare import prepare, representative
from simkit.store.schema import VARIABLES


@pytest.mark.parametrize(
    ("seconds", "cases", "workers", "size"),
    [
        (0.5, 1000, 2, 10),  # about six seconds of work, as many blocks for each worker
        (0.5, 15, 2, 2),  # three or four blocks a worker
        (60.0, 100, 2, 1),  # never none
        (0.05, 10_000, 2, 160),  # some six seconds, in pieces of 32, the same for both workers
        (0.5, 10_000, 2, 96),  # up to twenty seconds of a long run, or no more than 10,000 files
        (0.0, 1, 2, 1),
    ],
)
def test_block_sizes(seconds, cases, workers, size):
    assert block_size_for(seconds, cases, workers) == size


@pytest.mark.parametrize(("seconds", "workers"), [(0.001, 1), (0.05, 2), (3.0, 16)])
def test_a_hundred_thousand_cases_make_at_most_ten_thousand_files(seconds, workers):
    size = block_size_for(seconds, 100_000, workers)
    assert -(-100_000 // size) * len(VARIABLES) < 9_900


def test_a_block_fits_into_memory():
    assert block_size_for(0.001, 10**6, 1, case_bytes=4_000_000) == 64
    assert block_size_for(0.001, 10**6, 1, case_bytes=10**9) == 1


def test_the_time_limit_grows_with_the_matrix_or_the_time_one_case_took():
    assert limit_for(30, 0.0) == 30
    assert limit_for(30, 2.0) == 90
    assert limit_for(30) < 70
    assert limit_for(800) > 10 * 40 * 0.3  # ten times forty solves of 0.37 s
    assert limit_for(800, converge=True) > 8 * limit_for(800)


def test_a_key_depends_on_every_input_and_on_nothing_else(make_study):
    study = make_study([60, 64])
    case = study.case(0)
    key = case_key(case, "plan")
    assert key == case_key(study.case(0), "plan")
    assert len(key) == 64
    assert key != case_key(study.case(1), "plan")
    assert key != case_key(case, "another plan")
    for name, value in [("reference_ohm", 75.0), ("model", "line")]:
        antenna = dataclasses.replace(case.antenna, **{name: value})
        assert key != case_key(dataclasses.replace(case, antenna=antenna), "plan")
    moved = dataclasses.replace(case, index=7, values={"arm": 1.0})
    assert key == case_key(moved, "plan")


def test_the_identity_sees_keys_columns_and_order(make_study, fake):
    prepared = prepare(make_study([60, 64], [8, 10]), fake)
    keys, swept, shape = prepared.keys, prepared.swept, (2, 2)
    same = study_identity(keys, swept, shape)
    assert same == prepared.identity == prepare(make_study([60, 64], [8, 10]), fake).identity
    assert same != study_identity(keys[::-1], swept, shape)
    assert same != study_identity(keys, swept[::-1], shape)
    assert same != study_identity(keys, swept, (4,))
    renamed = dataclasses.replace(swept[0], name="reach")
    assert same != study_identity(keys, (renamed, swept[1]), shape)


def test_refused_cases_have_keys_of_their_own(make_study, fake):
    prepared = prepare(make_study([60, 64], [0, 8]), fake)
    assert prepared.case(0).antenna is None
    assert len(set(prepared.keys.tolist())) >= 3


def test_few_cases_all_count_for_the_mesh_and_of_many_the_extremes_do():
    few = np.arange(24.0).reshape(12, 2)
    assert representative(few, most=12).tolist() == list(range(12))
    arms, widths = np.meshgrid(np.arange(50.0), np.arange(40.0), indexing="ij")
    many = np.stack([arms.ravel(), widths.ravel()], axis=1)
    rows = representative(many, most=100)
    assert 90 < len(rows) <= 104
    assert {0, 39, 1960, 1999} <= set(rows.tolist())
    # No step of the grid is in tune with the spread: nearly every width is met.
    assert len(set(many[rows, 1])) > 35
    odd = np.random.default_rng(2).uniform(size=(500, 3))
    rows = representative(odd, most=50)
    assert odd[rows].max(axis=0).tolist() == odd.max(axis=0).tolist()
    assert odd[rows].min(axis=0).tolist() == odd.min(axis=0).tolist()


def test_an_index_finds_settled_cases_and_the_first_of_equal_ones():
    index = Index()
    keys = np.array([b"d", b"a", b"", b"c"], dtype="S64")
    index.add(Path("one"), keys, np.array([True, True, True, False]))
    index.add(Path("two"), np.array([b"a", b"b"], dtype="S64"), np.array([True, True]))
    found = {key: index.get(key) for key in ("a", "b", "c", "d", "")}
    assert found == {
        "a": (Path("one"), 1), "b": (Path("two"), 1), "c": None, "d": (Path("one"), 0), "": None,
    }  # fmt: skip
    assert index.has(np.array([b"b", b"c", b"d"], dtype="S64")).tolist() == [True, False, True]
    assert Index().get("a") is None
