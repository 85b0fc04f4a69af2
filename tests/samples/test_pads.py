"""What the houses of Larkspur Campus stand on, by plain numpy at cell centres."""

import numpy as np
import pytest
import shapely

import earthwork
from tests.samples.ground_by_numpy import SAMPLES, Plan

FOLDER = SAMPLES / "larkspur-campus"


@pytest.fixture(scope="module")
def pads():
    found = earthwork.pads(FOLDER / "site.toml").to_dict()["pads"]
    return {row["pad"]: row for row in found}


@pytest.fixture(scope="module")
def by_numpy():
    """Depth (+ is fill) and fill thickness [m] of the cells under each house and 1.5 m around it."""
    plan = Plan(FOLDER)
    stripped = plan.elevation("existing") - 0.15 * plan.inside("grading")
    subgrade = plan.elevation("finished") - 0.40 * plan.inside("buildings") - 0.45 * plan.inside("pavement")
    subgrade -= 0.15 * plan.inside("green")
    depth = subgrade - stripped
    # A metre is dug out below the lower of the two and refilled, all over the pads and 1.5 m beyond.
    thickness = np.clip(depth, 0, None) + 1.0 * plan.inside("pads", 1.5)
    columns, houses = plan.features("buildings")
    under = {}
    for name, house in zip(columns["building"], houses, strict=True):
        inside = shapely.contains_xy(house.buffer(1.5), *plan.centres())
        under[name] = depth[inside], thickness[inside]
    return under


@pytest.mark.parametrize("name", ["Aster House", "Bergamot House", "Clover House", "Dogwood House", "Elder House"])
def test_thickness_and_shares(pads, by_numpy, name):
    depth, thickness = by_numpy[name]
    found = pads[name]
    assert found["cut_share_percent"] == pytest.approx(100 * (depth < 0).mean(), abs=0.7)
    assert found["fill_share_percent"] == pytest.approx(100 * (depth > 0).mean(), abs=0.7)
    # Cells on the edge of a slab share in two sections, 0.40 and 0.15 m: here by their centre, there by area.
    assert found["max_fill_m"] == pytest.approx(thickness.max(), abs=0.125)
    assert found["min_fill_m"] == pytest.approx(thickness.min(), abs=0.125)
    assert found["mean_fill_m"] == pytest.approx(thickness.mean(), abs=0.03)
    assert found["p95_fill_m"] == pytest.approx(np.percentile(thickness, 95), abs=0.05)
    assert found["differential_fill_m"] == pytest.approx(np.ptp(thickness), abs=0.25)


def test_story_of_the_houses(pads):
    """A cut pad on loess, a deep fill, two transitions, and loess that may collapse under all of them."""
    assert {name: row["class"] for name, row in pads.items()} == {
        "Aster House": "cut",
        "Bergamot House": "transition",
        "Clover House": "deep fill",
        "Dogwood House": "fill",
        "Elder House": "transition",
    }
    for row in pads.values():
        assert row["natural_ground"]["material"] == "loess"
        assert "collapse" in row["natural_ground"]["flags"]
        # 1430 kg/m³ in the ground against a maximum of 1761
        assert row["natural_ground"]["percent_of_maximum"] == pytest.approx(81.2, abs=0.2)


def test_settlement_is_the_stated_share_of_the_thickness(pads):
    """0.2 to 1.0 % of the greatest fill thickness, after construction: a screen."""
    for row in pads.values():
        assert row["settlement_low_m"] == pytest.approx(0.002 * row["max_fill_m"], rel=1e-6)
        assert row["settlement_high_m"] == pytest.approx(0.010 * row["max_fill_m"], rel=1e-6)
