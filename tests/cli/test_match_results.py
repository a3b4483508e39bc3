"""``simkit match`` on results: which case, lines of the study, and the matched study it writes."""

from __future__ import annotations

import json
import os
import shutil
from pathlib import Path

import numpy as np
import pytest
from click.testing import CliRunner, Result

import simkit
from simkit.cli import main
from simkit.response.features import reflection
from simkit.study import load_study

STUDY = """\
# A dipole on the gauge's pole, too short for its band.
title = "Creek gauge link"

[values]
arm = "76 mm"   # cut from one strip
width = "8 mm"

[[strip]]
name = "east"
path = [["1 mm", "0 mm"], ["1 mm + arm", "0 mm"]]
width = "width"

[[strip]]
name = "west"
mirror = "east"

[metal]
material = "brass"
thickness = "0.15 mm"

[feed]
from = "west.start"
to = "east.start"

[[measured]]    # its build
file = "build.s1p"
arm = "75.8 mm"

[frequency]
start = "700 MHz"
stop = "1050 MHz"
points = 71

[sweep]
arm = ["76 mm", "73 mm"]
"""
BAND = ("--from", "850 MHz", "--to", "880 MHz")
START_HZ, STOP_HZ = 850e6, 880e6
PAIR = "two-strips, width=5 mm, separation=2 mm"


@pytest.fixture(scope="module")
def solved(tmp_path_factory) -> Path:
    folder = tmp_path_factory.mktemp("match")
    (folder / "gauge.toml").write_text(STUDY, "utf-8")
    (folder / "build.s1p").write_text(
        "# MHz S RI R 50\n" + "".join(f"{f} 0.1 0.2\n" for f in range(800, 900, 5)), "ascii"
    )
    simkit.run(load_study(folder / "gauge.toml"), results=folder / "results", workers=1)
    return folder


@pytest.fixture
def folder(solved, tmp_path, monkeypatch) -> Path:
    """A copy one may write into, as the current folder."""
    shutil.copytree(solved, tmp_path, dirs_exist_ok=True)
    monkeypatch.chdir(tmp_path)
    monkeypatch.setattr("simkit.cli.match.draw_network", lambda *_: None)
    return tmp_path


def run(*words: str | Path) -> Result:
    return CliRunner().invoke(main, ["match", *map(str, words)])


def data(*words: str | Path):
    done = run(*words, "--json")
    assert done.exit_code == 0, done.output
    return json.loads(done.stdout)


def test_the_case_nearest_to_the_drawing_is_taken_unless_one_is_named(folder):
    one = data("results/gauge", *BAND, "--kind", "single part")
    other = data("gauge.toml", *BAND, "--kind", "single part", "--case", "1")
    assert (one["case"], other["case"]) == (0, 1)
    assert one["plane"] == "feed"
    # Shorter arms: more capacitance.
    reactance = [found["impedance"][1]["reactance_ohm"] for found in (one, other)]
    assert reactance[1] < reactance[0] < 0
    said = run("results/gauge", *BAND, "--kind", "single part", "--case", "1").stdout
    assert said.startswith("results/gauge, case 1: arm 73 mm\nimpedance at the feed: ")
    stored = simkit.open_results("results/gauge").sel(case=0)["impedance"]
    assert one["impedance"][1]["resistance_ohm"] == pytest.approx(
        float(stored.sel(frequency=865e6).real), rel=1e-9
    )


def worst_db(results: Path, case: int) -> float:
    """Smallest return loss at the connector over the band, from the store alone."""
    chosen = simkit.open_results(results).sel(case=case, frequency=slice(START_HZ, STOP_HZ))
    gamma = reflection(chosen["impedance_at_connector"].values, 50.0)
    return float(-20 * np.log10(np.abs(gamma).max()))


