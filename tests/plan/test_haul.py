"""Haul plans of small sites worked by hand, from the surfaces on disk to the moves."""

from itertools import pairwise

import geopandas
import numpy as np
import pytest
import scipy.optimize
import shapely

from earthwork.errors import FileError, GroundError, PlanError, SiteFileError
from earthwork.plan.haul import haul

from .conftest import FILL, LOESS

#: 1600 bank, 1800 in the fill (expected compaction 100 %), 1280 loose; moist 1.10 as loaded.
SHALE = {"use": "rock", "bank": {"dry_density": 2250.0, "water_content": 0.0}, "loose": {"dry_density": 1500.0},
         "fill": {"dry_density": 2000.0}}  # fmt: skip
TOPSOIL = {"use": "topsoil", "bank": {"dry_density": 1250.0, "water_content": 10.0}, "loose": {"swell_percent": 25.0}}
LAYERS = {"stratum": [{"material": "loess"}], "material": {"loess": LOESS}, "fill": FILL}
WEST, NORTH = 500_000.0, 4_000_000.0


def flat(rows=20, columns=40):
    return np.full((rows, columns), 100.0)


def cut_and_fill(cut=1.0, fill=0.5):
    """Cut in the west ten columns, fill in the east ten, 20 rows of 1 m cells."""
    finished = flat()
    finished[:, :10] -= cut
    finished[:, 30:] += fill
    return flat(), finished


def at(column, row):
    """CRS coordinates of a column and row."""
    return [WEST + column, NORTH - row]


def write_shapes(path, layer, shapes, **attributes):
    """Shapes in columns and rows, east and south of the north-west corner."""
    moved = [shapely.transform(s, lambda p: np.column_stack([WEST + p[:, 0], NORTH - p[:, 1]])) for s in shapes]
    geopandas.GeoDataFrame(attributes or {"id": range(len(moved))}, geometry=moved).to_file(path, layer=layer)


@pytest.fixture
def make_haul(make_site):
    def make(existing, finished, *, haul=None, **tables):
        return make_site(
            existing, finished, **{**LAYERS, "haul": {"block": 20.0, "cost": 1.0, **(haul or {})}, **tables}
        )

    return make


def moved(result):
    return {(m.from_name, m.to_name): m for m in result.moves}


# --- by hand ------------------------------------------------------------------------------------------------------


def test_cut_to_fill_and_the_rest_to_the_stockpile(make_haul):
    # 200 m³ of cut are 320 t; the fill of 100 m³ takes 180 t from centre to centre, 30 m; 140 t stay.
    result = haul(make_haul(*cut_and_fill()))
    moves = moved(result)
    fill = moves["A1 loess", "B1 fill"]
    assert fill.dry_mass_t == pytest.approx(180)
    assert (fill.bank_m3, fill.compacted_m3, fill.loose_m3) == (
        pytest.approx(112.5), pytest.approx(100), pytest.approx(180 / 1.28),
    )  # fmt: skip
    assert fill.distance_m == pytest.approx(30)
    rest = moves["A1 loess", "on-site stockpile"]
    assert (rest.dry_mass_t, rest.distance_m) == (pytest.approx(140), pytest.approx(0))
    # Money per t·km.
    assert result.cost == pytest.approx(180 * 0.030)
    assert result.total_t_km == pytest.approx(5.4)
    assert result.mean_distance_m == pytest.approx(30 * 180 / 320)
    assert result.loads is None
    assert "surplus-stockpiled" in {w.code for w in result.warnings}


def test_the_json_has_the_keys_of_the_contract(make_haul):
    document = haul(make_haul(*cut_and_fill())).to_dict()
    assert {"moves", "blocks", "mean_distance_m", "total_t_km", "cost", "loads"} <= document.keys()
    move, block = document["moves"][0], document["blocks"][0]
    assert {"from", "to", "material", "dry_mass_t", "bank_m3", "compacted_m3", "loose_m3", "distance_m", "loads",
            "limited_by"} <= move.keys()  # fmt: skip
    assert {"block", "kind", "easting_m", "northing_m", "dry_mass_t", "compacted_m3", "marginal_cost"} <= block.keys()
    kinds = {b["block"]: b["kind"] for b in document["blocks"]}
    assert kinds == {"A1 loess": "cut", "B1 fill": "fill", "on-site stockpile": "disposal"}
    assert (block["easting_m"], block["northing_m"]) == (pytest.approx(WEST + 5), pytest.approx(NORTH - 10))
    assert (block["dry_mass_t"], block["compacted_m3"]) == (pytest.approx(320), None)


def test_one_more_tonne(make_haul):
    # One more tonne of cut goes to the stockpile where it lies, for nothing; one more in the fill comes 30 m.
    blocks = {b.block: b for b in haul(make_haul(*cut_and_fill())).blocks}
    assert blocks["A1 loess"].marginal_cost == pytest.approx(0)
    assert blocks["B1 fill"].marginal_cost == pytest.approx(0.030)
    assert blocks["B1 fill"].compacted_m3 == pytest.approx(100)


def test_loss_is_taken_off_before_the_move(make_haul):
    result = haul(make_haul(*cut_and_fill(), material={"loess": {**LOESS, "loss_percent": 5}}))
    assert sum(m.dry_mass_t for m in result.moves) == pytest.approx(320 * 0.95)


def test_borrow_makes_up_a_shortage_at_its_price(make_haul):
    # Fill of 300 m³ needs 540 t; the cut gives 320, the pit 220 t of 137.5 bank m³ at 2 each.
    pit = {"name": "pit", "at": at(35.0, 110.0), "material": "loess", "price": 2.0}
    result = haul(make_haul(*cut_and_fill(fill=1.5), borrow=[pit]))
    brought = moved(result)["pit", "B1 fill"]
    assert (brought.dry_mass_t, brought.bank_m3) == (pytest.approx(220), pytest.approx(137.5))
    assert brought.distance_m == pytest.approx(100)
    assert result.cost == pytest.approx(320 * 0.030 + 220 * 0.100 + 137.5 * 2)
    assert {b.block: b.marginal_cost for b in result.blocks}["B1 fill"] == pytest.approx(0.100 + 2 / 1.6)


@pytest.mark.parametrize(("per", "cost"), [("bank", 2.0 / 1.6), ("loose", 2.0 / 1.28), ("mass", 2.0)])
def test_price_of_borrow_by_bank_loose_or_mass(make_haul, per, cost):
    pit = {"name": "pit", "at": at(35.0, 10.0), "material": "loess", "price": 2.0, "price_per": per}
    result = haul(make_haul(flat(), cut_and_fill(cut=0.0)[1], borrow=[pit]))
    assert result.cost == pytest.approx(180 * cost)


