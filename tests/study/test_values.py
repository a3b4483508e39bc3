"""The table [values]: order, circles, names, limits."""

from __future__ import annotations

from collections.abc import Callable

import pytest

from simkit.study import Study

Loader = Callable[..., Study]
Complaints = Callable[..., list[str]]

GAP = 'gap   = "3 mm"'


def test_values_may_use_later_ones(load: Loader) -> None:
    study = load((GAP, 'gap = "thin*3"\nratio = "n/2"\nthin = "width/5"\nn = 3'))
    assert study.values["gap"] == pytest.approx(0.003, rel=1e-15)  # three roundings
    assert study.values["ratio"] == 1.5
    assert list(study.values) == ["arm", "width", "gap", "ratio", "thin", "n"]


def test_what_depends_on_a_swept_value_follows_it(load: Loader) -> None:
    study = load(
        (GAP, 'gap = "thin*3"\nthin = "width/5"\nother = "arm*2"'),
        added='\n[sweep]\nwidth = ["10 mm", "20 mm"]\n',
    )
    assert [q.key for q in study.moving] == ["values.thin", "values.gap"]
    first, second = (case.antenna for case in study.cases())
    assert first is not None
    assert second is not None
    assert first.strips[0].path_m[0][0] == pytest.approx(0.003, rel=1e-15)
    assert second.strips[0].path_m[0][0] == pytest.approx(0.006, rel=1e-15)


def test_a_circle_is_shown_once(complaints: Complaints) -> None:
    (line,) = complaints((GAP, 'gap = "a/2"\na = "b + 1 mm"\nb = "max(c, a)"\nc = "2 mm"'))
    assert line in {
        f"weir.toml:{number}: values.{circle[0]} = {written}: these values go round in a circle: "
        f"{' -> '.join((*circle, circle[0]))}"
        for number, circle, written in [(7, "ab", '"b + 1 mm"'), (8, "ba", '"max(c, a)"')]
    }


def test_a_value_of_itself_and_two_circles(complaints: Complaints) -> None:
    found = complaints((GAP, 'gap = "gap"\na = "b"\nb = "a"'))
    assert [line.split("circle: ")[1] for line in found] in (
        ["gap -> gap", "a -> b -> a"],
        ["gap -> gap", "b -> a -> b"],
    )


def test_what_uses_a_broken_value_is_not_reported_again(complaints: Complaints) -> None:
    (line,) = complaints((GAP, 'gap = "3 Mm"\ntwice = "gap*2"\nsum = "twice + 3"'))
    assert line.startswith('weir.toml:6: values.gap = "3 Mm": ')


@pytest.mark.parametrize(
    ("entry", "sentence"),
    [
        ('mm = "3 mm"', "this name is a unit; choose another, as mm_strip"),
        ('S = "3 mm"', "this name is a unit"),
        ("pi = 3", "has a meaning in expressions"),
        ("max = 3", "has a meaning in expressions"),
        ('"a b" = 3', "a name is a letter, then up to 59"),
        ('"metal.thickness" = 3', "a name is a letter"),
        ("a-b = 3", "a name is a letter"),
        ("_a = 3", "a name is a letter"),
        (f"{'a' * 61} = 3", "a name is a letter"),
        ("a.b = 3", "a value is text with a unit or a number, but this is a table"),
        ("a = [1]", "this is a list; a quantity is text with a unit"),
        ("a = true", "this is true or false"),
        ("a = 1979-05-27", "this is a date or time"),
        ("a = inf", "a number must be finite"),
        ("a = nan", "a number must be finite"),
        (f"a = 1{'0' * 70}", "a number must be finite and within 1e60"),
        ('a = "1e20 m"', "a length of 1e+20 in SI units is beyond 1e+15; check its unit"),
        ('a = "1/0"', "divides by zero; change it"),
        ('a = "arn*2"', "`arn` is not a name of [values]; do you mean `arm`?"),
        ('a = "zzz"', "`zzz` is not a name of [values]; define it in [values]"),
        ('a = "' + "(" * 99 + '"', "nested deeper than 40 levels"),
        ('a = "arm + 3"', "a length and a pure number cannot be added"),
    ],
)
def test_values_that_are_refused(complaints: Complaints, entry: str, sentence: str) -> None:
    (line,) = complaints((GAP, f"{GAP}\n{entry}"))
    assert line.startswith("weir.toml:7: values.")
    assert sentence in line


def test_there_may_not_be_too_many(complaints: Complaints) -> None:
    entries = "\n".join(f"a{i} = {i}" for i in range(500))
    (line,) = complaints((GAP, f"{GAP}\n{entries}"))
    assert "values: has 503 names; at most 500 are allowed" in line


def test_a_swept_value_keeps_its_number_though_it_uses_another_swept_one(load: Loader) -> None:
    study = load(
        (GAP, 'gap = "arm/10"'),
        added='\n[sweep]\narm = ["50 mm", "60 mm"]\ngap = ["1 mm", "4 mm"]\n',
    )
    starts = [case.antenna.strips[0].path_m[0][0] for case in study.cases() if case.antenna]
    assert starts == [0.0005, 0.002, 0.0005, 0.002]
