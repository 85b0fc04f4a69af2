"""The walk: tiles, bands, seams and threads change nothing."""

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from earthwork.quantities.engine import band_edges


def hills(rows, columns, seed=0, dtype=float, holes=0.0):
    """Smooth ground that crosses zero often, with some cells missing."""
    r = np.random.default_rng(seed)
    y, x = np.mgrid[:rows, :columns]
    z = np.sin(x / 7.3) * np.cos(y / 5.1) + 0.3 * r.normal(size=(rows, columns))
    z[r.random((rows, columns)) < holes] = np.nan
    return z.astype(dtype)


def pick(v):
    return np.array([v.area_m2, v.cut_m3, v.fill_m3, v.cut_area_m2, v.fill_area_m2, v.unsplit_cut_m3,
                     v.unsplit_fill_m3, v.disturbed_area_m2, v.max_cut_m, v.max_fill_m, v.missing_area_m2])  # fmt: skip


@settings(max_examples=40, deadline=None)
@given(st.integers(1, 70), st.integers(1, 70), st.integers(3, 40), st.integers(9, 900), st.integers(0, 99))
def test_any_tiling_gives_the_whole(rows, columns, band_rows, tile_cells, seed):
    from tests.quantities.conftest import count_arrays

    ground = hills(rows, columns, seed, holes=0.05)
    if np.isnan(ground).all():
        return
    level = np.zeros((rows, columns))
    whole = count_arrays(ground, level, band_rows=10_000, tile_cells=10**9)
    tiled = count_arrays(ground, level, band_rows=band_rows, tile_cells=tile_cells)
    assert pick(tiled) == pytest.approx(pick(whole), rel=1e-12, abs=1e-11)


@pytest.mark.parametrize("dtype", [np.float32, np.float64])
def test_threads_change_no_digit(count, dtype):
    ground, level = hills(400, 300, dtype=dtype, holes=0.02), np.zeros((400, 300), dtype)
    one = pick(count(ground, level, threads=1, band_rows=16, tile_cells=900))
    for threads in (2, 3, 4):
        many = pick(count(ground, level, threads=threads, band_rows=16, tile_cells=900))
        assert many.tobytes() == one.tobytes()


def test_bands_lie_on_blocks():
    # Blocks of 256 rows, one of which begins at row 156.
    assert band_edges(700, (256, 256), start=156) == [0, 156, 412, 700]
    assert band_edges(5, (256, 256)) == [0, 5]
    for rows in range(1, 700, 13):
        edges = band_edges(rows, (1, 5000))
        assert edges[0] == 0
        assert edges[-1] == rows
        assert len(edges) == 2 or min(np.diff(edges)) >= 3


def test_swapping_surfaces_swaps_cut_and_fill(count):
    a, b = hills(60, 50, 1), hills(60, 50, 2)
    forth, back = count(a, b), count(b, a)
    assert forth.cut_m3 == pytest.approx(back.fill_m3, rel=1e-12)
    assert forth.fill_m3 == pytest.approx(back.cut_m3, rel=1e-12)


def test_adding_a_constant_to_both_changes_nothing(count):
    a, b = hills(60, 50, 1), hills(60, 50, 2)
    assert pick(count(a + 512.0, b + 512.0)) == pytest.approx(pick(count(a, b)), rel=1e-11)


def test_lengths_times_k_give_volumes_times_k_cubed(count):
    a, b = hills(60, 50, 1), hills(60, 50, 2)
    assert count(3 * a, 3 * b, cell=3.0).cut_m3 == pytest.approx(27 * count(a, b).cut_m3, rel=1e-12)


def test_error_in_a_thread_is_raised(count):
    from earthwork.errors import FileError
    from earthwork.quantities.engine import walk
    from tests.quantities.conftest import stack_of

    class Broken:
        def empty(self):
            return self

        def add(self, tile):
            raise FileError("block 7 is broken")

    with pytest.raises(FileError, match="block 7"):
        walk(stack_of(hills(90, 9), hills(90, 9)), [Broken()], threads=3, band_rows=9)
