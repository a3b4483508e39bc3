from __future__ import annotations

import numpy as np

from simkit.store import estimate_bytes
from simkit.store.schema import MODES, SAMPLES, VARIABLES
from simkit.store.write import StoreFile


def test_the_estimate_is_within_a_factor_of_two_of_a_written_block(make_results):
    """Odd numbers do not pack, and a usual case fills half the mode and 2/5 of the sample slots."""
    folder = make_results()
    store = StoreFile(folder / "store.zarr")
    block, rng = store.new_block(0), np.random.default_rng(5)
    for name, variable in VARIABLES.items():
        array = block.arrays[name]
        if variable.dtype[0] not in "fc":
            continue
        array[...] = rng.standard_normal(array.shape)
        if "mode" in variable.dims:
            array[:, MODES // 2 :] = np.nan
        if "sample" in variable.dims:
            array[:, 2 * SAMPLES // 5 :] = np.nan
    store.write_block(0, block)
    chunks = [path for path in store.path.rglob("c.*") if path.is_file()]
    written = sum(-(-path.stat().st_size // 4096) * 4096 for path in chunks)
    estimate = estimate_bytes(cases=4, frequencies=11, strips=2, segments=5, block_size=4)
    assert 0.5 < estimate / written < 2


def test_the_estimate_grows_with_every_size():
    sizes = {"cases": 30, "frequencies": 1351, "strips": 2, "segments": 51}
    base = estimate_bytes(**sizes)
    assert all(estimate_bytes(**sizes | {name: 2 * sizes[name]}) > base for name in sizes)
