from __future__ import annotations

import numpy as np
import pytest
import xarray as xr

from simkit.errors import DamageError, StoreError
from simkit.store import as_grid, open_results, status_labels, swept_names, swept_values
from simkit.store.read import damaged_cases
from simkit.store.schema import VARIABLES

from .conftest import ARMS_M, WIDTHS_M, case_values


def test_results_open_with_coordinates_units_and_order(results):
    dataset = open_results(results)
    assert list(dataset.data_vars) == list(VARIABLES)
    assert list(dataset.coords)[:3] == ["case", "arm", "width"]
    assert dataset["arm"].attrs == {"units": "m", "long_name": "arm", "display_unit": "mm"}
    assert dataset["frequency"].attrs["units"] == "Hz"
    assert dataset["strip"].values.tolist() == ["east", "west"]
    assert dataset["impedance"].attrs["units"] == "ohm"
    assert dataset.sizes["segment"] == 5
    assert swept_names(dataset) == {"arm": "arm", "width": "width"}
    assert swept_values(dataset, 3) == {"arm": 0.074, "width": 0.008}


def test_data_are_read_only_when_used(results):
    dataset = open_results(results)
    assert not dataset["gain"].variable._in_memory
    assert dataset["gain"].isel(case=2, mode=0, theta=0, phi=0) == -7.0


def test_unsolved_cases_read_as_nan(results):
    dataset = open_results(results)
    assert np.array_equal(dataset["impedance"][3], case_values(3)["impedance"])
    waiting = dataset["impedance"][4].values
    assert np.isnan(waiting.real).all()
    assert np.isnan(waiting.imag).all()


def test_status_words(results):
    labels = status_labels(open_results(results))
    assert labels.dims == ("case",)
    assert labels.values.tolist() == [
        "solved", "refused", "timed-out", "doubtful", "waiting", "waiting",
    ]  # fmt: skip


def test_strips_are_selected_by_name(results):
    dataset = open_results(results)
    chosen = dataset["mode_current"].sel(strip="west")
    assert chosen.dims == ("case", "mode", "position")


def test_plain_xarray_sees_the_swept_values_as_coordinates(results):
    plain = xr.open_zarr(results / "store.zarr", consolidated=False, chunks=None)
    assert {"arm", "width"} <= set(plain.coords)


def test_a_grid_has_one_dimension_for_each_swept_value(results):
    grid = as_grid(open_results(results))
    assert dict(grid["impedance"].sizes) == {"arm": 3, "width": 2, "frequency": 11}
    assert grid["arm"].values.tolist() == [0.070, 0.074, 0.078]
    assert grid["width"].values.tolist() == [0.004, 0.008]
    assert grid["arm"].attrs["display_unit"] == "mm"
    for case in range(4):
        point = {"arm": ARMS_M[case], "width": WIDTHS_M[case]}
        assert int(grid["case"].sel(point)) == case
        assert np.array_equal(grid["x"].sel(point), case_values(case)["x"])
        assert str(grid["reason"].sel(point).values) == f"because of {case}"
    assert np.isnan(grid["impedance"].sel(arm=0.078)).all()
    assert grid["frequency"].dims == ("frequency",)


def test_a_value_swept_twice_over_the_same_number_still_makes_a_grid(make_results):
    from simkit.store.layout import SweptColumn

    swept = (SweptColumn("arm", "m", "mm", np.full(6, 0.07)),)
    attrs = {"title": "Ford", "sweep_method": "grid", "sweep_shape": [6]}
    grid = as_grid(open_results(make_results(swept=swept, attrs=attrs)))
    assert grid["arm"].values.tolist() == [0.07] * 6


def test_without_a_sweep_there_is_no_case_dimension(make_results):
    attrs = {"title": "Ford", "sweep_method": "grid", "sweep_shape": []}
    grid = as_grid(open_results(make_results(cases=1, swept=(), attrs=attrs)))
    assert grid["impedance"].dims == ("frequency",)


