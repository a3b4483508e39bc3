"""Whole study files: what comes out, what an error says, and that nothing else gets out."""

from __future__ import annotations

import math
import pickle
import subprocess
import sys
from collections.abc import Callable
from contextlib import suppress
from pathlib import Path

import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st

from simkit.errors import SimkitError, StudyError
from simkit.study import Study, load_study
from simkit.study.model import EndFeed, FrequencyBand, Metal

Loader = Callable[..., Study]
Complaints = Callable[..., list[str]]

SWEEP = """
[sweep]
arm = { from = "60 mm", to = "75 mm", count = 4 }
width = ["4 mm", "0.25 in", "-1 mm"]
"metal.thickness" = ["0.1 mm", "35 um"]
"""


def test_a_study_in_si(load: Loader) -> None:
    study = load()
    antenna = study.nominal()
    upper, lower = antenna.strips
    assert study.title == "Gauge at the weir"
    assert study.values == {"arm": 0.071, "width": 0.005, "gap": 0.003}
    assert upper.path_m == ((0.0015, 0.0), (0.0725, 0.0), (0.0725, 0.011))
    assert lower.path_m == ((-0.0015, 0.0), (-0.0725, 0.0), (-0.0725, 0.011))
    assert (upper.name, lower.name, upper.width_m, lower.width_m) == ("upper", "lower", 5e-3, 5e-3)
    assert antenna.metal == Metal("copper", 5.8e7, 35e-6)
    assert antenna.feed == EndFeed("lower", "start", "upper", "start")
    assert antenna.reference_ohm == 75.0
    assert antenna.frequency == FrequencyBand(0.4e9, 2.5e9, 211)
    assert antenna.model == "auto"


def test_a_study_without_a_sweep_is_one_case(load: Loader) -> None:
    study = load()
    assert (study.case_count, study.shape, study.swept, study.method) == (1, (), (), "grid")
    (case,) = study.cases()
    assert (case.index, case.values, case.refused) == (0, {}, "")
    assert case.antenna == study.nominal()


def test_cases_of_a_grid_vary_the_last_name_fastest(load: Loader) -> None:
    study = load(added=SWEEP)
    assert study.shape == (4, 3, 2)
    assert study.case_count == 24
    assert [case.index for case in study.cases()] == list(range(24))
    case = study.case(7)
    assert case.values == {"arm": 0.065, "width": 0.004, "metal.thickness": 35e-6}
    assert case.antenna is not None
    assert case.antenna.metal.thickness_m == 35e-6
    assert case.antenna.strips[0].path_m[1] == (0.0665, 0.0)
    assert study.nominal().strips[0].path_m[1] == (0.0725, 0.0)
    assert study.nominal().metal.thickness_m == 35e-6


def test_a_point_that_does_not_resolve_is_refused_with_its_place(load: Loader) -> None:
    study = load(added=SWEEP)
    case = study.case(4)
    assert case.antenna is None
    assert case.refused == (
        'weir.toml:13: strip.upper.width = "width" (here -1 mm): '
        "must be above 0 mm; a positive number is needed"
    )
    refused = [case.index for case in study.cases() if case.refused]
    assert refused == [4, 5, 10, 11, 16, 17, 22, 23]


def test_an_expression_that_fails_at_a_point_refuses_it(load: Loader) -> None:
    study = load(
        ('gap   = "3 mm"', 'gap   = "3 mm * sqrt(n - 1) / sqrt(n - 1)"\nn = 2'),
        added="\n[sweep]\nn = [2, 1, 0.5]\n",
    )
    assert [bool(case.refused) for case in study.cases()] == [False, True, True]
    assert study.case(1).refused.startswith("weir.toml:6: values.gap = ")
    assert "divides by zero; change it" in study.case(1).refused
    assert "`sqrt` has no real result for -0.5" in study.case(2).refused


@pytest.mark.parametrize("index", [-1, 24, 10**9])
def test_there_are_no_other_cases(load: Loader, index: int) -> None:
    with pytest.raises(IndexError, match="this study has cases 0 to 23"):
        load(added=SWEEP).case(index)


def test_a_study_survives_pickling(load: Loader) -> None:
    study = load(added=SWEEP)
    copy = pickle.loads(pickle.dumps(study))
    assert copy == study
    assert list(copy.cases()) == list(study.cases())


def test_units_for_display_are_those_the_user_wrote(load: Loader) -> None:
    study = load(
        (
            'arm   = "71 mm"',
            'arm = "7.1 cm"\nreach = "arm*2"\nf = "868 MHz"\nwave = "3e8 m/s/f"\nn = 3',
        ),
        ('thickness = "0.035 mm"', 'thickness = "35 um"'),
        added='\n[sweep]\nwidth = ["0.25 in", "4 mm"]\n',
    )
    shown = {name: study.display_unit(name) for name in study.values}
    assert shown == {
        "arm": "cm",
        "reach": "cm",
        "f": "MHz",
        "wave": "mm",
        "n": "1",
        "width": "in",
        "gap": "mm",
    }
    assert study.display_unit("metal.thickness") == "um"
    with pytest.raises(KeyError, match=r"metal\.conductivity"):
        study.display_unit("metal.conductivity")


