"""Exports, read back by the libraries other people use."""

from __future__ import annotations

import csv
import errno
import os

import numpy as np
import pytest
import xarray as xr
from skrf.io.touchstone import Touchstone

import simkit
from simkit.errors import ExportError
from simkit.exports import aside, netcdf
from simkit.store import open_results
from simkit.store.rows import OF_MODE

SOLVED = [case for case in range(14) if case not in (3, 12, 13)]


@pytest.fixture(scope="module")
def dataset(creek_results):
    return open_results(creek_results)


def written(folder):
    return sorted(path.name for path in folder.rglob("*"))


# -- netCDF ------------------------------------------------------------------------------------


def test_netcdf_gives_back_every_number_text_and_unit(dataset, tmp_path):
    done = simkit.export(dataset, tmp_path / "creek.nc", "netcdf")
    assert (done.cases, done.left_out) == (14, 0)
    with xr.open_dataset(tmp_path / "creek.nc") as read:
        for name, variable in dataset.variables.items():
            if variable.dtype.kind == "c":
                for part in ("real", "imag"):
                    found = read[f"{name}_{part}"]
                    np.testing.assert_array_equal(found.values, getattr(variable.values, part))
                    assert found.attrs["units"] == variable.attrs["units"]
                continue
            found = read[name]
            assert found.dims == variable.dims
            if variable.dtype.kind in "TU":
                assert list(map(str, found.values)) == list(map(str, variable.values))
            else:
                np.testing.assert_array_equal(found.values, variable.values)
                assert found.dtype.kind == variable.dtype.kind
            assert found.attrs.get("units") == variable.attrs.get("units")
        assert read.attrs["title"] == "Creek gauge, made up"
        assert read.attrs["reference_ohm"] == 50.0


def test_netcdf_of_some_cases_and_variables(dataset, tmp_path):
    names = ("mode_q", "impedance")
    simkit.export(dataset, tmp_path / "q.nc", "netcdf", where="width = 8 mm", only=names)
    with xr.open_dataset(tmp_path / "q.nc") as read:
        assert set(read.data_vars) == {"mode_q", "impedance_real", "impedance_imag"}
        assert read["case"].values.tolist() == [1, 3, 5, 7, 9, 11, 13]
        assert np.isnan(read["mode_q"].sel(case=3)).all()


def test_netcdf_too_large_for_one_file_is_refused_with_the_ways_out(dataset, tmp_path, monkeypatch):
    monkeypatch.setattr(netcdf, "LARGEST_BYTES", 100_000)
    with pytest.raises(ExportError, match=r"14 cases are .* GB.*--where.*--only.*store\.zarr"):
        simkit.export(dataset, tmp_path / "creek.nc", "netcdf")
    assert written(tmp_path) == []
    simkit.export(dataset, tmp_path / "creek.nc", "netcdf", only=["mode_q"])


def test_an_unknown_variable_is_told_with_the_nearest(dataset, tmp_path):
    with pytest.raises(ExportError, match="no variable 'mode_qq'; do you mean mode_q"):
        simkit.export(dataset, tmp_path / "creek.nc", "netcdf", only=["mode_qq"])


# -- CSV ---------------------------------------------------------------------------------------


def test_csv_has_one_row_a_case_and_mode(dataset, tmp_path):
    simkit.export(dataset, tmp_path / "modes.csv", "csv")
    with (tmp_path / "modes.csv").open(encoding="utf-8", newline="") as file:
        rows = list(csv.DictReader(file))
    assert len(rows) == 3 * len(SOLVED) + 3
    of_case = {int(row["case"]): row for row in reversed(rows)}  # the first row of each
    assert of_case[3]["status"] == "refused"
    assert of_case[3]["reason"] == "the strip crosses itself, über all"
    assert of_case[3]["frequency_hz"] == of_case[3]["half_waves"] == of_case[3]["on_plane"] == ""
    assert of_case[5]["dip_frequency_hz"] == ""
    assert of_case[6]["on_plane"] == "1"
    assert float(of_case[13]["carrier.infill"]) == 0.95
    # The same numbers, to the last bit, as the rows of Python.
    for row in simkit.modes(dataset):
        mine = [other for other in rows if int(other["case"]) == row["case"]]
        assert float(mine[0]["arm_m"]) == row["values"]["arm"]
        for mode, other in zip(row["modes"], mine, strict=False):
            assert other["half_waves"] == str(mode["half_waves"])
            for key in OF_MODE:
                assert (float(other[key]) if other[key] else None) == mode.get(key)


