"""Files for other programs, read back by other libraries: coordinates to 0.001, layers, styles, the model."""

from __future__ import annotations

import json
import xml.etree.ElementTree as ElementTree

import ezdxf
import numpy as np
import pyogrio
import pytest
import rasterio
import trimesh
from scipy.interpolate import LinearNDInterpolator

from tests.reporting.report.conftest import HOSTILE, SAMPLES

NS = {"x": "http://www.landxml.org/schema/LandXML-1.2"}
US_FOOT = 1200 / 3937


def elevation(raster, easting, northing):
    """Of the cell whose centre is the place."""
    with rasterio.open(raster) as file:
        return next(iter(file.sample([(easting, northing)])))[0]


@pytest.fixture(scope="module")
def landxml(sample):
    return ElementTree.parse(sample.directory / "surfaces.xml").getroot()


def surface_of(root, name):
    found = next(s for s in root.iter(f"{{{NS['x']}}}Surface") if s.get("name") == name)
    points = np.array([[float(v) for v in p.text.split()] for p in found.iter(f"{{{NS['x']}}}P")])
    faces = np.array([[int(v) for v in f.text.split()] for f in found.iter(f"{{{NS['x']}}}F")]) - 1
    return points, faces


def test_landxml_says_its_unit_and_place(landxml):
    assert landxml.get("version") == "1.2"
    assert landxml.find("x:Units/x:Imperial", NS).get("linearUnit") == "USSurveyFoot"
    assert landxml.find("x:CoordinateSystem", NS).get("epsgCode") == "2274"
    assert landxml.find("x:Project", NS).get("name") == "Cooper Ridge Section 4"
    names = [s.get("name") for s in landxml.iter(f"{{{NS['x']}}}Surface")]
    assert names == ["existing", "removal bottom", "subgrade", "finished"]


