"""Sweeps: targets, ranges, lists, methods, limits."""

from __future__ import annotations

from collections.abc import Callable

import pytest

from simkit.store.schema import VARIABLES
from simkit.study import Study
from simkit.study.sweep import RESULT_NAMES, Sweep, SweptValue, spread

Loader = Callable[..., Study]
Complaints = Callable[..., list[str]]

CUT = ('from = "lower.start"\nto   = "upper.start"', 'strip = "upper"\nat = "9 mm"\ngap = "gap"')


def test_a_range_holds_the_numbers_one_would_write() -> None:
    assert spread(0.07, 0.082, 5) == [0.07, 0.073, 0.076, 0.079, 0.082]
    assert spread(3.0, -1.0, 3) == [3.0, 1.0, -1.0]
    assert spread(0.1, 0.3, 1) == [0.1]


def test_a_grid_takes_every_combination_once() -> None:
    sweep = Sweep((SweptValue("a", "m", (1.0, 2.0, 3.0)), SweptValue("b", "1", (5.0, 6.0))))
    points = [tuple(sweep.point(i).values()) for i in range(sweep.case_count)]
    assert points == [(1, 5), (1, 6), (2, 5), (2, 6), (3, 5), (3, 6)]
    assert list(sweep.point(0)) == ["a", "b"]


def test_a_list_takes_values_in_step(load: Loader) -> None:
    study = load(
        added='\n[sampling]\nmethod = "list"\n[sweep]\narm = ["70 mm", "70 mm", "74 mm"]\n'
        'width = { from = "2 mm", to = "6 mm", count = 3 }\n'
    )
    assert (study.method, study.shape, study.case_count) == ("list", (3,), 3)
    assert [case.values for case in study.cases()] == [
        {"arm": 0.07, "width": 0.002},
        {"arm": 0.07, "width": 0.004},
        {"arm": 0.074, "width": 0.006},
    ]


def test_dotted_keys_may_be_bare_or_quoted(load: Loader) -> None:
    study = load(
        CUT,
        added='\n[sweep]\n"metal.thickness" = ["0.1 mm", "0.2 mm"]\nfeed.at = ["8 mm"]\n'
        "strip.upper.width.from = '3 mm'\nstrip.upper.width.to = '4 mm'\n"
        "strip.upper.width.count = 2\nfeed.gap = ['gap*2']\n",
    )
    assert [value.name for value in study.swept] == [
        "metal.thickness",
        "feed.at",
        "feed.gap",
        "strip.upper.width",
    ]
    antenna = study.case(3).antenna
    assert antenna is not None
    assert antenna.metal.thickness_m == 2e-4
    assert [strip.width_m for strip in antenna.strips] == [0.004, 0.004]
    assert (antenna.feed.at_m, antenna.feed.gap_m) == (0.008, 0.006)  # type: ignore[union-attr]