def test_csv_of_curves(dataset, tmp_path):
    done = simkit.export(dataset, tmp_path / "c.csv", "csv", curves=True, where="case <= 4")
    assert (done.cases, done.left_out) == (4, 1)
    with (tmp_path / "c.csv").open(encoding="utf-8", newline="") as file:
        rows = list(csv.DictReader(file))
    assert len(rows) == 4 * 101
    impedance = dataset["impedance"].sel(case=4).values
    mine = [row for row in rows if row["case"] == "4"]
    assert [float(row["resistance_ohm"]) for row in mine] == impedance.real.tolist()
    assert [float(row["reactance_ohm"]) for row in mine] == impedance.imag.tolist()
    # 40 ohm against 50 reflects a ninth: 19.08 dB, at the centre of the circuit, 880 MHz.
    (centre,) = [row for row in mine if float(row["frequency_hz"]) == 880e6]
    assert float(centre["return_loss_db"]) == pytest.approx(20 * np.log10(9), abs=1e-9)
    assert float(centre["reflection_real"]) == pytest.approx(-1 / 9, abs=1e-12)


# -- Touchstone --------------------------------------------------------------------------------


def test_touchstone_is_read_back_by_scikit_rf(creek_results, dataset, tmp_path):
    done = simkit.export(creek_results, tmp_path / "bench", "touchstone")
    assert (done.cases, done.left_out) == (len(SOLVED), 3)
    assert written(tmp_path / "bench") == [f"creek_gauge_case_{case:04d}.s1p" for case in SOLVED]
    file = Touchstone(str(tmp_path / "bench" / "creek_gauge_case_0009.s1p"))
    frequency, s = file.get_sparameter_arrays()
    impedance = dataset["impedance"].sel(case=9).values
    np.testing.assert_array_equal(frequency, dataset["frequency"].values)
    np.testing.assert_array_equal(s[:, 0, 0], (impedance - 50) / (impedance + 50))
    assert file.resistance == 50
    comments = file.get_comments()
    for words in ("arm = 78 mm", "width = 8 mm", "carrier.infill = 0.75", "doubtful", "50 ohm"):
        assert words in comments
    assert "case 9" in comments
    assert simkit.read_touchstone(tmp_path / "bench" / "creek_gauge_case_0009.s1p") is not None


def test_touchstone_at_the_connector_if_there_is_one(dataset, tmp_path):
    behind = dataset.assign(impedance_at_connector=dataset["impedance"] * 2)
    simkit.export(behind, tmp_path, "touchstone", where="case = 2", name="line")
    file = Touchstone(str(tmp_path / "line_case_0002.s1p"))
    impedance = 2 * dataset["impedance"].sel(case=2).values
    s = file.get_sparameter_arrays()[1][:, 0, 0]
    np.testing.assert_array_equal(s, (impedance - 50) / (impedance + 50))
    assert "reflection at the connector" in file.get_comments()


def test_names_sort_in_the_order_of_cases():
    from simkit.exports.touchstone import file_names

    names = file_names("a", np.array([7, 99_999, 123_456]))
    assert names == ["a_case_000007.s1p", "a_case_099999.s1p", "a_case_123456.s1p"]


def test_a_dataset_is_called_by_its_title(dataset, tmp_path):
    simkit.export(dataset, tmp_path, "touchstone", where="case = 2")
    assert written(tmp_path) == ["creek_gauge_made_up_case_0002.s1p"]


# -- what all have in common -------------------------------------------------------------------