def test_lines_of_keys(load: Loader) -> None:
    study = load(added=SWEEP)
    keys = [
        "title",
        "arm",
        "values.gap",
        "strip.upper.width",
        "strip.lower.width",
        "metal.thickness",
    ]
    assert [study.line_of(key) for key in keys] == [1, 4, 6, 13, 15, 21]
    assert study.line_of("sweep.metal.thickness") == 38
    assert study.line_of("strip.upper.path.2") == 12
    assert study.line_of("carrier.infill") is None


def test_every_problem_comes_at_once_and_in_order(complaints: Complaints) -> None:
    found = complaints(
        ('title = "Gauge', 'titel = "Gauge'),
        ('gap   = "3 mm"', 'gap   = "3 Mm"'),
        ('width = "5 mm"', 'width = "-5 mm"'),
        ('"11 mm"]', "11]"),
        ('mirror = "upper"', 'mirror = "uper"'),
        ('"copper"', '"coper"'),
        ('"0.4 GHz"', '"0 GHz"'),
        ("points = 211", "points = 1.5\nstep = 3"),
        added="[[feedline]]\n",
    )
    places = [": ".join(line.split(": ")[:2]).removeprefix("weir.toml:") for line in found]
    assert places == [
        " title",
        '1: titel = "Gauge at the weir"',
        '6: values.gap = "3 Mm"',
        "12: strip.upper.path[3].y = 11",
        '13: strip.upper.width = "width" (here -5 mm)',
        '17: strip.lower.mirror = "uper"',
        '20: metal.material = "coper"',
        '31: frequency.start = "0 GHz"',
        "33: frequency.points = 1.5",
        "34: frequency.step = 3",
        "35: feedline.item.kind",
    ]
    assert "is missing; give the study a title" in found[0]
    assert "do you mean `title`?" in found[1]


def test_a_problem_names_place_key_value_limit_and_remedy(complaints: Complaints) -> None:
    assert complaints(("points = 211", "points = 1e6")) == [
        "weir.toml:33: frequency.points = 1000000.0: must be at most 100001; lower it"
    ]
    assert complaints(('"5 mm"', "5")) == [
        'weir.toml:13: strip.upper.width = "width": a length is needed, but `width` is a pure '
        "number; check the units of `width` in [values]"
    ]


@pytest.mark.parametrize(
    ("text", "line", "sentence"),
    [
        ("title = ", 1, "this is not TOML: invalid value"),
        ("a = 1\nb = [1,\n2", 3, "this is not TOML: .*at the end of the file"),
        ("a = 1\na = 2", 2, "this is not TOML: cannot overwrite a value"),
        ("a = 1\n[a]\n[b", 2, "this is not TOML"),
        ("a = 'x\x00'", 1, "this is not TOML"),
        ("a = 2024-13-45", 1, "this is not TOML"),
    ],
)
def test_a_syntax_error_gives_its_line(tmp_path: Path, text: str, line: int, sentence: str) -> None:
    file = tmp_path / "bad.toml"
    file.write_text(text)
    with pytest.raises(StudyError, match=sentence) as caught:
        load_study(file)
    assert [problem.line for problem in caught.value.problems] == [line]


@pytest.mark.parametrize(
    ("content", "sentence"),
    [
        (
            b"title = \"a\"\nx = '\xff'",
            r"bad\.toml:2: is not UTF-8 text here; save the file as UTF-8",
        ),
        (b"# " + b"x" * 1_000_000, "is larger than 1,000,000 bytes"),
        (b"x = " + b"[" * 5000 + b"]" * 5000, "nested deeper than 12 levels"),
        (b"x = " + b"[" * 14 + b"]" * 14, "nested deeper than 12 levels"),
        (b"x = " + b"9" * 5000, "this is not TOML: exceeds the limit"),
        (b"", "title: is missing"),
        (b"strip = 3\nfeed = 1\nvalues = []", r"strip = 3: must be an array of tables"),
    ],
)
def test_files_that_are_no_studies(tmp_path: Path, content: bytes, sentence: str) -> None:
    file = tmp_path / "bad.toml"
    file.write_bytes(content)
    with pytest.raises(StudyError, match=sentence):
        load_study(file)


def test_files_that_cannot_be_read(tmp_path: Path) -> None:
    with pytest.raises(StudyError, match=r"none\.toml: there is no such file; `simkit new NAME`"):
        load_study(tmp_path / "none.toml")
    with pytest.raises(StudyError, match="is a folder; name the study file"):
        load_study(tmp_path)
    with pytest.raises(StudyError, match="cannot be read"):
        load_study("nul\0byte.toml")


