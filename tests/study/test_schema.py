"""Tables and keys of a study: what is refused, and in which words."""

from __future__ import annotations

from collections.abc import Callable

import pytest

from simkit.study import Study
from simkit.study.model import CutFeed, Metal

Loader = Callable[..., Study]
Complaints = Callable[..., list[str]]

FEED = 'from = "lower.start"\nto   = "upper.start"'
METAL = 'material  = "copper"\nthickness = "0.035 mm"'
MIRROR = 'mirror = "upper"'


@pytest.mark.parametrize(
    ("old", "new", "line", "sentence"),
    [
        ("[connector]", "[conector]", 27, "is not a key of a study file; do you mean `connector`?"),
        ("reference", "referense", 28, "is not a key of [connector]; do you mean `reference`?"),
        ("thickness", "thicknes", 21, "is not a key of [metal]; do you mean `thickness`?"),
        ("points", "zzz", 33, "is not a key of [frequency]; there are start, stop, points"),
        (MIRROR, MIRROR + "\nflip = true", 18, "is not a key of a mirrored strip; there are"),
        (FEED, FEED + "\nat_end = 1", 26, "is not a key of [feed]; "),
    ],
)
def test_unknown_keys_are_problems(
    complaints: Complaints, old: str, new: str, line: int, sentence: str
) -> None:
    found = complaints((old, new))
    assert any(sentence in text and f":{line}: " in text for text in found), found


@pytest.mark.parametrize(
    ("old", "new", "sentence"),
    [
        (
            'title = "Gauge at the weir"',
            "title = 3",
            'text is needed, as in "...", but this is a b',
        ),
        ('title = "Gauge at the weir"', 'title = ""', "one line of 1 to 200 printable characters"),
        ('title = "Gauge at the weir"', 'title = "a\\nb"', "one line of 1 to 200 printable"),
        ('"upper"\npath', '"up per"\npath', "a name is a letter, then up to 59"),
        ('name   = "lower"', 'name = "upper"', "another strip has this name already"),
        ('name   = "lower"', "", "is missing; give every strip a name"),
        (MIRROR, 'mirror = "uper"', 'no strip has this name; do you mean "upper"?'),
        (MIRROR, 'mirror = "lower"', "lead round in a circle"),
        (MIRROR, MIRROR + '\naxis = "z"', 'must be one of "y", "x"'),
        (MIRROR, MIRROR + '\nwidth = "3 mm"', "takes this from its original; leave it out"),
        (MIRROR, MIRROR + "\npath = []", "takes this from its original; leave it out"),
        ('width = "width"', 'width = "width"\naxis = "y"', "belongs to a strip with `mirror`"),
        ('width = "width"', "", "is missing; write how wide the strip is"),
        ('["gap/2 + arm", "0 mm"],', '["gap/2 + arm"],', "a point is a pair [x, y]"),
        ('["gap/2 + arm", "0 mm"],', '"gap",', "a point is a pair [x, y]"),
        (
            '["gap/2 + arm", "0 mm"],',
            '[true, "0 mm"],',
            "this is true or false; a quantity is text",
        ),
        ('["gap/2 + arm", "0 mm"],', '[nan, "0 mm"],', "a number must be finite"),
        ('["gap/2 + arm", "0 mm"],', '["gap/2 + arm", "0"],', 'the unit too, as in "0 mm"'),
        ('"copper"', '"steel"', "this metal is not in the table"),
        ('"copper"', '"Cooper"', 'do you mean "copper"? Or give conductivity'),
        ('thickness = "0.035 mm"', "", "the loss of a real metal needs it"),
        ("material ", 'conductivity = "1e7 S/m"\nmaterial ', "either `material` or `conductivity`"),
        ('material  = "copper"', 'conductivity = "1e7"', "a conductivity is needed"),
        ('"lower.start"', '"lowr.start"', "no strip is called `lowr`; do you mean `lower`?"),
        ('"lower.start"', '"lower.middle"', 'write a strip and its end, as in "east.start"'),
        ('"lower.start"', '"upper.start"', "a feed needs two different ends"),
        (FEED, "", "is missing; write a strip and its end"),
        (FEED, 'strip = "upper"', 'where along the strip the cut is, as in at = "12 mm"'),
        (FEED, 'at = "3 mm"', "name the strip the cut goes across"),
        (FEED, 'strip = "uper"\nat = "3 mm"', "no strip has this name; do you mean `upper`?"),
        (FEED, FEED + '\nstrip = "upper"', "a feed is either between two ends"),
        ('"75 ohm"', '"75 mm"', "a resistance is needed, but this is a length"),
        ('stop   = "2.5 GHz"', "", 'is missing; as in stop = "3 GHz"'),
        ("points = 211", 'points = "2 GHz"', "a pure number is needed, but this is a frequency"),
        ("[connector]", '[model]\nkind = "lines"\n[connector]', 'do you mean "line"?'),
        ("[connector]", '[model]\nconverge = "true"\n[connector]', "true or false, without quotes"),
        ("[connector]", "[connector]\nx.y = 1", "is not a key of [connector]"),
        ("[connector]\n", "connector = 3\n[x]\n", "is not a key"),
        ('[[strip]]\nname   = "lower"', "[strip_two]\nname = 'lower'", "do you mean `strip`?"),
    ],
)
def test_what_is_wrong_in_a_table(
    complaints: Complaints, old: str, new: str, sentence: str
) -> None:
    found = complaints((old, new))
    assert any(sentence in text for text in found), found


