"""``simkit match`` on one-port files: textbook examples end to end, and what is refused."""

from __future__ import annotations

import csv
import io
import json
import tomllib
from pathlib import Path

import numpy as np
import pytest
from click.testing import CliRunner, Result
from scipy.constants import c

from simkit.cli import main
from simkit.cli.match import KINDS
from simkit.feedline.candidates import MAKERS
from simkit.response.features import reflection

BOOKS = tomllib.loads(
    (Path(__file__).parents[1] / "published" / "networks_pozar.toml").read_text("utf-8")
)


def run(*words: str | Path) -> Result:
    return CliRunner().invoke(main, ["match", *map(str, words)])


def write_load(path: Path, frequency_hz, impedance_ohm, reference_ohm: float = 50.0) -> Path:
    gamma = reflection(np.asarray(impedance_ohm, dtype=complex), reference_ohm)
    rows = [
        f"{f:.1f} {g.real:.12f} {g.imag:.12f}" for f, g in zip(frequency_hz, gamma, strict=True)
    ]
    path.write_text("\n".join([f"# Hz S RI R {reference_ohm:g}", *rows, ""]), "ascii")
    return path


def textbook_file(folder: Path, load_ohm: complex, centre_hz: float, reference_ohm: float) -> Path:
    """A load as the book draws it: a resistor and the reactance's one part, in series."""
    f = np.linspace(0.9, 1.1, 41) * centre_hz
    growth = f / centre_hz if load_ohm.imag > 0 else centre_hz / f
    return write_load(folder / "load.s1p", f, load_ohm.real + 1j * load_ohm.imag * growth, 50.0)


def band(centre_hz: float, part: float = 0.01) -> tuple[str, ...]:
    low, high = centre_hz * (1 - part / 2), centre_hz * (1 + part / 2)
    return ("--from", f"{low:.0f} Hz", "--to", f"{high:.0f} Hz")


@pytest.fixture(autouse=True)
def without_pictures(monkeypatch, request):
    """They take longer than the design."""
    if "pictures" not in request.node.name:
        monkeypatch.setattr("simkit.cli.match.draw_network", lambda *_: None)


@pytest.fixture
def dipole(tmp_path) -> Path:
    """Somewhat like a dipole for 868 MHz, too short."""
    f = np.linspace(780e6, 960e6, 91)
    w = 2 * np.pi * f
    return write_load(tmp_path / "dipole.s1p", f, 68 + 1j * w * 55e-9 - 1j / (w * 0.52e-12))


BAND = ("--from", "853 MHz", "--to", "883 MHz")


@pytest.mark.parametrize("row", BOOKS["stub"], ids=lambda row: row["name"])
def test_textbook_stubs_come_out_of_the_command(tmp_path, row):
    """Pozar, examples 5.2 and 5.3, digits as printed; the book's frequency is 2 GHz."""
    centre = 2e9
    file = textbook_file(tmp_path, complex(*row["load_ohm"]), centre, 50.0)
    kind = f"{row['connection']} stub"
    done = run(file, *band(centre), "--kind", kind, "--exact", "--json", "--plots", tmp_path)
    assert done.exit_code == 0, done.output
    wave = c / centre
    found = sorted(
        (d["dimensions"][0]["value"] / wave, d["dimensions"][1]["value"] / wave)
        for d in json.loads(done.stdout)["designs"]
        if d["feedline"][1]["end"] == row["end"]
    )
    # Half of the last digit printed, and a little: the book takes one distance off a chart.
    assert [x for x, _ in found] == pytest.approx(row["distance"], abs=0.00065)
    assert [x for _, x in found] == pytest.approx(row["length"], abs=0.00065)


def test_textbook_l_section_comes_out_of_the_command(tmp_path):
    """Pozar, example 5.1: 200 - j100 ohm to 100 ohm at 500 MHz, two ways."""
    (row,) = BOOKS["l_section"]
    file = textbook_file(tmp_path, complex(*row["load_ohm"]), row["frequency_hz"], 50.0)
    ideal = ("--values", "any", "--exact", "--inductor-q", "inf", "--capacitor-q", "inf")
    words = ("--kind", "l-section", "--reference", "100 ohm", "--plots", tmp_path)
    done = run(file, *band(row["frequency_hz"]), *ideal, *words, "--json")
    assert done.exit_code == 0, done.output
    parts = {
        (design["feedline"][0]["kind"], item["kind"]): float(item["value"].split()[0])
        for design in json.loads(done.stdout)["designs"]
        for item in design["feedline"]
    }
    # The book computes the parts from b and x rounded to two places: 0.5 %.
    wanted = {
        ("capacitor", "capacitor"): row["capacitor_pf"][0],
        ("capacitor", "inductor"): row["inductor_nh"][0],
        ("inductor", "inductor"): row["inductor_nh"][1],
        ("inductor", "capacitor"): row["capacitor_pf"][1],
    }
    assert parts == pytest.approx(wanted, rel=0.005)


