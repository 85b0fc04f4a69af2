"""The command ``pads`` from files to JSON, tables, page and pictures, against sites that can be worked by hand."""

import json
import math
import re

import ezdxf
import numpy as np
import pyogrio.raw
import pytest
import rasterio
import shapely
from earthwork_cli.main import main
from rasterio.transform import from_origin
from shapely.geometry import LineString, box

import earthwork
from earthwork.errors import GroundError, PlanError, SiteFileError
from earthwork.reporting.pads_page import page

EAST, NORTH = 500_000.0, 4_400_000.0
CRS = "EPSG:32614"

SITE = """
[site]
name = "Quarter Mile"
units = "{units}"
[ground]
existing = "existing.tif"
finished = "finished.tif"
ground_scale = 1.0
{layers}
[[stratum]]
material = "silt"
[material.silt]
use = "fill"
specific_gravity = 2.68
bank.dry_density = "1430 kg/m3"
bank.water_content = 8
loose.dry_density = "1150 kg/m3"
proctor = {{ method = "ASTM D698", max_dry_density = "1760 kg/m3", optimum_water_content = 16 }}
[fill]
relative_compaction = 95
expected_compaction = 96.5
[pads]
area = "pads.gpkg"
name = "pad"
{pads}
"""
PERCENT = "settlement_percent = [0.2, 1.0]\n"


def write_layer(path, shapes, **columns):
    moved = [shapely.transform(s, lambda c: c + [EAST, NORTH]) for s in shapes]
    pyogrio.raw.write(
        path, shapely.to_wkb(np.array(moved, object)), [np.array(v, object) for v in columns.values()], list(columns),
        geometry_type=shapes[0].geom_type, crs=CRS, layer="plan",
    )  # fmt: skip


@pytest.fixture
def site(tmp_path):
    """Writes a site of 100 × 100 m, 1 m cells: ground at 100 that rises east by 5 %, finished at 102.5 (or as given)."""

    def make(shapes=(box(30, 30, 70, 70),), names=("A",), *, pads=PERCENT, layers="", units="metric", **surfaces):
        east, north = np.meshgrid(np.arange(100) + 0.5, 99.5 - np.arange(100))
        fields = {"existing": 100 + 0.05 * east, "finished": np.full(east.shape, 102.5)}
        for name, values in fields.items():
            given = surfaces.get(name)
            values = values if given is None else given(east, north) + 0.0 * east
            with rasterio.open(
                tmp_path / f"{name}.tif", "w", driver="GTiff", height=100, width=100, count=1, dtype="float64", crs=CRS,
                transform=from_origin(EAST, NORTH + 100, 1, 1), nodata=-9999,
            ) as raster:  # fmt: skip
                raster.write(np.where(np.isnan(values), -9999, values), 1)
        write_layer(tmp_path / "pads.gpkg", list(shapes), pad=list(names))
        (tmp_path / "site.toml").write_text(SITE.format(units=units, layers=layers, pads=pads), encoding="utf-8")
        return earthwork.Site.open(tmp_path / "site.toml")

    return make


