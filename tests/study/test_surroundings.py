"""[placement], [carrier] and [ground]: what comes out and what is refused."""

from __future__ import annotations

import json
import math
import pickle
from collections.abc import Callable
from dataclasses import asdict
from itertools import product

import pytest

from simkit.study import Study
from simkit.study.blueprint import PlacementPlan
from simkit.study.evaluate import Evaluator
from simkit.study.expression import constant
from simkit.study.model import NO_ROTATION, Carrier, Ground, Placement, Vector
from simkit.study.resolve_surroundings import resolve_placement
from simkit.study.tables import Quantity
from simkit.study.units import PURE

Loader = Callable[..., Study]
Complaints = Callable[..., list[str]]

WIDTH = 'width = "width"'
CARRIER = """[carrier]
permittivity = 2.7
loss_tangent = 0.02
infill = 0.4
thickness = "2.4 mm"
overhang = "2 mm"
"""
UP = '[placement]\nrotate_x = "90 deg"\nshift = ["0 mm", "0 mm", "300 mm"]\n'
EARTH = '[ground]\nkind = "earth"\npermittivity = 13\nconductivity = "5 mS/m"\n'


def placed(placement: Placement, point: Vector) -> Vector:
    x, y, z = (
        sum(a * b for a, b in zip(row, point, strict=True)) + shift
        for row, shift in zip(placement.rotation, placement.shift_m, strict=True)
    )
    return (x, y, z)


def test_without_the_tables_there_is_nothing_around(load: Loader) -> None:
    antenna = load().nominal()
    assert antenna.placement == Placement(NO_ROTATION, (0.0, 0.0, 0.0))
    assert (antenna.carrier, antenna.ground) == (None, None)
    assert load(added="[placement]").nominal() == antenna


def test_everything_can_be_hashed_pickled_and_written_as_json(load: Loader) -> None:
    antenna = load(added=UP + CARRIER + EARTH).nominal()
    assert pickle.loads(pickle.dumps(antenna)) == antenna
    assert hash(antenna) == hash(pickle.loads(pickle.dumps(antenna)))
    assert json.loads(json.dumps(asdict(antenna)))["carrier"]["loss_tangent"] == 0.02


# -- placement -------------------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("key", "point", "goes_to"),
    [
        ("rotate_x", (0.0, 2.0, 0.0), (0.0, 0.0, 2.0)),
        ("rotate_x", (3.0, 0.0, 0.0), (3.0, 0.0, 0.0)),
        ("rotate_y", (3.0, 0.0, 0.0), (0.0, 0.0, -3.0)),
        ("rotate_z", (3.0, 0.0, 0.0), (0.0, 3.0, 0.0)),
    ],
)
def test_a_quarter_turn_about_each_axis(
    load: Loader, key: str, point: Vector, goes_to: Vector
) -> None:
    placement = load(added=f'[placement]\n{key} = "90 deg"').nominal().placement
    assert placed(placement, point) == goes_to


def test_turns_follow_one_another_about_fixed_axes_before_the_shift(load: Loader) -> None:
    turns = '[placement]\nrotate_z = "90 deg"\nrotate_x = "90 deg"\nrotate_y = "90 deg"\n'
    placement = load(added=turns + 'shift = ["gap", "-1 mm", "10 mm"]').nominal().placement
    # about x: y to z; about y: z to x; about z: x to y
    assert placed(placement, (0.0, 1.0, 0.0)) == (0.003, 0.999, 0.010)


def test_equal_placements_are_equal_as_text() -> None:
    """Quarter turns in every combination give twenty-four rotations, and no zero has a sign."""
    quarters = [k * math.pi / 2 for k in (-3, -2, -1, 0, 1, 2, 3)]
    plans = [PlacementPlan(*(_angle(a) for a in abc)) for abc in product(quarters, repeat=3)]
    evaluator = Evaluator({})
    texts = {json.dumps(asdict(resolve_placement(evaluator, plan))) for plan in plans}  # type: ignore[arg-type]
    assert len(texts) == 24
    assert not any("-0.0" in text for text in texts)


def _angle(radians: float) -> Quantity:
    return Quantity("placement.rotate_x", None, "", constant(radians), PURE)


