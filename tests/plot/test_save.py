"""Writing pictures, and leaving no trace elsewhere."""

from __future__ import annotations

import shutil
import subprocess
import sys
from pathlib import Path

import matplotlib
import pytest
import xarray as xr
from matplotlib.figure import Figure

import simkit.plot
from simkit.cli.run import keep_measured
from simkit.errors import StoreError
from simkit.plot import KINDS, save_all, save_plot
from simkit.plot.save import draw, measured_builds, write
from simkit.study import load_study

STUDY = """
title = "Creek gauge link, 868 MHz"
[values]
arm = "76 mm"
width = "8 mm"
gap = "2 mm"
[[strip]]
name = "east"
path = [["gap/2", "0 mm"], ["gap/2 + arm", "0 mm"]]
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
[frequency]
start = "300 MHz"
stop = "3 GHz"
points = 271
[sweep]
arm = { from = "70 mm", to = "82 mm", count = 5 }
width = ["4 mm", "8 mm", "12 mm"]
"""
PNG = b"\x89PNG\r\n\x1a\n"


@pytest.fixture
def study_path(tmp_path: Path) -> Path:
    path = tmp_path / "creek_gauge.toml"
    path.write_text(STUDY, encoding="utf-8")
    return path


def test_all_pictures_of_a_run(dataset: xr.Dataset, study_path: Path, tmp_path: Path) -> None:
    settings = dict(matplotlib.rcParams)
    folder = tmp_path / "results" / "plots"
    written = save_all(dataset, folder, study=load_study(study_path))
    names = [path.name for path, _ in written]
    assert names == [
        "geometry.png",
        "impedance.png",
        "reflection.png",
        "smith.png",
        "current.png",
        "charge.png",
        "current_map.png",
        "charge_map.png",
        "pattern.png",
        "tracks.png",
        "tracks_width.png",
    ]
    assert sorted(names) == sorted(path.name for path in folder.iterdir())
    assert all(path.read_bytes().startswith(PNG) for path, _ in written)
    assert all("case 7: arm 76 mm, width 8 mm" in about for _, about in written[:9])
    assert dict(matplotlib.rcParams) == settings


def test_without_study_or_sweep_there_is_less_to_draw(dataset: xr.Dataset, tmp_path: Path) -> None:
    single = dataset.isel(case=[7]).assign_attrs(swept={})
    names = [path.stem for path, _ in save_all(single, tmp_path)]
    assert names == ["impedance", "reflection", "smith", "current", "charge", "pattern"]


def test_a_carrier_is_drawn_where_there_is_one(
    dataset: xr.Dataset, study_path: Path, tmp_path: Path
) -> None:
    with pytest.raises(StoreError, match=r"needs a study with a \[carrier\] table"):
        save_plot(dataset, "carrier", tmp_path / "a.png", study=load_study(study_path))
    carried = study_path.with_name("carried.toml")
    table = '[carrier]\npermittivity = 2.7\nloss_tangent = 0.01\nthickness = "2 mm"\n'
    carried.write_text(f"{STUDY}\n{table}", encoding="utf-8")
    (ax, *_) = draw(dataset, "carrier", study=load_study(carried)).axes
    assert "mm" in ax.get_xlabel()


def test_nothing_solved_leaves_geometry_and_empty_tracks(
    dataset: xr.Dataset, study_path: Path, tmp_path: Path
) -> None:
    refused = dataset.isel(case=[10]).assign_attrs(swept={})
    names = [
        path.stem for path, _ in save_all(refused, tmp_path / "p", study=load_study(study_path))
    ]
    assert names == ["geometry"]


def test_case_nearest_the_nominal_values_is_drawn(dataset: xr.Dataset, study_path: Path) -> None:
    study = load_study(study_path)
    moved = study_path.with_name("moved.toml")
    moved.write_text(STUDY.replace('width = "8 mm"', 'width = "11 mm"'), encoding="utf-8")
    title = draw(dataset, "impedance", study=study).axes[0].get_title(loc="left")
    assert "width 8 mm" in title
    title = draw(dataset, "impedance", study=load_study(moved)).axes[0].get_title(loc="left")
    assert "case 8: arm 76 mm, width 12 mm" in title


@pytest.mark.parametrize("ending", ["png", "svg", "pdf"])
def test_the_ending_says_the_format(dataset: xr.Dataset, tmp_path: Path, ending: str) -> None:
    path = save_plot(dataset, "reflection", tmp_path / f"picture.{ending}", case=5)
    starts = {"png": PNG, "svg": b"<?xml", "pdf": b"%PDF"}
    assert path.read_bytes().startswith(starts[ending])


