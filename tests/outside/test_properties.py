"""What must hold of any ground, through the command line: swaps, parts, constants, scale, tiles, threads, dry mass."""

import json

import numpy as np
import pytest
import rasterio
import shapely

from tests.outside.conftest import centres, write_polygons, write_raster, write_site

KEYS = ("area_m2", "cut_m3", "fill_m3", "cut_area_m2", "fill_area_m2", "missing_area_m2")


def two_grounds(seed=1, rows=90, columns=120, cell=2.0, holes=0.0):
    """Hills and a plan that crosses them many times, with some cells missing [m]."""
    r = np.random.default_rng(seed)
    x, y = centres(rows, columns, cell)
    ground = 40 + 2 * np.sin(x / 19) + 1.5 * np.cos((x + 2 * y) / 27) + r.normal(0, 0.05, x.shape)
    plan = 40 + 0.008 * x - 0.005 * y + np.where(abs(x) < 30, 1.0, 0.0)
    ground[r.random(x.shape) < holes] = np.nan
    return ground, plan


def write_pair(folder, ground, plan, *, cell=2.0, name="", **more):
    return {
        "existing": write_raster(folder / f"ground{name}.tif", ground, cell=cell, nodata=np.nan, **more),
        "finished": write_raster(folder / f"plan{name}.tif", plan, cell=cell, nodata=np.nan, **more),
    }


def test_swapping_the_surfaces_swaps_cut_and_fill(tmp_path, volumes):
    files = write_pair(tmp_path, *two_grounds(holes=0.03))
    there = volumes(**files)
    back = volumes(existing=files["finished"], finished=files["existing"])
    for key, other in (("cut_m3", "fill_m3"), ("cut_area_m2", "fill_area_m2"), ("max_cut_m", "max_fill_m")):
        assert there["total"][key] == pytest.approx(back["total"][other], rel=1e-12), key
        assert there["total"][other] == pytest.approx(back["total"][key], rel=1e-12), key
    assert there["unsplit"]["cut_m3"] == pytest.approx(back["unsplit"]["fill_m3"], rel=1e-12)


def test_a_surface_against_itself_is_nothing(tmp_path, volumes):
    files = write_pair(tmp_path, *two_grounds(holes=0.03))
    total = volumes(existing=files["existing"], finished=files["existing"])["total"]
    assert (total["cut_m3"], total["fill_m3"], total["cut_area_m2"], total["fill_area_m2"]) == (0, 0, 0, 0)
    assert total["missing_area_m2"] > 0


@pytest.mark.parametrize("step", [-512.0, 0.25, 3000.0])
def test_raising_both_surfaces_changes_nothing(tmp_path, volumes, step):
    ground, plan = (np.round(g * 1024) / 1024 for g in two_grounds())  # so that the sums are exact
    first = volumes(**write_pair(tmp_path, ground, plan))["total"]
    again = volumes(**write_pair(tmp_path, ground + step, plan + step, name="2"))["total"]
    for key in KEYS:
        assert again[key] == pytest.approx(first[key], rel=1e-12), key


@pytest.mark.parametrize("factor", [0.5, 3.0])
def test_lengths_times_k_give_volumes_times_k_cubed(tmp_path, volumes, factor):
    ground, plan = two_grounds(holes=0.02)
    first = volumes(**write_pair(tmp_path, ground, plan))["total"]
    again = volumes(**write_pair(tmp_path, ground * factor, plan * factor, cell=2.0 * factor, name="2"))["total"]
    for key in KEYS:
        assert again[key] == pytest.approx(first[key] * factor ** (3 if key.endswith("m3") else 2), rel=1e-11), key


def test_moving_and_turning_the_site_changes_nothing(tmp_path, volumes):
    ground, plan = two_grounds(holes=0.02)
    first = volumes(**write_pair(tmp_path, ground, plan))["total"]
    turned = write_pair(tmp_path, np.rot90(ground), np.rot90(plan), name="2", corner=(700_000.0, 5_000_000.0))
    again = volumes(**turned)["total"]
    for key in (*KEYS, "max_cut_m", "max_fill_m"):
        assert again[key] == pytest.approx(first[key], rel=1e-11), key


