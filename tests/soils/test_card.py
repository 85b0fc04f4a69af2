"""Soil cards from direct figures: hand-worked factors, and what must be refused."""

from __future__ import annotations

import json
from collections.abc import Iterator
from pathlib import Path
from typing import Any

import pytest

import earthwork
from earthwork.errors import SiteFileError, SoilError
from earthwork.site import Site, check_site
from earthwork.soils.card import soil_cards

LOESS = {
    "use": "fill",
    "specific_gravity": 2.68,
    "bank": {"dry_density": 1430, "water_content": 7.5},
    "loose": {"dry_density": 1150},
    "proctor": {"method": "ASTM D698", "max_dry_density": 1760, "optimum_water_content": 16.0},
    "loss_percent": 2,
}
FILL = {"relative_compaction": 95, "expected_compaction": 96.5, "water_content_offset": 0.5}


def site(
    material: dict[str, Any],
    *,
    fill: dict[str, Any] | None = None,
    units: str = "metric",
    name: str = "loess",
) -> Site:
    document = {
        "site": {"name": "Plover Ridge", "units": units, "crs": "EPSG:32611"},
        "ground": {"existing": {"level": 1.0}, "finished": {"level": 2.0}},
        "material": {name: material},
        "fill": fill or FILL,
    }
    return check_site(document, Path(), foot_of=lambda *_: 0.3048)


def changed(**changes: Any) -> dict[str, Any]:
    """The loess with some of its keys replaced; None takes a key out."""
    merged = {**LOESS, **changes}
    return {key: value for key, value in merged.items() if value is not None}


def test_factors_by_hand() -> None:
    # 0.965 × 1760 = 1698.4; 1430 / 1698.4 = 0.841969; less 2 % loss 0.825130; 1430/1150 − 1 = 24.348 %
    card = soil_cards(site(LOESS))["loess"]
    assert card.fill_dry_density_kg_m3 == pytest.approx(1698.4)
    assert card.shrinkage_factor == pytest.approx(0.8419689, abs=1e-7)
    assert card.effective_factor == pytest.approx(0.8251295, abs=1e-7)
    assert card.shrink_percent_of_bank == pytest.approx(15.80311, abs=1e-5)
    assert card.shrink_percent_of_fill == pytest.approx(18.76923, abs=1e-5)
    assert card.swell_percent == pytest.approx(24.34783, abs=1e-5)
    assert card.load_factor == pytest.approx(0.8041958, abs=1e-7)
    assert card.target_water_content_percent == 16.5
    # 100 (1000/1698.4 − 1/2.68)
    assert card.zero_air_voids_water_content_percent == pytest.approx(21.56551, abs=1e-5)
    assert card.assumed == ()
    assert card.warnings == ()


def test_json_is_what_scripts_read() -> None:
    result = earthwork.soil(site(LOESS)).to_dict()
    card = result["materials"][0]
    for key in (
        "material", "use", "bank_dry_density_kg_m3", "loose_dry_density_kg_m3", "fill_dry_density_kg_m3",
        "max_dry_density_kg_m3", "optimum_water_content_percent", "target_water_content_percent",
        "bank_water_content_percent", "shrinkage_factor", "effective_factor", "shrink_percent_of_bank",
        "shrink_percent_of_fill", "swell_percent", "load_factor", "bank_void_ratio", "fill_void_ratio",
        "fill_saturation_percent", "zero_air_voids_water_content_percent", "shrinkage_factor_sd", "tests", "bands",
        "assumed",
    ):  # fmt: skip
        assert key in card
    json.dumps(result, allow_nan=False)


def test_bands_by_depth() -> None:
    fill = {**FILL, "by_depth": [{"below": 9.0, "relative_compaction": 98, "expected_compaction": 99}]}
    card = soil_cards(site(LOESS, fill=fill))["loess"]
    assert card.bands[0].fill_dry_density_kg_m3 == pytest.approx(1742.4)
    assert card.bands[0].shrinkage_factor == pytest.approx(1430 / 1742.4)
    assert card.compacted_volume_m3(1742.4, band=0) == pytest.approx(1.0)
    assert card.compacted_volume_m3(1698.4) == pytest.approx(1.0)


