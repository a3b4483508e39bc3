"""[cable]: what comes out and what is refused."""

from __future__ import annotations

import json
import pickle
import re
from collections.abc import Callable
from dataclasses import asdict

import pytest

from simkit.runner.identity import canonical_json, case_key, sha256
from simkit.study import Study
from simkit.study.model import Cable

Loader = Callable[..., Study]
Complaints = Callable[..., list[str]]

PLAIN = '[cable]\nat = "lower.start"\nlength = "90 mm"\ndiameter = "3 mm"\n'
FEED = '[feed]\nfrom = "lower.start"\nto   = "upper.start"'
CUT = '[feed]\nstrip = "upper"\nat = "20 mm"\ngap = "2 mm"'
ROUTE = 'route = [["0 mm", "0 mm", "40 mm"], ["0 mm", "30 mm", "40 mm"]]'
UP = '[placement]\nrotate_x = "90 deg"\nshift = ["0 mm", "0 mm", "60 mm"]\n'
PLANE = '[ground]\nkind = "plane"\n'


def in_mm(cable: Cable | None) -> list[tuple[float, ...]]:
    assert cable is not None
    return [tuple(round(value * 1e3, 9) for value in point) for point in cable.points_m]


def test_it_leaves_the_end_it_is_joined_to_along_the_normal(load: Loader) -> None:
    cable = load(added=PLAIN).nominal().cable
    assert cable is not None
    assert (cable.strip, cable.end, cable.diameter_m) == ("lower", "start", 0.003)
    assert in_mm(cable) == [(-1.5, 0.0, 0.0), (-1.5, 0.0, 90.0)]
    assert cable.length_m == pytest.approx(0.09, rel=1e-12)


def test_a_direction_has_any_length(load: Loader) -> None:
    cable = load(added=PLAIN + "direction = [0, -3, 4]\n").nominal().cable
    assert in_mm(cable)[1] == (-1.5, -54.0, 72.0)


def test_a_route_is_relative_to_the_end(load: Loader) -> None:
    text = PLAIN.replace('length = "90 mm"', ROUTE).replace("lower.start", "upper.start")
    points = [(1.5, 0.0, 0.0), (1.5, 0.0, 40.0), (1.5, 30.0, 40.0)]
    assert in_mm(load(added=text).nominal().cable) == points


@pytest.mark.parametrize(("length", "end"), [("55 mm", 15.0), ("130 mm", 90.0)])
def test_a_length_cuts_or_carries_on_the_last_leg_of_a_route(
    load: Loader, length: str, end: float
) -> None:
    cable = load(added=f"{PLAIN}{ROUTE}\n".replace("90 mm", length)).nominal().cable
    assert in_mm(cable)[-1] == (-1.5, end, 40.0)


@pytest.mark.parametrize(("side", "x"), [("start", 20.5), ("end", 22.5)])
def test_at_a_cut_it_is_joined_to_one_edge(load: Loader, side: str, x: float) -> None:
    text = PLAIN.replace("lower.start", f"upper.{side}")
    assert in_mm(load((FEED, CUT), added=text).nominal().cable)[0] == (x, 0.0, 0.0)


def test_at_a_cut_across_a_loop_it_may_lie_on_either_side_of_the_seam(load: Loader) -> None:
    square = (
        '[["0 mm", "0 mm"], ["40 mm", "0 mm"], ["40 mm", "30 mm"], ["0 mm", "30 mm"], '
        '["0 mm", "0 mm"]]'
    )
    path = (
        '[["gap/2", "0 mm"],\n         ["gap/2 + arm", "0 mm"],\n         ["gap/2 + arm", "11 mm"]]'
    )
    swaps = ((path, square), (FEED, CUT.replace("20 mm", "0 mm")))
    mirror = ('[[strip]]\nname   = "lower"\nmirror = "upper"\n', "")
    text = PLAIN.replace("lower.start", "upper.start")
    cable = load(*swaps, mirror, added=text).nominal().cable
    assert in_mm(cable)[0] == (0.0, 1.0, 0.0)


def test_its_length_can_be_swept(load: Loader) -> None:
    study = load(added=PLAIN + '[sweep]\n"cable.length" = ["30 mm", "55 mm", "80 mm"]\n')
    lengths = [case.antenna.cable.length_m for case in study.cases() if case.antenna]  # type: ignore[union-attr]
    assert lengths == pytest.approx([0.03, 0.055, 0.08], rel=1e-12)
    assert study.display_unit("cable.length") == "mm"


def test_a_value_in_the_route_can_be_swept(load: Loader) -> None:
    text = PLAIN.replace('length = "90 mm"', 'route = [["0 mm", "drop", "0 mm"]]')
    swaps = (('gap   = "3 mm"', 'gap   = "3 mm"\ndrop = "20 mm"'),)
    study = load(*swaps, added=text + '[sweep]\ndrop = ["20 mm", "35 mm"]\n')
    ends = [in_mm(case.antenna.cable)[-1][1] for case in study.cases() if case.antenna]
    assert ends == [20.0, 35.0]