def test_us_prices_are_per_yard_and_ton_mile(make_haul):
    pit = {"name": "pit", "at": at(35.0, 10.0), "material": "loess", "price": 2.0}
    soil = {**LOESS, "bank": {"dry_density": "1600 kg/m3", "water_content": 10.0},
            "proctor": {"method": "ASTM D698", "max_dry_density": "1800 kg/m3", "optimum_water_content": 14.0}}  # fmt: skip
    result = haul(
        make_haul(flat(), cut_and_fill(cut=0.0)[1], units="us", borrow=[pit], material={"loess": soil},
                  haul={"block": "20 m"})
    )  # fmt: skip
    # Local grids of US sites are in feet: 100 ft³ … the fill is 20 × 10 × 0.5 ft³ compacted.
    yards = 100 * 1800 / 1600 / 27
    assert result.cost == pytest.approx(yards * 2.0, rel=1e-6)


def test_disposal_takes_what_it_accepts_at_its_price(make_haul):
    tip = {"name": "tip", "at": at(5.0, 60.0), "accepts": ["loess"], "price": 4.0}
    result = haul(make_haul(*cut_and_fill(), disposal=[tip]))
    gone = moved(result)["A1 loess", "tip"]
    assert (gone.dry_mass_t, gone.distance_m) == (pytest.approx(140), pytest.approx(50))
    assert result.cost == pytest.approx(180 * 0.030 + 140 * 0.050 + 140 / 1.28 * 4)
    assert "surplus-stockpiled" not in {w.code for w in result.warnings}


def test_waste_leaves_and_fill_comes_at_once(make_haul):
    waste = {**LOESS, "use": "waste"}
    del waste["proctor"]
    pit = {"name": "pit", "at": at(35.0, 30.0), "material": "loess"}
    result = haul(
        make_haul(
            *cut_and_fill(), stratum=[{"material": "clay"}], material={"clay": waste, "loess": LOESS}, borrow=[pit]
        )
    )
    assert set(moved(result)) == {("A1 clay", "on-site stockpile"), ("pit", "B1 fill")}
    assert moved(result)["A1 clay", "on-site stockpile"].compacted_m3 is None


def test_topsoil_goes_to_its_respreading(make_haul, tmp_path):
    write_shapes(tmp_path / "plan.gpkg", "east", [shapely.box(30, 0, 40, 20)])
    write_shapes(tmp_path / "plan.gpkg", "west", [shapely.box(0, 0, 10, 20)])
    # 0.5 m are stripped in the west, 0.3 m laid in the east, which lies 0.3 m higher in the end: no earth fill.
    finished = flat()
    finished[:, :10] -= 0.5
    finished[:, 30:] += 0.3
    result = haul(
        make_haul(
            flat(), finished, material={"loess": LOESS, "topsoil": TOPSOIL},
            strip=[{"material": "topsoil", "depth": 0.5, "area": {"file": "plan.gpkg", "layer": "west"}}],
            section=[{"name": "lawn", "thickness": 0.3, "source": "topsoil",
                      "area": {"file": "plan.gpkg", "layer": "east"}}],
        )
    )  # fmt: skip
    moves = moved(result)
    assert moves["A1 topsoil", "B1 lawn"].dry_mass_t == pytest.approx(0.3 * 200 * 1.25)
    assert moves["A1 topsoil", "on-site stockpile"].dry_mass_t == pytest.approx(0.2 * 200 * 1.25)


def test_over_excavated_soil_is_dug_and_refilled(make_haul, tmp_path):
    write_shapes(tmp_path / "plan.gpkg", "pad", [shapely.box(30, 0, 40, 20)])
    dug = {"name": "pad", "depth": 1.0, "area": {"file": "plan.gpkg", "layer": "pad"}}
    result = haul(make_haul(*cut_and_fill(cut=0.5, fill=0.0), over_excavation=[dug]))
    # 200 m³ of pad are dug (320 t) and 200 m³ refilled (360 t): 40 t more come from the cut of 160 t.
    moves = moved(result)
    assert moves["B1 loess", "B1 fill"].dry_mass_t == pytest.approx(320)
    assert moves["B1 loess", "B1 fill"].distance_m == pytest.approx(0, abs=1e-6)
    assert moves["A1 loess", "B1 fill"].dry_mass_t == pytest.approx(40)
    assert moves["A1 loess", "on-site stockpile"].dry_mass_t == pytest.approx(120)


def test_scarified_ground_takes_what_it_shrinks(make_haul):
    result = haul(make_haul(*cut_and_fill(cut=2.0), scarify=[{"depth": 0.2}]))
    # 0.2 m under 200 m² of fill shrink by a ninth: 4.444 m³ more fill.
    assert {b.block: b.compacted_m3 for b in result.blocks}["B1 fill"] == pytest.approx(100 + 0.2 * 200 / 9)


def test_allowances_give_and_take_at_their_places(make_haul):
    spoil = {"name": "trench", "material": "loess", "volume": 50.0, "state": "bank", "at": at(35.0, 10.0)}
    berm = {"name": "berm", "material": "loess", "volume": -20.0, "state": "compacted", "at": at(5.0, 10.0)}
    result = haul(make_haul(*cut_and_fill(), allowance=[spoil, berm]))
    moves = moved(result)
    assert moves["trench", "B1 fill"].dry_mass_t == pytest.approx(80)
    assert moves["A1 loess", "berm"].dry_mass_t == pytest.approx(36)


def test_an_allowance_without_a_place_is_taken_for_the_middle_of_the_cut(make_haul):
    spoil = {"name": "trench", "material": "loess", "volume": 50.0}
    result = haul(make_haul(*cut_and_fill(), allowance=[spoil]))
    places = {b.block: (b.easting_m, b.northing_m) for b in result.blocks}
    assert places["trench"] == pytest.approx(places["A1 loess"])
    assert 'allowance "trench": no place is given' in next(
        w.message for w in result.warnings if w.code == "place-assumed"
    )


def test_bands_of_compaction_take_more_of_a_soil(make_haul):
    # Fill 2 m high; under 1 m it is to reach 108 % of the maximum: 1944 kg/m³.
    fill = {**FILL, "by_depth": [{"below": 1.0, "relative_compaction": 105.0, "expected_compaction": 108.0}]}
    result = haul(make_haul(*cut_and_fill(cut=4.0, fill=2.0), fill=fill))
    move = moved(result)["A1 loess", "B1 fill"]
    assert move.compacted_m3 == pytest.approx(400)
    assert move.dry_mass_t == pytest.approx(200 * 1.8 + 200 * 1.944)
    assert "network simplex" in result.certificate.method