@pytest.mark.parametrize(
    ("entry", "sentence"),
    [
        (
            'arn = ["1 mm"]',
            "neither a name of [values] nor a quantity of the study; do you mean `arm`",
        ),
        ('zzz = ["1 mm"]', "neither a name of [values] nor a quantity of the study; name one"),
        ('"metal.thicknes" = ["1 mm"]', "do you mean `metal.thickness`?"),
        (
            'frequency.start = ["1 GHz"]',
            "cannot be swept: all cases of a study share one frequency",
        ),
        (
            '"connector.reference" = ["50 ohm"]',
            "cannot be swept: all cases of a study share one ref",
        ),
        ('"strip.lower.width" = ["1 mm"]', "a mirrored strip has the width of `upper`"),
        (
            '"metal.conductivity" = ["1e7 S/m"]',
            "`material` fixes it; give metal.conductivity instead",
        ),
        ('"feed.at" = ["1 mm"]', "this feed sits between two strip ends"),
        ('"feed.gap" = ["1 mm"]', "the gap of this feed is the distance of its two strip ends"),
        ('"strip.upper.path" = ["1 mm"]', "neither a name of [values]"),
        ('arm = "70 mm"', "this is text; write { from = "),
        ("arm = 70", "this is a bare number; write { from = "),
        ("arm = []", "the list is empty"),
        ("arm = {}", "is missing; write { from"),
        ('arm = ["70 mm", 71]', "sweep.arm[2] = 71: a length is needed, but this is a pure number"),
        ('arm = ["70 mm", "3 GHz"]', "a length is needed, but this is a frequency"),
        ('arm = ["70 mm", "7 cm"]', "a value occurs twice; each must differ in a grid"),
        ('arm = ["70 mm", "gap*gap/(gap - gap)"]', "divides by zero"),
        ('arm = { from = "70 mm", to = "70 mm", count = 2 }', "a value occurs twice"),
        ('arm = { from = "70 mm", to = "71 mm", count = 0 }', "must be a whole number from 1 to"),
        ('arm = { from = "70 mm", to = "71 mm", count = 2.5 }', "must be a whole number from 1"),
        ('arm = { from = "70 mm", to = "71 mm", count = "2 mm" }', "a pure number is needed"),
        ('arm = { from = "70 mm", to = "71 mm", count = 1e7 }', "must be a whole number from 1 to"),
        ('arm = { from = "70 mm", count = 2 }', "sweep.arm.to: is missing; write { from"),
        ('arm = { from = "70 mm", to = "71 mm", steps = 2 }', "is not a key of a range; there are"),
        ("", "is empty; name what to vary"),
    ],
)
def test_entries_that_are_refused(complaints: Complaints, entry: str, sentence: str) -> None:
    found = complaints(added=f"\n[sweep]\n{entry}\n")
    assert any(sentence in line for line in found), found
    assert {line.partition(": ")[0] for line in found} <= {"weir.toml:35", "weir.toml:36"}


@pytest.mark.parametrize(
    ("added", "sentence"),
    [
        (
            '[sampling]\nmethod = "list"\n[sweep]\narm = ["1 mm"]\nwidth = ["1 mm", "2 mm"]',
            'sweep: the method "list" takes values in step, so all need the same count, not arm',
        ),
        (
            '[sweep]\narm = {from="1 mm",to="9 mm",count=1001}\n'
            'width = {from="1 mm",to="9 mm",count=1000}',
            "this makes 1,001,000 cases (arm 1001, width 1000); at most 1,000,000",
        ),
        ('[sampling]\nmethod = "sobol"\nsamples = 9', "there is no [sweep] to take samples of"),
        ("[sampling]\nsamples = 9", 'has no meaning for the method "grid"; leave it out'),
        ('[sampling]\nmethod = "gird"', '"sobol"; do you mean "grid"?'),
        ("[sampling]\nmethods = 1", "is not a key of [sampling]; do you mean `method`?"),
    ],
)
def test_samplings_that_are_refused(complaints: Complaints, added: str, sentence: str) -> None:
    (line,) = complaints(added=added)
    assert sentence in line


SAMPLED = (
    '\n[sampling]\nmethod = "{method}"\nsamples = {samples}\nseed = {seed}\n[sweep]\n'
    'arm = {{ from = "70 mm", to = "82 mm" }}\nwidth = {{ from = "6 mm", to = "2 mm" }}\n'
)


def points(study: Study) -> list[tuple[float, ...]]:
    return [tuple(case.values.values()) for case in study.cases()]


@pytest.mark.parametrize("method", ["latin-hypercube", "sobol"])
def test_samples_lie_between_the_ends_and_follow_the_seed(load: Loader, method: str) -> None:
    first = load(added=SAMPLED.format(method=method, samples=12, seed=3))
    assert (first.method, first.shape, first.case_count) == (method, (12,), 12)
    found = points(first)
    assert len(set(found)) == 12
    assert all(0.070 <= arm <= 0.082 and 0.002 <= width <= 0.006 for arm, width in found)
    assert found == points(load(added=SAMPLED.format(method=method, samples=12, seed=3)))
    assert found != points(load(added=SAMPLED.format(method=method, samples=12, seed=4)))
    assert first.display_unit("arm") == "mm"