def test_zones_and_the_rest_add_up_to_the_site(tmp_path, volumes):
    """Slanting lots that share their edges, a round pond, a lot that hangs over the edge of the data."""
    files = write_pair(tmp_path, *two_grounds(holes=0.02))
    lots = [
        shapely.Polygon([(510 + 31 * i, 740), (541 + 31 * i, 740), (555 + 31 * i, 880), (524 + 31 * i, 880)])
        for i in range(5)
    ]
    zones = [*lots, shapely.Point(715, 800).buffer(7.3), shapely.box(725, 850, 790, 930)]
    found = volumes("--zones", write_polygons(tmp_path / "lots.gpkg", zones), "--zone-name", "name", **files)
    parts = [*found["zones"], found["outside_zones"]]
    assert len(parts) == 8
    for key in ("area_m2", "cut_m3", "fill_m3", "cut_area_m2", "fill_area_m2"):
        assert sum(part[key] for part in parts) == pytest.approx(found["total"][key], rel=1e-9), key
    for lot, zone in zip(lots, found["zones"], strict=False):
        assert zone["area_m2"] + zone["missing_area_m2"] == pytest.approx(lot.area, rel=1e-9)


def test_what_has_no_data_is_counted_in_the_zone_and_outside_of_all_zones(tmp_path, earthwork):
    """Ground of 40 × 30 m with a hole of 6 × 5 m; a zone of 20 × 20 m reaches 8 m beyond it, and holds 4 × 5 m of the hole."""
    ground = np.full((30, 40), 5.0)
    ground[10:15, 30:36] = np.nan
    files = write_pair(tmp_path, ground, np.full((30, 40), 6.0), cell=1.0, corner=(0.0, 30.0))
    zone = write_polygons(tmp_path / "zone.gpkg", [shapely.box(28, 0, 48, 20).difference(shapely.box(34, 5, 36, 30))])
    arguments = [x for key, path in files.items() for x in (f"--{key}", path)]
    ran = earthwork("volumes", *arguments, "--zones", zone, "--zone-name", "name", "--json")
    total, (zone,), outside = (ran.result[key] for key in ("total", "zones", "outside_zones"))
    assert (total["area_m2"], total["missing_area_m2"]) == (1170, 30)
    assert (zone["area_m2"], zone["missing_area_m2"]) == (pytest.approx(190), pytest.approx(20 + 160))
    assert (outside["area_m2"], outside["missing_area_m2"]) == (pytest.approx(980), pytest.approx(10))
    assert "zone-beyond-ground" in ran.warning_codes


def test_a_zone_elsewhere_is_named(tmp_path, earthwork):
    files = write_pair(tmp_path, np.full((30, 40), 5.0), np.full((30, 40), 6.0), cell=1.0, corner=(0.0, 30.0))
    zones = write_polygons(tmp_path / "zone.gpkg", [shapely.box(0, 0, 20, 20), shapely.box(900, 0, 920, 20)])
    arguments = [x for key, path in files.items() for x in (f"--{key}", path)]
    ran = earthwork("volumes", *arguments, "--zones", zones, "--zone-name", "name", "--json")
    (warning,) = [w for w in ran.document["warnings"] if w["code"].startswith("zone")]
    assert warning["code"] == "zone-without-ground"
    assert repr(ran.result["zones"][1]["zone"]) in warning["message"]


def test_cutting_a_zone_in_two_adds_up(tmp_path, volumes):
    files = write_pair(tmp_path, *two_grounds())
    zone = shapely.Point(620, 810).buffer(61.7)
    halves = [zone.intersection(shapely.box(0, 0, 617.3, 2000)), zone.intersection(shapely.box(617.3, 0, 2000, 2000))]

    def zones(name, polygons):
        path = write_polygons(tmp_path / f"{name}.gpkg", polygons)
        return volumes("--zones", path, "--zone-name", "name", **files)["zones"]

    (whole,), parts = zones("whole", [zone]), zones("halves", halves)
    for key in ("area_m2", "cut_m3", "fill_m3"):
        assert sum(part[key] for part in parts) == pytest.approx(whole[key], rel=1e-9), key


def test_limits_in_two_parts_add_up(tmp_path, volumes):
    files = write_pair(tmp_path, *two_grounds())
    west, east = shapely.box(511.3, 733.7, 600.9, 880.1), shapely.box(600.9, 733.7, 731.2, 880.1)
    found = [
        volumes("--limits", write_polygons(tmp_path / f"l{i}.gpkg", [part]), **files)["total"]
        for i, part in enumerate([west, east, west.union(east)])
    ]
    for key in ("area_m2", "cut_m3", "fill_m3"):
        assert found[0][key] + found[1][key] == pytest.approx(found[2][key], rel=1e-9), key


