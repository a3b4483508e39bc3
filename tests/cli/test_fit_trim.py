"""``simkit fit`` and ``simkit trim`` from a measured file to millimetres, through the engine."""

import json
import re
import shutil
from pathlib import Path

import numpy as np
import pytest
from click.testing import CliRunner

from simkit.cli import main
from simkit.cli.fit import write_study
from simkit.cli.fitting import save
from simkit.errors import StoreError
from simkit.study import load_study

STUDY = """
title = "Creek gauge link"
[values]
arm = "76 mm"
width = "8 mm"
[[strip]]
name = "east"
path = [["1 mm", "0 mm"], ["1 mm + arm", "0 mm"]]
width = "width"
[[strip]]
name = "west"
mirror = "east"
[feed]
from = "west.start"
to = "east.start"
[frequency]
start = "600 MHz"
stop = "1200 MHz"
points = 101
"""
SAMPLE = Path(__file__).parents[2] / "studies" / "creek_gauge_build_1.s1p"


@pytest.fixture(scope="module")
def folder(tmp_path_factory):
    folder = tmp_path_factory.mktemp("fit")
    (folder / "gauge.toml").write_text(STUDY)
    shutil.copy(SAMPLE, folder / "build.s1p")
    return folder


def run(folder, *words):
    files = [str(folder / "gauge.toml"), str(folder / "build.s1p")]
    return CliRunner().invoke(main, [words[0], *files, *words[1:]])


def test_fit_writes_a_fitted_study_and_pictures(folder):
    done = run(folder, "fit", "--free", "arm=72 mm..79 mm", "--json")
    assert done.exit_code == 0, done.output
    (value,) = json.loads(done.stdout)["values"]
    # Cut at 75.1 and 74.3 mm with a gap of 2.4 instead of 2 mm: as if 74.9 mm.
    assert value["low"] < 74.9e-3 < value["high"]
    fitted = load_study(folder / "gauge_fitted.toml")
    assert fitted.values["arm"] == pytest.approx(value["fitted"], rel=1e-5)
    names = {path.name for path in (folder / "plots").iterdir()}
    assert names == {
        "fit_build.png", "fit_build_smith.png", "fit_build_residuals.png", "fit_mode_ratios.png",
    }  # fmt: skip
    assert "1 mm + arm" in (folder / "gauge_fitted.toml").read_text()


def test_trim_says_how_much_to_cut(folder, monkeypatch):
    titles = []
    monkeypatch.setattr(
        "simkit.cli.trim.save",
        lambda ax, *place: (titles.append(ax.get_title(loc="left")), save(ax, *place)),
    )
    words = ("--mode", "1/2", "--target", "930 MHz", "--by", "arm", "--free", "arm=72 mm..79 mm")
    done = run(folder, "trim", *words)
    assert done.exit_code == 0, done.output
    assert "cut -" in done.stdout
    assert "correction factor" in done.stdout
    # A short dipole has 1.76 dBi, a half-wave one 2.15.
    assert re.search(r"peak gain of the mode 2\.\d\d dBi now, 2\.\d\d dBi then", done.stdout)
    assert (folder / "plots" / "trim_arm.png").stat().st_size > 10_000
    first, *_, last = titles[0].split("\n")
    assert first == "Creek gauge link - build.s1p"
    assert last.startswith("the measured file says: INVENTED DATA")
    as_json = json.loads(run(folder, "trim", *words, "--json").stdout)[0]
    # The dip of 902 MHz and 12 MHz per millimetre.
    assert as_json["change"] == pytest.approx(-2.3e-3, abs=0.5e-3)
    assert as_json["low"] < as_json["change"] < as_json["high"] < 0


def test_trim_by_two_dimensions_meets_two_targets(folder):
    words = (
        "--mode", "1/2", "--target", "920 MHz..930 MHz", "--target", "13 dB", "--by", "arm",
        "--by", "width=7 mm..9 mm", "--known", "arm = 75 mm +- 0.5 mm", "--json",
    )  # fmt: skip
    done = run(folder, "trim", *words)
    assert done.exit_code == 0, done.output
    found = json.loads(done.stdout)
    arm, width = found["dimensions"]
    # 12 MHz per millimetre from 902 MHz; the match of a dipole needs no other width for 13 dB.
    assert arm["change"] == pytest.approx(-1.9e-3, abs=0.5e-3)
    assert width["change"] == 0
    assert found["targets"][1]["after"] > 13
    assert found["unsupported_modes"] == []
    assert found["gains_dbi"][0][1] == pytest.approx(2.12, abs=0.06)
    assert (folder / "plots" / "trim_arm_width.png").stat().st_size > 10_000


def test_a_sweep_without_a_dip_gives_no_millimetres(folder, tmp_path):
    flat = tmp_path / "flat.s1p"
    rows = "".join(f"{f:.0f} 0.9 0\n" for f in np.linspace(6e8, 1.2e9, 61))
    flat.write_text(f"# Hz S RI R 50\n{rows}")
    words = ["trim", str(folder / "gauge.toml"), str(flat), "--free", "arm=72 mm..79 mm"]
    words += ["--mode", "1/2", "--target", "930 MHz", "--by", "arm"]
    done = CliRunner().invoke(main, [*words, "--plots", str(tmp_path)])
    assert done.exit_code == 2, done.output
    assert "flat.s1p: no dip from 600 to 1200 MHz, so nothing measured says where" in done.stderr
    assert not list(tmp_path.glob("*.png"))