def test_landxml_points_are_the_survey_to_a_thousandth(landxml):
    points, faces = surface_of(landxml, "existing")
    assert faces.max() == len(points) - 1
    for northing, easting, height in points[:: len(points) // 50]:
        surveyed = elevation(SAMPLES / "cooper-ridge" / "existing.tif", easting, northing)
        assert height == pytest.approx(surveyed, abs=0.001)


def test_landxml_triangles_lie_within_the_tolerance_that_they_tell(landxml, sample):
    name = "finished"
    points, faces = surface_of(landxml, name)
    found = next(s for s in landxml.iter(f"{{{NS['x']}}}Surface") if s.get("name") == name)
    tolerance_ft = float(found.get("desc").split("than ")[1].split(" ft")[0])
    # a second library interpolates the same triangles
    from matplotlib.tri import LinearTriInterpolator, Triangulation

    east0, north0 = points[:, 1].min(), points[:, 0].min()
    surface = LinearTriInterpolator(Triangulation(points[:, 1] - east0, points[:, 0] - north0, faces), points[:, 2])
    overview = sample.parts.surfaces
    rows, columns = np.nonzero(np.isfinite(overview.finished))
    east = overview.grid.west + (columns + 0.5) * overview.grid.cell_east
    north = overview.grid.north - (rows + 0.5) * overview.grid.cell_north
    made = surface(east - east0, north - north0)
    off_ft = np.abs(made - overview.finished[rows, columns] / US_FOOT).compressed()
    assert len(off_ft) > 10_000
    assert off_ft.max() <= tolerance_ft + 0.0006


def test_landxml_breaklines_carry_pads_at_grade(landxml, sample):
    lines = list(landxml.iter(f"{{{NS['x']}}}Breakline"))
    assert lines
    assert {line.get("brkType") for line in lines} == {"standard"}
    for line in lines[:5]:
        values = np.array(line.find("x:PntList3D", NS).text.split(), dtype=float).reshape(-1, 3)
        assert len(values) > 4
        assert np.ptp(values[:, 2]) < 30


def test_landxml_of_hostile_names_is_well_formed(hostile):
    root = ElementTree.parse(hostile.directory / "surfaces.xml").getroot()
    assert root.find("x:Project", NS).get("name") == "Quarry </script><b>"
    names = {line.get("name") for line in root.iter(f"{{{NS['x']}}}Breakline")}
    assert names == set(HOSTILE[:2])


def test_dxf_comes_back_with_its_layers_and_coordinates(hostile):
    drawing = ezdxf.readfile(hostile.directory / "surfaces.dxf")
    assert drawing.dxfversion == "AC1009"
    space = drawing.modelspace()
    faces = space.query("3DFACE")
    assert {f.dxf.layer for f in faces} == {"EXISTING", "SUBGRADE"}
    existing = hostile.parts.site.directory / "existing.tif"
    for face in faces[:: len(faces) // 40]:
        assert face.dxf.vtx2.isclose(face.dxf.vtx3)
        if face.dxf.layer == "EXISTING":
            for corner in (face.dxf.vtx0, face.dxf.vtx1, face.dxf.vtx2):
                assert corner.z == pytest.approx(elevation(existing, corner.x, corner.y), abs=0.001)
    lines = space.query("POLYLINE[layer=='PAD_EDGE']")
    assert len(lines) == 2
    # pad edges run on the finished grade; where they follow the edge of cells, half of them is natural ground
    assert all(95 < vertex.dxf.location.z < 106 for line in lines for vertex in line.vertices)


def test_dxf_of_hostile_names_reads(hostile):
    drawing = ezdxf.readfile(hostile.directory / "surfaces.dxf")
    texts = {t.dxf.text for t in drawing.modelspace().query("TEXT")}
    assert HOSTILE[0] in texts
    assert not drawing.audit().errors


def test_stakes_are_pnezd_at_subgrade(hostile):
    lines = (hostile.directory / "stakeout.txt").read_text().splitlines()
    rows = [line.split(",") for line in lines]
    assert all(len(row) == 5 for row in rows)
    assert [int(row[0]) for row in rows] == list(range(1, len(rows) + 1))
    corners = [row for row in rows if "corner" in row[4]]
    assert len(corners) == 8
    # a pad's corner on the edge of cells: bilinear between the four around it, two or three of them natural ground
    stakes = [row for row in rows if row[4].startswith(("C ", "F "))]
    assert stakes
    for _, north, east, z, code in stakes[::7]:
        finished = elevation(hostile.parts.site.directory / "finished.tif", float(east), float(north))
        existing = elevation(hostile.parts.site.directory / "existing.tif", float(east), float(north))
        # no sections: subgrade is the finished grade; 0.1 m of topsoil is stripped where the ground is disturbed
        assert float(z) == pytest.approx(finished, abs=0.001)
        depth = finished - existing
        worked = 0.1 if abs(depth) > 0.01 or "corner" in code else None
        sign, figure = code.split()[:2]
        if worked is not None:
            assert (1 if sign == "F" else -1) * float(figure) == pytest.approx(depth + worked, abs=0.006)


def test_geopackage_has_every_layer_with_figures_and_styles(sample):
    path = sample.directory / "site.gpkg"
    layers = {name for name, _ in pyogrio.list_layers(path)}
    assert {"limits", "zones", "pads", "breaklines", "layer_styles"} <= layers
    zones = pyogrio.read_dataframe(path, layer="zones")
    document = json.loads((sample.directory / "report.json").read_text())["result"]
    cut = {z["zone"]: z["cut_m3"] for z in document["volumes"]["zones"]}
    for name, value in zip(zones["name"], zones["cut_yd3"], strict=True):
        assert value * 0.764554857984 == pytest.approx(cut[name], rel=1e-9)
    assert zones.crs.to_epsg() == 2274
    if document["haul"]:
        moves = pyogrio.read_dataframe(path, layer="moves")
        assert moves["dry_mass_ton"].sum() * 0.90718474 == pytest.approx(
            sum(m["dry_mass_t"] for m in document["haul"]["moves"]), rel=1e-9
        )
    styles = pyogrio.read_dataframe(path, layer="layer_styles")
    assert set(styles["f_table_name"]) == layers - {"layer_styles"}
    for sld, qml in zip(styles["styleSLD"], styles["styleQML"], strict=True):
        ElementTree.fromstring(sld)
        ElementTree.fromstring(qml)


def test_thickness_raster_is_depth_and_refill(hostile):
    with rasterio.open(hostile.directory / "fill_thickness.tif") as file:
        thickness = file.read(1)
        assert file.units == ("m",)
        assert file.crs.to_epsg() == 32614
    # in the middle of the first pad: finished 101.0 over ground stripped by 0.1 m, over-excavated by 0.5 m
    with rasterio.open(hostile.parts.site.directory / "existing.tif") as file:
        existing = file.read(1)
    ground = existing[30, 20] - 0.1
    assert thickness[30, 20] == pytest.approx(max(101.0 - ground, 0.0) + 0.5, abs=1e-4)
    assert thickness[2, 2] == pytest.approx(0.0, abs=1e-6)


def test_the_model_stands_upright_with_true_heights(hostile):
    scene = trimesh.load(hostile.directory / "site.glb")
    assert set(scene.geometry) == {"existing", "removal bottom", "subgrade"}
    facts = scene.metadata
    existing = scene.geometry["existing"]
    with rasterio.open(hostile.parts.site.directory / "existing.tif") as file:
        ground = file.read(1)
    assert existing.vertices[:, 1].min() + facts["origin_elevation_m"] == pytest.approx(ground.min(), abs=1e-3)
    assert (existing.face_normals[:, 1] > 0).all()
    # y is up, x east, z south: a place of the model is a place of the map
    vertex = existing.vertices[len(existing.vertices) // 2]
    scale = hostile.parts.surfaces.grid.ground_scale
    place = facts["origin_easting"] + vertex[0] / scale, facts["origin_northing"] - vertex[2] / scale
    surveyed = elevation(hostile.parts.site.directory / "existing.tif", *place)
    assert vertex[1] + facts["origin_elevation_m"] == pytest.approx(surveyed, abs=1e-3)
    colors = existing.visual.vertex_colors
    assert colors.shape == (len(existing.vertices), 4)
    flat = LinearNDInterpolator(existing.vertices[:, [0, 2]], existing.vertices[:, 1])
    assert flat(vertex[0], vertex[2]) == pytest.approx(vertex[1], abs=1e-6)
