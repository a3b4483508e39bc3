"""Strips of every shape: what comes out, and what is said about those that cannot be."""

from __future__ import annotations

import math
from collections.abc import Callable

import pytest

from simkit.study import Study
from simkit.study.model import EndFeed, Strip
from simkit.study.paths import SPLINE_POINTS, is_closed, path_length
from simkit.study.strip_schema import MOST_POINTS, MOST_SMOOTH_POINTS

Loader = Callable[..., Study]
Complaints = Callable[..., list[str]]

WIDTH = 'width = "width"'
MIRROR = 'mirror = "upper"'
FEED = 'from = "lower.start"\nto   = "upper.start"'
TAPER = (WIDTH, 'width = ["width", "width + 4 mm", "7 mm"]')
PATH = """[["gap/2", "0 mm"],
         ["gap/2 + arm", "0 mm"],
         ["gap/2 + arm", "11 mm"]]"""
CURVE = 'curve = { x = "gap/2 + t*arm", y = "t**2 * 20 mm", t = [0, 2], points = 5 }'
ARC = (
    'arc = { centre = ["60 mm", "5 mm"], radius = "50 mm", from = "180 deg", to = "90 deg", '
    "points = 19 }"
)


def strip_of(body: str) -> str:
    """A third strip, called `extra`."""
    return f'\n[[strip]]\nname = "extra"\n{body}\n'


def extra(load: Loader, body: str, *replacements: tuple[str, str]) -> Strip:
    return load(*replacements, added=strip_of(body)).nominal().strips[2]


def test_a_taper_and_its_mirror(load: Loader) -> None:
    upper, lower = load(TAPER).nominal().strips
    assert upper.widths_m == pytest.approx((0.005, 0.009, 0.007), rel=1e-14)  # rounding
    assert upper.widths_m == lower.widths_m == upper.widths
    assert upper.width_m == lower.width_m == upper.widths[1]


def test_a_list_of_equal_widths_is_no_taper(load: Loader) -> None:
    equal = load((WIDTH, 'width = ["width", "5 mm", "5 mm"]')).nominal()
    assert equal == load().nominal()
    assert equal.strips[0].widths_m == ()
    assert equal.strips[0].widths == (0.005,) * 3


def test_a_taper_may_move_with_a_sweep(load: Loader) -> None:
    study = load(TAPER, added='[sweep]\nwidth = ["3 mm", "2 mm", "-1 mm"]')
    tapers = [case.antenna.strips[0].widths_m for case in study.cases() if case.antenna]
    assert tapers == [(0.003, 0.007, 0.007), (0.002, 0.006, 0.007)]
    assert 'width[1] = "width" (here -1 mm): must be above 0 mm' in study.case(2).refused


def test_the_default_gap_of_a_cut_follows_the_taper(load: Loader) -> None:
    at = (FEED, 'strip = "upper"\nat = "35.5 mm"')  # the middle of the first leg, 7 mm wide
    feed = load(TAPER, at).nominal().feed
    assert feed.gap_m == pytest.approx(0.7e-3, rel=1e-12)  # type: ignore[union-attr]  # rounding


def test_the_metal_must_be_thin_against_the_narrowest_place(complaints: Complaints) -> None:
    (line,) = complaints((WIDTH, 'width = ["width", "0.06 mm", "5 mm"]'))
    assert "thinner than half the narrowest strip (0.06 mm wide)" in line


def test_a_smooth_path_goes_through_its_points(load: Loader) -> None:
    given = load(TAPER).nominal().strips[0]
    upper, lower = load((WIDTH, TAPER[1] + "\nsmooth = true")).nominal().strips
    assert len(upper.path_m) == len(upper.widths_m) == 2 * SPLINE_POINTS + 1
    assert upper.path_m[::SPLINE_POINTS] == given.path_m
    assert upper.widths_m[::SPLINE_POINTS] == given.widths_m
    assert lower.path_m == tuple((-x, y) for x, y in upper.path_m)
    assert lower.widths_m == upper.widths_m
    assert path_length(upper.path_m) > path_length(given.path_m)


def test_a_smooth_loop_closes_exactly(load: Loader) -> None:
    body = (
        'path = [["0 mm", "50 mm"], ["9 mm", "50 mm"], ["9 mm", "62 mm"], '
        '["(0.1 + 0.2 - 0.3)*1 m", "50 mm"]]\nwidth = "1 mm"\nsmooth = true'
    )
    path = extra(load, body).path_m
    assert len(path) == 3 * SPLINE_POINTS + 1
    assert path[0] == path[-1] == (0.0, 0.05)


