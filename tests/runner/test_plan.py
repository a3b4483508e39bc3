from __future__ import annotations

import dataclasses

import pytest

from simkit.runner.identity import case_key, study_identity
from simkit.runner.plan import block_size_for, limit_for
from simkit.runner.prepare import prepare


@pytest.mark.parametrize(
    ("seconds", "cases", "workers", "size"),
    [
        (0.5, 1000, 2, 8),  # four seconds of work
        (0.5, 15, 2, 3),  # three blocks a worker
        (60.0, 1000, 2, 1),  # never none
        (1e-6, 10**6, 2, 256),  # nor too many to lose
        (0.0, 1, 2, 1),
    ],
)
def test_block_sizes(seconds, cases, workers, size):
    assert block_size_for(seconds, cases, workers) == size


def test_the_time_limit_grows_with_the_matrix():
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
    assert same == prepared.identity
    assert same != study_identity(keys[::-1], swept, shape)
    assert same != study_identity(keys, swept[::-1], shape)
    assert same != study_identity(keys, swept, (4,))
    renamed = dataclasses.replace(swept[0], name="reach")
    assert same != study_identity(keys, (renamed, swept[1]), shape)


def test_refused_cases_have_keys_of_their_own(make_study, fake):
    prepared = prepare(make_study([60, 64], [0, 8]), fake)
    assert prepared.cases[0].antenna is None
    assert len(set(prepared.keys)) >= 3
