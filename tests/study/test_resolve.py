"""Limits that a resolved antenna must keep."""

from __future__ import annotations

from collections.abc import Callable

import pytest

from simkit.study import Study
from simkit.study.paths import path_length

Loader = Callable[..., Study]
Complaints = Callable[..., list[str]]

FEED = 'from = "lower.start"\nto   = "upper.start"'
BOX = """
[[strip]]
name = "loop"
path = [["0 mm", "50 mm"], ["9 mm", "50 mm"], ["9 mm", "62 mm"], ["(0.1 + 0.2 - 0.3)*1 m", "50 mm"]]
width = "1 mm"
"""


@pytest.mark.parametrize(
    ("old", "new", "said"),
    [
        ('"5 mm"', '"0 mm"', '13: strip.upper.width = "width" (here 0 mm): must be above 0 mm'),
        ('"5 mm"', '"200 km"', "must be at most 1e+08 mm; check its unit"),
        (
            '"11 mm"',
            '"-200 km"',
            '12: strip.upper.path[3].y = "-200 km" (here -2e+08 mm): must be at',
        ),
        ('"11 mm"', '"0 mm"', "12: strip.upper.path[3] = "),
        ('"11 mm"', '"0 mm"', "point 3 of the path repeats point 2; move it or leave it out"),
        ('"11 mm"', '"1e-10 m"', "point 3 of the path repeats point 2"),
        ('["gap/2 + arm", "11 mm"]', '["gap/2", "0 mm"]', "the path goes out and back on itself"),
        ('"75 ohm"', '"0 ohm"', "must be above 0 ohm"),
        ('"75 ohm"', '"-50 ohm"', "must be above 0 ohm"),
        ('"75 ohm"', '"75 Mohm"', "must be at most 1e+06 ohm"),
        ('"0.4 GHz"', '"0 Hz"', "must be above 0 MHz"),
        ('"0.4 GHz"', '"2.5 GHz"', '32: frequency.stop = "2.5 GHz": must be above start, 2500 MHz'),
        ('"2.5 GHz"', '"20 THz"', "must be at most 1e+07 MHz; check its unit"),
        ("211", "1", "must be at least 2; raise it"),
        ("211", "100002", "must be at most 100001; lower it"),
        ("211", "3.5", "must be a whole number"),
        ('"0.035 mm"', '"0 mm"', "must be above 0 mm"),
        ('"0.035 mm"', '"3 mm"', "thinner than half the narrowest strip (5 mm wide)"),
        ('"3 mm"', '"0 mm"', "25: feed.to"),
    ],
)
def test_limits(complaints: Complaints, old: str, new: str, said: str) -> None:
    found = complaints((old, new))
    assert any(said in line for line in found), found


@pytest.mark.parametrize(
    ("feed", "sentence"),
    [
        (
            'strip = "upper"\nat = "90 mm"',
            "strip, which is 82 mm long; choose a place from 0.25 mm",
        ),
        ('strip = "upper"\nat = "0.2 mm"', "choose a place from 0.25 mm to 81.75 mm"),
        ('strip = "upper"\nat = "-1 mm"', "must be at least 0 mm"),
        ('strip = "upper"\nat = "1 mm"\ngap = "0 mm"', "must be above 0 mm"),
        ('strip = "loop"\nat = "99 mm"', "must lie on the strip, which is 36 mm long"),
        ('from = "loop.start"\nto = "upper.start"', "`loop` is a closed loop and has no ends"),
    ],
)
def test_places_of_a_feed(complaints: Complaints, feed: str, sentence: str) -> None:
    (line,) = complaints((FEED, feed), added=BOX)
    assert sentence in line


def test_a_loop_closes_exactly_in_spite_of_rounding(load: Loader) -> None:
    study = load((FEED, 'strip = "loop"\nat = "0 mm"\ngap = "0.2 mm"'), added=BOX)
    path = study.nominal().strips[2].path_m
    assert path[-1] == path[0] == (0.0, 0.05)
    assert path_length(path) == pytest.approx(0.036, rel=1e-12)  # sum of three rounded lengths


def test_ends_that_touch_have_no_gap(complaints: Complaints) -> None:
    (line,) = complaints(('"3 mm"', '"0 mm"'))
    assert line == (
        'weir.toml:25: feed.to = "upper.start": '
        "the two ends touch, so there is no gap to feed; move them apart"
    )


def test_a_strip_on_its_mirror_axis_lies_on_its_own_image(complaints: Complaints) -> None:
    (line,) = complaints(
        (FEED, 'strip = "upper"\nat = "12 mm"'),
        (
            "[metal]",
            '[[strip]]\nname = "post"\npath = [["0 mm","1 mm"],["0 mm","9 mm"]]\n'
            'width = "1 mm"\n[[strip]]\nname = "image"\nmirror = "post"\n[metal]',
        ),
    )
    assert line.endswith("strip.image: lies exactly on strip `post`; move it or leave it out")
    assert line.startswith("weir.toml:25: ")


def test_a_strip_drawn_backwards_on_another_is_found(complaints: Complaints) -> None:
    (line,) = complaints(
        added='[[strip]]\nname = "again"\nwidth = "2 mm"\n'
        'path = [["gap/2 + arm", "11 mm"], ["gap/2 + arm", "0 mm"], ["gap/2", "0 mm"]]\n',
    )
    assert line.endswith("strip.again: lies exactly on strip `upper`; move it or leave it out")