def test_smooth_may_say_false(load: Loader) -> None:
    assert load((WIDTH, WIDTH + "\nsmooth = false")).nominal() == load().nominal()


def test_a_curve_is_sampled_at_equal_steps_of_t(load: Loader) -> None:
    strip = extra(load, f'{CURVE}\nwidth = "4 mm"')
    assert [x for x, _ in strip.path_m] == pytest.approx(
        [0.0015 + t * 0.071 for t in (0, 0.5, 1, 1.5, 2)], rel=1e-14
    )  # rounding
    assert [y for _, y in strip.path_m] == pytest.approx([0, 0.005, 0.02, 0.045, 0.08], rel=1e-14)
    assert (strip.width_m, strip.widths_m) == (0.004, ())


def test_a_curve_has_sixty_points_from_0_to_1_unless_told(load: Loader) -> None:
    strip = extra(load, 'curve = { x = "t * 90 mm", y = "70 mm" }\nwidth = "4 mm"')
    assert len(strip.path_m) == 60
    assert (strip.path_m[0], strip.path_m[-1]) == ((0.0, 0.07), (0.09, 0.07))


def test_the_width_of_a_curve_may_run_with_t(load: Loader) -> None:
    strip = extra(load, f'{CURVE}\nwidth = "width + t * 1 mm"')
    assert strip.widths_m == pytest.approx((0.005, 0.0055, 0.006, 0.0065, 0.007), rel=1e-14)
    assert strip.width_m == strip.widths_m[-1]