def test_soils_that_differ_by_band_are_a_linear_program(make_haul):
    # The upper half of the cut is loess, the lower shale, which is 2000 at any depth; both go into banded fill.
    fill = {**FILL, "by_depth": [{"below": 1.0, "relative_compaction": 105.0, "expected_compaction": 108.0}]}
    finished = flat()
    finished[:, :10] -= 2.0
    finished[:, 30:] += 1.5
    finished[:, 15:20] += 0.5
    result = haul(
        make_haul(
            flat(), finished, fill=fill, stratum=[{"material": "loess", "thickness": 1.0}, {"material": "shale"}],
            material={"loess": LOESS, "shale": SHALE}, haul={"block": 5.0},
        )
    )  # fmt: skip
    assert "linear program" in result.certificate.method
    assert result.certificate.relative_gap <= 1e-8
    into = {}
    for m in result.moves:
        if m.to_name.endswith("fill"):
            into[m.to_name] = into.get(m.to_name, 0.0) + m.compacted_m3
    assert sum(into.values()) == pytest.approx(200 * 1.5 + 100 * 0.5)


def test_rules_say_what_may_go_into_the_top_metre(make_haul):
    # Shale lies nearest, but only loess may go into the top metre of a 2 m fill.
    finished = flat()
    finished[:, :10] -= 2.0
    finished[:, 10:20] -= 2.0
    finished[:, 30:] += 2.0
    rule = {"name": "top metre", "materials": ["loess"], "top": 1.0}
    site = make_haul(
        flat(), finished, stratum=[{"material": "loess", "thickness": 1.0}, {"material": "shale"}],
        material={"loess": LOESS, "shale": SHALE}, haul={"rule": [rule], "block": 10.0},
    )  # fmt: skip
    result = haul(site)
    top = {m.material for m in result.moves if m.to_name.endswith("fill, top metre")}
    assert top == {"loess"}
    parts = {b.block: b.compacted_m3 for b in result.blocks if b.kind == "fill"}
    assert parts == {
        name: pytest.approx(100) for name in ("D1 fill", "D1 fill, top metre", "D2 fill", "D2 fill, top metre")
    }


# --- trucks -------------------------------------------------------------------------------------------------------


def test_loads_by_volume_and_by_weight(make_haul):
    # 10 loose m³ weigh 12.8 t dry and 14.08 t moist: a payload of 15 t leaves volume in charge, one of 11 t takes 10 t.
    by_volume = haul(make_haul(*cut_and_fill(), haul={"truck": {"heaped_volume": 10, "payload": 15}}))
    fill = moved(by_volume)["A1 loess", "B1 fill"]
    assert (fill.loads, fill.limited_by) == (pytest.approx(180 / 12.8), "volume")
    # 14.06 and 10.94 loads are 15 and 11 whole ones.
    assert by_volume.loads == 26
    by_weight = haul(make_haul(*cut_and_fill(), haul={"truck": {"heaped_volume": 10, "payload": 11}}))
    fill = moved(by_weight)["A1 loess", "B1 fill"]
    assert (fill.loads, fill.limited_by) == (pytest.approx(18), "weight")


def test_whole_loads_are_rounded_once_for_each_destination(make_haul):
    truck = {"heaped_volume": 10, "payload": 15}
    many = haul(make_haul(*cut_and_fill(), haul={"block": 10.0, "truck": truck}))
    for row in many.loads_by_destination:
        decimal = sum(m.loads for m in many.moves if (m.material, m.to_name) == (row["material"], row["to"]))
        assert decimal <= row["loads"] < decimal + 1


def test_legal_weight_on_the_road_for_what_leaves(make_haul):
    truck = {"heaped_volume": 10, "payload": 15, "road_payload": 11}
    tip = {"name": "tip", "at": at(5.0, 60.0)}
    moves = moved(haul(make_haul(*cut_and_fill(), haul={"truck": truck}, disposal=[tip])))
    assert (moves["A1 loess", "tip"].loads, moves["A1 loess", "tip"].limited_by) == (pytest.approx(14), "weight")
    assert moves["A1 loess", "B1 fill"].limited_by == "volume"


def test_trucks_match_the_loader(make_haul):
    # 30 m at 5 m/s loaded and 10 m/s empty are 6 s and 3 s; with 2 min to load, 1 to dump and none to wait the cycle is
    # 3.15 min and 1.575 trucks match.
    truck = {"heaped_volume": 10, "payload": 15, "speed_loaded": "5 m/s", "speed_empty": "10 m/s", "load_time": 2,
             "dump_time": 1, "hour_cost": 90, "loader_hour_cost": 120}  # fmt: skip
    result = haul(make_haul(*cut_and_fill(), haul={"truck": truck}))
    row = next(r for r in result.fleet.rows if r.to_name == "B1 fill")
    assert row.cycle_min == pytest.approx(3.15)
    assert (row.trucks_to_match, row.trucks) == (pytest.approx(1.575), 2)
    assert row.loads_per_hour == pytest.approx(30)
    assert row.hours == pytest.approx(180 / 12.8 / 30)
    assert row.cost == pytest.approx(row.hours * (2 * 90 + 120))


def test_the_cheapest_plan_by_time_may_be_another_one(make_haul):
    # By time a plan costs truck hours: 6 s + 3 s of travel and 3 min of the rest for each of 14.0625 loads, and 3 min
    # for the loads that go to the stockpile in place.
    truck = {"heaped_volume": 10, "payload": 15, "speed_loaded": "5 m/s", "speed_empty": "10 m/s", "load_time": 2,
             "dump_time": 1, "hour_cost": 90}  # fmt: skip
    result = haul(make_haul(*cut_and_fill(), haul={"truck": truck, "cost_by": "time"}))
    fill, rest = 180 / 12.8, 140 / 12.8
    assert result.cost == pytest.approx((fill * 3.15 + rest * 3.0) / 60 * 90)


# --- ways ---------------------------------------------------------------------------------------------------------


def test_barriers_lengthen_the_way_and_roads_bridge_them(make_haul, tmp_path):
    write_shapes(tmp_path / "plan.gpkg", "creek", [shapely.box(19, -200, 21, 200)])
    write_shapes(
        tmp_path / "plan.gpkg", "roads", [shapely.LineString([(15, 10), (25, 10)])], road=["bridge"], speed=[20.0]
    )
    barriers = {"barriers": {"file": "plan.gpkg", "layer": "creek"}}
    free = haul(make_haul(*cut_and_fill()))
    round_it = haul(make_haul(*cut_and_fill(), haul=barriers))
    way = moved(round_it)["A1 loess", "B1 fill"]
    assert way.distance_m == pytest.approx(2 * np.hypot(14, 190) + 2)
    assert round_it.cost > free.cost
    roads = {"file": "plan.gpkg", "layer": "roads", "name": "road", "speed": "speed"}
    bridged = haul(make_haul(*cut_and_fill(), haul={**barriers, "roads": roads, "ground_speed": 20.0}))
    way = moved(bridged)["A1 loess", "B1 fill"]
    assert way.distance_m == pytest.approx(30)
    assert set(way.roads.tolist()) == {-1, 0}