ALL = [("netcdf", {}), ("csv", {}), ("csv", {"curves": True}), ("touchstone", {"name": "a"})]


@pytest.mark.parametrize(("to", "more"), ALL)
def test_nothing_is_overwritten_unasked(dataset, tmp_path, to, more):
    target = tmp_path / "out"
    place = target / "a_case_0002.s1p" if to == "touchstone" else target
    place.parent.mkdir(exist_ok=True)
    place.write_text("mine")
    some = dataset.isel(case=[2])
    with pytest.raises(ExportError, match=r"is there already and is left as it is.*--overwrite"):
        simkit.export(some, target, to, **more)
    assert place.read_text() == "mine"
    simkit.export(some, target, to, overwrite=True, **more)
    assert place.read_bytes() != b"mine"
    assert not [name for name in written(tmp_path) if name.endswith(".part")]


@pytest.mark.parametrize(("to", "more"), ALL)
def test_an_interrupted_export_leaves_nothing(dataset, tmp_path, to, more):
    def interrupt(done):
        assert [name for name in written(tmp_path) if name.endswith(".part")] or to == "netcdf"
        raise KeyboardInterrupt

    with pytest.raises(KeyboardInterrupt):
        simkit.export(dataset, tmp_path / "out", to, seen=interrupt, **more)
    assert written(tmp_path) == []


@pytest.mark.parametrize(
    ("code", "message"),
    [
        (errno.ENOSPC, "the disk is full; make room"),
        (errno.EROFS, "can only be read; choose another place"),
        (errno.EACCES, "you may not write here"),
    ],
)
@pytest.mark.parametrize(("to", "more"), ALL)
def test_a_disk_that_does_not_take_it_is_said(
    dataset, tmp_path, monkeypatch, to, more, code, message
):
    def full(paths):
        list(paths)
        raise OSError(code, os.strerror(code))

    monkeypatch.setattr(aside, "flush", full)
    with pytest.raises(ExportError, match=f"out: .*{message}.*Nothing was left behind"):
        simkit.export(dataset, tmp_path / "out", to, **more)
    assert written(tmp_path) == []


def test_a_folder_that_is_there_takes_what_its_surroundings_do_not(dataset, tmp_path, monkeypatch):
    """As the current folder, or a memory stick: nothing is written beside it."""
    made = []
    original = type(tmp_path).mkdir
    monkeypatch.setattr(
        type(tmp_path), "mkdir", lambda path, *a, **k: (made.append(path), original(path, *a, **k))
    )
    monkeypatch.chdir(tmp_path)
    simkit.export(dataset, ".", "touchstone", where="case = 2", name="a")
    assert written(tmp_path) == ["a_case_0002.s1p"]
    assert all(path.absolute().is_relative_to(tmp_path) for path in made)


def test_progress_is_told(dataset, tmp_path):
    seen = []
    simkit.export(dataset, tmp_path / "m.csv", "csv", seen=seen.append)
    assert seen[-1] == 14


@pytest.mark.parametrize(
    ("to", "more", "message"),
    [
        ("matlab", {}, "not known; there are netcdf, csv, touchstone"),
        ("csv", {"only": ["mode_q"]}, "chosen for netcdf, not for csv"),
        ("netcdf", {"curves": True}, "curves are a table of csv"),
        ("csv", {"where": "case > 20"}, "no case is selected"),
        ("touchstone", {"where": "case > 11"}, "none of the selected cases has a solution"),
    ],
)
def test_what_cannot_be_asked(dataset, tmp_path, to, more, message):
    with pytest.raises(ExportError, match=message):
        simkit.export(dataset, tmp_path / "out", to, **more)


def test_a_folder_in_place_of_a_file_and_the_other_way_round(dataset, tmp_path):
    with pytest.raises(ExportError, match="this is a folder; name a file"):
        simkit.export(dataset, tmp_path, "csv")
    (tmp_path / "a").write_text("")
    with pytest.raises(ExportError, match="this is a file; name a folder"):
        simkit.export(dataset, tmp_path / "a", "touchstone")