def test_the_written_study_keeps_its_promise_when_it_is_solved(folder):
    done = run("gauge.toml", *BAND, "--kind", "quarter-wave", "--line", PAIR, "--write", "1")
    assert done.exit_code == 0, done.output
    promised = float(done.stderr.split("as written: at least ")[1].split(" dB")[0])
    assert promised > 20
    text = (folder / "gauge_matched.toml").read_text("utf-8")
    for line in STUDY.splitlines():
        assert line in text  # measured builds as comments, the rest as it was
    study = load_study(folder / "gauge_matched.toml")
    assert study.measured == ()
    upper, lower = study.nominal().feedline
    assert (upper.line.width_m, upper.line.distance_m) == (5e-3, 2e-3)
    assert upper.line.conductivity_s_per_m == 1.5e7  # the study's brass
    for length in (upper.length_m, lower.length_m, lower.line.width_m):
        assert length * 1e4 == pytest.approx(round(length * 1e4), abs=1e-6)
    simkit.run(study, results=folder / "results", workers=1)
    # The store has a frequency every 5 MHz, and the promise is given to a tenth of a decibel.
    assert worst_db(folder / "results/gauge_matched", 0) == pytest.approx(promised, abs=0.1)
    assert worst_db(folder / "results/gauge_matched", 1) < promised - 3

    # Once more: what is there stays, and the new network comes behind it.
    again = run("gauge_matched.toml", *BAND, "--line", "match_line", "--write", "1")
    assert again.exit_code == 0, again.output
    assert "impedance at the connector: " in again.stdout
    before = float(again.stdout.split("without a network at least ")[1].split(" dB")[0])
    assert before == pytest.approx(promised, abs=0.1)
    more = load_study(folder / "gauge_matched_matched.toml").nominal().feedline
    assert more[:2] == (upper, lower)
    assert len(more) > 2
    assert len({item.name for item in more}) == len(more)
    refused = run("gauge_matched.toml", *BAND, "--plane", "feed", "--write", "1", "-o", "x.toml")
    assert refused.exit_code == 2
    assert "has a feed line already" in refused.output
    assert not (folder / "x.toml").exists()


def test_a_network_for_another_case_takes_its_values_along(folder):
    words = ("--kind", "L-section", "--case", "1", "--write", "1", "-o", "short.toml")
    done = run("results/gauge", *BAND, *words)
    assert done.exit_code == 0, done.output
    study = load_study(folder / "short.toml")
    assert study.values["arm"] == pytest.approx(73e-3)
    assert 'arm = "73 mm"  # matched here, was 76 mm; cut from one strip' in study.text
    assert "for arm 73 mm." in study.text
    first, second = study.nominal().feedline
    assert {first.connection, second.connection} == {"shunt", "series"}


def test_a_results_folder_writes_into_the_current_one(folder):
    done = run("results/gauge", *BAND, "--kind", "single part", "--write", "1")
    assert done.exit_code == 0, done.output
    assert (folder / "gauge_matched.toml").is_file()
    assert "next: simkit run gauge_matched.toml" in done.stderr


def test_lines_that_do_not_hold_over_the_whole_band_are_noted(folder):
    words = ("--kind", "quarter wave", "--line", "two-strips, width=40 mm, separation=20 mm")
    done = run("gauge.toml", *BAND, *words, "--write", "1")
    assert done.exit_code == 0, done.output
    assert (
        "note: a case with a mode there will be doubtful: two strips 40 mm wide, 20 mm apart"
        in done.stderr
    )
    assert "this is used up to 1050 MHz" in done.stderr


def test_nothing_is_overwritten(folder):
    (folder / "gauge_matched.toml").write_text("mine")
    for words in ((), ("-o", "gauge.toml")):
        done = run("gauge.toml", *BAND, "--kind", "single part", "--write", "1", *words)
        assert done.exit_code == 2
        assert "exists already and is left as it is" in done.output
        assert "rank" in done.stdout  # the table is there all the same
    assert (folder / "gauge_matched.toml").read_text() == "mine"
    assert (folder / "gauge.toml").read_text() == STUDY