def test_table_bound_and_pictures(dipole):
    done = run(dipole, *BAND, "--most", "3")
    assert done.exit_code == 0, done.output
    lines = done.stdout.splitlines()
    assert lines[0] == str(dipole)
    assert lines[1].startswith("impedance at the plane of the measurement: 68.0 -")
    assert "match to 50 ohm from 853 MHz to 883 MHz; without a network" in done.stdout
    assert [line.split()[0] for line in lines if line[:4].strip().isdigit()] == ["1", "2", "3"]
    assert "As a series resonator of 68 ohm with Q 5.19 at 868 MHz" in done.stdout
    names = {path.name for path in (dipole.parent / "plots").iterdir()}
    assert names == {
        "match_dipole_path.png", "match_dipole_reflection.png", "match_dipole_schematic.png",
    }  # fmt: skip


def test_the_command_knows_every_kind():
    assert set(KINDS) == set(MAKERS)


def test_csv_and_json_agree(dipole):
    rows = list(csv.DictReader(io.StringIO(run(dipole, *BAND, "--csv").stdout)))
    data = json.loads(run(dipole, *BAND, "--json").stdout)
    assert len(rows) == len(data["designs"]) > 8
    for row, design in zip(rows, data["designs"], strict=True):
        assert row["kind"] == design["kind"]
        assert float(row["worst_return_loss_db"]) == design["worst_return_loss_db"]
    assert data["reference_ohm"] == 50.0
    assert data["impedance"][1]["resistance_ohm"] == pytest.approx(68.0)
    assert data["bound"]["kind"] == "series"
    assert data["case"] is None


def test_kinds_parts_and_lines_that_were_asked_for(dipole):
    words = ("--kind", "L-section", "--inductor-q", "25", "--tolerance", "2 %")
    data = json.loads(run(dipole, *BAND, *words, "--json").stdout)
    assert {d["kind"] for d in data["designs"]} == {"L-section"}
    assert {i["q"] for d in data["designs"] for i in d["feedline"]} == {25, 200}
    words = ("--kind", "tapped line", "--line", "two-strips, width=6 mm, separation=1.2 mm")
    data = json.loads(run(dipole, *BAND, *words, "--json").stdout)
    (item,) = data["designs"][0]["feedline"]
    assert (item["line"], item["width"], item["separation"]) == ("two-strips", "6 mm", "1.2 mm")
    words = ("--kind", "shunt-stub", "--line", "50 ohm, 0.66", "--stub-line", "75 ohm")
    data = json.loads(run(dipole, *BAND, *words, "--json").stdout)
    line, stub = data["designs"][0]["feedline"]
    assert (line["impedance"], line["velocity_factor"]) == ("50 ohm", 0.66)
    assert stub["impedance"] == "75 ohm"


def test_a_port_extension_moves_the_plane(dipole, tmp_path):
    """A file measured behind 100 mm of cable gives the same with the extension."""
    plain = json.loads(run(dipole, *BAND, "--kind", "single-part", "--json").stdout)
    rows = [line.split() for line in dipole.read_text().splitlines()[1:]]
    f = np.array([float(row[0]) for row in rows])
    gamma = np.array([complex(float(row[1]), float(row[2])) for row in rows])
    gamma = gamma * np.exp(-4j * np.pi * f * 0.1 * np.sqrt(2.1) / c)
    behind = write_load(tmp_path / "behind.s1p", f, 50 * (1 + gamma) / (1 - gamma))
    words = (*BAND, "--kind", "single-part", "--json")
    moved = json.loads(run(behind, *words, "--extension", "100 mm in 2.1").stdout)
    for one, other in zip(moved["designs"], plain["designs"], strict=True):
        assert one["feedline"] == other["feedline"]
        # The file has twelve digits, and a spline through more turns of phase.
        assert one["worst_return_loss_db"] == pytest.approx(other["worst_return_loss_db"], abs=1e-4)
    assert json.loads(run(behind, *words).stdout)["impedance"] != plain["impedance"]