def test_straight_distances_take_a_factor_when_asked(make_haul, tmp_path):
    write_shapes(tmp_path / "plan.gpkg", "creek", [shapely.box(19, -200, 21, 200)])
    how = {"barriers": {"file": "plan.gpkg", "layer": "creek"}, "distance": "straight", "straight_factor": 1.3}
    result = haul(make_haul(*cut_and_fill(), haul=how))
    assert moved(result)["A1 loess", "B1 fill"].distance_m == pytest.approx(39)
    assert result.cost == pytest.approx(180 * 0.039)
    assert "barriers-ignored" in {w.code for w in result.warnings}


def test_straight_distances_by_time_take_the_factor_too(make_haul, tmp_path):
    # 30 m × 1.2 out and back at 18 km/h are 0.24 min, with 3 to load: 3.24 min at 60 an hour for each load of 12.8 t.
    write_shapes(tmp_path / "plan.gpkg", "wall", [shapely.box(19, -100, 21, 100)])
    straight = {"distance": "straight", "straight_factor": 1.2, "cost_by": "time",
                "barriers": {"file": "plan.gpkg", "layer": "wall"},
                "truck": {"heaped_volume": 10, "payload": 30, "hour_cost": 60, "speed_loaded": 18, "load_time": 3}}  # fmt: skip
    result = haul(make_haul(*cut_and_fill(), haul=straight))
    fill = moved(result)["A1 loess", "B1 fill"]
    assert (fill.distance_m, fill.cycle.total) == (pytest.approx(36), pytest.approx(3.24))
    assert result.cost == pytest.approx((180 * 3.24 + 140 * 3) / 12.8)


@pytest.mark.parametrize(("count", "code"), [(1, None), (4, "road-over-capacity")])
def test_more_loads_than_a_road_takes_are_told(make_haul, tmp_path, count, code):
    # A bridge of 6 m in a way of 30 m: 0.1 min each way at 18 km/h and 0.8 to dump make a cycle of 1 min, so 60 loads
    # an hour and truck, where the bridge takes 100.
    write_shapes(tmp_path / "plan.gpkg", "wall", [shapely.box(19, -100, 21, 100)])
    write_shapes(tmp_path / "plan.gpkg", "roads", [shapely.LineString([(17, 10), (23, 10)])], road=["bridge"], cap=[100.0])
    ways = {"barriers": {"file": "plan.gpkg", "layer": "wall"}, "ground_speed": 18,
            "roads": {"file": "plan.gpkg", "layer": "roads", "name": "road", "capacity": "cap"}}  # fmt: skip
    truck = {"heaped_volume": 10, "payload": 30, "speed_loaded": 18, "dump_time": 0.8, "count": count}
    result = haul(make_haul(*cut_and_fill(), haul={**ways, "truck": truck}))
    assert result.fleet.roads[0].use_percent == pytest.approx(60 * count)
    told = [w for w in result.warnings if w.code.startswith("road-")]
    assert [w.code for w in told] == ([code] if code else [])
    blind = haul(make_haul(*cut_and_fill(), haul=ways))
    assert 'haul road "bridge": loads an hour are not known' in " ".join(w.message for w in blind.warnings)


def test_rise_and_fall_along_the_way(make_haul):
    existing = 100 + np.tile(0.05 * (np.arange(400) + 0.5), (200, 1))
    finished = existing.copy()
    finished[:, :100] -= 1.0
    finished[:, 300:] += 0.5
    result = haul(make_haul(existing, finished, haul={"block": 200.0}))
    move = moved(result)["A1 loess", "B1 fill"]
    # 300 m up 5 %.
    assert (move.rise_m, move.fall_m) == (pytest.approx(15), pytest.approx(0))


def test_places_off_the_surfaces_are_reached_over_ground_of_unknown_grade(make_haul):
    tip = {"name": "tip", "at": at(5.0, 1020.0)}
    result = haul(make_haul(*cut_and_fill(), disposal=[tip]))
    assert moved(result)["A1 loess", "tip"].unknown_m == pytest.approx(1000, abs=15)
    assert "grade-unknown" in {w.code for w in result.warnings}


# --- blocks -------------------------------------------------------------------------------------------------------


def test_zones_as_blocks(make_haul, tmp_path):
    write_shapes(
        tmp_path / "plan.gpkg", "lots", [shapely.box(0, 0, 12, 20), shapely.box(28, 0, 40, 20)], lot=["west", "east"]
    )
    zones = {"area": {"file": "plan.gpkg", "layer": "lots"}, "name": "lot"}
    result = haul(make_haul(*cut_and_fill(), haul={"by": "zones"}, zones=zones))
    assert ("west loess", "east fill") in moved(result)


def test_block_size_does_not_change_what_is_moved(make_haul):
    rng = np.random.default_rng(0)
    existing = 100 + rng.normal(0, 1, (40, 60))
    finished = existing + np.repeat(np.repeat(rng.normal(-0.7, 2, (4, 6)), 10, 0), 10, 1)
    totals = []
    for block in (5.0, 10.0, 100.0):
        result = haul(make_haul(existing, finished, haul={"block": block}))
        totals.append((result.dry_mass_t, sum(m.compacted_m3 for m in result.moves if "fill" in m.to_name)))
        assert result.volumes.total.cut_m3 * 1.6 == pytest.approx(result.dry_mass_t, rel=1e-9)
    assert totals[0] == pytest.approx(totals[2], rel=1e-9)
    assert totals[1] == pytest.approx(totals[2], rel=1e-9)


def test_threads_change_nothing(make_haul):
    rng = np.random.default_rng(1)
    existing = 100 + rng.normal(0, 1, (40, 60))
    finished = existing + np.repeat(np.repeat(rng.normal(-0.7, 2, (4, 6)), 10, 0), 10, 1)
    site = make_haul(existing, finished, haul={"block": 10.0})
    assert haul(site, threads=1).to_dict() == haul(site, threads=2).to_dict()


def test_a_zone_that_is_called_as_a_square_is_told_apart(make_haul, tmp_path):
    write_shapes(tmp_path / "plan.gpkg", "lots", [shapely.box(0, 0, 5, 20)], lot=["A1"])
    zones = {"area": {"file": "plan.gpkg", "layer": "lots"}, "name": "lot"}
    result = haul(make_haul(*cut_and_fill(), haul={"by": "zones"}, zones=zones))
    names = [b.block for b in result.blocks]
    assert len(names) == len(set(names))
    assert {"A1 loess", "A1 loess (2)"} <= set(names)


def test_haul_that_costs_nothing_is_told(make_haul):
    assert "haul-free" in {w.code for w in haul(make_haul(*cut_and_fill(), haul={"cost": 0.0})).warnings}


# --- phases -------------------------------------------------------------------------------------------------------


