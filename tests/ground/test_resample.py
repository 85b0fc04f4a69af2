"""Weights along an axis: by hand, and by the algebra that they must obey."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import assume, given
from hypothesis import strategies as st

from earthwork.ground.resample import apply_taps, axis_taps


def on_axis(values, taps):
    """Values of a line of samples on the target cells."""
    column = np.asarray(values, float)[:, None]
    one = axis_taps(0.0, 1.0, 1, 0.0, 1.0, 1)
    return apply_taps(column, taps, one)[:, 0]


# --- by hand -------------------------------------------------------------------------------------------------------


def test_a_quarter_of_a_cell_further():
    # centres at 0.75, 1.75 between samples at 0.5, 1.5, 2.5: a quarter of the way
    taps = axis_taps(0.0, 1.0, 3, 0.25, 1.0, 3)
    assert (taps.first, taps.stop) == (0, 2)
    assert on_axis([10.0, 20.0, 40.0], taps).tolist() == [12.5, 25.0]


def test_the_same_cells_take_one_sample_each():
    taps = axis_taps(100.0, 2.0, 3, 100.0, 2.0, 3)
    assert on_axis([1.0, np.nan, 3.0], taps)[[0, 2]].tolist() == [1.0, 3.0]


def test_no_value_beyond_the_outermost_samples():
    # cells of the target half as large: the first and the last centre lie outside of the samples
    taps = axis_taps(0.0, 2.0, 3, 0.0, 1.0, 6)
    assert (taps.first, taps.stop) == (1, 5)
    assert on_axis([0.0, 4.0, 8.0], taps).tolist() == [1.0, 3.0, 5.0, 7.0]


def test_cells_of_one_and_a_half_are_averaged_by_length():
    # [0, 1.5] holds all of sample 0 and half of sample 1: (10 + 20/2) / 1.5
    taps = axis_taps(0.0, 1.0, 3, 0.0, 1.5, 2)
    assert taps.averaged
    assert on_axis([10.0, 20.0, 40.0], taps) == pytest.approx([20 / 1.5, 50 / 1.5], rel=1e-15)


def test_a_broken_line_is_averaged_by_its_integral():
    # line through (0.5, 0), (1.5, 1), (2.5, 0): over [0.5, 2.5] it is a hat of area 1 over a length of 2
    taps = axis_taps(0.0, 1.0, 3, 0.5, 2.0, 1, nodes=True)
    assert on_axis([0.0, 1.0, 0.0], taps) == pytest.approx([0.5], rel=1e-15)
    # by samples that stand for their cells: [0.5, 2.5] holds half of 0, all of 1, half of 0
    assert on_axis([0.0, 1.0, 0.0], axis_taps(0.0, 1.0, 3, 0.5, 2.0, 1)) == pytest.approx([0.5], rel=1e-15)
    # over [1, 2] inside one target cell of 1.2 they differ: see the closed form below
    taps = axis_taps(0.0, 1.0, 3, 0.9, 1.2, 1, nodes=True)
    assert on_axis([0.0, 1.0, 0.0], taps) == pytest.approx([(1.2 - 2 * 0.6**2 / 2) / 1.2], rel=1e-14)


def test_a_cell_with_one_sample_missing_is_missing():
    taps = axis_taps(0.0, 1.0, 4, 0.5, 1.0, 3)
    assert np.isnan(on_axis([1.0, np.nan, 3.0, 4.0], taps)).tolist() == [True, True, False]
    taps = axis_taps(0.0, 1.0, 4, 0.0, 2.0, 2)
    assert np.isnan(on_axis([1.0, np.nan, 3.0, 4.0], taps)).tolist() == [True, False]


def test_nothing_in_common():
    taps = axis_taps(0.0, 1.0, 4, 10.0, 1.0, 3)
    assert len(taps) == 0


def test_averaging_begins_at_five_percent():
    assert not axis_taps(0.0, 1.0, 9, 0.0, 1.04, 3).averaged
    assert axis_taps(0.0, 1.0, 9, 0.0, 1.06, 3).averaged


def test_columns_and_rows():
    z = np.array([[0.0, 10.0], [100.0, 110.0]])
    half = axis_taps(0.0, 1.0, 2, 0.5, 1.0, 1)
    quarter = axis_taps(0.0, 1.0, 2, 0.25, 1.0, 1)
    assert apply_taps(z, half, quarter).tolist() == [[52.5]]
    assert apply_taps(z, quarter, half).tolist() == [[30.0]]


# --- algebra -------------------------------------------------------------------------------------------------------

axes = st.builds(
    dict,
    source_start=st.floats(-1e6, 1e6),
    source_cell=st.floats(0.1, 50.0),
    samples=st.integers(2, 60),
    shift=st.floats(-20, 20),
    ratio=st.floats(0.05, 12.0),
    cells=st.integers(1, 60),
    nodes=st.booleans(),
)


def taps_of(a):
    start = a["source_start"] + a["shift"] * a["source_cell"]
    cell = a["ratio"] * a["source_cell"]
    return (
        axis_taps(a["source_start"], a["source_cell"], a["samples"], start, cell, a["cells"], nodes=a["nodes"]),
        start,
        cell,
    )


@given(axes)
def test_weights_sum_to_one_and_are_not_negative(a):
    taps, _, _ = taps_of(a)
    assert (taps.weight >= 0).all()
    assert taps.weight.sum(axis=0) == pytest.approx(np.ones(len(taps)), rel=1e-12)
    if len(taps):
        assert 0 <= taps.reach[0] < taps.reach[1] <= a["samples"]


@given(axes)
def test_a_slope_stays_the_same_slope(a):
    """Interpolation keeps straight lines; so does averaging of nodes, away from the samples' rounding."""
    taps, start, cell = taps_of(a)
    assume(len(taps) and (a["nodes"] or not taps.averaged))
    samples = a["source_start"] + (np.arange(a["samples"]) + 0.5) * a["source_cell"]
    centres = start + (np.arange(taps.first, taps.stop) + 0.5) * cell
    assert on_axis(samples, taps) == pytest.approx(centres, abs=2e-6 * max(cell, a["source_cell"]) + 1e-9)


