from __future__ import annotations

import json
from pathlib import Path

import pytest

from simkit.cli import output


@pytest.mark.parametrize(
    ("frequency_hz", "text"),
    [
        (868.31e6, "868.3 MHz"),
        (2.4e9, "2.400 GHz"),
        (999.97e6, "1000 MHz"),
        (50.0, "50.00 Hz"),
        (float("nan"), "-"),
        (None, "-"),
    ],
)
def test_frequency_text(frequency_hz: float | None, text: str) -> None:
    assert output.frequency_text(frequency_hz) == text


@pytest.mark.parametrize(
    ("value", "digits", "text"),
    [(-1e-12, 3, "0.000 dB"), (-0.0, 1, "0.0 dB"), (-0.06, 1, "-0.1 dB"), (2.0, 0, "2 dB")],
)
def test_number_text_knows_no_negative_zero(value: float, digits: int, text: str) -> None:
    assert output.number_text(value, digits, "dB") == text


@pytest.mark.parametrize(
    ("value", "unit", "text"),
    [(0.0765, "mm", "76.5 mm"), (2.7, "1", "2.7"), (0.0254, "in", "1 in"), (9e8, "MHz", "900 MHz")],
)
def test_quantity_text(value: float, unit: str, text: str) -> None:
    assert output.quantity_text(value, unit) == text


@pytest.mark.parametrize(
    ("seconds", "text"), [(0.123, "0.12 s"), (42.4, "42 s"), (600.0, "10 min"), (7300.0, "2.0 h")]
)
def test_duration_text(seconds: float, text: str) -> None:
    assert output.duration_text(seconds) == text


@pytest.mark.parametrize(
    ("size", "text"), [(12, "12 B"), (3456, "3.46 kB"), (2.5e6, "2.5 MB"), (4e9, "4 GB")]
)
def test_size_text(size: float, text: str) -> None:
    assert output.size_text(size) == text


def test_table_aligns_numbers_right_and_words_left() -> None:
    text = output.table(["case", "status"], [["7", "solved"], ["12", "timed-out"]])
    assert text.splitlines() == [
        "case  status",
        "----  ---------",
        "   7  solved",
        "  12  timed-out",
    ]


def test_json_has_null_for_what_is_not_finite() -> None:
    text = output.json_text([{"q": float("nan"), "peaks": (1.5, float("inf"))}])
    assert json.loads(text) == [{"q": None, "peaks": [1.5, None]}]


def test_csv_unites_columns_and_leaves_unknown_cells_empty() -> None:
    text = output.csv_text([{"case": 0, "q": 4.5}, {"case": 1, "dip_hz": float("nan"), "on": None}])
    assert text.splitlines() == ["case,q,dip_hz,on", "0,4.5,,", "1,,,"]


def test_emit_writes_a_file(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    target = tmp_path / "modes.csv"
    output.emit("a,b\n1,2\n", str(target))
    assert target.read_text("utf-8") == "a,b\n1,2\n"
    printed = capsys.readouterr()
    assert printed.out == ""
    assert str(target) in printed.err