def test_it_can_be_hashed_pickled_and_written_as_json(load: Loader) -> None:
    antenna = load(added=PLAIN).nominal()
    assert hash(pickle.loads(pickle.dumps(antenna))) == hash(antenna)
    assert json.loads(json.dumps(asdict(antenna)))["cable"]["end"] == "start"


def test_without_a_cable_a_case_keeps_its_key(load: Loader) -> None:
    """The hash of the inputs as they were before there were cables and feed lines."""
    case = load().case(0)
    assert case.antenna is not None
    inputs = asdict(case.antenna)
    assert inputs.pop("cable") is None
    assert inputs.pop("feedline") == ()
    assert case_key(case, "mesh") == sha256(f"{canonical_json(inputs)}\nmesh")
    assert case_key(load(added=PLAIN).case(0), "mesh") != case_key(case, "mesh")


# -- what is refused -------------------------------------------------------------------------------

START = 34
"""Line of [cable] below the study of these tests."""


@pytest.mark.parametrize(
    ("old", "new", "line", "words"),
    [
        ('at = "lower.start"\n', "", 0, "is missing; write which side of the feed the braid"),
        ("lower.start", "lower.end", 1, 'must be "lower.start" or "upper.start": one of the two'),
        ('length = "90 mm"', "", 0, 'write how long the cable is, as in length = "300 mm", or'),
        ('"90 mm"', '"-9 mm"', 2, "must be above 0"),
        ('"90 mm"', '"9 MHz"', 2, "a length is needed"),
        ('diameter = "3 mm"', "", 0, "is missing; write that of the braid"),
        ('"3 mm"', '"0 mm"', 3, "must be above 0"),
        ("length", "lenght", 2, "do you mean `length`?"),
        ('"3 mm"', '"3 mm"\ndirection = [0, 1]', 4, r"write x, y and z, as in \[0, 0, 1\], not 2"),
        ('"3 mm"', '"3 mm"\ndirection = "up"', 4, r"not text"),
        ('"3 mm"', '"3 mm"\ndirection = [0, 0, 0]', 4, "the direction has no length"),
        ('"3 mm"', '"3 mm"\nroute = "up"', 4, "write the points the cable passes"),
        ('"3 mm"', '"3 mm"\nroute = [["0 mm", "0 mm"]]', 4, "write x, y and z"),
        ('"3 mm"', '"3 mm"\nroute = [[0, 0, 3]]', 4, "a length is needed"),
        ('"3 mm"', '"3 mm"\nroute = [["0 mm", "0 mm", "0 mm"]]', 4, "leave that point out"),
        (
            '"3 mm"',
            '"3 mm"\nroute = [["0 mm", "0 mm", "9 mm"], ["0 mm", "0 mm", "9 mm"]]',
            4,
            "two points of the cable's route coincide",
        ),
        (
            '"3 mm"',
            '"3 mm"\nroute = [["0 mm", "0 mm", "95 mm"], ["0 mm", "9 mm", "95 mm"]]',
            2,
            "the route is 95 mm long up to its last leg",
        ),
        ('"3 mm"', '"3 mm"\ndirection = [0, 0, 1]\n' + ROUTE, 4, "either `route` or `direction`"),
    ],
)
def test_mistakes_are_named_with_their_line(
    complaints: Complaints, old: str, new: str, line: int, words: str
) -> None:
    assert old in PLAIN
    found = complaints(added=PLAIN.replace(old, new))
    assert any(re.search(words, one) for one in found), found
    assert any(f":{START + line}:" in one for one in found), found


def test_at_a_cut_the_sides_are_named_after_the_strips_ends(complaints: Complaints) -> None:
    (found,) = complaints((FEED, CUT), added=PLAIN)
    assert 'must be "upper.start" or "upper.end": the side of the cut that leads to' in found


def test_a_sweep_of_the_list_is_refused(complaints: Complaints) -> None:
    text = PLAIN + 'direction = [0, 0, 1]\n[sweep]\n"cable.direction" = [1, 2]\n'
    (found,) = complaints(added=text)
    assert "it is a list; sweep a name of [values] used in it" in found


LYING = 'route = [["0 mm", "-60 mm", "9 mm"], ["0 mm", "-60 mm", "50 mm"]]'


@pytest.mark.parametrize(
    ("cable", "words"),
    [
        (PLAIN + "direction = [0, -1, 0]\n", "the cable reaches 30 mm below the ground"),
        (PLAIN.replace('length = "90 mm"', LYING), "the cable lies in the ground"),
    ],
)
def test_it_must_stay_above_the_ground(complaints: Complaints, cable: str, words: str) -> None:
    (found,) = complaints(added=UP + PLANE + cable)
    assert words in found
    assert f":{START + 5}:" in found


def test_it_may_reach_a_plane(load: Loader) -> None:
    text = UP + PLANE + PLAIN.replace("90 mm", "60 mm") + "direction = [0, -1, 0]\n"
    assert in_mm(load(added=text).nominal().cable)[-1] == (-1.5, -60.0, 0.0)