def test_what_cannot_be_drawn_or_written_is_said(dataset: xr.Dataset, tmp_path: Path) -> None:
    with pytest.raises(StoreError, match="no picture 'waterfall'; choose from geometry, impedance"):
        save_plot(dataset, "waterfall", tmp_path / "a.png")
    with pytest.raises(StoreError, match="name the study too"):
        save_plot(dataset, "geometry", tmp_path / "a.png")
    with pytest.raises(StoreError, match=r"file name ends in \.png, \.svg, \.pdf"):
        save_plot(dataset, "smith", tmp_path / "a.docx")
    with pytest.raises(StoreError, match="case 99 is not in these results"):
        save_plot(dataset, "smith", tmp_path / "a.png", case=99)
    (tmp_path / "file").write_text("not a folder")
    with pytest.raises(StoreError, match="the picture cannot be written"):
        save_plot(dataset, "smith", tmp_path / "file" / "a.png")
    assert [path.name for path in tmp_path.iterdir()] == ["file"]


def test_failed_write_leaves_the_old_picture(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    target = tmp_path / "a.png"
    target.write_bytes(b"old")

    def torn(self: Figure, path: Path, **_: object) -> None:
        Path(path).write_bytes(b"half")
        raise OSError(28, "No space left on device")

    monkeypatch.setattr(Figure, "savefig", torn)
    with pytest.raises(StoreError, match="No space left on device"):
        write(Figure(), target)
    assert target.read_bytes() == b"old"
    assert [path.name for path in tmp_path.iterdir()] == ["a.png"]


def test_every_kind_names_a_function_of_the_package() -> None:
    assert list(KINDS) == [kind.name for kind in KINDS.values()]
    for kind in KINDS.values():
        assert callable(getattr(simkit.plot, kind.function))


def test_dollar_signs_in_a_title_are_no_formula(dataset: xr.Dataset, tmp_path: Path) -> None:
    priced = dataset.assign_attrs(title="Gauge $2_{a}^ and $")
    for kind in ("impedance", "pattern", "tracks"):
        save_plot(priced, kind, tmp_path / f"{kind}.png")
    title = draw(priced, "smith").axes[0].get_title(loc="left")
    assert title.startswith(r"Gauge \$2_{a}^ and \$: reflection")


def test_drawing_leaves_pyplot_alone_and_listing_needs_no_matplotlib(tmp_path: Path) -> None:
    code = (
        "import sys\n"
        "from simkit.plot import KINDS\n"
        "assert len(KINDS) == 14\n"
        "assert not [m for m in sys.modules if m.startswith(('matplotlib', 'xarray'))]\n"
        "import simkit.plot.save\n"
        "assert 'matplotlib.figure' in sys.modules\n"
        "assert 'matplotlib.pyplot' not in sys.modules\n"
    )
    subprocess.run([sys.executable, "-c", code], check=True, timeout=120)


SAMPLE = Path(__file__).parents[2] / "studies" / "creek_gauge_build_1.s1p"


def test_measured_builds_are_found_in_a_moved_results_folder(tmp_path: Path) -> None:
    """The study says a name beside it; a run left a copy in the results folder."""
    tables = '[[measured]]\nfile = "builds/one.s1p"\narm = "75 mm"\n[[measured]]\nfile = "no.s1p"\n'
    home = tmp_path / "home"
    (home / "builds").mkdir(parents=True)
    (home / "gauge.toml").write_text(STUDY + tables, encoding="utf-8")
    shutil.copy(SAMPLE, home / "builds" / "one.s1p")
    study = load_study(home / "gauge.toml")
    moved = tmp_path / "moved" / "gauge"
    moved.mkdir(parents=True)
    keep_measured(study, moved)
    assert [path.name for path in (moved / "measured").iterdir()] == ["one.s1p"]
    (moved / "study.toml").write_text(STUDY + tables, encoding="utf-8")
    shutil.rmtree(home)
    (build,) = measured_builds(load_study(moved / "study.toml"), "arm")
    assert (build.name, build.value) == ("one", 0.075)
    assert build.dip_frequency_hz == pytest.approx((902.3e6, 2814.4e6), rel=1e-3)
    # The build's width is not said: it stands at the nominal one.
    (build,) = measured_builds(load_study(moved / "study.toml"), "width")
    assert build.value == 0.008
    assert measured_builds(load_study(moved / "study.toml"), "carrier.infill") == []
    assert measured_builds(None, "arm") == []
