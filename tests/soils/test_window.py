"""The placing window: its area in closed form, its edges, and windows that no state fits."""

from __future__ import annotations

import math

import pytest
import shapely
from hypothesis import given
from hypothesis import strategies as st

from earthwork.errors import SoilError
from earthwork.soils.window import PlacingWindow


def test_area_between_water_limits_and_zero_air_voids() -> None:
    # ∫ Gs ρw / (1 + Gs w) − ρmin over 15 to 19 % = 100 ρw ln((1 + 0.19 Gs) / (1 + 0.15 Gs)) − 4 ρmin.
    window = PlacingWindow(min_dry_density_kg_m3=1672, specific_gravity=2.68, water_content_percent=(15, 19))
    exact = 100_000 * math.log((1 + 0.19 * 2.68) / (1 + 0.15 * 2.68)) - 4 * 1672
    assert window.polygon.area == pytest.approx(exact, rel=1e-4)


def test_area_of_a_strip_of_saturation() -> None:
    # Between 80 and 95 %, over ρmin; the top is where the two lines are still under the wet limit.
    window = PlacingWindow(
        min_dry_density_kg_m3=1600, specific_gravity=2.7, water_content_percent=(10, 14), saturation_percent=(80, 95)
    )

    def integral(saturation: float) -> float:
        return 1000 * saturation * math.log((1 + 2.7 * 14 / saturation) / (1 + 2.7 * 10 / saturation))

    assert window.polygon.area == pytest.approx(integral(95) - integral(80), rel=1e-4)


@given(st.floats(5, 30), st.floats(1400, 2200))
def test_polygon_and_rules_agree(water: float, density: float) -> None:
    window = PlacingWindow(
        min_dry_density_kg_m3=1650, specific_gravity=2.7, water_content_percent=(12, 18), saturation_percent=(60, 92),
        air_voids_max_percent=10,
    )  # fmt: skip
    inside = window.contains(water, density)
    state = shapely.Point(water, density)
    near_edge = window.polygon.boundary.distance(state) < 0.05
    assert near_edge or inside == window.polygon.contains(state)


@pytest.mark.parametrize(
    ("state", "fault"),
    [
        ((16.0, 1690.0), None),
        ((15.0, 1672.0), None),
        ((14.99, 1700.0), "drier than 15.0 %"),
        ((19.01, 1700.0), "wetter than 19.0 %"),
        ((16.0, 1671.0), "under the required 1672"),
        ((19.0, 1790.0), "the state is impossible"),
        ((16.0, 2700.0), "not below that of the grains"),
    ],
)
def test_just_inside_and_just_outside(state: tuple[float, float], fault: str | None) -> None:
    window = PlacingWindow(min_dry_density_kg_m3=1672, specific_gravity=2.68, water_content_percent=(15, 19))
    found = window.faults(*state)
    assert window.contains(*state) == (fault is None)
    assert not found if fault is None else any(fault in text for text in found)


def test_saturation_and_air_voids_limits() -> None:
    window = PlacingWindow(
        min_dry_density_kg_m3=1600, specific_gravity=2.7, saturation_percent=(70, 90), air_voids_max_percent=8
    )
    # 1700 kg/m³: e = 0.588; 17 % is 78 % saturated, 8.1 % air; 18 % is 82.6 %, 6.4 %.
    assert window.contains(18.0, 1700.0)
    assert window.faults(17.0, 1700.0) == ["air voids 8.1 % are over 8 %"]
    assert "saturation 68.9 % is under 70 %" in window.faults(15.0, 1700.0)
    assert window.faults(20.0, 1700.0) == ["saturation 91.8 % is over 90 %"]


@pytest.mark.parametrize(
    ("limits", "message"),
    [
        ({"water_content_percent": (23, 26)}, "no state fits the placing window"),
        (
            {"water_content_percent": (10, 12), "air_voids_max_percent": 0.0, "min_dry_density_kg_m3": 2300},
            "no state fits",
        ),
        ({"target": (25.0, 1700.0)}, "the target lies outside the placing window: saturation"),
        ({"target": (15.0, 1600.0)}, "is under the required 1672"),
    ],
)
def test_windows_that_cannot_be(limits: dict, message: str) -> None:
    given_limits = {"min_dry_density_kg_m3": 1672, "specific_gravity": 2.68, **limits}
    with pytest.raises(SoilError, match=message):
        PlacingWindow(**given_limits).check("material.x")


def test_a_window_of_one_water_content() -> None:
    window = PlacingWindow(
        min_dry_density_kg_m3=1672, specific_gravity=2.68, water_content_percent=(16, 16), target=(16.0, 1700.0)
    )
    window.check("material.x")
    assert window.polygon.is_empty
    assert window.contains(16.0, 1700.0)


def test_outline_for_scripts_is_short_and_right() -> None:
    window = PlacingWindow(min_dry_density_kg_m3=1672, specific_gravity=2.68, water_content_percent=(15, 19))
    outline = window.to_dict()["outline"]
    assert len(outline) < 24
    assert shapely.Polygon(outline).area == pytest.approx(window.polygon.area, rel=2e-3)