@pytest.mark.parametrize(
    "layout",
    [
        {"tiled": True, "blockxsize": 16, "blockysize": 16},
        {"tiled": True, "blockxsize": 64, "blockysize": 32, "compress": "DEFLATE", "predictor": 3},
        {"blockysize": 1},
        {"blockysize": 7, "compress": "LZW"},
        {"compress": "ZSTD", "interleave": "band"},
    ],
    ids=str,
)
def test_blocks_of_the_file_change_nothing(tmp_path, volumes, layout):
    ground, plan = two_grounds(holes=0.02, rows=151, columns=133)
    first = volumes(**write_pair(tmp_path, ground, plan))
    again = volumes(**write_pair(tmp_path, ground, plan, name="2", **layout))
    assert flat(again) == pytest.approx(flat(first), rel=1e-12)


def flat(result):
    """The figures of the whole site, by name."""
    return {
        f"{part}.{key}": value
        for part in ("total", "unsplit")
        for key, value in result[part].items()
        if key != "materials"
    }


@pytest.mark.parametrize("dtype", ["float32", "float64"])
def test_threads_change_no_digit(tmp_path, earthwork, dtype):
    ground, plan = two_grounds(rows=700, columns=500, holes=0.01)
    files = write_pair(tmp_path, ground, plan, dtype=dtype, tiled=True, blockxsize=64, blockysize=64)
    zones = write_polygons(
        tmp_path / "z.gpkg", [shapely.Point(900, 300).buffer(211), shapely.box(1200, -300, 1400, 700)]
    )
    said = {
        earthwork(
            "volumes", "--existing", files["existing"], "--finished", files["finished"], "--zones", zones,
            "--zone-name", "name", "--json", "--quiet", "--threads", threads,
        ).stdout
        for threads in (1, 2, 3, 4)
    }  # fmt: skip
    assert len(said) == 1
    assert json.loads(said.pop())["result"]["total"]["cut_m3"] > 0


def test_finer_cells_of_the_same_ground_change_nothing(tmp_path, volumes):
    """Each cell cut into four of the same value: plain sums stay to the last digits."""
    ground, plan = two_grounds()
    first = volumes(**write_pair(tmp_path, ground, plan))["unsplit"]
    fine = (np.kron(g, np.ones((2, 2))) for g in (ground, plan))
    again = volumes(**write_pair(tmp_path, *fine, cell=1.0, name="2"))["unsplit"]
    assert again == pytest.approx(first, rel=1e-12)


def test_missing_ground_is_named_and_never_filled(tmp_path, earthwork, volumes):
    ground, plan = np.full((20, 20), 10.0), np.full((20, 20), 11.0)
    ground[4:6, 7:10] = np.nan
    plan[15, 15] = np.nan
    files = write_pair(tmp_path, ground, plan)
    total = volumes(**files)["total"]
    assert total["missing_area_m2"] == 7 * 4
    assert total["fill_m3"] == pytest.approx(393 * 4, rel=1e-12)
    ran = earthwork("volumes", "--existing", files["existing"], "--finished", files["finished"], "--json")
    (text,) = [w["message"] for w in ran.document["warnings"] if w["code"] == "missing-data"]
    assert "28 m²" in text
    assert "514" in text  # the western edge of the hole: 500 + 7 · 2


SOILS = """
[[strip]]
material = "topsoil"
depth = 0.2
[[section]]
name = "lawn"
thickness = 0.1
source = "topsoil"
[[over_excavation]]
name = "yard"
depth = 0.8
area = "yard.gpkg"
[[scarify]]
depth = 0.15
[[allowance]]
name = "trench"
material = "clay"
volume = 120
state = "loose"
[[stratum]]
material = "clay"
thickness = 1.4
[[stratum]]
material = "rock"
[material.topsoil]
use = "topsoil"
bank.dry_density = 1200
loose.swell_percent = 25
[material.clay]
use = "fill"
specific_gravity = 2.7
bank.dry_density = 1600
bank.water_content = 18
loose.swell_percent = 30
proctor = { method = "ASTM D698", max_dry_density = 1780, optimum_water_content = 15.5 }
loss_percent = 3
[material.rock]
use = "rock"
bank.dry_density = 2300
loose.swell_percent = 50
fill.dry_density = 2000
loss_percent = 1
[fill]
relative_compaction = 95
expected_compaction = 97
"""


@pytest.fixture
def site(tmp_path):
    ground, plan = two_grounds()
    write_pair(tmp_path, ground, plan)
    write_polygons(tmp_path / "yard.gpkg", [shapely.box(560, 760, 640, 830)])
    return write_site(tmp_path, '[ground]\nexisting = "ground.tif"\nfinished = "plan.tif"\n' + SOILS)


