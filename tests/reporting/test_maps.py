"""Maps and charts: classes and spots by hand, and pictures that are drawn whatever the site is like."""

import numpy as np
import pytest
import shapely
from PIL import Image

from earthwork.ground.grid import Grid
from earthwork.quantities.depth_map import DepthMap, coarse_grid
from earthwork.reporting import colors
from earthwork.reporting.balance_curve import draw_balance_curve
from earthwork.reporting.cut_fill_map import Classes, _draw_zero_line, classes_for, draw_cut_fill_map, spots
from earthwork.reporting.figures import new_figure, round_step, wrapped
from earthwork.reporting.map_frame import Frame
from earthwork.units import METRIC, US


def _luminance(color):
    """Relative luminance of a hexadecimal colour (WCAG 2.1)."""
    parts = [int(color[i : i + 2], 16) / 255 for i in (1, 3, 5)]
    linear = [p / 12.92 if p <= 0.04045 else ((p + 0.055) / 1.055) ** 2.4 for p in parts]
    return 0.2126 * linear[0] + 0.7152 * linear[1] + 0.0722 * linear[2]


def test_both_wings_are_equally_light():
    for cut, fill in zip(colors.CUT, reversed(colors.FILL), strict=True):
        assert _luminance(cut) == pytest.approx(_luminance(fill), abs=0.02)


def test_classes_are_round_and_alike_for_cut_and_fill():
    classes = classes_for(np.linspace(-7.6, 3.0, 1000), 0.01)
    assert classes.step == 2.0
    assert classes.bounds == [-np.inf, -6.0, -4.0, -2.0, -0.01, 0.01, 2.0, 4.0, 6.0, np.inf]
    labels = classes.labels("m")
    assert labels[0] == "+ fill over 6 m"
    assert labels[-1] == "− cut over 6 m"


def test_untouched_ground_has_classes_too():
    assert classes_for(np.zeros((4, 4)), 0.01).step > 0
    assert classes_for(np.full((4, 4), np.nan), 0.01).step > 0


def test_spots_are_extremes_and_apart():
    row, column = np.mgrid[0:120, 0:100]
    depth = 5 * np.exp(-((row - 30) ** 2 + (column - 20) ** 2) / 80)
    depth -= 4 * np.exp(-((row - 90) ** 2 + (column - 80) ** 2) / 80)
    assert spots(depth, 0.5) == [(30, 20), (90, 80)]
    assert spots(np.full((5, 5), np.nan), 0.5) == []


def _zero_lines(depth):
    """Lines that the map draws where cut meets fill, as arrays of (easting, northing)."""
    frame = Frame.around(Grid(*depth.shape, 0.0, 100.0, 1.0, 1.0), METRIC)
    axes = frame.map_axes(new_figure(*frame.size))
    _draw_zero_line(axes, depth, Classes(1.0, 0.01), frame)
    return [line.get_xydata() for line in axes.lines]


def test_no_zero_line_runs_around_ground_without_data():
    depth = np.full((100, 80), 2.0)
    depth[20:60, 30:70] = np.nan
    assert _zero_lines(depth) == []


def test_the_zero_line_crosses_specks_without_data_and_reaches_the_edges():
    depth = np.where(np.arange(80) < 40, -1.0, 1.0) * np.ones((100, 1))
    depth[::7, 38:42] = np.nan
    lines = _zero_lines(depth)
    assert len(lines) == 2  # from cut to none, and from none to fill
    for line in lines:
        assert np.ptp(line[:, 1]) == 100.0
        assert np.all(np.abs(line[:, 0] - 40.0) < 1.5)


@pytest.mark.parametrize("shape", [(200, 5000), (5000, 200), (300, 400)])
def test_a_map_is_true_to_scale_with_the_ground_in_its_middle(shape):
    frame = Frame.around(Grid(*shape, 1000.0, 9000.0, 1.0, 1.0), METRIC)
    west, east, south, north = frame.view
    assert (east - west) / frame.map_width == pytest.approx((north - south) / frame.map_height)
    assert (west + east) / 2 == pytest.approx(1000.0 + shape[1] / 2)
    assert (south + north) / 2 == pytest.approx(9000.0 - shape[0] / 2)
    assert min(frame.map_width, frame.map_height) >= 1.2


@pytest.mark.parametrize("title", ["Mill", "x" * 500, "Larkspur Campus and its long approach road: cut and fill"])
def test_titles_stay_on_the_sheet(title):
    frame = Frame.around(Grid(900, 100, 0.0, 0.0, 1.0, 1.0), METRIC)
    figure = new_figure(*frame.size)
    frame.draw_titles(figure, title, "")
    box = figure.texts[0].get_window_extent()
    assert box.x1 <= frame.size[0] * figure.dpi
    assert box.width > 0