def test_expected_compaction_is_assumed_with_a_warning() -> None:
    result = earthwork.soil(site(LOESS, fill={"relative_compaction": 95}))
    assert result["loess"].expected_compaction_percent == 97
    assert result["loess"].assumed == ("expected_compaction_percent",)
    assert [warning.code for warning in result.warnings] == ["compaction-assumed"]


def test_a_dry_mass_keeps_through_its_states() -> None:
    card = soil_cards(site(LOESS))["loess"]
    mass = card.dry_mass_kg(1000.0, "bank")
    assert mass == pytest.approx(1.43e6)
    for state in ("bank", "loose", "compacted"):
        assert card.dry_mass_kg(card.volume_m3(mass, state), state) == pytest.approx(mass, rel=1e-15)
    assert card.loaded_moist_mass_kg(1000.0) == pytest.approx(1075.0)


def test_moist_density_becomes_dry_at_once() -> None:
    card = soil_cards(site(changed(bank={"moist_density": 1760, "water_content": 10})))["loess"]
    assert card.bank_dry_density_kg_m3 == pytest.approx(1600.0)


def test_topsoil_is_never_compacted() -> None:
    card = soil_cards(site({"use": "topsoil", "bank": {"dry_density": 1250}}, name="topsoil"))["topsoil"]
    assert card.fill_dry_density_kg_m3 is None
    assert card.shrinkage_factor is None
    with pytest.raises(SoilError, match="no compacted dry density, because its use is topsoil"):
        card.compacted_volume_m3(1.0)


def test_rock_from_a_shrink_range() -> None:
    rock = {"use": "rock", "bank": {"dry_density": 2250}, "shrink_percent_of_bank": [-14, -8]}
    card = soil_cards(site(rock, name="shale"))["shale"]
    assert card.shrinkage_factor == pytest.approx(1.11)
    assert card.shrinkage_factor_sd == pytest.approx(0.06 / 12**0.5)
    assert "shrinkage_factor" in card.assumed
    assert "shrink-assumed" in [warning.code for warning in card.warnings]


def test_oversize_raises_the_maximum() -> None:
    # 20 % of 2.5 in the maximum 2000: 1 / (0.8/2000 + 0.2/2500) = 2083.333; water 0.8 × 10 + 0.2 × 1 = 8.2
    card = soil_cards(
        site(
            changed(
                proctor={"method": "ASTM D698", "max_dry_density": 2000, "optimum_water_content": 10.0},
                oversize={"percent": 20, "specific_gravity": 2.5, "water_content": 1.0},
                bank={"dry_density": 1700},
            )
        )
    )["loess"]
    assert card.max_dry_density_kg_m3 == pytest.approx(2083.3333, abs=1e-3)
    assert card.optimum_water_content_percent == pytest.approx(8.2)


def test_bank_over_the_maximum_only_warns() -> None:
    card = soil_cards(site(changed(bank={"dry_density": 1800}, loose={"swell_percent": 30})))["loess"]
    assert [warning.code for warning in card.warnings] == ["bank-denser-than-maximum"]


