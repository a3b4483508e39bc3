from __future__ import annotations

import json
import os
import shutil

import numpy as np
import pytest
import zarr

from simkit.errors import StoreError
from simkit.store import files
from simkit.store.layout import create_store, fill_value, numpy_dtype
from simkit.store.schema import VARIABLES, Status
from simkit.store.write import StoreFile

from .conftest import FREQUENCIES, SEGMENTS, case_values, layout


def test_nothing_written_reads_as_fill_of_the_declared_type(make_results):
    store = StoreFile(make_results() / "store.zarr")
    arrays = store.read_arrays(0)
    assert set(arrays) == set(VARIABLES)
    for name, array in arrays.items():
        assert array.dtype == numpy_dtype(name), name
        expected = np.full(array.shape, fill_value(name), array.dtype)
        assert np.array_equal(array, expected, equal_nan=array.dtype.kind in "fc"), name
    assert np.isnan(arrays["impedance"].imag).all()
    assert (arrays["mode_half_waves"] == -1).all()
    assert (arrays["status"] == Status.WAITING).all()


def test_chunks_are_blocks_of_cases_with_a_checksum(make_results):
    group = zarr.open_group(make_results() / "store.zarr")
    for name in VARIABLES:
        array = group[name]
        assert array.metadata.zarr_format == 3
        assert array.chunks == (4, *array.shape[1:]), name
        assert any(type(codec).__name__ == "Crc32cCodec" for codec in array.metadata.codecs), name


def test_a_large_block_is_one_file_whose_cases_are_read_alone(make_results):
    """The gain of a case takes 28 kB, so 320 cases of it are 9 MB in one file."""
    store = StoreFile(make_results(cases=700, block_size=320, swept=()) / "store.zarr")
    assert store.array("gain").shards == (320, 10, 19, 37)
    assert store.array("gain").chunks == (32, 10, 19, 37)
    assert store.array("mode_q").shards is None
    for block in (0, 2):
        content = store.new_block(block)
        for case in range(content.first, content.first + content.count):
            content.put(case, case_values(case) | {"status": int(Status.SOLVED)})
        store.write_block(block, content)
    files = sorted(path.name for path in (store.path / "gain").glob("c.*"))
    assert files == ["c.0.0.0.0", "c.2.0.0.0"]
    again = StoreFile(store.path)
    assert (again.array("gain")[699] == -3.5 * 699).all()
    assert np.isnan(again.array("gain")[320]).all()
    arrays = again.read_arrays(2)
    assert len(arrays["gain"]) == 60
    assert (arrays["x"][-1] == case_values(699)["x"]).all()


@pytest.mark.parametrize("content", [b"", b"torn"])
def test_a_torn_large_block_does_not_pass_as_data(make_results, content):
    store = StoreFile(make_results(cases=320, block_size=320, swept=()) / "store.zarr")
    block = store.new_block(0)
    block.put(7, case_values(7) | {"status": int(Status.SOLVED)})
    store.write_block(0, block)
    (store.path / "gain" / "c.0.0.0.0").write_bytes(content)
    with pytest.raises(ValueError, match=r"empty|checksum"):
        StoreFile(store.path).read_arrays(0)


def test_units_meanings_and_flags_are_kept(make_results):
    group = zarr.open_group(make_results() / "store.zarr")
    for name, variable in VARIABLES.items():
        attrs = dict(group[name].attrs)
        assert attrs["long_name"] == variable.meaning
        assert attrs.get("units", "") == variable.units
    status = dict(group["status"].attrs)
    assert status["flag_values"] == [0, 1, 2, 3, 4, 5]
    assert status["flag_meanings"] == "waiting solved doubtful refused failed timed-out"
    assert dict(group["driven"].attrs)["flag_values"] == [-1, 0, 1]


def test_a_block_comes_back_bit_for_bit(results):
    arrays = StoreFile(results / "store.zarr").read_arrays(0)
    for case in range(4):
        for name, value in case_values(case).items():
            assert np.array_equal(arrays[name][case], np.asarray(value, arrays[name].dtype)), name
    assert arrays["reason"].tolist() == [f"because of {case}" for case in range(4)]


def test_a_short_last_block_leaves_the_others_alone(results):
    store = StoreFile(results / "store.zarr")
    before = store.read_arrays(0)
    block = store.new_block(1)
    assert block.count == 2
    for case in (4, 5):
        block.put(case, case_values(case) | {"status": int(Status.SOLVED)})
    store.write_block(1, block)
    after = StoreFile(results / "store.zarr").read_arrays(0)
    assert all(
        np.array_equal(before[n], after[n], equal_nan=before[n].dtype.kind in "fc") for n in after
    )
    assert store.read_statuses().tolist() == [1, 3, 5, 2, 1, 1]
    assert store.read_keys().tolist() == [b"key %d" % case for case in range(6)]