@pytest.mark.parametrize(
    ("name", "start"), [("feed", "[feed]"), ("frequency", "[frequency]"), ("strip", "[[strip]]")]
)
def test_tables_that_must_be_there(
    complaints: Complaints, name: str, start: str, text: str
) -> None:
    blocks = [block for block in text.split("\n\n") if block.startswith(start)]
    found = complaints(*((block, "") for block in blocks))
    assert any(line.startswith(f"weir.toml: {name}: is missing; ") for line in found), found


def test_tables_that_may_be_left_out(load: Loader) -> None:
    study = load((f"[metal]\n{METAL}", ""), ('[connector]\nreference = "75 ohm"', ""))
    assert study.nominal().metal == Metal("perfect conductor", None, 0.0)
    assert study.nominal().reference_ohm == 50.0


def test_what_the_model_is_told(load: Loader) -> None:
    plain, told = load(), load(added='[model]\nkind = "grid"\nconverge = true')
    assert (plain.nominal().model, plain.nominal().converge) == ("auto", False)
    assert (told.nominal().model, told.nominal().converge) == ("grid", True)


def test_a_metal_by_its_conductivity_and_a_thick_perfect_one(load: Loader) -> None:
    given = load((METAL, 'conductivity = "9 MS/m"\nthickness = "0.1 mm"'))
    assert given.nominal().metal == Metal("given conductivity", 9e6, 1e-4)
    thick = load((METAL, 'thickness = "0.1 mm"'))
    assert thick.nominal().metal == Metal("perfect conductor", None, 1e-4)


def test_a_mirror_of_a_mirror_and_the_other_axis(load: Loader) -> None:
    first = '\n[[strip]]\nname = "below"\nmirror = "lower"\naxis = "x"\n'
    strips = load((MIRROR, MIRROR + first)).nominal().strips
    assert [strip.name for strip in strips] == ["upper", "lower", "below"]
    assert strips[2].path_m == ((-0.0015, 0.0), (-0.0725, 0.0), (-0.0725, -0.011))


def test_a_strip_may_be_mirrored_before_it_is_described(load: Loader, text: str) -> None:
    blocks = text.split("\n\n")
    swapped = [(blocks[2], "@"), (blocks[3], blocks[2]), ("@", blocks[3])]
    strips = load(*swapped).nominal().strips
    assert [strip.name for strip in strips] == ["lower", "upper"]


def test_cuts_with_and_without_a_gap(load: Loader) -> None:
    assert load((FEED, 'strip = "lower"\nat = "9 mm"')).nominal().feed == CutFeed(
        "lower", 0.009, 0.0005
    )
    assert load((FEED, 'strip = "lower"\nat = "9 mm"\ngap = "gap"')).nominal().feed == CutFeed(
        "lower", 0.009, 0.003
    )