def test_windows_line_ends_and_a_byte_order_mark_are_welcome(
    tmp_path: Path, text: str, complaints: Complaints
) -> None:
    file = tmp_path / "windows.toml"
    file.write_bytes(b"\xef\xbb\xbf" + text.replace("\n", "\r\n").encode())
    assert load_study(file).line_of("frequency.points") == 33
    file.write_bytes(text.replace("\n", "\r\n").replace("211", "1").encode())
    with pytest.raises(StudyError, match=r"windows\.toml:33: frequency\.points = 1"):
        load_study(file)


def test_reading_studies_needs_no_heavy_library() -> None:
    code = (
        "import sys, simkit.study; "
        "heavy = {'pint', 'numpy', 'xarray', 'matplotlib', 'pydantic', 'dask'}; "
        "print(sorted(heavy & set(sys.modules)))"
    )
    done = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True)
    assert done.stdout.strip() == "[]"


def test_the_example_study_has_fifteen_cases() -> None:
    root = Path(__file__).parents[2] / "studies"
    study = load_study(root / "creek_gauge.toml")
    assert study.shape == (5, 3)
    assert all(case.antenna for case in study.cases())
    (measured,) = study.measured
    assert measured.path == root / "creek_gauge_build_1.s1p"
    assert measured.build == {"arm": 0.076}


PIECES = (
    st.sampled_from(
        [
            "",
            " ",
            "\n",
            "#",
            "[",
            "]",
            "[[",
            "=",
            '"',
            "'",
            "{",
            "}",
            ",",
            ".",
            "0",
            "-1",
            "1e400",
            "nan",
        ]
    )
    | st.sampled_from(
        [
            "inf",
            "true",
            "1979-05-27",
            "mm",
            '"0 mm"',
            '"1/0"',
            '"arm"',
            "[]",
            "{}",
            "\x00",
            "é",
            "\\",
        ]
    )
    | st.sampled_from(
        [
            "\n[sweep]\narm = [1]\n",
            "\n[sweep]\narm.from = 3\n",
            "\n[feed]\n",
            '\nmirror = "lower"\n',
            "\n[[strip]]\n",
            "\n[[measured]]\n",
            "\ncarrier = 1\n",
            "\n[ground]\nkind = 'plane'\n",
            "\n[placement]\nrotate_x = '90 deg'\n",
            "\nsmooth = true\n",
            "\narc = {}\n",
            "\nrotate = '1 rad'\n",
            '\n[sampling]\nmethod = "list"\n',
            "from",
            "strip",
            "values",
            "count",
            '"lower.end"',
            "99999999999999999999999999",
        ]
    )
)
SHAPES = """
[[strip]]
name = "sail"
path = [["9 mm", "70 mm"], ["20 mm", "75 mm"], ["30 mm", "70 mm"]]
width = ["1 mm", "2 mm", "width"]
smooth = true
rotate = "7 deg"
[[strip]]
name = "sag"
curve = { x = "t*arm", y = "90 mm*t**2", t = [0, 1], points = 9 }
width = "1 mm + t*2 mm"
[[strip]]
name = "bow"
arc = { centre = ["0 mm", "0 mm"], radius = "200 mm", from = "3 deg", to = "90 deg", points = 9 }
width = "2 mm"
shift = ["1 mm", "2 mm"]
[placement]
rotate_x = "90 deg"
shift = ["0 mm", "0 mm", "300 mm"]
[carrier]
permittivity = 2.7
thickness = "2 mm"
skin = "0.2 mm"
[ground]
kind = "earth"
permittivity = 13
conductivity = "5 mS/m"
"""
EDITS = st.lists(st.tuples(st.floats(0, 1), st.integers(0, 12), PIECES), min_size=1, max_size=4)


@pytest.fixture(scope="module")
def scratch(tmp_path_factory: pytest.TempPathFactory) -> Path:
    return tmp_path_factory.mktemp("scratch") / "mangled.toml"


@settings(
    max_examples=400,
    deadline=None,
    derandomize=True,
    suppress_health_check=[HealthCheck.function_scoped_fixture],  # `text` is a constant
)
@given(edits=EDITS)
def test_a_mangled_study_gives_a_study_or_a_study_error(
    scratch: Path, text: str, edits: list[tuple[float, int, str]]
) -> None:
    text += SHAPES + SWEEP + '[[measured]]\nfile = "a.s1p"\narm = "70 mm"\n'
    for place, removed, piece in edits:
        start = int(place * len(text))
        text = text[:start] + piece + text[start + removed :]
    scratch.write_text(text, encoding="utf-8")
    with suppress(SimkitError):
        study = load_study(scratch)
        assert math.isfinite(study.nominal().reference_ohm)
        for index in range(min(study.case_count, 6)):
            case = study.case(index)
            assert (case.antenna is None) == bool(case.refused)


@settings(
    max_examples=150,
    deadline=None,
    derandomize=True,
    suppress_health_check=[HealthCheck.function_scoped_fixture],  # the file is rewritten each time
)
@given(text=st.text(max_size=60))
def test_any_text_gives_a_study_error(scratch: Path, text: str) -> None:
    scratch.write_text(text, encoding="utf-8", errors="replace")
    with pytest.raises(StudyError, match=r"mangled\.toml"):
        load_study(scratch)