@pytest.mark.parametrize(
    ("material", "fill", "message"),
    [
        ({"loose": {"dry_density": 1500}}, FILL, r"loose\.dry_density: 1500 kg/m³ is not below the bank dry density"),
        ({"bank": {"dry_density": 2700}}, FILL, r"bank\.dry_density: 2700 kg/m³ is at or over the density of its grains"),
        ({"bank": {"dry_density": 1700, "water_content": 25}}, FILL, r"write it as bank\.moist_density"),
        ({"specific_gravity": 2.4}, FILL, r"proctor: .* above zero air voids; .* Suspect specific_gravity = 2\.4"),
        ({}, {**FILL, "water_content_offset": 6}, r"greatest water content possible there is 21\.57 %\. Suspect fill\.wat"),
        ({}, {**FILL, "water_content_window": [-1, 6]}, r"the wet end of the window, 22\.00 % water .* Suspect fill\.water"),
        ({}, {**FILL, "expected_compaction": 112}, r"saturation 123.0 .* Suspect the expected compaction"),
        ({"proctor": None}, FILL, "what it becomes as fill is missing; give proctor"),
        ({"bank": {}}, FILL, "its dry density is missing; give dry_density"),
        ({"oversize": {"percent": 45}}, FILL, r"45 %; it must be 0 to 40 % \(ASTM D4718"),
    ],
)  # fmt: skip
def test_impossible_soils_are_refused(material: dict[str, Any], fill: dict[str, Any], message: str) -> None:
    with pytest.raises(SoilError, match=message):
        soil_cards(site(changed(**material), fill=fill))


def test_every_fault_of_a_material_is_named() -> None:
    bad = changed(loose={"dry_density": 1500}, specific_gravity=2.4)
    with pytest.raises(SoilError, match=r"2 faults in the soils\n.*proctor.*\n.*loose"):
        soil_cards(site(bad))


@pytest.mark.parametrize(
    ("material", "message"),
    [
        ({"bank": {"moist_density": 1760}}, "give water_content with moist_density"),
        (
            {"bank": {"dry_density": 1430, "moist_density": 1500, "water_content": 5}},
            "give one of dry_density, moist",
        ),
        ({"shrink_percent_of_bank": [5, 10]}, "proctor and shrink_percent_of_bank are given; keep one"),
        ({"fill": {"dry_density": 1700}}, r"proctor and fill\.dry_density are given; keep one"),
        ({"use": "rock"}, "rock has no compaction test"),
        (
            {"proctor": {"method": "ASTM D698", "max_dry_density": 1760}},
            "give max_dry_density and optimum_water",
        ),
        ({"bank": {"dry_density": 1430, "water_content": 0.075}}, "looks like a fraction"),
        ({"bank": {"dry_density": 110}}, "looks like lb/ft³"),
    ],
)
def test_contradictions_in_the_site_file(material: dict[str, Any], message: str) -> None:
    with pytest.raises(SiteFileError, match=message):
        site(changed(**material))


def test_missing_sections_are_named() -> None:
    document = {
        "site": {"name": "Plover Ridge", "units": "metric"},
        "ground": {"existing": {"level": 1.0}, "finished": {"level": 2.0}},
    }
    with pytest.raises(SiteFileError, match=r"\[material\.\*\] and \[fill\] missing"):
        soil_cards(check_site(document, Path()))


def test_us_site_gives_the_same_card() -> None:
    pcf = 16.01846337396014
    us = changed(
        bank={"dry_density": 1430 / pcf, "water_content": 7.5},
        loose={"dry_density": 1150 / pcf},
        proctor={"method": "ASTM D698", "max_dry_density": 1760 / pcf, "optimum_water_content": 16.0},
    )
    metric, mirrored = soil_cards(site(LOESS))["loess"], soil_cards(site(us, units="us"))["loess"]
    one, other = dict(flat(metric.to_dict())), dict(flat(mirrored.to_dict()))
    assert one.keys() == other.keys()
    for key, value in one.items():
        assert other[key] == (pytest.approx(value, rel=1e-9) if isinstance(value, float) else value)


def flat(value: Any, key: str = "") -> Iterator[tuple[str, Any]]:
    """Every number and text of a JSON value with its path."""
    if isinstance(value, dict):
        for name, inner in value.items():
            yield from flat(inner, f"{key}.{name}")
    elif isinstance(value, list):
        for i, inner in enumerate(value):
            yield from flat(inner, f"{key}[{i}]")
    else:
        yield key, value