def test_a_pad_half_in_cut_half_in_fill(site):
    # Depth falls from +1 to −1 over the pad: half in each; thickness is even from 0 to 1 on one half, 0 on the other.
    pad = earthwork.pads(site())["A"]
    assert (pad.class_name, pad.class_before_undercut) == ("transition", "transition")
    assert pad.flags == ("transition", "fill", "cut")
    assert (pad.cut_share_percent, pad.fill_share_percent) == (pytest.approx(50), pytest.approx(50))
    assert pad.max_fill_m == pytest.approx(1 - 0.025)
    assert pad.min_fill_m == 0
    assert pad.max_cut_m == pytest.approx(1 - 0.025)
    assert pad.mean_fill_m == pytest.approx(0.25)
    assert pad.p95_fill_m == pytest.approx(0.9, abs=0.026)
    assert pad.differential_fill_m == pad.max_fill_m
    assert pad.differential_distance_m == pytest.approx(20, abs=1)
    # 1 % of 5 %: 1 in 2000.
    assert pad.max_distortion == pytest.approx(2000)
    assert (pad.settlement_low_m, pad.settlement_high_m) == (
        pytest.approx(0.002 * pad.max_fill_m),
        pytest.approx(0.01 * pad.max_fill_m),
    )
    assert pad.settlement_index == pytest.approx(pad.max_fill_m / 3)
    natural = pad.natural_ground
    assert (natural.material, natural.percent_of_maximum) == ("silt", pytest.approx(100 * 1430 / 1760))
    assert natural.flags == ("loose", "collapse")
    # To 0.9 m everywhere: 800 m² × 0.9 where there is none, and ∫ (0.9 − t) over t from 0 to 0.9 on 720 m².
    assert pad.undercut.asked_m == 0.9
    assert pad.undercut.volume_m3 == pytest.approx(800 * 0.9 + 720 * 0.45, rel=1e-3)
    factor = 1430 / (1760 * 0.965)
    assert pad.undercut.compacted_cost_m3 == pytest.approx(pad.undercut.volume_m3 * (1 - factor))


def test_an_undercut_that_reaches_the_blanket_mends_a_transition(site):
    dug = '[[over_excavation]]\nname = "pads"\ndepth = 0.9\narea = "pads.gpkg"\n'
    pad = earthwork.pads(site(layers=dug))["A"]
    assert (pad.class_name, pad.class_before_undercut) == ("fill", "transition")
    assert pad.flags == ("fill", "cut", "transition mended")
    assert pad.min_fill_m == pytest.approx(0.9)
    assert pad.undercut is None
    shallow = earthwork.pads(site(layers=dug.replace("0.9", "0.8")))["A"]
    assert shallow.class_name == "transition"
    assert shallow.undercut.volume_m3 == pytest.approx(800 * 0.1 + 80 * 0.05, rel=2e-2)


def test_the_depth_that_the_page_asks_for_mends_a_transition(site, tmp_path):
    # Fill of up to 3.5217 m: a third of it is 1.1622 m, which 1.16 would not reach.
    shape = {"finished": lambda e, n: 105.0217 + 0.0 * e, "existing": lambda e, n: 100 + 0.15 * (e - 20.5)}
    result = earthwork.pads(site(**shape))
    assert result["A"].undercut.asked_m == pytest.approx(0.33 * 3.5217)
    text = page(earthwork.Site.open(tmp_path / "site.toml"), result)
    (row,) = next(b.rows for b in text.blocks if getattr(b, "heading", "").startswith("Undercut"))
    (depth,) = re.findall(r"for ([\d.]+) m of fill", row[2])
    dug = f'[[over_excavation]]\nname = "A"\ndepth = {depth}\nmeasured_from = "subgrade"\narea = "pads.gpkg"\n'
    assert "transition mended" in earthwork.pads(site(layers=dug, **shape))["A"].flags


def test_only_the_building_and_its_margin_are_judged(site, tmp_path):
    # A building on the fill side: with its margin of 1.5 m it goes from 35 to 45 m east, all in fill.
    write_layer(tmp_path / "buildings.gpkg", [box(36.5, 40, 43.5, 60)], use=["shed"])
    pad = earthwork.pads(site(pads=PERCENT + 'building = "buildings.gpkg"\n'))["A"]
    assert pad.judged_on == "building"
    assert pad.class_name == "fill"
    assert pad.area_m2 == pytest.approx(1600)
    assert pad.footprint_m2 == pytest.approx(7 * 20 + 2 * 1.5 * 27 + math.pi * 1.5**2, rel=1e-3)
    assert pad.max_fill_m == pytest.approx(2.5 - 0.05 * 35.5)
    assert pad.min_fill_m == pytest.approx(2.5 - 0.05 * 44.5)