def test_a_sweep_too_coarse_for_the_band_is_noted(dipole):
    """A point every 2 MHz."""
    done = run(dipole, "--from", "866 MHz", "--to", "870 MHz", "--kind", "single part")
    assert "note: only 3 points of the sweep lie in the band" in done.stdout
    assert "note: " not in run(dipole, *BAND, "--kind", "single part").stdout


def test_what_no_network_can_do_is_said(dipole):
    """Bode and Fano: pi/Q over the relative bandwidth in neper, 28 dB here."""
    done = run(dipole, "--from", "790 MHz", "--to", "950 MHz", "--wanted", "40")
    assert done.exit_code == 0, done.output
    limit = 20 / np.log(10) * np.pi / (160 / 866.3 * 5.18)
    assert "40 dB cannot be had without loss: as a series resonator of 68 ohm" in done.stdout
    said = float(done.stdout.split("gives more than ")[1].split(" dB")[0])
    assert said == pytest.approx(limit, abs=0.2)


@pytest.mark.parametrize(
    ("words", "said"),
    [
        (("--from", "700 MHz", "--to", "870 MHz"), "known from 780 MHz to 960 MHz"),
        (("--from", "868 MHz", "--to", "868 MHz"), "has no width"),
        (("--from", "870 MHz", "--to", "860 MHz"), "has no width"),
        (("--from", "-8 MHz", "--to", "860 MHz"), "the frequency must be positive"),
        (("--from", "868", "--to", "870 MHz"), "a frequency is needed"),
        ((*BAND, "--kind", "shunt stup"), "do you mean 'shunt stub'"),
        ((*BAND, "--kind", "x"), "choose from shunt stub, series stub"),
        ((*BAND, "--case", "2"), "a measured sweep has none"),
        ((*BAND, "--port", "2"), "port 2 does not exist"),
        ((*BAND, "--tolerance", "much"), "give a part or per cents"),
        ((*BAND, "--tolerance", "120 %"), "must be below 1"),
        ((*BAND, "--inductor-q", "0"), "inductor_q is 0: it must be more than 0"),
        ((*BAND, "--reference", "-50 ohm"), "must be finite and more than 0"),
        ((*BAND, "--reference", "50 mm"), "a resistance is needed"),
        ((*BAND, "--extension", "3 m in 0.2"), "does not exist"),
        ((*BAND, "--draw", "99"), "networks"),
        ((*BAND, "--json", "--csv"), "exclude each other"),
        ((*BAND, "--line", "three-strips, width=6 mm"), "give an impedance"),
        ((*BAND, "--line", "two-strips, width=6 mm"), "separation"),
        ((*BAND, "--line", "two-strips, wide=6 mm, separation=1 mm"), "do you mean"),
        ((*BAND, "--line", "two-strips, width=-6 mm, separation=1 mm"), "width"),
        (
            (*BAND, "--line", "two-strips, width=900 mm, separation=1 mm"),
            "good for widths from 0.01 mm to 100 mm",
        ),
        ((*BAND, "--line", "50 mm"), "a resistance is needed"),
        ((*BAND, "--line", "50 ohm, 2"), "must be at most 1"),
    ],
)
def test_bad_requests_are_refused_with_a_sentence(dipole, words, said):
    done = run(dipole, *words)
    assert done.exit_code == 2, done.output
    assert said in done.output
    assert "Traceback" not in done.output


def test_a_load_without_resistance_is_refused(tmp_path):
    f = np.linspace(800e6, 900e6, 51)
    file = write_load(tmp_path / "coil.s1p", f, 1j * 2 * np.pi * f * 10e-9)
    done = run(file, *BAND)
    assert done.exit_code == 2
    assert "purely reactive at 868 MHz" in done.output


def test_no_network_is_said(tmp_path):
    f = np.linspace(800e6, 900e6, 51)
    file = write_load(tmp_path / "high.s1p", f, np.full(51, 400.0))
    done = run(file, *BAND, "--kind", "shunt stub", "--line", "390 ohm")
    assert done.exit_code == 2
    assert "no network matches this load: shunt stub: no place on a line of 390 ohm" in done.output


def test_pictures_that_cannot_be_written_cost_no_table(dipole, tmp_path):
    blocked = tmp_path / "file"
    blocked.write_text("not a folder")
    done = run(dipole, *BAND, "--plots", blocked / "plots")
    assert done.exit_code == 1
    assert "the picture cannot be written" in done.output
    assert "rank" in done.stdout