@pytest.mark.parametrize("shape", [CURVE, ARC])
def test_widths_of_a_curve_are_spread_over_it(load: Loader, shape: str) -> None:
    strip = extra(load, f'{shape}\nwidth = ["3 mm", "5 mm", "4 mm"]')
    last = len(strip.path_m) - 1
    assert (strip.widths_m[0], strip.widths_m[last // 2], strip.widths_m[-1]) == (3e-3, 5e-3, 4e-3)
    assert strip.width_m == 5e-3


def test_a_curve_moves_with_a_sweep(load: Loader) -> None:
    study = load(added=strip_of(f'{CURVE}\nwidth = "4 mm"') + '[sweep]\narm = ["50 mm", "60 mm"]')
    ends = [case.antenna.strips[2].path_m[-1] for case in study.cases() if case.antenna]
    assert [x for x, _ in ends] == pytest.approx([0.1015, 0.1215], rel=1e-12)  # rounding


def test_an_arc_by_centre_radius_and_angles(load: Loader) -> None:
    strip = extra(load, f'{ARC}\nwidth = "4 mm"')
    assert len(strip.path_m) == 19
    assert strip.path_m[0] == pytest.approx((0.01, 0.005), abs=1e-15)  # rounding
    assert strip.path_m[-1] == pytest.approx((0.06, 0.055), abs=1e-15)
    assert all(math.dist(p, (0.06, 0.005)) == pytest.approx(0.05) for p in strip.path_m)
    assert all(x < 0.06 + 1e-12 and y > 0.005 - 1e-12 for x, y in strip.path_m)


def test_a_full_circle_is_a_loop(load: Loader) -> None:
    body = (
        'arc = { centre = ["0 mm", "90 mm"], radius = "30 mm", from = "10 deg", to = "370 deg" }\n'
        'width = "4 mm"'
    )
    path = extra(load, body).path_m
    assert path[0] == path[-1]
    assert is_closed(path)
    assert len(path) == 60


def test_an_arc_can_be_swept_by_its_own_keys(load: Loader) -> None:
    study = load(
        added=strip_of(f'{ARC}\nwidth = "4 mm"')
        + '[sweep]\n"strip.extra.arc.radius" = ["40 mm", "60 mm"]\n'
        '"strip.extra.arc.to" = ["80 deg", "100 deg", "540 deg"]'
    )
    starts = [c.antenna.strips[2].path_m[0][0] if c.antenna else None for c in study.cases()]
    assert starts == [pytest.approx(0.02), pytest.approx(0.02), None, *[pytest.approx(0)] * 2, None]
    assert study.display_unit("strip.extra.arc.to") == "deg"
    assert "(here 540 deg): too few for an arc" not in study.case(2).refused
    assert "points = 19: too few for an arc of 360 deg; give at least 25" in study.case(2).refused


def test_first_turned_then_shifted(load: Loader) -> None:
    moved = 'rotate = "90 deg"\nshift = ["gap", "-2 mm"]'
    upper, lower = load((WIDTH, f"{WIDTH}\n{moved}")).nominal().strips
    expected = [(0.003, -0.0005), (0.003, 0.0705), (-0.008, 0.0705)]
    assert upper.path_m == tuple(pytest.approx(p, abs=1e-17) for p in expected)
    assert lower.path_m == tuple((-x, y) for x, y in upper.path_m)


def test_a_mirrored_strip_is_moved_after_mirroring(load: Loader) -> None:
    moved = MIRROR + '\nshift = ["0 mm", "30 mm"]\nrotate = "-90 deg"'
    upper, lower = load((MIRROR, moved)).nominal().strips
    assert upper.path_m[0] == (0.0015, 0.0)
    assert lower.path_m == tuple((y, 0.03 - x) for x, y in ((-x, y) for x, y in upper.path_m))


def test_a_turn_can_be_swept(load: Loader) -> None:
    study = load(
        (WIDTH, WIDTH + '\nrotate = "0 deg"'),
        added='[sweep]\n"strip.upper.rotate" = ["0 deg", "60 deg", "500 deg"]',
    )
    heights = [case.antenna.strips[0].path_m[1][1] for case in study.cases() if case.antenna]
    assert heights == [0.0, pytest.approx(0.0725 * math.sin(math.pi / 3))]
    assert "(here 500 deg): must be at most 360 deg; check its unit" in study.case(2).refused


@pytest.mark.parametrize("values", ["[0, 5]", '{ from = "0 deg", to = 5, count = 2 }'])
def test_a_swept_angle_takes_its_unit_too(complaints: Complaints, values: str) -> None:
    turned = (WIDTH, WIDTH + '\nrotate = "0 deg"')
    (line,) = complaints(turned, added=f'[sweep]\n"strip.upper.rotate" = {values}')
    assert line.endswith('= 5: an angle takes its unit, as in "5 deg" or "0.5 rad"')


def test_a_strip_may_be_fed_between_its_own_ends(load: Loader) -> None:
    body = (
        'arc = { centre = ["0 mm", "0 mm"], radius = "90 mm", from = "3 deg", to = "357 deg" }\n'
        'width = "4 mm"'
    )
    study = load((FEED, 'from = "extra.start"\nto = "extra.end"'), added=strip_of(body))
    assert study.nominal().feed == EndFeed("extra", "start", "extra", "end")


def test_strips_may_touch_and_differ_in_width(load: Loader) -> None:
    stub = 'path = [["40 mm", "0 mm"], ["40 mm", "20 mm"]]\nwidth = "2 mm"'
    assert extra(load, stub).width_m == 0.002


@pytest.mark.parametrize(
    ("old", "new", "sentence"),
    [
        (WIDTH, 'width = ["5 mm", "6 mm"]', "there are 2 widths for 3 points; write one width per"),
        (WIDTH, "width = []", "there are 0 widths for 3 points"),
        (WIDTH, 'width = ["5 mm", "6 mm", 7]', "13: strip.upper.width[3] = 7: a length is needed"),
        (WIDTH, 'width = ["5 mm", "0 mm", "1 mm"]', 'width[2] = "0 mm": must be above 0 mm'),
        (WIDTH, WIDTH + "\nsmooth = 1", "must be true or false, without quotes, not a bare number"),
        (WIDTH, WIDTH + "\nsmoth = true", "is not a key of a strip; do you mean `smooth`?"),
        (WIDTH, WIDTH + "\nrotate = 30", 'an angle takes its unit, as in "30 deg"'),
        (WIDTH, WIDTH + '\nrotate = "30"', 'an angle takes its unit, as in "30 deg"'),
        (WIDTH, WIDTH + "\nrotate = -4.5", 'an angle takes its unit, as in "-4.5 deg"'),
        (WIDTH, WIDTH + '\nrotate = "3 mm"', "a pure number is needed, but this is a length"),
        (WIDTH, WIDTH + '\nrotate = "361 deg"', "must be at most 360 deg; check its unit"),
        (WIDTH, WIDTH + '\nshift = "3 mm"', "write one length each for x, y, as in shift = ["),
        (WIDTH, WIDTH + '\nshift = ["3 mm", 4]', "strip.upper.shift.y = 4: a length is needed"),
        (WIDTH, WIDTH + '\nshift = ["3 mm", "200 km"]', "must be at most 1e+08 mm"),
        (WIDTH, WIDTH + f"\n{CURVE}", "either `path`, `curve` or `arc`, and `path` stands"),
        (WIDTH, WIDTH + "\narc = 3", "either `path`, `curve` or `arc`, and `path` stands"),
        (MIRROR, MIRROR + f"\n{CURVE}", "a mirrored strip takes this from its original"),
        (MIRROR, MIRROR + "\nsmooth = true", "a mirrored strip takes this from its original"),
        (MIRROR, MIRROR + '\nrotate = "400 deg"', "must be at most 360 deg"),
        (f"path  = {PATH}", "", "points of the centre line, as in path = "),
        (f"path  = {PATH}", "", "or give `curve`, `arc` or `mirror`"),
        (PATH, '[["0 mm", "0 mm"], ["9 mm", "0 mm"]]\nsmooth = true', "has 2 points; at least 3"),
    ],
)
def test_what_is_wrong_with_a_strip(
    complaints: Complaints, old: str, new: str, sentence: str
) -> None:
    found = complaints((old, new))
    assert any(sentence in line for line in found), found


@pytest.mark.parametrize(
    ("body", "sentence"),
    [
        (CURVE.replace('"t**2 * 20 mm"', '"t**2"'), "multiply it by one, as in t * 8 mm"),
        (CURVE.replace('"t**2 * 20 mm"', '"t*gap*gap"'), "check the units of `gap` in [values]"),
        (CURVE.replace('"t**2 * 20 mm"', '"u*gap"'), "`u` is not a name of [values]"),
        (CURVE.replace('"t**2 * 20 mm"', '"gap/(t - 1)"'), "divides by zero; change it"),
        (CURVE.replace('"t**2 * 20 mm"', '"gap/(t - 1)"'), "(at t = 1)"),
        (CURVE.replace('"t**2 * 20 mm"', '"t * 60 km"'), 'y = "t * 60 km" (here 1.2e+08 mm)'),
        (CURVE.replace('"t**2 * 20 mm"', '"t * 60 km"'), "check its unit (at t = 2)"),
        (CURVE.replace('y = "t**2 * 20 mm", ', ""), "extra.curve.y: is missing; write the coord"),
        (CURVE.replace("[0, 2]", "[1, 1]"), "t must end at another number than it begins with"),
        (CURVE.replace("[0, 2]", "3"), "write where t begins and ends, as in t = [0, 1]"),
        (CURVE.replace("[0, 2]", '[0, "1 mm"]'), 'curve.t[2] = "1 mm": a pure number is needed'),
        (CURVE.replace("points = 5", "points = 1"), "must be at least 2; raise it"),
        (CURVE.replace("points = 5", "points = 2001"), "must be at most 2000; lower it"),
        (CURVE.replace("points = 5", "points = 5.5"), "must be a whole number"),
        (CURVE.replace("points", "point"), "is not a key of a curve; do you mean `points`?"),
        (CURVE + "\nsmooth = true", "`curve` is smooth already; leave it out"),
        ('curve = "t"', "must be a table in braces, as in curve = { x ="),
        ('curve = { x = "t/t*9 mm", y = "5 mm", t = [1, 2] }', "point 2 of the path repeats p"),
        ('curve = { x = "t/t*9 mm", y = "5 mm", t = [1, 2] }', "let the curve move on, or give"),
        ('curve = { x = "t*(1-t)*9 mm", y = "5 mm", points = 3 }', "goes out and back on itself"),
        (ARC.replace('"90 deg"', '"180 deg"'), "the arc spans 0 deg; it must span more than 0"),
        (ARC.replace('"90 deg"', '"-190 deg"'), "the arc spans 370 deg; it must span more than 0"),
        (ARC.replace('"90 deg"', "90"), 'an angle takes its unit, as in "90 deg"'),
        (ARC.replace('"50 mm"', '"0 mm"'), 'extra.arc.radius = "0 mm": must be above 0 mm'),
        (ARC.replace("19", "6"), "too few for an arc of 90 deg; give at least 7"),
        (ARC.replace('"60 mm", ', ""), "write one length each for x, y, as in centre = "),
        (ARC.replace("centre", "center"), "is not a key of an arc; do you mean `centre`?"),
        (ARC + "\nsmooth = true", "`arc` is smooth already"),
        ("arc = [1]", "must be a table in braces, as in arc = { centre = "),
    ],
)
def test_what_is_wrong_with_a_curve(complaints: Complaints, body: str, sentence: str) -> None:
    found = complaints(added=strip_of(f'{body}\nwidth = "4 mm"'))
    assert any(sentence in line for line in found), found


@pytest.mark.parametrize(
    ("shape", "width", "sentence"),
    [
        (CURVE, '"3 mm - t*2 mm"', "must be above 0 mm; a positive number is needed (at t = 1.5)"),
        (CURVE, '"t"', "multiply it by one, as in t * 8 mm"),
        (CURVE, '["3 mm"]', "write the widths at the start and the end of the curve at least"),
        (ARC, '"t * 3 mm"', "`t` is not a name of [values]"),
    ],
)
def test_what_is_wrong_with_the_width_of_a_curve(
    complaints: Complaints, shape: str, width: str, sentence: str
) -> None:
    (line,) = complaints(added=strip_of(f"{shape}\nwidth = {width}"))
    assert sentence in line


def test_a_loop_must_end_as_wide_as_it_starts(complaints: Complaints) -> None:
    ring = 'arc = { centre = ["0 m", "90 mm"], radius = "30 mm", from = "0 deg", to = "360 deg" }'
    (line,) = complaints(added=strip_of(ring + '\nwidth = ["3 mm", "5 mm", "4 mm"]'))
    assert 'extra.width[3] = "4 mm": a closed loop must end as wide as it starts, 3 mm' in line


def test_a_value_called_t_would_be_taken_for_the_parameter(complaints: Complaints) -> None:
    (line,) = complaints(
        ('gap   = "3 mm"', 'gap   = "3 mm"\nt = "2 mm"'), added=strip_of(f'{CURVE}\nwidth = "gap"')
    )
    assert line.startswith("weir.toml:7: values.t: in a curve t runs along it; give this value an")


def test_a_value_called_t_is_like_any_other_where_no_curve_is(load: Loader) -> None:
    study = load(('gap   = "3 mm"', 'gap   = "3 mm"\nt = "2 mm"'), (WIDTH, 'width = "t"'))
    assert study.nominal().strips[0].width_m == 0.002


@pytest.mark.parametrize(
    ("key", "why"),
    [
        ("strip.upper.width", "the widths are a list; sweep a name of [values] used in it"),
        ("strip.extra.width", "it changes along the curve; sweep a name of [values]"),
        ("strip.extra.curve.x", "it is an expression along the curve"),
        ("strip.extra.curve.points", "share one number of points"),
        ("strip.extra.shift", "it is a list; sweep a name of [values] used in it"),
        ("strip.extra.rotate", "the study does not give it; write it there first"),
    ],
)
def test_what_cannot_be_swept(complaints: Complaints, key: str, why: str) -> None:
    body = f'{CURVE}\nwidth = "width*(1 + t)"\nshift = ["0 mm", "0 mm"]'
    (line,) = complaints(TAPER, added=strip_of(body) + f'[sweep]\n"{key}" = ["1 mm", "2 mm"]')
    assert "cannot be swept: " in line
    assert why in line


def test_all_cases_share_one_number_of_points(complaints: Complaints) -> None:
    body = CURVE.replace("points = 5", 'points = "n"') + '\nwidth = "4 mm"'
    (line,) = complaints(
        ('gap   = "3 mm"', 'gap   = "3 mm"\nn = 7'), added=strip_of(body) + "[sweep]\nn = [5, 6]"
    )
    assert 'extra.curve.points = "n": depends on `n`, which the sweep varies' in line


@pytest.mark.parametrize(("smooth", "most"), [("", MOST_POINTS), ("smooth = true", 166)])
def test_a_path_may_not_be_endless(complaints: Complaints, smooth: str, most: int) -> None:
    assert most in (MOST_POINTS, MOST_SMOOTH_POINTS)
    points = ", ".join(['["1 mm", "0 mm"]'] * (most + 1))
    (line,) = complaints(('[["gap/2", "0 mm"],', f"[{points}, "), (WIDTH, f"{WIDTH}\n{smooth}"))
    assert f"has {most + 3} points; at most {most} are allowed" in line