def test_coarse_grids_keep_the_corner_and_cover_the_ground():
    coarse, joined = coarse_grid(Grid(20_000, 9_999, 10.0, 50.0, 0.5, 0.5), 1500)
    assert (joined, coarse.rows, coarse.columns) == (14, 1429, 715)
    assert (coarse.west, coarse.north, coarse.cell_east) == (10.0, 50.0, 7.0)


@pytest.mark.parametrize("rows_columns", [(1, 1), (2, 900), (700, 3), (60, 90)])
@pytest.mark.parametrize("kind", ["cut", "fill", "both", "nothing", "no data", "noise"])
def test_a_map_of_any_site(tmp_path, rows_columns, kind):
    rng = np.random.default_rng(3)
    depth = {
        "cut": np.full(rows_columns, -2.0),
        "fill": np.full(rows_columns, 0.3),
        "both": np.add.outer(np.linspace(-1, 1, rows_columns[0]), np.linspace(-2, 3, rows_columns[1])),
        "nothing": np.zeros(rows_columns),
        "no data": np.full(rows_columns, np.nan),
        "noise": rng.normal(0, 0.05, rows_columns),
    }[kind]
    draw_cut_fill_map(
        DepthMap(depth, Grid(*rows_columns, 0.0, 0.0, 1.0, 1.0)), tmp_path / "m.png", units=METRIC, title="x"
    )
    with Image.open(tmp_path / "m.png") as picture:
        assert min(picture.size) > 500
        assert max(picture.size) < 2500


def test_names_are_written_as_they_are_and_harm_nothing(tmp_path):
    names = ["$x^2$", "\\frac{", "<script>", "🏔" * 40, "=1+1", "line\nbreak\x00"]
    grid = Grid(60, 90, 0.0, 60.0, 1.0, 1.0)
    zones = [(name, shapely.box(15 * i, 0, 15 * i + 15, 60)) for i, name in enumerate(names)]
    draw_cut_fill_map(
        DepthMap(np.zeros((60, 90)), grid), tmp_path / "m.png", units=US, title="$$", subtitle="%s {0}", zones=zones
    )
    assert (tmp_path / "m.png").stat().st_size > 10_000


def test_the_same_map_gives_the_same_bytes(tmp_path):
    grid = Grid(60, 90, 0.0, 60.0, 1.0, 1.0)
    depth = np.add.outer(np.linspace(-3, 3, 60), np.linspace(-2, 2, 90))
    for name in ("a.png", "b.png"):
        draw_cut_fill_map(DepthMap(depth, grid), tmp_path / name, units=METRIC, title="x")
    assert (tmp_path / "a.png").read_bytes() == (tmp_path / "b.png").read_bytes()


@pytest.mark.parametrize("shift", [None, -0.4, 0.9])
def test_a_curve_with_and_without_a_balance(tmp_path, shift):
    curve = [(s / 10, 900.0 - 1200 * s / 10) for s in range(-10, 16)]
    draw_balance_curve(curve, tmp_path / "c.png", units=US, title="x", shift_m=shift, sd_m3=120.0, target_m3=50.0)
    with Image.open(tmp_path / "c.png") as picture:
        assert picture.size == (1140, 720)


def test_round_steps_and_short_names():
    assert [round_step(s, 4) for s in (0.9, 3.0, 8.0, 50.0)] == [0.2, 1.0, 2.0, 10.0]
    assert wrapped("a" * 100, 10, 2) == "aaaaaaaaaa\naaaaaaaaaa…"


def test_a_zone_without_ground_has_no_name_on_the_map(tmp_path):
    grid = Grid(60, 90, 500_000.0, 4_400_000.0, 2.0, 2.0)
    zones = [("beyond", shapely.Polygon()), ("many", shapely.MultiPolygon()), ("here", shapely.box(*grid.bounds))]
    frame = Frame.around(grid, METRIC)
    axes = frame.map_axes(new_figure(*frame.size))
    frame.label_zones(axes, zones, [])
    assert [text.get_text() for text in axes.texts] == ["here"]
    picture = DepthMap(np.full((60, 90), 1.5), grid)
    draw_cut_fill_map(picture, tmp_path / "map.png", units=METRIC, title="Mill", zones=zones)
    assert Image.open(tmp_path / "map.png").size[0] > 500


def test_a_name_that_the_slanted_font_lacks_stands_upright():
    from earthwork.reporting.figures import slant

    assert slant("Nord-Süd 3\nyard") == "italic"
    # Letters that the upright font has and the slanted one does not would be boxes.
    assert slant("مبنى") == "normal"