def phased(make_haul, tmp_path, first, second, **tables):
    """West and east halves as two phases."""
    write_shapes(
        tmp_path / "plan.gpkg", "phases", [shapely.box(0, 0, 20, 20), shapely.box(20, 0, 40, 20)], phase=[first, second]
    )
    return make_haul(*cut_and_fill(), phases={"area": {"file": "plan.gpkg", "layer": "phases"}}, **tables)


def test_earth_for_a_later_phase_waits_on_a_stockpile(make_haul, tmp_path):
    pile = {"name": "heap", "at": at(25.0, 10.0), "rehandling": 1.5}
    result = haul(phased(make_haul, tmp_path, 1, 2, stockpile=[pile]))
    moves = moved(result)
    first, second = moves["A1 phase 1 loess", "heap"], moves["heap", "B1 phase 2 fill"]
    assert (first.phase, second.phase) == ("1", "2")
    # All 320 t go there; 180 t of them are loaded again.
    assert (first.dry_mass_t, first.distance_m) == (pytest.approx(320), pytest.approx(20))
    assert (second.dry_mass_t, second.distance_m) == (pytest.approx(180), pytest.approx(10))
    assert result.cost == pytest.approx(320 * 0.020 + 180 * 0.010 + 180 / 1.28 * 1.5)


def test_a_fill_is_never_served_by_a_cut_that_is_not_open(make_haul, tmp_path):
    with pytest.raises(
        PlanError, match=r'haul: "B1 phase 1 fill" needs 100 m³ .* of loess, and 100 m³ of it have no source'
    ):
        haul(phased(make_haul, tmp_path, 2, 1))
    pit = {"name": "pit", "at": at(35.0, 30.0), "material": "loess"}
    result = haul(phased(make_haul, tmp_path, "2025-06-01", "2025-04-01", borrow=[pit]))
    assert set(moved(result)) == {
        ("pit", "B1 phase 2025-04-01 fill"), ("A1 phase 2025-06-01 loess", "on-site stockpile"),
    }  # fmt: skip


def test_a_stockpile_that_is_too_small_is_named(make_haul, tmp_path):
    pile = {"name": "heap", "at": at(25.0, 10.0), "capacity": 100.0}
    tip = {"name": "tip", "at": at(5.0, 60.0)}
    with pytest.raises(
        PlanError,
        match=r'stockpile "heap" would hold 141 m³ \(loose\) after phase 1, .* capacity of 100 m³ is too small by up to 41',
    ):
        haul(phased(make_haul, tmp_path, 1, 2, stockpile=[pile], disposal=[tip]))


def test_earth_that_a_stockpile_has_no_room_for_goes_elsewhere(make_haul, tmp_path):
    # 180 t of fill are 140.6 loose m³; the near heap holds 100 (128 t), 52 t go over the far one.
    near = {"name": "near", "at": at(25.0, 10.0), "capacity": 100.0, "rehandling": 1.5}
    far = {"name": "far", "at": at(25.0, 110.0), "rehandling": 1.5}
    tip = {"name": "tip", "at": at(5.0, 60.0)}
    result = haul(phased(make_haul, tmp_path, 1, 2, stockpile=[near, far], disposal=[tip]))
    moves = moved(result)
    assert moves["A1 phase 1 loess", "near"].dry_mass_t == pytest.approx(128)
    assert moves["far", "B1 phase 2 fill"].dry_mass_t == pytest.approx(52)
    assert moves["A1 phase 1 loess", "tip"].dry_mass_t == pytest.approx(140)
    over_near = 128 * (0.020 + 0.010) + 100 * 1.5
    over_far = 52 * 2 * 0.0 + 52 * (np.hypot(20, 100) + np.hypot(10, 100)) / 1000 + 52 / 1.28 * 1.5
    assert result.cost == pytest.approx(over_near + over_far + 140 * 0.050)
    assert "stockpiles" in result.certificate.method
    assert result.certificate.relative_gap <= 1e-8


def test_a_pit_helps_out_where_a_stockpile_has_no_room(make_haul, tmp_path):
    heap = {"name": "heap", "at": at(25.0, 10.0), "capacity": 100.0}
    pit = {"name": "pit", "at": at(35.0, 510.0), "material": "loess", "price": 5.0}
    tip = {"name": "tip", "at": at(5.0, 60.0)}
    moves = moved(haul(phased(make_haul, tmp_path, 1, 2, stockpile=[heap], disposal=[tip], borrow=[pit])))
    assert moves["pit", "B1 phase 2 fill"].dry_mass_t == pytest.approx(52)
    assert moves["A1 phase 1 loess", "tip"].dry_mass_t == pytest.approx(192)


def test_a_stockpile_is_used_again_when_it_is_empty(make_haul, tmp_path):
    # Three phases in a row from west to east: cut, cut, fill … the heap is filled after 1, emptied in 2, filled again.
    finished = flat(20, 60)
    finished[:, :10] -= 0.5  # phase 1: 160 t
    finished[:, 20:30] += 0.4  # phase 2: 144 t of fill
    finished[:, 30:40] -= 0.6  # phase 2: 192 t, which serve it at once
    finished[:, 50:] += 0.6  # phase 3: 216 t
    thirds = [shapely.box(0, 0, 20, 20), shapely.box(20, 0, 40, 20), shapely.box(40, 0, 60, 20)]
    write_shapes(tmp_path / "plan.gpkg", "phases", thirds, phase=[1, 2, 3])
    heap = {"name": "heap", "at": at(30.0, 30.0), "capacity": 130.0}
    site = make_haul(
        flat(20, 60), finished, phases={"area": {"file": "plan.gpkg", "layer": "phases"}}, stockpile=[heap],
        disposal=[{"name": "tip", "at": at(30.0, 90.0)}], haul={"block": 10.0},
        borrow=[{"name": "pit", "at": at(55.0, 300.0), "material": "loess", "price": 9.0}],
    )  # fmt: skip
    result = haul(site)
    loose, order = {}, {"1": 0, "2": 1, "3": 2}
    for m in result.moves:
        if m.to_name == "heap":
            for t in range(order[m.phase], 3):
                loose[t] = loose.get(t, 0.0) + m.loose_m3
        if m.from_name == "heap":
            for t in range(order[m.phase], 3):
                loose[t] = loose.get(t, 0.0) - m.loose_m3
    assert loose[0] <= 130 * (1 + 1e-9)
    assert loose[1] <= 130 * (1 + 1e-9)
    assert loose[2] == pytest.approx(0, abs=1e-6)
    assert sum(m.compacted_m3 for m in result.moves if m.to_name.endswith("fill")) == pytest.approx(200)