def test_buildings_off_pads_and_over_their_edge_are_told(site, tmp_path):
    write_layer(tmp_path / "buildings.gpkg", [box(60, 40, 70, 60), box(5, 5, 10, 10)], use=["shed", "hut"])
    result = earthwork.pads(site(pads=PERCENT + 'building = "buildings.gpkg"\n'))
    codes = [warning.code for warning in result.warnings]
    assert "building-over-pad-edge" in codes
    assert "building-off-pads" in codes
    assert result["A"].footprint_m2 == pytest.approx(11.5 * 23 - (1 - math.pi / 4) * 2 * 1.5**2, rel=1e-3)


def test_deep_and_differential_fill(site):
    pad = earthwork.pads(site(existing=lambda e, n: 92 + 0.1 * e))["A"]
    # Thickness from 10.5 − 0.1·30 = 7.5 down to 3.5 at the pad's edges.
    assert pad.class_name == "deep fill"
    assert pad.flags == ("deep fill", "fill", "differential fill")
    assert pad.max_distortion == pytest.approx(1000)
    assert [limit.x for limit in pad.distortion_limits] == []
    steep = earthwork.pads(site(existing=lambda e, n: 88 + 0.2 * e))["A"]
    assert steep.max_distortion == pytest.approx(500)
    assert "distortion" not in steep.flags  # at the limit, not over it
    assert [limit.x for limit in steep.distortion_limits] == [750, 600, 500]
    # 1 % of a thickness that changes by 1 in 20,000 is 1 in 2,000,000: noise of the surfaces, and no slope.
    assert earthwork.pads(site(existing=lambda e, n: 90 + 0.00005 * e))["A"].max_distortion is None
    over = earthwork.pads(site(existing=lambda e, n: 84 + 0.25 * e))["A"]
    assert over.max_distortion == pytest.approx(400)
    assert "distortion" in over.flags


def test_without_figures_settlement_is_an_index_only(site):
    result = earthwork.pads(site(pads=""))
    pad = result["A"]
    assert (pad.settlement_low_m, pad.settlement_high_m, pad.max_distortion) == (None, None, None)
    assert pad.settlement_index > 0
    assert "settlement-unknown" in [warning.code for warning in result.warnings]


def test_settlement_from_tests(site):
    tests = (
        "[pads.settlement]\ncreep_percent = [0.2, 0.4]\ncreep_from = 36.525\nlife = 9.9\nallowed = 0.002\n"
        "wetting = [[0, 0.0], [100, 1.0]]\nmodulus = 20000\n"
    )
    pad = earthwork.pads(site(pads=tests))["A"]
    high = pad.max_fill_m
    # From 0.1 to 10 years are two tenfolds. Wetting strain is 0.01 %/kPa: s = 0.0001 γ H²/2.
    density, water = 1760 * 0.965, 16.0
    weight = density * (1 + water / 100) * 9.80665 / 1000
    assert pad.settlement_low_m == pytest.approx(2 * 0.002 * high)
    assert pad.settlement_high_m == pytest.approx(2 * 0.004 * high + 0.0001 * weight * high**2 / 2)
    assert pad.compression_while_placing_m == pytest.approx(weight * high**2 / 4 / 20000)
    assert pad.creep_per_year_m == pytest.approx(0.004 * high / math.log(10) / 0.1)
    assert pad.wait_days == pytest.approx(9.9 * 365.25 / (10 ** (0.002 / (0.004 * high)) - 1))


def test_json_has_the_names_of_the_contract(site):
    document = earthwork.pads(site()).to_dict()
    (row,) = document["pads"]
    assert {
        "pad", "area_m2", "footprint_m2", "class", "class_before_undercut", "flags", "cut_share_percent",
        "fill_share_percent", "max_fill_m", "min_fill_m", "mean_fill_m", "p95_fill_m", "differential_fill_m",
        "max_cut_m", "natural_ground", "settlement_low_m", "settlement_high_m", "settlement_index", "max_distortion",
    } <= set(row)  # fmt: skip
    assert {"material", "percent_of_maximum", "flags"} <= set(row["natural_ground"])
    assert "NaN" not in json.dumps(document)


