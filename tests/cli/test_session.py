"""From a study file to pictures and a comparison, by the commands alone.

The study has two cases with a solution and one whose strip crosses itself.
"""

from __future__ import annotations

import csv
import io
import json
import shutil
from collections.abc import Callable
from pathlib import Path

import pytest

import simkit
from simkit.cli.run import show_comparisons

from .hook import SCALE, STUDY, Session

PLOTS = ("geometry", "impedance", "reflection", "smith", "current", "pattern", "tracks")


def test_run_goes_on_past_a_refused_case_and_exits_non_zero(session: Session) -> None:
    assert session.first.exit_code == 1, session.first.output
    out = session.first.stdout
    assert "2 solved, 1 refused (0 reused)" in out
    assert f"simkit modes {session.results}" in out
    (line,) = [line for line in out.splitlines() if line.split()[:2] == ["2", "refused"]]
    assert "hook" in line
    assert line.endswith("(hook.toml:7)")  # the table of the strip


def test_run_draws_every_picture_and_names_it(session: Session) -> None:
    for name in PLOTS:
        path = session.results / "plots" / f"{name}.png"
        assert path.read_bytes().startswith(b"\x89PNG")
        assert f"{path}:" in session.first.stdout


def test_the_same_run_again_solves_nothing(session: Session) -> None:
    words = ("run", session.study, "--results", session.results.parent, "--workers", "1")
    again = session.simkit(*words)
    assert again.exit_code == 1
    assert "2 solved, 1 refused (3 reused)" in again.stdout
    assert "0 to solve" in again.stderr


def test_status(session: Session) -> None:
    text = session.simkit("status", session.results)
    assert text.exit_code == 0
    assert "3 cases: 2 solved, 1 refused" in text.stdout
    data = json.loads(session.simkit("status", session.results, "--json").stdout)
    assert data["title"] == "Hook on the gauge mast"
    assert data["counts"]["solved"] == 2
    assert [(r["case"], r["status"]) for r in data["remarks"]] == [(2, "refused")]
    assert data["remarks"][0]["reason"].endswith("(study.toml:7)")
    assert data["running"] is False


def test_modes_json_is_the_contract(session: Session) -> None:
    result = session.simkit("modes", session.results, "--json")
    rows = json.loads(result.stdout, parse_constant=pytest.fail)
    assert [row["case"] for row in rows] == [0, 1, 2]
    assert [row["status"] for row in rows] == ["solved", "solved", "refused"]
    assert [row["values"] for row in rows] == [{"lift": 0.01}, {"lift": 0.014}, {"lift": -0.012}]
    for row in rows[:2]:
        assert row["solves"] > 3
        assert [mode["half_waves"] for mode in row["modes"]][:2] == [1, 2]
        frequencies = [mode["frequency_hz"] for mode in row["modes"]]
        assert frequencies == sorted(frequencies)
        assert all(mode["q"] > 0 for mode in row["modes"])
        assert {"frequency_hz", "return_loss_db"} <= set(row["dips"][0])
        for resonance in row["resonances"]:
            assert resonance["kind"] in {"series", "parallel"}
            assert resonance["resistance_ohm"] > 0
    assert rows[2]["modes"] == rows[2]["resonances"] == rows[2]["dips"] == []
    assert "reason" in rows[2]


def test_modes_in_python_are_the_same_rows(session: Session) -> None:
    printed = json.loads(session.simkit("modes", session.results, "--json").stdout)
    assert simkit.modes(session.results) == printed
    assert simkit.modes(simkit.open_results(session.results)) == printed


def test_a_shorter_hook_rings_higher(session: Session) -> None:
    # lift is where the last leg ends, coming from y = 30 mm: more lift is less metal.
    longer, shorter, _ = simkit.modes(session.results)
    for low, high in zip(longer["modes"], shorter["modes"], strict=False):
        assert low["frequency_hz"] < high["frequency_hz"]


def test_modes_table_shows_the_unit_of_the_study(session: Session) -> None:
    lines = session.simkit("modes", session.results).stdout.splitlines()
    assert lines[0].split()[:3] == ["case", "lift", "status"]
    assert "10 mm" in lines[2]
    assert "1/2 wave" in lines[2]


def test_modes_csv_has_one_line_per_mode(session: Session) -> None:
    rows = list(
        csv.DictReader(io.StringIO(session.simkit("modes", session.results, "--csv").stdout))
    )
    counts = [len(row["modes"]) or 1 for row in simkit.modes(session.results)]
    assert len(rows) == sum(counts)
    assert float(rows[0]["lift_m"]) == 0.01
    assert rows[-1]["status"] == "refused"
    assert rows[-1]["frequency_hz"] == ""