def test_pads_already_built_are_barriers_for_later_phases(make_haul, tmp_path):
    write_shapes(tmp_path / "plan.gpkg", "built", [shapely.box(12, -100, 18, 100)])
    pile = {"name": "heap", "at": at(25.0, 10.0)}
    built = {"built": {"file": "plan.gpkg", "layer": "built"}}
    site = phased(
        make_haul, tmp_path, 1, 2, haul=built, stockpile=[pile], disposal=[{"name": "tip", "at": at(5.0, 30.0)}]
    )
    moves = moved(haul(site))
    # The pad of phase 1 is open while phase 1 is dug; a haul across it in phase 2 goes round.
    assert moves["A1 phase 1 loess", "heap"].distance_m == pytest.approx(20)
    site = phased(make_haul, tmp_path, 1, 2, haul=built, borrow=[{"name": "pit", "at": at(5.0, 10.0), "material": "loess",
                                                                  "price": -100.0}])  # fmt: skip
    assert moved(haul(site))["pit", "B1 phase 2 fill"].distance_m == pytest.approx(
        np.hypot(7, 90) + 6 + np.hypot(17, 90)
    )


# --- prices and properties ----------------------------------------------------------------------------------------


def test_a_negative_price_is_income(make_haul):
    pit = {"name": "pit", "at": at(35.0, 10.0), "material": "loess", "price": -3.0}
    result = haul(make_haul(*cut_and_fill(), borrow=[pit]))
    # The pit pays for every load that the fill can take; none of it goes straight to the stockpile.
    assert moved(result)["pit", "B1 fill"].dry_mass_t == pytest.approx(180)
    assert result.cost == pytest.approx(-180 / 1.6 * 3)


def test_opening_a_pit_is_paid_once_and_only_when_worth_it(make_haul):
    near = {"name": "near", "at": at(35.0, 110.0), "material": "loess", "opening": 50.0}
    far = {"name": "far", "at": at(35.0, 310.0), "material": "loess"}
    # Fill of 100 m³ (180 t) without cut: near costs 18 + 50, far 54.
    site = make_haul(flat(), cut_and_fill(cut=0.0)[1], borrow=[near, far])
    result = haul(site)
    assert (result.cost, result.opened) == (pytest.approx(180 * 0.3), ())
    near["opening"] = 30.0
    result = haul(make_haul(flat(), cut_and_fill(cut=0.0)[1], borrow=[near, far]))
    assert (result.cost, result.opened) == (pytest.approx(180 * 0.1 + 30), ("near",))


def test_the_choice_among_many_pits_agrees_with_a_mixed_integer_program(make_haul):
    # 600 m³ of fill need 1080 t, the cut gives 320 t: 760 t come from pits, each with its fee, capacity and price.
    pits = [
        {"name": f"pit {k}", "at": at(35.0 + k, 30.0 + 7 * k % 11), "material": "loess", "capacity": 60.0 + k,
         "price": 1.0 + 0.01 * k, "opening": 50.0 + k % 3}
        for k in range(16)
    ]  # fmt: skip
    away = np.array([np.hypot(k, 20.0 + 7 * k % 11) for k in range(16)])
    price = away / 1000 + np.array([p["price"] for p in pits]) / 1.6
    capacity, fee = np.array([p["capacity"] for p in pits]) * 1.6, np.array([p["opening"] for p in pits])
    one = np.eye(16)
    expected = scipy.optimize.milp(
        np.concatenate([price, fee]),
        constraints=[
            scipy.optimize.LinearConstraint(np.concatenate([np.ones(16), np.zeros(16)]), 760, 760),
            scipy.optimize.LinearConstraint(np.hstack([one, -np.diag(capacity)]), -np.inf, 0),
        ],
        integrality=np.repeat([0, 1], 16), bounds=scipy.optimize.Bounds(0, np.repeat([np.inf, 1.0], 16)),
        options={"mip_rel_gap": 0.0},
    )  # fmt: skip
    result = haul(make_haul(*cut_and_fill(fill=3.0), borrow=pits))
    assert result.cost == pytest.approx(expected.fun + 320 * 0.030, rel=1e-7)


def test_a_second_identical_pit_never_costs_more(make_haul):
    pit = {"name": "pit", "at": at(35.0, 110.0), "material": "loess", "capacity": 200.0, "price": 1.0}
    other = {**pit, "name": "twin"}
    dear = {"name": "dear", "at": at(35.0, 310.0), "material": "loess", "price": 9.0}
    once = haul(make_haul(*cut_and_fill(fill=4.0), borrow=[pit, dear])).cost
    assert haul(make_haul(*cut_and_fill(fill=4.0), borrow=[pit, other, dear])).cost <= once


@pytest.mark.parametrize("seed", range(4))
def test_another_barrier_never_makes_a_plan_cheaper(make_haul, tmp_path, seed):
    rng = np.random.default_rng(seed)
    existing = 100 + rng.normal(0, 1, (40, 60))
    finished = existing + np.repeat(np.repeat(rng.normal(-0.7, 2, (4, 6)), 10, 0), 10, 1)
    corners = rng.uniform(0, 50, (6, 2))
    boxes = [shapely.box(x, y, x + 4, y + 4) for x, y in corners]
    costs = []
    for count in (0, 2, 4, 6):
        kept = [b for i, b in enumerate(boxes[:count]) if all(b.disjoint(o) for o in boxes[:i])]
        write_shapes(tmp_path / "no_go.gpkg", f"n{count}", kept or [shapely.box(900, 900, 901, 901)])
        barriers = {"barriers": {"file": "no_go.gpkg", "layer": f"n{count}"}, "block": 10.0}
        costs.append(haul(make_haul(existing, finished, haul=barriers)).cost)
    assert all(b >= a * (1 - 1e-6) for a, b in pairwise(costs))


def test_noise_alone_makes_a_plan_too(make_haul):
    rng = np.random.default_rng(2)
    existing = 100 + rng.normal(0, 0.02, (40, 60))
    result = haul(make_haul(existing, 100 + rng.normal(-0.02, 0.02, (40, 60)), haul={"block": 10.0}))
    assert result.certificate.relative_gap <= 1e-9


# --- the mass curve -----------------------------------------------------------------------------------------------


