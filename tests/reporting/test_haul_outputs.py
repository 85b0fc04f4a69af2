"""What ``haul`` writes: the table, the lines along the ways, the map and the mass curve of a small site."""

import json

import geopandas
import numpy as np
import pandas
import pytest
import rasterio
import shapely
from rasterio.transform import from_origin

from earthwork.reporting.runner import run_command
from earthwork.site import check_site

WEST, NORTH = 500_000.0, 4_000_000.0
LOESS = {
    "use": "fill", "bank": {"dry_density": 1600.0, "water_content": 10.0}, "loose": {"swell_percent": 25.0},
    "proctor": {"method": "ASTM D698", "max_dry_density": 1800.0, "optimum_water_content": 14.0},
}  # fmt: skip


def write(path, values):
    profile = {"driver": "GTiff", "height": values.shape[0], "width": values.shape[1], "count": 1, "dtype": "float64"}
    with rasterio.open(path, "w", transform=from_origin(WEST, NORTH, 1, 1), crs="EPSG:32611", **profile) as file:
        file.write(values, 1)


def shapes(path, layer, *geometries):
    moved = [shapely.transform(g, lambda p: np.column_stack([WEST + p[:, 0], NORTH - p[:, 1]])) for g in geometries]
    geopandas.GeoDataFrame({"id": range(len(moved))}, geometry=moved, crs="EPSG:32611").to_file(path, layer=layer)


def make_site(folder, existing, finished, **haul):
    write(folder / "existing.tif", existing)
    write(folder / "finished.tif", finished)
    shapes(folder / "plan.gpkg", "no_go", shapely.box(19, -200, 21, 15))
    shapes(folder / "plan.gpkg", "line", shapely.LineString([(0, 10), (existing.shape[1], 10)]))
    document = {
        "site": {"name": 'Hill <b>"7"</b> $x$', "units": "metric"},
        "ground": {"existing": "existing.tif", "finished": "finished.tif", "ground_scale": 1.0},
        "stratum": [{"material": "loess"}],
        "material": {"loess": LOESS},
        "fill": {"relative_compaction": 95.0, "expected_compaction": 100.0},
        "haul": {
            "block": 10.0, "barriers": {"file": "plan.gpkg", "layer": "no_go"},
            "truck": {"heaped_volume": 10, "payload": 15, "speed_loaded": 30, "load_time": 2, "hour_cost": 90}, **haul,
        },
        "disposal": [{"name": "tip", "at": [WEST + 900.0, NORTH - 400.0], "price": 2.0}],
        "baseline": {"line": {"file": "plan.gpkg", "layer": "line"}, "interval": 5.0, "freehaul": 20.0},
    }  # fmt: skip
    return check_site(document, folder)


@pytest.fixture(scope="module")
def run(tmp_path_factory):
    folder = tmp_path_factory.mktemp("haul")
    existing = np.full((20, 40), 100.0)
    finished = existing.copy()
    finished[:, :10] -= 1.0
    finished[:, 30:] += 0.5
    return run_command("haul", make_site(folder, existing, finished), out=folder / "out")


def test_files(run):
    assert {p.name for p in run.written} == {
        "haul.csv", "haul.json", "haul_blocks.csv", "haul_loads.csv", "haul_map.png", "haul_mass_curve.csv",
        "haul_mass_curve.png", "haul_matrix.csv", "haul_moves.gpkg", "haul_trucks.csv",
    }  # fmt: skip


def test_lines_run_along_the_ways(run):
    (path,) = [p for p in run.written if p.suffix == ".gpkg"]
    moves = geopandas.read_file(path, layer="moves")
    assert moves.crs.to_epsg() == 32611
    assert moves.geometry.length.to_numpy() == pytest.approx(moves["distance_m"].to_numpy(), abs=1e-6)
    wall = shapely.box(WEST + 19.01, NORTH - 14.99, WEST + 20.99, NORTH + 200)
    assert not moves.geometry.intersects(wall).any()
    blocks = geopandas.read_file(path, layer="blocks").set_index("block")
    assert (blocks.loc["A1 loess"].geometry.x, blocks.loc["A1 loess"].geometry.y) == (WEST + 5, NORTH - 5)


def test_matrix_rows_are_the_cut_and_columns_what_arrives(run):
    (path,) = [p for p in run.written if p.name == "haul_matrix.csv"]
    matrix = pandas.read_csv(path, index_col=0)
    assert matrix.to_numpy().sum() == pytest.approx(320)
    assert matrix.loc["A1 loess"].sum() == pytest.approx(160)
    assert matrix["D1 fill_t"].sum() == pytest.approx(90)


def test_the_matrix_is_in_the_units_of_its_site(run):
    from earthwork.reporting.display import display_table
    from earthwork.units import US

    # 320 t in tons of 2000 pounds of 0.45359237 kg: the unit is in each heading.
    matrix = display_table(run.result.tables()["matrix"], US).set_index("from")
    assert all(name.endswith("_ton") for name in matrix.columns)
    assert matrix.to_numpy().sum() == pytest.approx(320 / 0.90718474)


def test_json_is_the_contract_and_page_has_units(run):
    document = json.loads(run.json())
    assert document["command"] == "haul"
    assert document["result"]["moves"][0]["from"]
    text = repr(run.page())
    for word in ("dry mass", "t·km", "truck loads", "Along the baseline", "No plan is cheaper"):
        assert word in text


def picture(path):
    import matplotlib.image

    return matplotlib.image.imread(path)


def test_pictures_have_ink(run):
    for name in ("haul_map.png", "haul_mass_curve.png"):
        (path,) = [p for p in run.written if p.name == name]
        image = picture(path)
        assert min(image.shape[:2]) > 500
        assert (image[..., :3].min(axis=2) < 0.3).mean() > 0.002


def test_a_plan_of_hundreds_of_moves_and_one_without_any(tmp_path):
    rng = np.random.default_rng(0)
    existing = 100 + rng.normal(0, 1, (60, 90))
    finished = existing + np.repeat(np.repeat(rng.normal(-0.2, 2, (12, 18)), 5, 0), 5, 1)
    many = run_command("haul", make_site(tmp_path, existing, finished, block=5.0), out=tmp_path / "many")
    assert len(many.result.moves) > 200
    (tmp_path / "flat").mkdir()
    flat = np.full((20, 40), 100.0)
    none = run_command("haul", make_site(tmp_path / "flat", flat, flat), out=tmp_path / "flat" / "out")
    assert none.result.moves == ()
    assert none.result.to_dict()["mean_distance_m"] is None
    assert {p.name for p in none.written} >= {"haul_map.png", "haul_mass_curve.png"}


def test_a_long_name_is_cut_at_the_edge_of_the_chart(tmp_path, monkeypatch):
    from earthwork.plan.haul import haul
    from earthwork.reporting import mass_curve_chart
    from earthwork.units import METRIC

    existing = np.full((20, 40), 100.0)
    finished = existing.copy()
    finished[:, :10] -= 1.0
    drawn = []
    monkeypatch.setattr(mass_curve_chart, "save_figure", lambda figure, path: drawn.append(figure))
    line = haul(make_site(tmp_path, existing, finished)).line
    mass_curve_chart.draw_mass_curve(line, tmp_path / "curve.png", units=METRIC, title="Willow Creek " * 20)
    heading = drawn[0].texts[0]
    assert heading.get_window_extent().x1 <= drawn[0].bbox.width
