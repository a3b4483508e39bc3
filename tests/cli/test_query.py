"""``simkit query`` and ``simkit export`` as typed, on a made-up store."""

from __future__ import annotations

import csv
import io
import json
import re
from pathlib import Path
from typing import Any

import pytest
from click.testing import CliRunner, Result

from simkit.cli import main, patience
from simkit.cli.query import quantities_text
from simkit.finding.quantities import quantity_rows

README = Path(__file__).resolve().parents[2] / "README.md"


def simkit(*words: object) -> Result:
    return CliRunner().invoke(main, [str(word) for word in words])


def test_table_shows_swept_values_status_and_what_the_condition_names(creek_results: Path) -> None:
    result = simkit("query", creek_results, "dip of 1/2 wave within 850 MHz .. 860 MHz")
    assert result.exit_code == 0, result.output
    head, _, *lines = result.stdout.splitlines()
    assert re.split(r"  +", head) == [
        "case",
        "arm",
        "width",
        "carrier.infill",
        "status",
        "dip of 1/2 wave",
    ]
    assert re.split(r"  +", lines[0].strip())[:3] == ["1", "70 mm", "8 mm"]
    assert lines[1].endswith("860.0 MHz")
    assert lines[-1] == "2 of 14 cases"


def test_unquoted_words_are_one_condition(creek_results: Path) -> None:
    words = "dip of 1/2 wave within 850 MHz .. 860 MHz"
    assert (
        simkit("query", creek_results, *words.split()).stdout
        == simkit("query", creek_results, words).stdout
    )


def test_json_has_si_numbers_and_null_for_what_is_missing(creek_results: Path) -> None:
    result = simkit(
        "query", creek_results, "case within 4 .. 5", "--show", "dip of 1/2 wave", "--json"
    )
    first, second = json.loads(result.stdout)
    assert first["case"] == 4
    assert first["values"]["arm"] == pytest.approx(0.074, rel=1e-12)
    assert first["quantities"] == {"dip_of_1/2_wave_hz": 880e6}
    assert second["quantities"] == {"dip_of_1/2_wave_hz": None}


def test_csv_names_units_and_keeps_its_head_without_cases(creek_results: Path) -> None:
    words = ("query", creek_results, "--csv", "--show", "gain of 1/2 wave")
    rows = list(csv.DictReader(io.StringIO(simkit(*words, "case = 4").stdout)))
    assert float(rows[0]["gain_of_1/2_wave_dbi"]) == 2.14
    assert rows[0]["status"] == "solved"
    empty = simkit(*words, "case = 99").stdout
    assert empty.strip().split(",") == list(rows[0])


def test_sorted_with_the_missing_at_last(creek_results: Path) -> None:
    words = ("query", creek_results, "case > 2 and case < 7", "--sort", "q of 1/2 wave", "--json")
    assert [row["case"] for row in json.loads(simkit(*words).stdout)] == [4, 5, 6, 3]
    down = json.loads(simkit(*words, "--descending", "--first", "2").stdout)
    assert [row["case"] for row in down] == [6, 5]


def test_without_a_condition_every_case_is_listed(creek_results: Path) -> None:
    result = simkit("query", creek_results, "--first", "3")
    assert result.stdout.splitlines()[-1] == "14 of 14 cases; 3 shown"


def test_a_bad_condition_is_an_error_of_usage_with_a_caret(creek_results: Path) -> None:
    result = simkit("query", creek_results, "dp of 1/2 wave < 880 MHz")
    assert result.exit_code == 2
    assert result.stderr.splitlines()[-2:] == ["  dp of 1/2 wave < 880 MHz", "  ^^"]
    assert simkit("query", creek_results, "--show", "gian of 1 wave").exit_code == 2
    assert "belongs to --sort" in simkit("query", creek_results, "--descending").stderr


def test_the_list_of_quantities_is_one_and_the_same(creek_results: Path) -> None:
    printed = simkit("query", "--quantities")
    assert printed.exit_code == 0
    assert printed.stdout.rstrip() == quantities_text()
    help_lines = [line.strip() for line in simkit("query", "--help").stdout.splitlines()]
    for line in quantities_text().splitlines():
        assert line.strip() in help_lines
    table = [
        f"| `{row['quantity']}` | {row['unit']} | {row['meaning']} |" for row in quantity_rows()
    ]
    assert "\n".join(table) in README.read_text("utf-8")