def test_mass_curve_along_a_baseline(make_haul, tmp_path):
    write_shapes(tmp_path / "plan.gpkg", "line", [shapely.LineString([(0, 10), (40, 10)])])
    line = {"line": {"file": "plan.gpkg", "layer": "line"}, "interval": 5.0, "start": 100.0, "freehaul": 20.0,
            "overhaul_price": 2.0, "borrow_cost": 5.0, "station": 10.0}  # fmt: skip
    # 225 m³ of cut at 8/9 make the 200 m³ of fill: 112.5 bank in each of two intervals.
    result = haul(make_haul(*cut_and_fill(cut=1.125, fill=1.0), baseline=line))
    curve = result.line.to_dict()
    rows = curve["stations"]
    assert [r["station_m"] for r in rows] == [100, 105, 110, 115, 120, 125, 130, 135, 140]
    assert [r["ordinate_compacted_m3"] for r in rows] == pytest.approx([0, 100, 200, 200, 200, 200, 200, 100, 0])
    assert curve["balance_points_m"] == [pytest.approx(140)]
    assert curve["mean_haul_m"] == pytest.approx(30)
    # All is hauled 30 m, 10 of them overhaul: 225 bank m³ × 1 station × 2.
    assert curve["overhaul_bank_m3_stations"] == pytest.approx(225)
    assert curve["overhaul_cost"] == pytest.approx(450)
    assert curve["economic_limit_m"] == pytest.approx(20 + 10 * 5 / 2)
    check = curve["check"]
    # Sections of 22.5 m² at 0 and 5 m, none at 10 m where the cut ends: end areas lose half of the second interval,
    # the prismoidal formula with its middle section a sixth.
    assert check["cut"]["grid_m3"] == pytest.approx(225)
    assert check["cut"]["end_area_m3"] == pytest.approx(112.5 + 56.25)
    assert check["cut"]["prismoidal_m3"] == pytest.approx(112.5 + 112.5 * 5 / 6)


def test_end_areas_of_a_wedge_are_exact(make_haul, tmp_path):
    # Cut grows evenly along the line: end areas, the prismoidal formula and the grid agree.
    depth = np.tile(0.05 * (np.arange(60) + 0.5), (20, 1))
    write_shapes(tmp_path / "plan.gpkg", "line", [shapely.LineString([(0.0, 10), (60, 10)])])
    line = {"line": {"file": "plan.gpkg", "layer": "line"}, "interval": 10.0}
    curve = haul(make_haul(flat(20, 60), flat(20, 60) - depth, baseline=line)).line.to_dict()["check"]["cut"]
    assert curve["grid_m3"] == pytest.approx(20 * 0.05 * 60**2 / 2)
    assert curve["end_area_m3"] == pytest.approx(curve["grid_m3"], rel=0.02)
    assert curve["prismoidal_m3"] == pytest.approx(curve["grid_m3"], rel=0.02)


def test_stations_on_a_bent_line_add_up_to_the_site(make_haul, tmp_path):
    rng = np.random.default_rng(3)
    existing = 100 + rng.normal(0, 1, (40, 60))
    finished = existing + np.repeat(np.repeat(rng.normal(-0.7, 2, (4, 6)), 10, 0), 10, 1)
    write_shapes(tmp_path / "plan.gpkg", "line", [shapely.LineString([(2, 3), (30, 8), (35, 30), (58, 38)])])
    line = {"line": {"file": "plan.gpkg", "layer": "line"}, "interval": 7.0}
    result = haul(make_haul(existing, finished, baseline=line))
    assert result.line.cut_m3.sum() == pytest.approx(result.volumes.total.cut_m3, rel=1e-12)
    assert result.line.fill_m3.sum() == pytest.approx(result.volumes.total.fill_m3, rel=1e-12)
    near = {**line, "width": 5.0}
    beside = haul(make_haul(existing, finished, baseline=near)).line
    assert beside.cut_m3.sum() + beside.outside_cut_m3 == pytest.approx(result.volumes.total.cut_m3, rel=1e-12)
    assert beside.outside_cut_m3 > 0


# --- bad input ----------------------------------------------------------------------------------------------------


def test_a_pit_too_small_is_named_with_what_it_lacks(make_haul):
    pit = {"name": "pit", "at": at(35.0, 30.0), "material": "loess", "capacity": 100.0}
    # The fill needs 540 t, the cut has 320 t and the pit 160: 60 t or 37.5 bank m³ are short.
    with pytest.raises(PlanError, match=r"Too small by 38 m³ \(bank\) of loess: raise the capacity of \"pit\" by that"):
        haul(make_haul(*cut_and_fill(fill=1.5), borrow=[pit]))


def test_what_pits_lack_is_told_in_the_soil_that_they_give(make_haul):
    # The fill of 540 t of loess or 600 t of shale has 320 t of loess: 122.2 m³ are left, 244.4 t or 108.6 bank m³ of
    # shale, of which the pit gives 10.
    pit = {"name": "rock pit", "at": at(35.0, 60.0), "material": "shale", "capacity": 10.0}
    site = make_haul(*cut_and_fill(fill=1.5), borrow=[pit], material={"loess": LOESS, "shale": SHALE})
    with pytest.raises(PlanError, match=r'Too small by 99 m³ \(bank\) of shale: raise the capacity of "rock pit" by that'):
        haul(site)


def test_without_a_pit_one_is_asked_for(make_haul):
    # 100 m³ are 180 t or 112.5 bank m³.
    with pytest.raises(PlanError, match=r"by 112 m³ \(bank\) of loess: add a \[\[borrow\]\] that gives that"):
        haul(make_haul(*cut_and_fill(cut=0.0)))


def test_two_lacks_are_not_mixed(make_haul):
    # The tip is too small for the topsoil and takes no loess: 0.8 m of loess are 256 t, 76 t over the 180 of the fill.
    tip = {"name": "tip", "at": at(5.0, 60.0), "accepts": ["topsoil"], "capacity": 5.0}
    strip = {"material": "topsoil", "depth": 0.2}
    existing, finished = cut_and_fill()
    site = make_haul(existing, finished, disposal=[tip], strip=[strip], haul={"block": 40.0},
                     material={"loess": LOESS, "topsoil": TOPSOIL}, fill=FILL)  # fmt: skip
    with pytest.raises(PlanError, match=r"of loess from \"A1 loess\" have no place to go: no \[\[disposal\]\] takes it"):
        haul(site)


@pytest.mark.parametrize(
    ("tables", "message"),
    [
        ({"borrow": [{"name": "pit", "at": at(35.0, 300.0), "material": "loess"}]}, r'barriers close off "pit"'),
        ({"disposal": [{"name": "tip", "at": at(35.0, 300.0)}]}, r'no place to go: barriers close off "tip"'),
    ],
)
def test_a_pit_or_tip_behind_a_barrier_is_named(make_haul, tmp_path, tables, message):
    ring = shapely.box(-50, -50, 100, 100) - shapely.box(-1, -1, 41, 21)
    write_shapes(tmp_path / "plan.gpkg", "wall", [ring])
    barriers = {"barriers": {"file": "plan.gpkg", "layer": "wall"}}
    with pytest.raises(PlanError, match=message):
        haul(make_haul(*cut_and_fill(fill=1.5 if "borrow" in tables else 0.5), haul=barriers, **tables))