def test_moving_and_turning_the_site_changes_nothing(site):
    there = earthwork.pads(site(shapes=[box(30, 35, 70, 60)])).to_dict()["pads"][0]
    turned = earthwork.pads(
        site(shapes=[box(40, 30, 65, 70)], existing=lambda e, n: 100 + 0.05 * n)
    ).to_dict()["pads"][0]
    for key in ("area_m2", "cut_share_percent", "max_fill_m", "mean_fill_m", "p95_fill_m", "max_distortion"):
        assert turned[key] == pytest.approx(there[key], rel=1e-9)


def test_missing_ground_under_a_pad_is_flagged(site):
    result = earthwork.pads(site(existing=lambda e, n: np.where(e > 60, np.nan, 100.0)))
    pad = result["A"]
    assert pad.missing_area_m2 == pytest.approx(400)
    assert "missing ground" in pad.flags
    message = next(w.message for w in result.warnings if w.code == "pad-missing-ground")
    assert 'pad "A" at (500050.00, 4400050.00): no data on 400.0 m² of it' in message


@pytest.mark.parametrize(
    ("shapes", "names", "error", "message"),
    [
        ([box(10, 10, 40, 40), box(30, 10, 60, 40)], ["A", "B"], GroundError,
         r'pads "A" and "B" overlap by 300 m² near'),
        ([box(10, 10, 40, 40), box(50, 10, 60, 40)], ["A", "A"], GroundError, r'the name "A" is given 2 times'),
        ([box(200, 10, 240, 40)], ["far"], GroundError, r'pad "far" at .* lies outside the ground that is known'),
        ([box(10.6, 10.6, 10.8, 10.8)], ["speck"], PlanError, r'"speck" at .* smaller than a cell'),
    ],
)  # fmt: skip
def test_bad_pads(site, shapes, names, error, message):
    with pytest.raises(error, match=message):
        earthwork.pads(site(shapes, names))


def test_missing_sections_are_named(site, tmp_path):
    site()
    path = tmp_path / "site.toml"
    text = path.read_text()
    path.write_text(text[: text.index("[pads]")])
    with pytest.raises(SiteFileError, match=r"pads needs a \[pads\] section"):
        earthwork.pads(path)
    path.write_text(text.replace('[[stratum]]\nmaterial = "silt"\n', ""))
    with pytest.raises(SiteFileError, match=r"pads needs at least one \[\[stratum\]\]"):
        earthwork.pads(path)
    path.write_text(text.replace('name = "pad"', 'name = "pod"'))
    with pytest.raises(Exception, match=r"there is no attribute 'pod'"):
        earthwork.pads(path)


@pytest.mark.parametrize(
    ("pads", "message"),
    [
        ("settlement_percent = [1.0, 0.2]\n", r"give the lower settlement_percent first"),
        (PERCENT + "[pads.settlement]\ncreep_percent = [0.2, 0.4]\n", r"give settlement_percent, or creep and wetting"),
        ("[pads.settlement]\ncreep_percent = [0.4, 0.2]\n", r"give the lower creep_percent first"),
        ("[pads.settlement]\nlife = 20\n", r"give creep_percent, wetting or modulus"),
        ("[pads.settlement]\nwetting = [[100, 1], [50, 2]]\n", r"wetting tests in rising order of stress"),
        ("[pads.settlement]\nmodulus = 100\nallowed = 0.01\n", r"give creep_percent with allowed"),
        ("gauge_length = 0\n", r"pads\.gauge_length = 0: it must be more than 0 m"),
    ],
)
def test_bad_rules(site, pads, message):
    with pytest.raises(SiteFileError, match=message):
        site(pads=pads)