def test_ledger_closes_in_dry_mass(site, earthwork):
    """What is dug, and what is brought, goes somewhere, tonne for tonne; the masses follow from volumes by hand."""
    found = earthwork("balance", site, "--json").result
    masses = {row["material"]: row for row in found["materials"]}
    for material, bank_t in (("topsoil", 1.2), ("clay", 1.6), ("rock", 2.3)):
        row = masses[material]
        bank = sum(row[f"{line}_bank_m3"] for line in ("cut", "strip", "over_excavation", "allowance"))
        assert row["dry_mass_t"] == pytest.approx(bank * bank_t, rel=1e-12)
    assert masses["clay"]["allowance_bank_m3"] == pytest.approx(120 / 1.3, rel=1e-12)
    assert masses["clay"]["lost_t"] == pytest.approx(0.03 * masses["clay"]["dry_mass_t"], rel=1e-12)
    clay = masses["clay"]["dry_mass_t"] * 0.97 / (0.97 * 1.780)
    rock = masses["rock"]["dry_mass_t"] * 0.99 / 2.0
    assert found["available_compacted_m3"] == pytest.approx(clay + rock, rel=1e-12)
    ledger = {}
    for row in found["ledger"]:
        ledger[row["material"]] = ledger.get(row["material"], 0.0) + row["dry_mass_t"]
    brought = {row["material"]: row["dry_mass_t"] for row in found["imports"]}
    for material, row in masses.items():
        assert ledger[material] == pytest.approx(row["dry_mass_t"] + brought.get(material, 0.0), rel=1e-9)
    assert abs(found["ledger_closure_t"]) < 1e-9 * sum(ledger.values())


def test_surplus_is_what_is_at_hand_less_what_is_needed(site, earthwork):
    found = earthwork("balance", site, "--json").result
    volumes = earthwork("volumes", site, "--json").result
    assert found["surplus_compacted_m3"] == pytest.approx(
        found["available_compacted_m3"] - found["required_compacted_m3"], rel=1e-12
    )
    placed = volumes["total"]["fill_m3"] + volumes["over_excavation_m3"]
    assert placed < found["required_compacted_m3"] < placed + volumes["scarify_m3"]
    assert volumes["over_excavation_m3"] == pytest.approx(0.8 * 80 * 70, rel=1e-9)


@pytest.mark.parametrize("part", ["all of it", "a yard of whole cells"])
def test_shift_that_balances_does(site, earthwork, tmp_path, part):
    """Raise the plan by the exact shift that the program names, by hand, and the site balances."""
    moves = shapely.box(500, 720, 740, 900) if part == "all of it" else shapely.box(520, 740, 700, 860)
    write_polygons(tmp_path / "all.gpkg", [shapely.box(500, 720, 740, 900)])
    write_polygons(tmp_path / "moves.gpkg", [moves])
    text = site.read_text("utf-8").replace("[ground]", '[ground]\ndisturbed = "all.gpkg"')
    site.write_text(text + '[balance]\nshift_area = "moves.gpkg"\nshift_range = [-5.0, 5.0]\n', "utf-8")
    found = earthwork("balance", site, "--json").result
    shift = found["grade_shift"]
    assert shift is not None, found["grade_shift_note"]
    assert shift["area_m2"] == pytest.approx(moves.area, rel=1e-12)
    assert abs(shift["shift_exact_m"]) > 0.1
    with rasterio.open(tmp_path / "plan.tif", "r+") as plan:
        values = plan.read(1)
        west, south, east, north = (int(v) for v in moves.bounds)
        values[(900 - north) // 2 : (900 - south) // 2, (west - 500) // 2 : (east - 500) // 2] += shift["shift_exact_m"]
        plan.write(values, 1)
    again = earthwork("balance", site, "--json").result
    assert again["surplus_compacted_m3"] == pytest.approx(shift["surplus_at_exact_m3"], abs=0.01)
    assert abs(again["surplus_compacted_m3"]) < 1e-5 * found["required_compacted_m3"]
    # The rounded shift is off by at most half a step of a centimetre.
    assert abs(shift["surplus_compacted_m3"]) <= 0.51 * abs(shift["surplus_change_per_cm_m3"]) + 0.01


@pytest.mark.parametrize("call", ["check", "volumes", "soil", "balance"])
def test_library_call_and_command_say_the_same(site, earthwork, call):
    """Each command is a call of the same name, which takes a site or the path of its file."""
    import earthwork as library

    of_path = getattr(library, call)(site).to_dict()
    assert of_path == getattr(library, call)(library.Site.open(site)).to_dict()
    assert json.loads(json.dumps(of_path)) == earthwork(call, site, "--json").result