def test_every_condition_of_the_readme_is_understood(creek_results: Path) -> None:
    text = README.read_text("utf-8")
    conditions = re.findall(r"simkit query \S+ '([^']+)'", text)
    conditions += re.findall(r"--where '([^']+)'", text)
    assert len(conditions) >= 4
    for condition in conditions:
        assert simkit("query", creek_results, condition).exit_code == 0, condition


def test_the_python_of_the_readme_runs_and_xarray_agrees(
    creek_results: Path, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    blocks = re.findall(r"^```python\n(.*?)^```$", README.read_text("utf-8"), re.M | re.S)
    (block,) = [text for text in blocks if "simkit.query" in text]
    (tmp_path / "results").mkdir()
    (tmp_path / "results" / "creek_gauge").symlink_to(creek_results)
    monkeypatch.chdir(tmp_path)
    names: dict[str, Any] = {}
    exec(block, names)
    # 868 MHz and 2 %: dips at 860, 880 MHz; 870 MHz is the refused case.
    assert names["chosen"]["case"].values.tolist() == [2, 4]
    assert names["same"].equals(names["chosen"])
    assert len(list((tmp_path / "for_the_bench").iterdir())) == 2


def test_export_says_what_it_wrote_and_left_out(creek_results: Path, tmp_path: Path) -> None:
    words = ("export", creek_results, "--to", "touchstone", "-o", tmp_path / "bench")
    result = simkit(*words, "--case", 2, "--case", 3)
    assert result.exit_code == 0, result.output
    assert "1 case)" in result.stderr
    assert "1 case without a solution is left out" in result.stderr
    assert (tmp_path / "bench" / "creek_gauge_case_0002.s1p").is_file()
    again = simkit(*words, "--case", 2)
    assert again.exit_code == 1
    assert "is there already" in again.stderr
    assert simkit(*words, "--case", 2, "--overwrite").exit_code == 0


def test_export_where(creek_results: Path, tmp_path: Path) -> None:
    target = tmp_path / "m.csv"
    words = ("export", creek_results, "--to", "csv", "-o", target, "--where", "case = 4")
    assert simkit(*words).exit_code == 0
    assert len(target.read_text("utf-8").splitlines()) == 4


@pytest.mark.parametrize(
    ("words", "message"),
    [
        (("--to", "csv", "--case", "1", "--where", "case = 1"), "exclude each other"),
        (("--to", "netcdf", "--curves"), "--curves belongs to --to csv"),
        (("--to", "csv", "--only", "mode_q"), "--only belongs to --to netcdf"),
        (("--to", "csv", "--case", "99"), "hold the cases 0 to 13"),
        (("--to", "photo"), "'photo' is not one of"),
    ],
)
def test_export_refuses(
    creek_results: Path, tmp_path: Path, words: tuple[str, ...], message: str
) -> None:
    result = simkit("export", creek_results, "-o", tmp_path / "x", *words)
    assert result.exit_code == 2
    assert message in result.stderr
    assert not list(tmp_path.iterdir())


def test_an_interrupted_export_says_that_nothing_was_written(
    creek_results: Path, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    from simkit.exports import tables

    def interrupt(*args: object) -> None:
        raise KeyboardInterrupt

    monkeypatch.setattr(tables, "_mode_columns", interrupt)
    result = simkit("export", creek_results, "--to", "csv", "-o", tmp_path / "m.csv")
    assert result.exit_code == 130
    assert "stopped; nothing was written to" in result.stderr
    assert not list(tmp_path.iterdir())


def test_progress_speaks_only_after_a_while(capsys: pytest.CaptureFixture[str]) -> None:
    with patience.patiently(10) as seen:
        seen(4)
        seen(10)
    assert capsys.readouterr().err == ""
    with patience.patiently(10, after_s=0.0) as seen:
        seen(4)
        seen(10)
    assert "10 of 10 cases" in capsys.readouterr().err