def test_hostile_names_come_out_harmless(site, tmp_path, capsys):
    names = ['=cmd|"/c calc"!A1', "<b>bold</b> & 'quoted'", "🏗️ emoji; DROP TABLE pads", "N" * 300]
    shapes = [box(10 + 20 * i, 30, 25 + 20 * i, 70) for i in range(4)]
    site(shapes, names, existing=lambda e, n: 102.5 + 0.05 * (n - 50))
    assert main(["pads", str(tmp_path / "site.toml"), "--out", str(tmp_path / "out"), "--json", "--quiet"]) == 0
    document = json.loads(capsys.readouterr().out)
    assert [pad["pad"] for pad in document["result"]["pads"]] == names
    table = (tmp_path / "out" / "pads.csv").read_text(encoding="utf-8-sig")
    assert "'=cmd" in table
    stored, _ = _layer(tmp_path / "out" / "pads_shapes.gpkg", "pads")
    assert list(stored["pad"]) == names
    for picture in ("pads_map.png", "pads_sections.png"):
        assert (tmp_path / "out" / picture).read_bytes()[:8] == b"\x89PNG\r\n\x1a\n"
    assert main(["pads", str(tmp_path / "site.toml"), "--quiet"]) == 0
    assert "what the pads stand on" in capsys.readouterr().out


def _layer(path, layer):
    """Attributes and shapes of a layer, without a data frame of shapes: that library is not needed here."""
    meta, _, geometry, fields = pyogrio.raw.read(path, layer=layer)
    return dict(zip(meta["fields"], fields, strict=True)), shapely.from_wkb(geometry)


def test_feet_in_and_feet_out(site, tmp_path, capsys):
    metric = earthwork.pads(site())["A"]
    us = earthwork.pads(site(pads=PERCENT, units="us"))["A"]
    assert us.max_fill_m == pytest.approx(metric.max_fill_m)
    assert us.max_distortion == pytest.approx(metric.max_distortion)
    assert main(["pads", str(tmp_path / "site.toml"), "--out", str(tmp_path / "out"), "--quiet"]) == 0
    assert "max_fill_ft" in (tmp_path / "out" / "pads.csv").read_text(encoding="utf-8-sig").splitlines()[0]
    assert "ft²" in capsys.readouterr().out


def test_designed_pads_bring_their_lines(site, tmp_path):
    site()
    path = tmp_path / "site.toml"
    text = path.read_text().replace('finished = "finished.tif"\n', "")
    design = '[design]\npads = "pads.gpkg"\nname = "pad"\nelevation = "grade"\nelevation_is = "subgrade"\n'
    write_layer(tmp_path / "pads.gpkg", [box(30, 30, 70, 70)], pad=["A"], grade=[102.5])
    path.write_text(text + design + "cut_slope = 2\nfill_slope = 2\n")
    result = earthwork.pads(path)
    assert result["A"].slopes.fill_height_m > 0.5
    assert main(["pads", str(path), "--out", str(tmp_path / "out"), "--quiet"]) == 0
    lines, shapes = _layer(tmp_path / "out" / "pads_design.gpkg", "lines")
    drawing = ezdxf.readfile(tmp_path / "out" / "pads_design.dxf")
    kinds = {"TOP OF FILL", "TOE OF FILL", "TOE OF CUT", "TOP OF CUT"}
    assert {entity.dxf.layer for entity in drawing.modelspace()} == kinds
    top = next(e for e in drawing.modelspace() if e.dxf.layer == "TOP OF FILL")
    # A level line is a flat polyline with its elevation; the others are 3D polylines.
    assert (top.dxftype(), round(top.dxf.elevation, 9)) == ("LWPOLYLINE", 102.5)
    toe = next(e for e in drawing.modelspace() if e.dxf.layer == "TOE OF FILL")
    assert toe.dxftype() == "POLYLINE"
    assert all(100 < point.z < 102.5 for point in toe.points())
    _, (area,) = _layer(tmp_path / "out" / "pads_design.gpkg", "area")
    assert area.area > 1600
    assert set(lines["kind"]) == {"top of fill", "toe of fill", "toe of cut", "top of cut"}
    assert all(isinstance(g, LineString) and g.has_z for g in shapes)