def test_cases_taken_in_step_span_no_grid(make_results):
    attrs = {"title": "Ford", "sweep_method": "list", "sweep_shape": [6]}
    with pytest.raises(StoreError, match=r"'Ford'.*sweep method 'list'.*isel\(case=0\)"):
        as_grid(open_results(make_results(attrs=attrs)))


def test_a_part_of_the_cases_spans_no_grid(results):
    with pytest.raises(StoreError, match=r"part of the cases \(2 of 6\)"):
        as_grid(open_results(results).isel(case=[0, 3]))


def test_a_missing_folder_is_said(tmp_path):
    with pytest.raises(StoreError, match="no such results folder; `simkit run STUDY` makes one"):
        open_results(tmp_path / "nowhere")


def test_an_empty_folder_is_said(tmp_path):
    with pytest.raises(StoreError, match=r"there is no store\.zarr in this folder"):
        open_results(tmp_path)


def test_a_file_is_no_results_folder(tmp_path):
    path = tmp_path / "ford.toml"
    path.write_text("")
    with pytest.raises(StoreError, match="this is a file"):
        open_results(path)


def test_garbage_is_no_store(tmp_path):
    store = tmp_path / "store.zarr"
    store.mkdir()
    with pytest.raises(StoreError, match="no results store here"):
        open_results(tmp_path)
    (store / "zarr.json").write_bytes(b"\xff\xfe\x00")
    with pytest.raises(StoreError, match="not a results store"):
        open_results(tmp_path)


def test_somebody_elses_zarr_is_refused(tmp_path):
    xr.Dataset({"a": ("x", [1.0])}).to_zarr(
        tmp_path / "store.zarr", zarr_format=3, consolidated=False
    )
    with pytest.raises(StoreError, match="was not written by simkit"):
        open_results(tmp_path)


def test_a_torn_status_is_said_with_the_remedy(results):
    chunk = results / "store.zarr" / "status" / "c.0"
    chunk.write_bytes(b"")
    with pytest.raises(StoreError, match=r"status of a block is damaged.*run the study again"):
        open_results(results)


def test_a_lost_file_of_solved_cases_is_said(results):
    (results / "store.zarr" / "impedance" / "c.0.0").unlink()
    said = r"curves of the solved cases from 0 to 3 are not there any more; .*--retry"
    with pytest.raises(DamageError, match=said):
        open_results(results)
    assert damaged_cases(results) == [range(4)]


@pytest.mark.parametrize("name", ["arm", "frequency", "strip"])
def test_a_torn_axis_is_said_with_the_remedy(results, name):
    (chunk,) = (path for path in (results / "store.zarr" / name / "c").iterdir())
    chunk.write_bytes(chunk.read_bytes()[:9])
    with pytest.raises(StoreError, match=r"damaged, (the values of `arm` )?cannot.*--fresh"):
        open_results(results)


@pytest.mark.parametrize("name", ["case", "frequency"])
def test_a_lost_axis_is_said_with_the_remedy(results, name):
    (results / "store.zarr" / name / "c" / "0").unlink()
    said = f"values of `{name}` are not there any more; simkit run STUDY --fresh"
    with pytest.raises(StoreError, match=said):
        open_results(results)


def test_a_missing_array_is_said(results):
    import shutil

    shutil.rmtree(results / "store.zarr" / "peak_gain")
    with pytest.raises(StoreError, match="arrays peak_gain are missing"):
        open_results(results)


def test_a_flipped_bit_does_not_pass_as_data(results):
    chunk = results / "store.zarr" / "impedance" / "c.0.0"
    content = bytearray(chunk.read_bytes())
    content[20] ^= 1
    chunk.write_bytes(content)
    dataset = open_results(results)
    with pytest.raises(ValueError, match="checksum"):
        dataset["impedance"].load()