def test_where_nothing_can_be_written(folder):
    words = ("gauge.toml", *BAND, "--kind", "single part", "--write", "1", "-o")
    done = run(*words, "no/such/folder/x.toml")
    assert done.exit_code == 2
    assert "cannot be written: No such file or directory" in done.output
    locked = folder / "locked"
    locked.mkdir(mode=0o500)
    if not os.access(locked, os.W_OK):  # the administrator may write everywhere
        done = run(*words, "locked/x.toml")
        assert "cannot be written: Permission denied" in done.output


def test_a_measured_file_gives_its_items_as_text(folder):
    words = ("build.s1p", *BAND, "--kind", "shunt stub", "--line", "50 ohm, 0.66", "--write", "1")
    done = run(*words)
    assert done.exit_code == 0, done.output
    items = done.stdout[done.stdout.index("# Matching network") :]
    assert "measured in build.s1p" in items
    whole = folder / "with_items.toml"
    whole.write_text(STUDY + items)
    first, second = load_study(whole).nominal().feedline
    assert (first.name, second.name) == ("match_line", "match_stub")
    assert second.line is first.line or second.line == first.line
    assert 'like       = "match_line"' in items
    to_file = run(*words, "-o", "items.toml", "--csv")
    assert to_file.exit_code == 0
    assert (folder / "items.toml").read_text() == items.strip() + "\n"
    refused = run(*words, "--json")
    assert refused.exit_code == 2
    assert "give -o FILE too" in refused.output


@pytest.mark.parametrize(
    ("words", "said"),
    [
        (("results/gauge", "--from", "600 MHz", "--to", "870 MHz"), "solved from 700 MHz"),
        (("results/gauge", *BAND, "--case", "7"), "case 7 is not in these results"),
        (("results/gauge", *BAND, "--port", "1"), "a port is chosen in a Touchstone file"),
        (("results/gauge", *BAND, "--extension", "12 mm"), "for measured sweeps only"),
        (("results/gauge", *BAND, "--write", "99"), "--write 99: there are"),
        (("results/gauge", *BAND, "-o", "x.toml"), "give both"),
        (("results/gauge", *BAND, "--line", "pair"), "give an impedance"),
        (("nothing.toml", *BAND), "does not exist"),
    ],
)
def test_bad_requests_are_refused_with_a_sentence(folder, words, said):
    done = run(*words)
    assert done.exit_code in (1, 2)
    assert said in done.output
    assert "Traceback" not in done.output


def test_a_study_that_is_not_solved_or_has_changed(folder):
    shutil.copy("gauge.toml", "other.toml")
    done = run("other.toml", *BAND)
    assert done.exit_code == 2
    assert "is not solved: results/other holds no results" in done.output
    (folder / "gauge.toml").write_text(STUDY.replace("8 mm", "9 mm"))
    done = run("gauge.toml", *BAND)
    assert done.exit_code == 2
    assert "has changed since results/gauge was made" in done.output


def test_the_verb_takes_what_python_has(folder):
    results = simkit.open_results("results/gauge")
    measured = simkit.read_touchstone("build.s1p")
    kinds = ("single part",)
    by_name = simkit.match("results/gauge", START_HZ, STOP_HZ, case=1, kinds=kinds)
    by_data = simkit.match(results, START_HZ, STOP_HZ, case=1, kinds=kinds)
    one_case = simkit.match(results.sel(case=1), START_HZ, STOP_HZ, kinds=kinds)
    assert by_name.as_rows() == by_data.as_rows() == one_case.as_rows()
    files = [simkit.match(x, START_HZ, STOP_HZ, kinds=kinds) for x in ("build.s1p", measured)]
    assert files[0].as_rows() == files[1].as_rows()
    with pytest.raises(simkit.FeedlineError, match="a measured sweep has none"):
        simkit.match(measured, START_HZ, STOP_HZ, case=1)
    with pytest.raises(simkit.FeedlineError, match=r"gauge\.toml is a study: solve it"):
        simkit.match("gauge.toml", START_HZ, STOP_HZ)
