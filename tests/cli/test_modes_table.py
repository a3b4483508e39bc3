"""The table of `simkit modes`, from rows made here."""

from __future__ import annotations

from typing import Any

from simkit.cli.modes import cabled, lossy, modes_table


def row(case: int, *efficiencies: float) -> dict[str, Any]:
    modes = [
        {
            "half_waves": n,
            "frequency_hz": n * 0.9e9,
            "q": 4.2,
            "frequency_error": 0.0012,
            "peak_gain_dbi": 1.23,
            "directivity_dbi": 2.19,
            "efficiency": efficiency,
        }
        for n, efficiency in enumerate(efficiencies, start=1)
    ]
    return {"case": case, "status": "solved", "values": {"arm": 0.07}, "modes": modes}


def test_where_power_is_lost_directivity_and_efficiency_are_shown() -> None:
    rows = [row(0, 1.0, 0.8017), row(1)]
    assert lossy(rows)
    head, _, first, second, empty = modes_table(rows, {"arm": "mm"}).splitlines()
    assert head.split()[-3:] == ["gain", "directivity", "efficiency"]
    assert first.split()[-5:] == ["dBi", "2.2", "dBi", "100.0", "%"]
    assert second.split()[-6:] == ["1.2", "dBi", "2.2", "dBi", "80.2", "%"]
    assert empty.split() == ["1", "70", "mm", "solved", "-"]


def test_why_a_case_has_no_modes_stands_under_the_table() -> None:
    refused = row(1) | {"status": "refused", "reason": "strip 'a' crosses itself"}
    lines = modes_table([row(0, 1.0), refused], {"arm": "mm"}).splitlines()
    assert lines[3].split() == ["1", "70", "mm", "refused", "-"]
    assert lines[4:] == ["", "case 1: refused: strip 'a' crosses itself"]


def test_without_losses_the_gain_says_it_all() -> None:
    rows = [row(0, 1.0, 0.9998)]
    assert not lossy(rows)
    assert modes_table(rows, {"arm": "mm"}).splitlines()[0].split()[-1] == "gain"


def test_modes_of_which_nothing_is_known_lose_nothing() -> None:
    only = {"half_waves": 1, "frequency_hz": 1e9}
    rows = [{"case": 0, "status": "solved", "values": {}, "modes": [only]}]
    assert not lossy(rows)
    assert "-" in modes_table(rows, {})


def test_what_flows_on_the_cable_is_shown_where_there_is_one() -> None:
    rows = [row(0, 1.0, 1.0)]
    assert not cabled(rows)
    rows[0]["modes"][0] |= {"on_cable": 0.042, "cable_current_db": -4.9}
    rows[0]["modes"][1] |= {"on_cable": 0.65, "half_waves": None}
    assert cabled(rows)
    head, _, first, second = modes_table(rows, {"arm": "mm"}).splitlines()
    assert head.split()[-3:] == ["cable", "on", "it"]
    assert first.split()[-4:] == ["-4.9", "dB", "4", "%"]
    assert second.split()[-3:] == ["-", "65", "%"]
    assert "cable mode" in second


def test_behind_a_feed_line_what_it_takes_is_shown() -> None:
    rows = [row(0, 1.0, 1.0)]
    rows[0]["modes"][0] |= {"network_efficiency": 0.912, "realised_gain_dbi": 0.6}
    head, _, first, second = modes_table(rows, {"arm": "mm"}, feedline=True).splitlines()
    assert head.split()[-3:] == ["gain", "network", "realised"]
    assert first.split()[-6:] == ["1.2", "dBi", "91.2", "%", "0.6", "dBi"]
    assert second.split()[-4:] == ["1.2", "dBi", "-", "-"]
    assert "network" not in modes_table(rows, {"arm": "mm"})