@pytest.mark.long
def test_a_dimension_that_cannot_do_it_leaves_the_other(folder):
    words = ("--mode", "1/2", "--target", "930 MHz", "--by", "width", "--by", "arm", "--csv")
    done = run(folder, "trim", *words, "--known", "arm = 75 mm +- 0.5 mm")
    assert done.exit_code == 0, done.output
    assert "not by this one: 930.0 MHz is out of reach" in done.stderr
    assert done.stdout.splitlines()[1].startswith("arm,1/2 wave")


@pytest.mark.parametrize(
    ("words", "said"),
    [
        (("fit",), "nothing is free to fit"),
        (("fit", "--free", "arn=1 mm..2 mm"), "do you mean `arm`"),
        (("fit", "--free", "arm=79 mm..72 mm"), "first bound must be below"),
        (("trim", "--mode", "x", "--target", "1 GHz", "--by", "arm"), "is no mode"),
        (("trim", "--mode", "1/2", "--target", "1 m", "--by", "arm"), "a frequency is needed"),
        (
            ("trim", "--mode", "1/2", "--target", "1 GHz", "--target", "9 dB", "--by", "arm"),
            "two targets need two dimensions",
        ),
    ],
)
def test_bad_requests_are_refused_with_a_sentence(folder, words, said):
    done = run(folder, *words)
    assert done.exit_code == 2
    assert said in done.output
    assert "Traceback" not in done.output


def test_the_fitted_study_does_not_replace_the_study(folder):
    done = run(folder, "fit", "--free", "arm=72 mm..79 mm", "-o", str(folder / "gauge.toml"))
    assert done.exit_code == 2
    assert "names the study itself" in done.output
    assert (folder / "gauge.toml").read_text() == STUDY


def test_a_measurement_elsewhere_is_refused(folder, tmp_path):
    frequency = np.linspace(4e9, 5e9, 50)
    rows = "\n".join(f"{f:.0f} 0.5 0.1" for f in frequency)
    other = tmp_path / "far.s1p"
    other.write_text(f"# Hz S RI R 50\n{rows}\n")
    words = ["fit", str(folder / "gauge.toml"), str(other), "--free", "arm=72 mm..79 mm"]
    done = CliRunner().invoke(main, words)
    assert done.exit_code == 2
    assert "no frequency in common" in done.output


def test_a_file_that_no_fit_wrote_is_left_alone(folder):
    mine = folder / "mine.toml"
    mine.write_text("# my own\n")
    done = run(folder, "fit", "--free", "arm=72 mm..79 mm", "-o", str(mine))
    assert done.exit_code == 2
    assert "was not written by a fit" in done.output
    assert mine.read_text() == "# my own\n"


def test_a_fitted_study_is_written_whole_or_not_at_all(folder):
    with pytest.raises(StoreError, match=r"cannot be written: .*name another place with -o"):
        write_study(folder / "none" / "x.toml", "text")
    target = folder / "whole.toml"
    write_study(target, "text")
    assert target.read_text() == "text"
    assert not list(folder.glob(".whole*"))


def test_values_that_cannot_be_written_back_are_refused_before_solving(folder, monkeypatch):
    table = 'arm = "76 mm"\nwidth = "8 mm"\n'
    inline = STUDY.replace(f"[values]\n{table}", "")
    assert inline != STUDY
    values = 'values = { arm = "76 mm", width = "8 mm" }\n'
    (folder / "inline.toml").write_text(inline.replace("[[strip]]", f"{values}[[strip]]", 1))
    monkeypatch.setattr("simkit.cli.fit.fitted", None)
    words = ["fit", str(folder / "inline.toml"), str(folder / "build.s1p")]
    done = CliRunner().invoke(main, [*words, "--free", "arm=72 mm..79 mm"])
    assert done.exit_code == 2
    assert "does not stand alone on a line" in done.output


def test_bounds_that_make_no_antenna_are_told(folder):
    done = run(folder, "fit", "--free", "arm=-1 mm..77 mm")
    assert done.exit_code == 2
    assert "not every antenna within the bounds (arm from -1 mm to 77 mm)" in done.output


@pytest.mark.long
def test_repeats_of_one_name_get_pictures_of_their_own(folder):
    (folder / "again").mkdir()
    shutil.copy(folder / "build.s1p", folder / "again" / "build.s1p")
    words = ["fit", str(folder / "gauge.toml"), str(folder / "build.s1p")]
    words += [str(folder / "again" / "build.s1p"), "--free", "arm=72 mm..79 mm"]
    done = CliRunner().invoke(main, [*words, "--plots", str(folder / "both"), "--csv"])
    assert done.exit_code == 0, done.output
    names = {path.name for path in (folder / "both").iterdir()}
    assert {"fit_build_1.png", "fit_build_2.png"} <= names