def test_the_status_is_written_after_everything_else_is_on_the_disk(results, monkeypatch):
    store = StoreFile(results / "store.zarr")
    flushed: list[str] = []

    def note(paths):
        paths = list(paths)
        flushed.extend(path.relative_to(store.path).as_posix() for path in paths)
        assert (store.path / "wire_radius" / "c.1").exists()
        written = store.read_statuses()[4] == Status.SOLVED
        assert written == any(path.parts[-2:] == ("status", "c.1") for path in paths) or (
            "status/c.1" in flushed
        )

    monkeypatch.setattr("simkit.store.write.flush", note)
    block = store.new_block(1)
    block.put(4, case_values(4) | {"status": int(Status.SOLVED)})
    store.write_block(1, block)
    assert flushed[-2:] == ["status/c.1", "status"]
    assert flushed.count("status/c.1") == 1
    assert {"impedance/c.1.0", "impedance", "gain/c.1.0.0.0", "reason/c.1"} <= set(flushed[:-2])


@pytest.mark.parametrize(
    ("values", "message"),
    [
        ({"no_such": 1.0}, "no variable 'no_such'"),
        ({"x": np.zeros(SEGMENTS + 1)}, r"x has shape \(6,\) .* keeps \(5,\)"),
        ({"mode_q": np.zeros(10, complex)}, "mode_q has .* type complex128"),
        ({"mode_half_waves": np.zeros(10)}, "mode_half_waves has .* type float64"),
    ],
)
def test_arrays_that_do_not_fit_are_refused(make_results, values, message):
    block = StoreFile(make_results() / "store.zarr").new_block(0)
    with pytest.raises(ValueError, match=message):
        block.put(2, values)


def test_a_torn_status_or_key_counts_as_waiting(results):
    for name in ("status", "case_key"):
        chunk = results / "store.zarr" / name / "c.0"
        chunk.write_bytes(chunk.read_bytes()[:-1])
    store = StoreFile(results / "store.zarr")
    assert store.read_statuses().tolist() == [0] * 6
    assert store.read_keys().tolist() == [b""] * 6


def test_a_store_appears_whole_or_not_at_all(tmp_path, monkeypatch):
    def no_space(*args, **kwargs):
        raise OSError(28, "No space left on device")

    monkeypatch.setattr("simkit.store.layout.flush_tree", no_space)
    with pytest.raises(OSError, match="No space left"):
        create_store(tmp_path / "store.zarr", layout())
    assert not (tmp_path / "store.zarr").exists()
    monkeypatch.undo()
    create_store(tmp_path / "store.zarr", layout())
    assert StoreFile(tmp_path / "store.zarr").cases == 6


@pytest.mark.parametrize(
    ("change", "message"),
    [
        (lambda store: shutil.rmtree(store / "gain"), "the array 'gain' is missing"),
        (lambda store: (store / "zarr.json").write_text("{"), "zarr.json is damaged"),
        (lambda store: (store / "zarr.json").write_text("[]"), "damaged; the store cannot be read"),
        (lambda store: (store / "zarr.json").write_text("{}"), "was not written by simkit"),
        (lambda store: _set_version(store, 99), "store version 99, this simkit reads version 1"),
        (lambda store: shutil.rmtree(store), "no results store here"),
    ],
)
def test_a_store_that_cannot_be_used_is_refused_in_words(results, change, message):
    change(results / "store.zarr")
    with pytest.raises(StoreError, match=message):
        StoreFile(results / "store.zarr").new_block(0)


def _set_version(store, version):
    path = store / "zarr.json"
    content = json.loads(path.read_text())
    content["attributes"]["store_version"] = version
    path.write_text(json.dumps(content))


def test_replacing_a_text_leaves_the_old_one_if_it_fails(tmp_path, monkeypatch):
    path = tmp_path / "study.toml"
    files.replace_text(path, "old")

    def no_space(handle):
        raise OSError(28, "No space left on device")

    monkeypatch.setattr(os, "fsync", no_space)
    with pytest.raises(OSError, match="No space left"):
        files.replace_text(path, "new")
    assert path.read_text() == "old"


def test_frequencies_are_as_given(results):
    group = zarr.open_group(results / "store.zarr")
    assert np.array_equal(group["frequency"][:], FREQUENCIES)


def test_a_case_with_fewer_segments_is_filled_up(make_results):
    store = StoreFile(make_results() / "store.zarr")
    block = store.new_block(0)
    short = np.arange(SEGMENTS - 2.0)
    current = np.full((40, SEGMENTS - 2), 2 + 1j)
    block.put(1, {"x": short, "current": current, "strip_index": np.zeros(SEGMENTS - 2, int)})
    assert block.arrays["x"][1][:-2].tolist() == short.tolist()
    assert np.isnan(block.arrays["x"][1][-2:]).all()
    assert np.isnan(block.arrays["current"][1][:, -2:]).all()
    assert block.arrays["strip_index"][1].tolist() == [0, 0, 0, -1, -1]
    with pytest.raises(ValueError, match="x has shape"):
        block.put(1, {"x": np.arange(SEGMENTS + 1.0)})
    with pytest.raises(ValueError, match="mode_q has shape"):
        block.put(1, {"mode_q": np.ones(3)})
