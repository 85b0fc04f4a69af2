"""Phase relations: ranges, round trips, and a second library."""

from __future__ import annotations

import groundhog.siteinvestigation.classification.phaserelations as second
import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from earthwork.errors import SoilError
from earthwork.soils import phase, states

gravities = st.floats(2.4, 3.0)
void_ratios = st.floats(0.15, 2.5)
saturations = st.floats(1.0, 100.0)
waters = st.floats(0.0, 80.0)


@given(gravities, void_ratios)
def test_void_ratio_and_dry_density_round_trip(gravity: float, void_ratio: float) -> None:
    dry = phase.dry_density_of_void_ratio(void_ratio, gravity)
    assert phase.void_ratio(dry, gravity) == pytest.approx(void_ratio, rel=1e-12)


@given(st.floats(800, 2400), waters)
def test_moist_and_dry_round_trip(dry: float, water: float) -> None:
    assert phase.dry_density(phase.moist_density(dry, water), water) == pytest.approx(dry, rel=1e-14)


@given(gravities, void_ratios, saturations)
def test_saturation_lines_go_through_their_states(gravity: float, void_ratio: float, saturation: float) -> None:
    dry = phase.dry_density_of_void_ratio(void_ratio, gravity)
    water = saturation * void_ratio / gravity  # S e = w Gs
    assert phase.saturation_percent(dry, water, gravity) == pytest.approx(saturation, rel=1e-9)
    assert phase.dry_density_at_saturation(water, gravity, saturation) == pytest.approx(dry, rel=1e-12)
    air = phase.air_voids_percent(dry, water, gravity)
    assert air == pytest.approx((100 - saturation) * phase.porosity(void_ratio), abs=1e-9)
    if air >= 0:
        assert phase.dry_density_at_air_voids(water, gravity, air) == pytest.approx(dry, rel=1e-12)


@given(gravities, void_ratios)
def test_zero_air_voids_is_full_saturation(gravity: float, void_ratio: float) -> None:
    dry = phase.dry_density_of_void_ratio(void_ratio, gravity)
    most = phase.zero_air_voids_water_content_percent(dry, gravity)
    assert phase.saturation_percent(dry, most, gravity) == pytest.approx(100, rel=1e-9)
    assert phase.moist_density(dry, most) == pytest.approx(phase.saturated_density(void_ratio, gravity), rel=1e-12)


@given(st.floats(2.4, 2.9), st.floats(0.55, 1.3), saturations)
def test_against_a_second_library(gravity: float, void_ratio: float, saturation: float) -> None:
    # groundhog works in unit weights and shares; the ranges are those that it takes.
    water = saturation * void_ratio / gravity
    dry = phase.dry_density_of_void_ratio(void_ratio, gravity)
    other = second.saturation_watercontent(water / 100, void_ratio, gravity)["saturation [-]"]
    assert phase.saturation_percent(dry, water, gravity) == pytest.approx(100 * other, rel=1e-9)
    porosity = second.porosity_voidratio(void_ratio)["porosity [-]"]
    assert phase.porosity(void_ratio) == pytest.approx(porosity, rel=1e-12)
    moist = phase.moist_density(dry, water)
    weight = second.dryunitweight_watercontent(water / 100, moist / 100)["dry unit weight [kN/m3]"]
    assert dry / 100 == pytest.approx(weight, rel=1e-12)
    if 1000 <= dry <= 2000:
        void = second.voidratio_drydensity(dry_density=dry, specific_gravity=gravity)["Void ratio [-]"]
        assert phase.void_ratio(dry, gravity) == pytest.approx(void, rel=1e-9)


@given(st.floats(900, 1900), st.floats(900, 2300))
def test_bank_to_fill_to_bank_is_the_identity(bank: float, fill: float) -> None:
    factor = states.shrinkage_factor(bank, fill)
    assert factor * states.shrinkage_factor(fill, bank) == pytest.approx(1, rel=1e-14)
    shrink = states.shrink_percent_of_bank(factor)
    assert states.fill_dry_density_of_shrink(bank, shrink) == pytest.approx(fill, rel=1e-9)
    assert (1 + states.shrink_percent_of_fill(factor) / 100) * (1 - shrink / 100) == pytest.approx(1, rel=1e-9)


@given(st.floats(900, 2400), st.floats(1, 120))
def test_swell_round_trip(bank: float, swell: float) -> None:
    loose = states.loose_dry_density_of_swell(bank, swell)
    assert states.swell_percent(bank, loose) == pytest.approx(swell, rel=1e-9)
    assert states.load_factor(bank, loose) == pytest.approx(1 / (1 + swell / 100), rel=1e-12)


def test_arrays_give_what_scalars_give() -> None:
    water = np.array([5.0, 10.0, 20.0])
    line = phase.zero_air_voids_dry_density(water, 2.7)
    assert line.shape == (3,)
    assert line == pytest.approx([phase.zero_air_voids_dry_density(float(w), 2.7) for w in water], rel=1e-15)
    dry = np.array([1500.0, 1600.0])
    assert phase.void_ratio(dry, 2.7) == pytest.approx([0.8, 0.6875])
    assert phase.dry_density(np.array([]), np.array([])).size == 0


@pytest.mark.parametrize(
    ("call", "message"),
    [
        (lambda: phase.dry_density(-1.0, 10.0), "moist density is -1; it must be more than 0"),
        (lambda: phase.dry_density(1700.0, -0.1), "water content is -0.1; it must be 0 or more"),
        (lambda: phase.dry_density(float("nan"), 10.0), "moist density is nan"),
        (lambda: phase.dry_density(1700.0, float("inf")), "water content is inf"),
        (lambda: phase.void_ratio(2700.1, 2.7), "dry density is 2700.1; it must be at most the grain density 2700"),
        (lambda: phase.void_ratio(1700.0, 0.0), "specific gravity is 0"),
        (lambda: phase.saturation_percent(2700.0, 1.0, 2.7), "no voids to fill"),
        (lambda: phase.dry_density_at_saturation(10.0, 2.7, 0.0), "saturation is 0"),
        (lambda: phase.dry_density_at_saturation(10.0, 2.7, 100.1), "saturation is 100.1"),
        (lambda: phase.dry_density_at_air_voids(10.0, 2.7, 100.0), "air voids is 100"),
        (lambda: phase.porosity(-0.01), "void ratio is -0.01"),
        (lambda: phase.combined_specific_gravity(101.0, 2.7, 2.6), "share of the second is 101"),
        (lambda: phase.dry_density(np.array([1700.0, -2.0]), np.array([1.0, 1.0])), "moist density is -2"),
        (lambda: states.shrinkage_factor(0.0, 1700.0), "it must be more than 0"),
        (lambda: states.fill_dry_density_of_shrink(1700.0, 100.0), "it must be below 100 %"),
        (lambda: states.loose_dry_density_of_swell(1700.0, -100.0), "it must be over -100 %"),
    ],
)
def test_outside_the_physical_range(call, message: str) -> None:
    with pytest.raises(SoilError, match=message):
        call()


def test_just_inside_the_range() -> None:
    assert phase.void_ratio(2700.0, 2.7) == pytest.approx(0, abs=1e-15)
    assert phase.dry_density_at_saturation(0.0, 2.7, 100.0) == pytest.approx(2700)
    assert phase.saturation_percent(1600.0, 0.0, 2.7) == 0