def test_any_turn_keeps_lengths_and_handedness(load: Loader) -> None:
    turns = 'rotate_x = "31 deg"\nrotate_y = "-1.1 rad"\nrotate_z = "200 deg"'
    a, b, c = load(added=f"[placement]\n{turns}").nominal().placement.rotation
    for row in (a, b, c):
        assert math.hypot(*row) == pytest.approx(1, rel=1e-14)  # rounding
    cross = (
        a[1] * b[2] - a[2] * b[1],
        a[2] * b[0] - a[0] * b[2],
        a[0] * b[1] - a[1] * b[0],
    )
    assert cross == pytest.approx(c, abs=1e-15)


def test_a_placement_can_be_swept(load: Loader) -> None:
    study = load(added=UP + '[sweep]\n"placement.rotate_x" = ["0 deg", "90 deg"]')
    rows = [case.antenna.placement.rotation[2] for case in study.cases() if case.antenna]
    assert rows == [(0.0, 0.0, 1.0), (0.0, 1.0, 0.0)]


@pytest.mark.parametrize(
    ("old", "new", "sentence"),
    [
        ('"90 deg"', "90", 'an angle takes its unit, as in "90 deg" or "0.5 rad"'),
        ('"90 deg"', '"90 mm"', "a pure number is needed, but this is a length"),
        ('"90 deg"', '"90 rad"', "must be at most 360 deg; check its unit"),
        ('"90 deg"', '"arm"', "a pure number is needed, but `arm` is a length"),
        ("rotate_x", "rotate", "is not a key of [placement]; do you mean `rotate_"),
        ('"0 mm", "0 mm", ', '"0 mm", ', "write one length each for x, y, z, as in shift = ["),
        ('"300 mm"', '"300 MHz"', 'placement.shift.z = "300 MHz": a length is needed'),
        ('"300 mm"', '"300 km"', "must be at most 1e+08 mm"),
    ],
)
def test_what_is_wrong_with_a_placement(
    complaints: Complaints, old: str, new: str, sentence: str
) -> None:
    (line,) = complaints(added=UP.replace(old, new))
    assert sentence in line


# -- carrier ---------------------------------------------------------------------------------------


def test_a_carrier_by_its_numbers(load: Loader) -> None:
    carrier = load(added=CARRIER).nominal().carrier
    assert carrier == Carrier(2.7, 0.02, 0.0024, infill=0.4, overhang_m=0.002)
    assert carrier.permittivity == pytest.approx(2.7 - 0.054j)
    assert carrier.mixing == "plastic-host"


def test_a_carrier_with_everything(load: Loader) -> None:
    rest = (
        'mixing = "bruggeman"\nskin = "gap/10"\nend_overhang = "1 mm"\noffset = "-2 mm"\n'
        'side = "embedded"\ndepth = "1 mm"\n'
    )
    carrier = load(added=CARRIER + rest).nominal().carrier
    assert carrier is not None
    assert carrier.skin_m == pytest.approx(0.3e-3, rel=1e-14)  # rounding
    assert (carrier.end_overhang_m, carrier.offset_m, carrier.depth_m) == (1e-3, -2e-3, 1e-3)
    assert (carrier.mixing, carrier.side) == ("bruggeman", "embedded")


def test_a_solid_carrier_without_loss_or_overhang(load: Loader) -> None:
    carrier = load(added='[carrier]\npermittivity = 2.7\nthickness = "1 mm"').nominal().carrier
    assert carrier == Carrier(2.7, 0.0, 0.001)
    assert str(carrier.permittivity) == "(2.7+0j)"


@pytest.mark.parametrize("name", ["ASA", "asa"])
def test_a_carrier_of_a_known_plastic(load: Loader, name: str) -> None:
    from simkit.crosssection import PLASTICS

    carrier = load(added=f'[carrier]\nmaterial = "{name}"\nthickness = "2 mm"').nominal().carrier
    assert carrier is not None
    assert carrier.material == "ASA"
    assert carrier.permittivity == PLASTICS["ASA"].complex_permittivity


