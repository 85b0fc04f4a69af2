"""Compaction charts: what they hold, and pictures that are drawn whatever the soil is like."""

from __future__ import annotations

from dataclasses import replace
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from PIL import Image

from earthwork.reporting import colors
from earthwork.reporting.compaction_chart import (
    ChartContent,
    _limits,
    chart_of_card,
    chart_of_curve,
    draw_compaction_chart,
)
from earthwork.soils.card import SoilCard, soil_cards
from earthwork.soils.curve import fit_curve
from earthwork.soils.records import CurvePoint, DensityTest, MaterialTests
from earthwork.units import METRIC, US, UnitSystem
from tests.soils.test_card import FILL, LOESS, site
from tests.soils.test_card_from_tests import SAND

POINTS = tuple(CurvePoint(w, 1760 - 6 * (w - 16) ** 2) for w in (11, 13, 15, 17, 19)) + (CurvePoint(25.0, 1745.0),)
BANK = tuple(DensityTest(d, 7.5) for d in (1410, 1430, 1450))
LOG = tuple(DensityTest(d, 16 + i / 4, name=str(i)) for i, d in enumerate((1690, 1700, 1710)))


def card_with_tests(**changes: Any) -> SoilCard:
    material = {
        **LOESS, "bank": {"tests": "a"}, "proctor": {"method": "ASTM D698", "tests": "b"}, "field": {"tests": "c"},
        **changes,
    }  # fmt: skip
    made = site(material, fill={**FILL, "water_content_window": [-2.0, 2.0]})
    return soil_cards(made, {"loess": MaterialTests(POINTS, BANK, LOG)})["loess"]


def colours_in(path: Path) -> np.ndarray:
    return np.asarray(Image.open(path).convert("RGB")).reshape(-1, 3)


def has(path: Path, color: str) -> bool:
    wanted = np.array([int(color[i : i + 2], 16) for i in (1, 3, 5)])
    return bool((np.abs(colours_in(path).astype(int) - wanted).max(axis=1) <= 2).any())


def test_a_chart_holds_all_that_is_known() -> None:
    content = chart_of_card(card_with_tests(), "Plover Ridge")
    assert content is not None
    assert len(content.points) == 5
    assert content.left_out == ((25.0, 1745.0),)
    assert content.peak == pytest.approx((16.0, 1760.0))
    assert content.target == pytest.approx((16.5, 1698.4))
    assert content.bank == (7.5, 1430.0)
    assert len(content.field) == 3
    assert not content.window.is_empty
    assert len(content.other_curves) == 2


def test_states_are_those_of_the_whole_soil() -> None:
    card = card_with_tests(oversize={"percent": 20, "specific_gravity": 2.6, "water_content": 1.0})
    content = chart_of_card(card, "x")
    assert content is not None
    water, density = content.points[0]
    assert water == pytest.approx(0.8 * 11 + 0.2 * 1)
    assert density == pytest.approx(1 / (0.8 / 1610 + 0.2 / 2600))
    # The curve still goes through its own maximum, as the card has it.
    top = max(content.curve, key=lambda state: state[1])
    assert top == pytest.approx(content.peak, rel=3e-3)
    assert "20 % oversize" in content.note


def test_no_chart_without_a_compaction_test() -> None:
    rock = {"use": "rock", "bank": {"dry_density": 2250}, "fill": {"dry_density": 2000}, "loose": {"swell_percent": 45}}
    assert chart_of_card(soil_cards(site(rock))["loess"], "x") is None


def test_a_free_draining_soil_is_shown_between_its_densities(tmp_path: Path) -> None:
    card = soil_cards(site(SAND, fill={"relative_compaction": 95, "relative_density": 70}))["loess"]
    content = chart_of_card(card, "x")
    assert content is not None
    assert content.peak is None
    assert [name for name, _ in content.levels] == ["maximum", "expected", "required", "minimum"]
    assert dict(content.levels)["required"] == pytest.approx(1800 * 1500 / (1800 - 0.7 * 300))
    draw_compaction_chart(content, tmp_path / "a.png", units=METRIC)
    assert has(tmp_path / "a.png", colors.CUT[0])


def test_a_window_that_tapers_does_not_stretch_the_chart() -> None:
    # Lines of 60 and 90 % saturation meet at bone dry, far above the chart: they must not pull it to 0 %.
    card = soil_cards(site(LOESS, fill={**FILL, "saturation_window": [60, 90], "water_content_window": None}))["loess"]
    content = chart_of_card(card, "Plover Ridge")
    assert content is not None
    assert content.title == "loess, Plover Ridge"
    (dry, wet), _ = _limits(replace(content, bank=None))
    assert 10 < dry < 15
    assert 18 < wet < 25


@pytest.mark.parametrize("units", [METRIC, US])
def test_the_picture_shows_its_parts(tmp_path: Path, units: UnitSystem) -> None:
    content = chart_of_card(card_with_tests(), "Plover Ridge")
    assert content is not None
    draw_compaction_chart(content, tmp_path / "a.png", units=units)
    assert has(tmp_path / "a.png", colors.CUT[0])
    assert has(tmp_path / "a.png", colors.EXPORT)
    assert has(tmp_path / "a.png", colors.FILL[3])
    assert Image.open(tmp_path / "a.png").width > 900


def test_the_same_chart_gives_the_same_bytes(tmp_path: Path) -> None:
    content = chart_of_card(card_with_tests(), "Plover Ridge")
    assert content is not None
    for name in ("a.png", "b.png"):
        draw_compaction_chart(content, tmp_path / name, units=METRIC)
    assert (tmp_path / "a.png").read_bytes() == (tmp_path / "b.png").read_bytes()


@pytest.mark.parametrize(
    "content",
    [
        ChartContent(title="only a maximum", note="", specific_gravity=2.7, peak=(16.0, 1760.0)),
        ChartContent(title="$\\alpha_{1}$ %s {}" * 20, note="x" * 400, specific_gravity=2.7, peak=(16.0, 1760.0)),
        ChartContent(title="many", note="", specific_gravity=2.7, peak=(16.0, 1760.0), field=((15.0, 1700.0),) * 300),
        ChartContent(title="wet bank", note="", specific_gravity=2.7, peak=(16.0, 1760.0), bank=(60.0, 900.0)),
        ChartContent(title="dry", note="", specific_gravity=2.65, peak=(1.0, 2200.0), bank=(0.0, 1500.0)),
    ],
)
def test_odd_charts_are_drawn(tmp_path: Path, content: ChartContent) -> None:
    draw_compaction_chart(content, tmp_path / "a.png", units=METRIC)
    assert (tmp_path / "a.png").stat().st_size > 10_000


def test_a_window_without_water_limits(tmp_path: Path) -> None:
    card = soil_cards(site(LOESS, fill={**FILL, "saturation_window": [60, 90]}))["loess"]
    content = chart_of_card(card, "x")
    assert content is not None
    draw_compaction_chart(content, tmp_path / "a.png", units=METRIC)
    assert has(tmp_path / "a.png", colors.CUT[0])


def test_a_curve_alone(tmp_path: Path) -> None:
    curve = fit_curve(POINTS[:5], specific_gravity=2.7, method="ASTM D698")
    draw_compaction_chart(chart_of_curve(curve, "bench"), tmp_path / "a.png", units=METRIC)
    assert has(tmp_path / "a.png", colors.CUT[0])
