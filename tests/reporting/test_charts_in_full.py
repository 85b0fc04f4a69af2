"""Charts of very large and very small sites: every number and name stands on the sheet, and none on another."""

import importlib
import itertools

import pytest

import earthwork
from earthwork.reporting.balance_curve import draw_balance_curve
from earthwork.reporting.figures import new_figure, number, shorten_to, tick_step
from earthwork.reporting.lift_chart import draw_lift_chart
from earthwork.reporting.water_chart import draw_tank, draw_water_days
from earthwork.units import METRIC, UnitSystem
from tests.plan.watered import site

LONG = "粘土 W" * 40


class Large(UnitSystem):
    """Numbers of areas, soil and water a hundred thousand times as large as they are."""

    def factor(self, dimension):
        return super().factor(dimension) * (1.0 if dimension == "length" else 1e-5)


@pytest.fixture
def drawn(monkeypatch, tmp_path):
    """Draw a chart; gives its figure."""

    def draw(function, *values, **options):
        figures = []
        module = importlib.import_module(function.__module__)
        monkeypatch.setattr(module, "save_figure", lambda figure, path: figures.append(figure))
        function(*values, tmp_path / "chart.png", **options)
        (figure,) = figures
        figure.draw_without_rendering()
        return figure

    return draw


def in_full(figure):
    """That no text leaves the sheet, and that no mark of an axis lies on its neighbour."""
    from matplotlib.text import Text

    sheet = figure.bbox
    for text in figure.findobj(Text):
        if text.get_visible() and text.get_text():
            box = text.get_window_extent()
            if any(text in axes.get_xticklabels() + axes.get_yticklabels() for axes in figure.axes):
                continue
            assert sheet.x0 <= box.x0 < box.x1 <= sheet.x1, text.get_text()
            assert sheet.y0 <= box.y0 < box.y1 <= sheet.y1, text.get_text()
    for axes in figure.axes:
        for axis, labels in ((axes.xaxis, axes.get_xticklabels()), (axes.yaxis, axes.get_yticklabels())):
            low, high = sorted(axis.get_view_interval())
            boxes = [
                label.get_window_extent()
                for place, label in zip(axis.get_ticklocs(), labels, strict=True)
                if low <= place <= high and label.get_visible()
            ]
            assert all(sheet.x0 <= box.x0 and box.x1 <= sheet.x1 for box in boxes)
            assert not any(a.overlaps(b) for a, b in itertools.pairwise(boxes))


@pytest.mark.parametrize("scale", [1e-3, 1.0, 1e6, 4e10])
@pytest.mark.parametrize("title", ["Mill", LONG])
def test_balance_curve(drawn, scale, title):
    curve = [(-1.0, 3 * scale), (0.0, -0.4 * scale), (1.0, -4 * scale)]
    figure = drawn(draw_balance_curve, curve, units=METRIC, title=title, shift_m=-0.1, sd_m3=0.1 * scale)
    in_full(figure)


def test_a_curve_says_no_minus_zero(drawn):
    figure = drawn(draw_balance_curve, [(-1.0, 2.0), (0.0, -0.02), (1.0, -2.0)], units=METRIC, title="Bed", shift_m=-1e-9)
    told = [text.get_text() for text in figure.axes[0].texts]
    assert "as designed: −0.02 m³" in told
    assert "balanced: 0.00 m" in told


@pytest.mark.parametrize("units", [METRIC, Large("metric")])
@pytest.mark.parametrize("title", ["Mill", LONG])
def test_charts_of_water_and_lifts(drawn, tmp_path, units, title):
    given = site(tmp_path, {"water.tank.volume": 4000})
    water, lifts = earthwork.water(given), earthwork.lifts(given)
    assert any(day.shortfall_l > 0 for day in water.days)
    for function, result in ((draw_water_days, water), (draw_tank, water), (draw_lift_chart, lifts)):
        in_full(drawn(function, result, units=units, title=title))


def test_numbers_under_an_axis_stay_apart():
    assert tick_step(0.0, 1e5, 3.7) == 20_000.0
    assert tick_step(0.0, 1.5e9, 3.7) == 500_000_000.0
    # Where not even two fit, one is left.
    assert tick_step(0.0, 1.5e9, 0.2) >= 1.5e9
    assert number(-0.004, 0.01) == "0.00"


def test_a_long_line_ends_where_its_room_does():
    text = new_figure(4.0, 2.0).text(0.0, 0.5, "W" * 300, fontsize=12)
    shorten_to(text, 300.0)
    assert text.get_window_extent().width <= 300.0
    assert text.get_text().endswith("W…")
    text = new_figure(4.0, 2.0).text(0.0, 0.5, "W" * 300 + ": water by day", fontsize=12)
    shorten_to(text, 300.0)
    assert text.get_window_extent().width <= 300.0
    assert text.get_text().endswith("W…: water by day")
    text = new_figure(4.0, 2.0).text(0.0, 0.5, "W" * 300 + " → I4 fill", fontsize=12)
    shorten_to(text, 300.0)
    assert text.get_text().endswith("W… → I4 fill")