def test_the_cross_section_knows_every_mixing_rule_of_the_study() -> None:
    from simkit.crosssection import mixed_permittivity
    from simkit.study.surroundings_schema import MIXING

    mixed = {name: mixed_permittivity(2.7, 0.4, rule).real for name, rule in MIXING.items()}
    assert sorted(mixed, key=lambda name: mixed[name]) == [
        "series",
        "bruggeman",
        "maxwell-garnett",
        "parallel",
    ]


def test_an_unknown_plastic(complaints: Complaints) -> None:
    (line,) = complaints(added='[carrier]\nmaterial = "PLAA"\nthickness = "2 mm"')
    assert line.startswith('weir.toml:35: carrier.material = "PLAA": this plastic is not in the ')
    assert 'do you mean "PLA"? Or give permittivity and loss_tangent.' in line


def test_a_carrier_can_be_swept_and_refuses_only_the_points_beyond_its_limits(
    load: Loader,
) -> None:
    study = load(
        added=CARRIER + '[sweep]\ncarrier.infill = [0, 0.5, 1, 40]\ngap = ["1 mm", "3 mm"]'
    )
    infills = [case.antenna.carrier.infill if case.antenna else None for case in study.cases()]  # type: ignore[union-attr]
    assert infills == [0.0, 0.0, 0.5, 0.5, 1.0, 1.0, None, None]
    assert (
        "carrier.infill = 0.4 (here 40): must be at most 1; write 40 % as" in study.case(6).refused
    )


@pytest.mark.parametrize(
    ("old", "new", "sentence"),
    [
        ("= 2.7", "= 0.9", "must be at least 1; that of the solid plastic is needed, mostly 2 to"),
        ("= 2.7", "= 270", "must be at most 100; that of the solid plastic"),
        ("= 2.7", '= "2.7 mm"', "a pure number is needed, but this is a length"),
        ("permittivity = 2.7", "", "carrier.material: is missing; write the plastic, as in mat"),
        ("= 0.02", "= -0.02", "must be at least 0; mostly it is below 0.05"),
        ("= 0.02", "= 2", "must be at most 1; mostly it is below 0.05"),
        ("= 0.4", "= 40", "must be at most 1; write 40 % as 0.4"),
        ("= 0.4", "= -1", "must be at least 0; write 40 % as 0.4"),
        ('"2.4 mm"', '"0 mm"', "must be above 0 mm"),
        ('thickness = "2.4 mm"', "", "is missing; write how thick the plastic is"),
        ('"2 mm"', '"-1 mm"', "must be at least 0 mm; a carrier narrower than the strip would"),
        ("overhang =", "overhag =", "is not a key of [carrier]; do you mean `overhang`?"),
    ],
)
def test_what_is_wrong_with_a_carrier(
    complaints: Complaints, old: str, new: str, sentence: str
) -> None:
    found = complaints(added=CARRIER.replace(old, new))
    assert any(sentence in line for line in found), found


@pytest.mark.parametrize(
    ("added", "sentence"),
    [
        ('end_overhang = "-1 mm"', "a carrier shorter than the strip would leave metal without"),
        ('skin = "1.3 mm"', "two skins do not fit in a carrier of 2.4 mm"),
        ('skin = "0.6 mm"', "the two skins alone fill 0.5 of the carrier, more than its infill of"),
        ('skin = "-0.1 mm"', "must be at least 0 mm; raise it"),
        ('offset = "2.5 mm"', "stands over its edge; keep it within the overhang of 2 mm"),
        ('offset = "-2.5 mm"', "stands over its edge; keep it within the overhang of 2 mm"),
        ('mixing = "maxwel-garnett"', 'do you mean "maxwell-garnett"?'),
        ('side = "above"', 'must be one of "below", "both", "embedded"'),
        ('side = "embedded"', "is missing; write how much plastic lies above the strip"),
        ('depth = "1 mm"', 'belongs to side = "embedded"; leave it out'),
        ('side = "embedded"\ndepth = "2.4 mm"', "an embedded strip lies between 0.035 mm, the me"),
        ('side = "embedded"\ndepth = "0.03 mm"', "2.4 mm, the carrier's, below its top"),
        ('side = "embedded"\ndepth = "0 mm"', "must be above 0 mm"),
        ('material = "ASA"', "give either `material` or the plastic's numbers, not both"),
    ],
)
def test_what_is_wrong_with_further_keys_of_a_carrier(
    complaints: Complaints, added: str, sentence: str
) -> None:
    found = complaints(added=f"{CARRIER}{added}\n")
    assert any(sentence in line for line in found), found