def test_a_tip_too_small_is_named_with_what_it_lacks(make_haul):
    tip = {"name": "tip", "at": at(5.0, 60.0), "capacity": 100.0}
    # 140 t are 109.4 loose m³.
    with pytest.raises(
        PlanError, match=r'9 m³ \(loose\) of loess from "A1 loess" have no place to go: the capacity of "tip"'
    ):
        haul(make_haul(*cut_and_fill(), disposal=[tip]))


def test_a_material_that_no_tip_takes_is_named(make_haul):
    tip = {"name": "tip", "at": at(5.0, 60.0), "accepts": ["topsoil"]}
    with pytest.raises(
        PlanError, match=r"of loess from \"A1 loess\" have no place to go: no \[\[disposal\]\] takes it"
    ):
        haul(make_haul(*cut_and_fill(), disposal=[tip], material={"loess": LOESS, "topsoil": TOPSOIL}))


def test_a_rule_without_a_source_names_fill_and_material(make_haul):
    rule = {"name": "top metre", "materials": ["shale"], "top": 1.0}
    site = make_haul(*cut_and_fill(), haul={"rule": [rule]}, material={"loess": LOESS, "shale": SHALE})
    with pytest.raises(PlanError, match=r'"B1 fill, top metre" needs 100 m³ \(compacted\) of shale, and 100 m³ of it'):
        haul(site)


def test_a_block_with_no_way_out_is_named(make_haul, tmp_path):
    ring = shapely.box(-5, -5, 15, 25) - shapely.box(-1, -1, 11, 21)
    write_shapes(tmp_path / "plan.gpkg", "wall", [ring])
    barriers = {"barriers": {"file": "plan.gpkg", "layer": "wall"}}
    tip = {"name": "tip", "at": at(5.0, 60.0)}
    with pytest.raises(PlanError, match=r'there is no way out of "A1 loess", which is closed in by barriers'):
        haul(make_haul(*cut_and_fill(), haul=barriers, disposal=[tip]))


def test_a_baseline_that_crosses_itself(make_haul, tmp_path):
    knot = shapely.LineString([(0, 0), (20, 20), (20, 0), (0, 20)])
    write_shapes(tmp_path / "plan.gpkg", "line", [knot])
    line = {"line": {"file": "plan.gpkg", "layer": "line"}}
    with pytest.raises(GroundError, match=r"the line crosses itself at \(500010, 3999990\)"):
        haul(make_haul(*cut_and_fill(), baseline=line))


def test_too_many_stations(make_haul, tmp_path):
    write_shapes(tmp_path / "plan.gpkg", "line", [shapely.LineString([(0, 10), (40, 10)])])
    line = {"line": {"file": "plan.gpkg", "layer": "line"}, "interval": 1e-6}
    with pytest.raises(SiteFileError, match=r"baseline.interval = 1e-06 m: it makes 40,000,000 stations; the most is 20,000"):
        haul(make_haul(*cut_and_fill(), baseline=line))


def test_a_tip_that_accepts_nothing(make_haul):
    with pytest.raises(SiteFileError, match=r"disposal\[1\].accepts"):
        make_haul(*cut_and_fill(), disposal=[{"name": "tip", "at": at(5.0, 60.0), "accepts": []}])


def test_a_road_attribute_that_is_not_there(make_haul, tmp_path):
    write_shapes(tmp_path / "plan.gpkg", "roads", [shapely.LineString([(15, 10), (25, 10)])], road=["r"], speed=[20.0])
    roads = {"roads": {"file": "plan.gpkg", "layer": "roads", "speed": "sped"}, "ground_speed": 10}
    with pytest.raises(FileError, match="there is no attribute 'sped'"):
        haul(make_haul(*cut_and_fill(), haul=roads))


def test_phases_without_an_order(make_haul, tmp_path):
    with pytest.raises(
        SiteFileError, match=r"phase is 'soon'; it must be a date .* or a number or a name that begins with"
    ):
        haul(phased(make_haul, tmp_path, "soon", "later"))


@pytest.mark.parametrize(
    ("tables", "message"),
    [
        ({"haul": {"truck": {"heaped_volume": 10, "payload": 0}}}, r"haul.truck.payload = 0: it must be more than 0 t"),
        (
            {"borrow": [{"name": "pit", "at": [0.0, 0.0], "material": "lose"}]},
            r"there is no \[material.lose\]; did you mean",
        ),
        (
            {"haul": {"rule": [{"name": "top", "materials": ["lose"]}]}},
            r'haul.rule\[1\].materials = "lose": there is no',
        ),
        ({"haul": {"by": "zones"}}, r'haul.by = "zones": there is no \[zones\]'),
        ({"haul": {"straight_factor": 1.2}}, r'haul.straight_factor = 1.2: it needs distance = "straight"'),
        ({"haul": {"cost_by": "time"}}, r'haul.cost_by = "time": it needs haul.truck with hour_cost and speed_loaded'),
        (
            {"disposal": [{"name": "on-site stockpile", "at": [0.0, 0.0]}]},
            r"stands for the surplus without a disposal site",
        ),
        (
            {"stockpile": [{"name": "x", "at": [0.0, 0.0]}], "disposal": [{"name": "x", "at": [0.0, 0.0]}]},
            'stockpile: the name "x" is given to a disposal as well',
        ),
        ({"haul": {"truck": {"heaped_volume": 10, "payload": 15, "power": 200}}}, "haul.truck.empty_mass: missing"),
        (
            {
                "allowance": [{"name": "pit", "material": "loess", "volume": 5.0}],
                "borrow": [{"name": "pit", "at": [0.0, 0.0], "material": "loess"}],
            },
            'allowance: the name "pit" is given to a borrow as well',
        ),
        (
            {"baseline": {"line": "x.gpkg", "overhaul_price": 2.0}},
            "baseline.overhaul_price: it needs baseline.freehaul",
        ),
    ],
)
def test_rules_of_the_site_file(make_haul, tables, message):
    with pytest.raises(SiteFileError, match=message):
        make_haul(*cut_and_fill(), **tables)


def test_too_many_blocks(make_haul, monkeypatch):
    monkeypatch.setattr("earthwork.quantities.haul_areas._MOST_SQUARES", 100)
    with pytest.raises(
        SiteFileError, match=r"haul.block = 1 m: it makes 800 blocks; the most is 100. Take 2.8 m or more"
    ):
        haul(make_haul(*cut_and_fill(), haul={"block": 1.0}))


def test_too_many_moves(make_haul, monkeypatch):
    monkeypatch.setattr("earthwork.plan.haul_plan._MOST_STRAIGHT", 5)
    with pytest.raises(PlanError, match="8 sources and 9 sinks make 0 million possible moves"):
        haul(make_haul(*cut_and_fill(), haul={"block": 5.0}))


def test_a_site_without_haul(make_site):
    with pytest.raises(SiteFileError, match=r"haul needs \[haul\]; an empty one plans with its defaults"):
        haul(make_site(*cut_and_fill(), **LAYERS))