def test_modes_of_one_case(session: Session) -> None:
    rows = json.loads(session.simkit("modes", session.results, "--case", "1", "--json").stdout)
    assert [row["case"] for row in rows] == [1]
    missing = session.simkit("modes", session.results, "--case", "7")
    assert missing.exit_code == 2
    assert "hold the cases 0 to 2" in missing.stderr


def test_json_and_csv_exclude_each_other(session: Session) -> None:
    result = session.simkit("modes", session.results, "--json", "--csv")
    assert result.exit_code == 2
    assert "exclude each other" in result.stderr


def test_plot_of_one_case_into_a_file(session: Session, tmp_path: Path) -> None:
    target = tmp_path / "current.svg"
    result = session.simkit("plot", session.results, "current", "--case", "1", "-o", target)
    assert result.exit_code == 0, result.output
    assert "<svg" in target.read_text("utf-8")
    assert str(target) in result.stderr


def test_plot_goes_to_the_results_folder(session: Session) -> None:
    result = session.simkit("plot", session.results, "geometry", "--case", "0")
    assert result.exit_code == 0, result.output
    assert (session.results / "plots" / "geometry_case_0.png").is_file()


@pytest.mark.parametrize(
    ("words", "status", "text"),
    [
        (("tracks", "--case", "1"), 2, "leave --case out"),
        (("smith", "--by", "lift"), 2, "--by belongs to tracks"),
        (("photo",), 2, "'photo' is not one of 'geometry'"),
        (("smith", "--case", "9"), 1, "case 9 is not in these results"),
    ],
    ids=["case", "by", "kind", "number"],
)
def test_plot_refuses(session: Session, words: tuple[str, ...], status: int, text: str) -> None:
    result = session.simkit("plot", session.results, *words)
    assert result.exit_code == status
    assert text in result.stderr


def test_compare_prints_one_line_per_mode(session: Session, measured: Path) -> None:
    result = session.simkit("compare", session.results, measured, "--case", "1")
    assert result.exit_code == 0, result.output
    lines = [line for line in result.stdout.splitlines() if "wave " in line]
    modes = simkit.modes(session.results)[1]["modes"]
    assert len(lines) == len(modes)
    for line, mode in zip(lines, modes, strict=True):
        assert f"{mode['frequency_hz'] / 1e6:.1f}" in line
    assert (session.results / "plots" / "compare_hook_build.png").is_file()


def test_compare_json_finds_the_case_and_the_ratio(session: Session, measured: Path) -> None:
    words = ("compare", session.results, measured, "--case", "1", "--json")
    rows = json.loads(session.simkit(*words).stdout)
    ratios = [row["measured_over_simulated"] for row in rows if row["measured_over_simulated"]]
    assert {row["case"] for row in rows} == {1}
    # The file is case 1 stretched; the dips are found anew on curves of 20 MHz steps.
    assert ratios == pytest.approx([SCALE] * len(ratios), abs=5e-4)
    assert ratios


def test_compare_says_what_is_wrong_with_a_file(session: Session, tmp_path: Path) -> None:
    empty = tmp_path / "empty.s1p"
    empty.write_text("", "utf-8")
    result = session.simkit("compare", session.results, empty)
    assert result.exit_code == 2
    assert str(empty) in result.stderr
    assert "Traceback" not in result.output


def test_one_picture_name_for_two_files_is_refused(session: Session, measured: Path) -> None:
    result = session.simkit("compare", session.results, measured, measured, "-o", "both.png")
    assert result.exit_code == 2
    assert "-o names one picture" in result.stderr