def test_a_latin_hypercube_has_one_sample_in_every_slice(load: Loader) -> None:
    found = points(load(added=SAMPLED.format(method="latin-hypercube", samples=12, seed=3)))
    assert sorted(int((arm - 0.070) / 0.001) for arm, _ in found) == list(range(12))
    assert sorted(int((0.006 - width) / (0.004 / 12)) for _, width in found) == list(range(12))


def test_more_samples_of_sobol_continue_the_sequence(load: Loader) -> None:
    few = points(load(added=SAMPLED.format(method="sobol", samples=12, seed=3)))
    many = points(load(added=SAMPLED.format(method="sobol", samples=50, seed=3)))
    assert many[:12] == few
    # A quarter of each half of the range, as of every box of this size.
    assert sum(arm < 0.076 and width < 0.004 for arm, width in many[:32]) == 8


@pytest.mark.parametrize(
    ("old", "new", "sentence"),
    [
        ("samples = 12\n", "", "sampling.samples: is missing; say how many cases to take"),
        ("samples = 12", "samples = 0", "must be a whole number from 1 to 1,000,000"),
        ("samples = 12", "samples = 2.5", "must be a whole number from 1 to 1,000,000"),
        ("seed = 3", "seed = -1", "must be a whole number from 0 to"),
        ('to = "82 mm" }', 'to = "82 mm", count = 5 }', "`samples` says how many cases"),
        ('to = "82 mm"', 'to = "70 mm"', "equals `from`, so there is nothing to take samples"),
        (', to = "82 mm"', "", 'is missing; write { from = "70 mm", to = "82 mm" }'),
        ('{ from = "70 mm", to = "82 mm" }', '["70 mm", "82 mm"]', 'between which "sobol" takes'),
    ],
)
def test_what_samples_need_is_said(
    complaints: Complaints, old: str, new: str, sentence: str
) -> None:
    text = SAMPLED.format(method="sobol", samples=12, seed=3)
    assert old in text
    assert any(sentence in line for line in complaints(added=text.replace(old, new, 1)))


def test_what_all_cases_share_may_not_move(complaints: Complaints) -> None:
    (line,) = complaints(
        ('gap   = "3 mm"', 'gap = "3 mm"\nwave = "arm*4"'),
        ('"2.5 GHz"', '"2.5 GHz * arm/wave*4"'),
        added='\n[sweep]\narm = ["70 mm", "71 mm"]\n',
    )
    assert line.startswith("weir.toml:33: frequency.stop = ")
    assert "depends on `arm`, which the sweep varies; all cases must share it" in line


def test_a_swept_value_must_change_something(complaints: Complaints) -> None:
    (line,) = complaints(
        ('gap   = "3 mm"', 'gap = "3 mm"\nidle = "arm*4"'),
        added='\n[sweep]\nidle = ["70 mm", "71 mm"]\n',
    )
    assert line == (
        "weir.toml:37: sweep.idle: "
        "nothing in the antenna depends on this value; use it there or do not sweep it"
    )


def test_a_swept_value_may_not_take_a_name_of_the_results(complaints: Complaints) -> None:
    (line,) = complaints(
        ('gap   = "3 mm"', 'gap = "3 mm"\nlength = "arm*4"'),
        ('"gap/2 + arm", "0 mm"', '"gap/2 + length", "0 mm"'),
        added='\n[sweep]\nlength = ["70 mm", "71 mm"]\n',
    )
    assert "the results use `length` for something else; rename the value, as length_1" in line


def test_the_names_of_the_results_are_complete() -> None:
    dimensions = {name for variable in VARIABLES.values() for name in variable.dims}
    assert dimensions | set(VARIABLES) <= RESULT_NAMES


def test_a_perfect_conductor_has_no_conductivity_to_sweep(complaints: Complaints) -> None:
    (line,) = complaints(
        ('material  = "copper"\n', ""), added='\n[sweep]\nmetal.conductivity = ["1e7 S/m"]\n'
    )
    assert "cannot be swept: this metal is a perfect conductor" in line