def test_skins_may_just_fill_the_carrier(load: Loader) -> None:
    full = CARRIER.replace("0.4", "1") + 'skin = "1.2 mm"'
    assert load(added=full).nominal().carrier is not None
    counted = CARRIER.replace("0.4", "0.1") + 'skin = "0.12 mm"'
    assert load(added=counted).nominal().carrier is not None


@pytest.mark.parametrize("key", ["permittivity", "loss_tangent"])
def test_a_material_fixes_its_numbers(complaints: Complaints, key: str) -> None:
    carrier = '[carrier]\nmaterial = "ASA"\nthickness = "2 mm"\n'
    (line,) = complaints(added=f'{carrier}[sweep]\n"carrier.{key}" = [1, 2]')
    assert f"`material` fixes it; give carrier.{key} instead of the material" in line


# -- ground ----------------------------------------------------------------------------------------


def test_a_plane_and_earth(load: Loader) -> None:
    assert load(added=UP + '[ground]\nkind = "plane"').nominal().ground == Ground("plane")
    assert load(added=UP + EARTH).nominal().ground == Ground("earth", 13.0, 0.005)


def test_a_strip_may_stand_on_the_plane(load: Loader) -> None:
    mast = '\n[[strip]]\nname = "mast"\npath = [["0 mm", "0 mm"], ["0 mm", "80 mm"]]\n' + WIDTH
    up = '\n[placement]\nrotate_x = "90 deg"\n[ground]\nkind = "plane"'
    feed = ('from = "lower.start"\nto   = "upper.start"', 'strip = "mast"\nat = "1 mm"')
    lifted = (WIDTH, WIDTH + '\nshift = ["0 mm", "10 mm"]')
    assert load(feed, lifted, added=mast + up).nominal().ground == Ground("plane")


@pytest.mark.parametrize(
    ("placement", "sentence"),
    [
        ("", "strip `upper` lies in the ground at z = 0; lift it with [placement]"),
        ('rotate_x = "-90 deg"', "strip `upper` reaches 11 mm below the ground at z = 0; turn it"),
        ('shift = ["0 mm", "0 mm", "-7 mm"]', "strip `lower` reaches 7 mm below the ground"),
    ],
)
def test_strips_below_or_in_the_ground(
    complaints: Complaints, placement: str, sentence: str
) -> None:
    found = complaints(added=f'[ground]\nkind = "plane"\n[placement]\n{placement}')
    assert len(found) == 2
    assert all(line.startswith("weir.toml:34: ground: strip") for line in found)
    assert any(sentence in line for line in found), found


@pytest.mark.parametrize(
    ("old", "new", "sentence"),
    [
        ('kind = "earth"\n', "", 'is missing; write kind = "plane" (perfect) or kind = "earth"'),
        ('"earth"', '"plan"', 'must be one of "plane", "earth"; do you mean "plane"?'),
        ('"earth"', '"plane"', 'a plane conducts perfectly; leave it out, or write kind = "earth"'),
        ("permittivity = 13\n", "", 'is missing; say what the earth is, as in kind = "earth"'),
        ("= 13", "= 0.5", "must be at least 1; dry sand has 3"),
        ("= 13", "= 1300", "must be at most 100; dry sand has 3"),
        ('"5 mS/m"', '"5 mS"', "a conductivity is needed, but this is a conductance"),
        ('"5 mS/m"', '"-5 mS/m"', "must be at least 0 S/m; dry sand has 1 mS/m"),
        ('"5 mS/m"', '"5 MS/m"', "must be at most 100 S/m; dry sand has 1 mS/m"),
        ("conductivity", "conductance", "not a key of [ground]; do you mean `conductivity`?"),
    ],
)
def test_what_is_wrong_with_a_ground(
    complaints: Complaints, old: str, new: str, sentence: str
) -> None:
    found = complaints(added=UP + EARTH.replace(old, new))
    assert any(sentence in line for line in found), found