def test_a_run_compares_with_the_files_its_study_names(
    session: Session, measured: Path, tmp_path: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    study = tmp_path / "hook.toml"
    named = f'\n[[measured]]\nfile = "{measured}"\nlift = "14 mm"\n'
    study.write_text(STUDY + named + '\n[[measured]]\nfile = "later.s1p"\n', "utf-8")
    dataset = simkit.open_results(session.results)
    trouble = show_comparisons(dataset, simkit.load_study(study), tmp_path)
    printed = capsys.readouterr()
    assert not trouble
    assert "beside case 1 (lift 14 mm)" in printed.out
    assert "later.s1p is not there yet" in printed.err
    assert (tmp_path / "plots" / "compare_hook_build.png").is_file()


def test_a_measured_file_that_cannot_be_used_is_trouble(
    session: Session, tmp_path: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    (tmp_path / "torn.s1p").write_text("# Hz S RI R 50\n1e9 0.5\n", "utf-8")
    study = tmp_path / "hook.toml"
    study.write_text(STUDY + '\n[[measured]]\nfile = "torn.s1p"\n', "utf-8")
    dataset = simkit.open_results(session.results)
    assert show_comparisons(dataset, simkit.load_study(study), tmp_path)
    assert "torn.s1p:2" in capsys.readouterr().err


def test_a_folder_of_another_study_is_left_alone(session: Session, tmp_path: Path) -> None:
    other = tmp_path / "hook.toml"
    other.write_text(STUDY.replace("Hook on the gauge mast", "Another hook"), "utf-8")
    before = sorted((p, p.stat().st_mtime_ns) for p in session.results.rglob("*"))
    for command in ("run", "check"):
        result = session.simkit(command, other, "--results", session.results.parent)
        assert result.exit_code == 1
        assert "holds the results of another study" in result.stderr
    assert sorted((p, p.stat().st_mtime_ns) for p in session.results.rglob("*")) == before


def test_every_problem_of_a_study_is_printed(session: Session, tmp_path: Path) -> None:
    broken = tmp_path / "broken.toml"
    text = STUDY.replace('at = "20 mm"', 'at = "20 GHz"').replace("points", "pionts")
    broken.write_text(text, "utf-8")
    for command in ("check", "run"):
        result = session.simkit(command, broken)
        assert result.exit_code == 2
        assert "broken.toml:15: feed.at" in result.stderr
        assert "broken.toml:20: frequency.pionts" in result.stderr
        assert "Traceback" not in result.output


@pytest.mark.parametrize("command", ["status", "modes"])
def test_a_folder_without_results(session: Session, tmp_path: Path, command: str) -> None:
    result = session.simkit(command, tmp_path)
    assert result.exit_code == 1
    assert "simkit run STUDY" in result.stderr


def torn(chunk: Path) -> None:
    chunk.write_bytes(chunk.read_bytes()[: chunk.stat().st_size // 2])


def flipped(chunk: Path) -> None:
    content = bytearray(chunk.read_bytes())
    content[len(content) // 3] ^= 0x55
    chunk.write_bytes(content)


READERS = {
    "modes": ("impedance", "DIR", "--json"),
    "query": ("impedance", "DIR", "worst_vswr in 1 GHz .. 1.1 GHz < 99"),
    "compare": ("impedance", "DIR", "MEASURED", "--case", "0"),
    "export": ("impedance", "DIR", "--to", "csv", "--curves", "-o", "OUT"),
    "status": ("reason", "DIR"),
    "match": ("current", "DIR", "--from", "1 GHz", "--to", "1.1 GHz", "--case", "0"),
    "fit": ("status", "STUDY", "MEASURED", "--free", "lift=11 mm..13 mm", "--results", "DIR"),
    "trim": (
        "status", "STUDY", "MEASURED", "--mode", "1/2", "--target", "1 GHz", "--by", "lift",
        "--results", "DIR",
    ),
}  # fmt: skip
"""The array that is damaged, and what is asked."""


@pytest.mark.parametrize("damage", [torn, flipped, Path.unlink])
@pytest.mark.parametrize("command", READERS)
def test_every_command_that_reads_results_names_the_damaged_cases(
    session: Session, tmp_path: Path, command: str, damage: Callable[[Path], None]
) -> None:
    copy, out = tmp_path / "hook", tmp_path / "out.csv"
    shutil.copytree(session.results, copy)
    # What is gone without a trace is missed where every solved case has something.
    array = "impedance" if damage is Path.unlink else READERS[command][0]
    chunk = min((copy / "store.zarr" / array).glob("c.*"))
    damage(chunk)
    measured = tmp_path / "build.s1p"
    rows = "".join(f"{k}e7 0.5 0.1\n" for k in range(60, 260))
    measured.write_text(f"# Hz S RI R 50\n{rows}")
    named = {"MEASURED": measured, "STUDY": session.study, "DIR": copy, "OUT": out}
    done = session.simkit(command, *(named.get(word, word) for word in READERS[command][1:]))
    assert done.exit_code == 1, done.output
    number = chunk.name.split(".")[1]  # every case is a block of its own
    assert done.stderr == (
        f"simkit: {copy}: damaged, the results of these cases cannot be read: {number}; "
        "simkit run STUDY --retry solves them anew\n"
    )
    assert not out.exists()


def test_damaged_results_are_named_with_the_way_out(session: Session, tmp_path: Path) -> None:
    copy = tmp_path / "hook"
    shutil.copytree(session.results, copy)
    (chunk,) = (copy / "store.zarr" / "impedance").glob("c.0*")
    chunk.write_bytes(b"torn")
    words = "the results of these cases cannot be read: 0; simkit run STUDY --retry solves them"
    drawn = session.simkit("plot", copy, "impedance", "-o", tmp_path / "impedance.png")
    again = session.simkit("run", session.study, "--results", tmp_path, "--workers", "1")
    for failed in (drawn, again):
        assert failed.exit_code == 1
        assert words in failed.stderr