@given(
    st.integers(1, 12), st.integers(1, 12), st.integers(0, 5), st.lists(st.floats(-100, 100), min_size=12, max_size=40)
)
def test_averaging_keeps_the_volume(fine, times, skipped, values):
    """Whole multiples: the sum over target cells is the sum over the samples that they cover."""
    assume(times >= 2)
    cells = (len(values) - skipped) // times
    assume(cells >= 1)
    side = 1.0 / fine
    taps = axis_taps(0.0, side, len(values), skipped * side, times * side, cells)
    total = on_axis(values, taps).sum() * times
    assert (taps.first, len(taps)) == (0, cells)
    assert total == pytest.approx(sum(values[skipped : skipped + cells * times]), abs=1e-9)


@given(axes, st.integers(0, 30), st.integers(1, 30))
def test_a_part_is_a_part_of_the_whole(a, start, length):
    taps, _, _ = taps_of(a)
    stop = min(start + length, a["cells"])
    assume(start < stop)
    whole = np.full(a["cells"], np.nan)
    values = np.sin(np.arange(a["samples"]))
    whole[taps.first : taps.stop] = on_axis(values, taps)
    part = taps.part(start, stop)
    got = np.full(stop - start, np.nan)
    got[part.first : part.stop] = on_axis(values, part)
    assert np.array_equal(got, whole[start:stop], equal_nan=True)


@given(axes, axes, st.integers(0, 2**32 - 1))
def test_the_compiled_kernel_gives_the_same_digits(a, b, seed):
    north, east = taps_of(a)[0], taps_of(b)[0]
    assume(len(north) and len(east))
    rng = np.random.default_rng(seed)
    values = rng.normal(100, 5, (a["samples"], b["samples"])).astype(np.float32)
    values[rng.random(values.shape) < 0.05] = np.nan
    plain, compiled = apply_taps(values, north, east), apply_taps(values, north, east, compiled=True)
    assert np.array_equal(plain, compiled, equal_nan=True)
