"""Polygons and lines as users have them: layers, filters, names, CRS, broken shapes, and what is refused."""

from __future__ import annotations

import contextlib
import json
import sqlite3
import subprocess
import sys
from pathlib import Path

import numpy as np
import pyogrio.raw
import pytest
import shapely
from pyproj import CRS, Transformer

from earthwork.errors import FileError, GroundError
from earthwork.files.vectors import NamedLine, NamedPolygon, read_lines, read_polygons
from earthwork.site.model import AreaSpec

DATA = Path(__file__).parents[2] / "../shared/data"
needs_data = pytest.mark.skipif(not DATA.is_dir(), reason="the folder of open data is not here")
UTM = CRS("EPSG:32611")
E, N = 500_000.0, 4_100_000.0


def box(west, south, side=10.0):
    return shapely.box(E + west, N + south, E + west + side, N + south + side)


def write(path, shapes, *, crs="EPSG:32611", layer=None, kind="Polygon", append=False, **columns):
    pyogrio.raw.write(
        path,
        geometry=shapely.to_wkb(np.array(shapes, dtype=object), include_srid=False),
        field_data=[np.array(v) for v in columns.values()],
        fields=list(columns),
        geometry_type=kind,
        crs=crs,
        layer=layer,
        append=append,
    )
    return path


def polygons(path, *, crs=UTM, name=None, warnings=None, **spec):
    return read_polygons(
        AreaSpec(file=path.name, **spec), path.parent, crs=crs, name=name, what="zones", warnings=warnings
    )


# --- what is read --------------------------------------------------------------------------------------------------


@pytest.mark.parametrize("file", ["plan.gpkg", "plan.geojson", "plan.shp", "plan.fgb"])
def test_formats(tmp_path, file):
    path = write(tmp_path / file, [box(0, 0), box(20, 0)], phase=["north", "south"], grade=[101.5, 99.0])
    zones = polygons(path, name="phase")
    assert [type(z) for z in zones] == [NamedPolygon, NamedPolygon]
    south, north = sorted(zones, key=lambda z: z.name)[::-1]  # some formats sort by place
    assert (north.name, south.name) == ("north", "south")
    assert [z.polygon.area for z in zones] == pytest.approx([100.0, 100.0], rel=1e-9)
    assert south.attributes["grade"] == 99.0
    assert north.label.endswith("'north'")


def test_layer_and_filter(tmp_path):
    path = write(tmp_path / "plan.gpkg", [box(0, 0), box(20, 0)], layer="pads", phase=[1, 2])
    write(path, [box(40, 0)], layer="limits", append=False, phase=[3])
    assert [z.name for z in polygons(path, layer="pads", name="phase")] == ["1", "2"]
    assert [z.name for z in polygons(path, layer="pads", name="phase", where="phase > 1")] == ["2"]
    assert len(polygons(path, layer="limits")) == 1


def test_several_layers_must_be_told_apart(tmp_path):
    path = write(tmp_path / "plan.gpkg", [box(0, 0)], layer="pads")
    write(path, [box(0, 0)], layer="limits")
    with pytest.raises(
        FileError, match=r"the file has 2 layers; name one: .*layer = \"pads\".*There are: pads, limits"
    ):
        polygons(path)
    with pytest.raises(FileError, match=r"there is no layer 'limit'; there are: pads, limits\. Did you mean 'limits'"):
        polygons(path, layer="limit")


def test_numbers_as_names(tmp_path):
    path = write(tmp_path / "p.gpkg", [box(0, 0), box(20, 0)], lot=[7.0, 8.5])
    assert [z.name for z in polygons(path, name="lot")] == ["7", "8.5"]
    assert [z.name for z in polygons(path, name="fid")] == ["1", "2"]
    assert [z.name for z in polygons(path)] == ["feature 1", "feature 2"]


def test_a_feature_without_its_name(tmp_path):
    path = write(tmp_path / "p.geojson", [box(0, 0), box(20, 0)], phase=["a", ""])
    with pytest.raises(FileError, match=r"feature 1 has no value in 'phase'.*where = \"phase IS NOT NULL\""):
        polygons(path, name="phase")
    path = write(tmp_path / "q.gpkg", [box(0, 0), box(20, 0)], lot=[1.0, np.nan])
    with pytest.raises(FileError, match="feature 2 has no value in 'lot'"):
        polygons(path, name="lot")


def test_heights_are_kept_apart(tmp_path):
    pad = shapely.Polygon([(E, N, 101), (E + 5, N, 102), (E + 5, N + 5, 103)])
    path = write(tmp_path / "p.gpkg", [pad, box(20, 0)], kind="Unknown")
    first, second = polygons(path)
    assert not first.polygon.has_z
    assert shapely.get_coordinates(first.heights, include_z=True)[:3, 2].tolist() == [101.0, 102.0, 103.0]
    assert second.heights is None


def test_curves_become_polygons(tmp_path):
    """A disc of radius 5 as two arcs: chords of a few degrees leave 0.1 % of its area out at most."""
    path = tmp_path / "disc.csv"
    path.write_text(
        f'name,WKT\nround,"CURVEPOLYGON(CIRCULARSTRING({E - 5} {N},{E} {N + 5},{E + 5} {N},{E} {N - 5},{E - 5} {N}))"\n'
    )
    (disc,) = polygons(path, name="name")
    assert disc.polygon.geom_type in ("Polygon", "MultiPolygon")
    assert disc.polygon.area == pytest.approx(np.pi * 25, rel=1e-3)


def test_lines(tmp_path):
    road = shapely.LineString([(E, N), (E + 30, N + 40)])
    path = write(tmp_path / "roads.gpkg", [road], kind="LineString", road=["main"])
    (line,) = read_lines(AreaSpec(file=path.name), path.parent, crs=UTM, name="road", what="haul roads")
    assert (type(line), line.name, line.line.length) == (NamedLine, "main", 50.0)
    with pytest.raises(GroundError, match=r"zones: .*'feature 1' is a LineString; it must be a polygon"):
        polygons(path)
    path = write(tmp_path / "pads.gpkg", [box(0, 0)])
    with pytest.raises(GroundError, match=r"is a Polygon; it must be a line"):
        read_lines(AreaSpec(file=path.name), path.parent, crs=UTM)


def test_a_feature_without_a_shape_is_left_out_and_told(tmp_path):
    warnings = []
    path = write(tmp_path / "p.gpkg", [box(0, 0), None], phase=["a", "b"])
    assert [z.name for z in polygons(path, name="phase", warnings=warnings)] == ["a"]
    assert [(w.code, "left out: b" in w.message) for w in warnings] == [("shape-missing", True)]


# --- coordinates ---------------------------------------------------------------------------------------------------


def test_edges_bend_with_the_crs(tmp_path):
    """A square of 0.05 degrees: every point of its edges, not only its corners, goes where pyproj puts it."""
    there = Transformer.from_crs("EPSG:4326", "EPSG:32611", always_xy=True)
    path = write(tmp_path / "p.gpkg", [shapely.box(-117.0, 37.0, -116.95, 37.05)], crs="EPSG:4326")
    (square,) = polygons(path)
    middle = shapely.Point(there.transform(-116.975, 37.0))  # of the southern edge, along a parallel
    assert square.polygon.exterior.distance(middle) < 1e-3
    chord = shapely.LineString([there.transform(-117.0, 37.0), there.transform(-116.95, 37.0)])
    assert chord.distance(middle) > 0.2  # which a straight edge would have missed
    corners = [shapely.Point(there.transform(*c)) for c in ((-117.0, 37.0), (-116.95, 37.05))]
    assert max(square.polygon.exterior.distance(c) for c in corners) < 1e-6


def test_the_same_crs_keeps_every_vertex(tmp_path):
    path = write(tmp_path / "p.gpkg", [box(0, 0)], crs="EPSG:32611")
    (square,) = polygons(path, crs=CRS("EPSG:32611+5703").sub_crs_list[0])
    assert len(square.polygon.exterior.coords) == 5
    assert square.polygon.equals(box(0, 0))


def test_heights_survive_reprojection(tmp_path):
    there = Transformer.from_crs("EPSG:32611", "EPSG:32610", always_xy=True)
    east, north = there.transform(240_000.0, 4_100_000.0)
    pad = shapely.Polygon([(east, north, 101), (east + 5, north, 101), (east + 5, north + 5, 101)])
    (read,) = polygons(write(tmp_path / "p.gpkg", [pad], crs="EPSG:32610", kind="Polygon Z"))
    assert set(shapely.get_coordinates(read.heights, include_z=True)[:, 2]) == {101.0}


def test_no_crs_in_the_file(tmp_path):
    warnings = []
    write(tmp_path / "p.shp", [box(0, 0)], crs=None)
    (square,) = polygons(tmp_path / "p.shp", warnings=warnings)
    assert square.polygon.bounds == (E, N, E + 10, N + 10)
    assert [w.code for w in warnings] == ["crs-missing"]
    assert "that of the surfaces, EPSG:32611" in warnings[0].message


@pytest.mark.parametrize("srs_id", [0, -1])
def test_the_two_ways_in_which_a_geopackage_names_no_crs(tmp_path, srs_id):
    path = write(tmp_path / "z.gpkg", [box(0, 0)], crs=None, layer="z", name=["a"])
    with contextlib.closing(sqlite3.connect(path)) as database, database:
        database.execute(f"UPDATE gpkg_geometry_columns SET srs_id = {srs_id}")
        database.execute(f"UPDATE gpkg_contents SET srs_id = {srs_id}")
    warnings = []
    assert polygons(path, warnings=warnings)[0].polygon.equals(box(0, 0))
    assert [w.code for w in warnings] == ["crs-missing"]
    assert polygons(path, crs=None)[0].polygon.equals(box(0, 0))


def test_no_crs_of_the_surfaces(tmp_path):
    warnings = []
    (square,) = polygons(write(tmp_path / "p.gpkg", [box(0, 0)]), crs=None, warnings=warnings)
    assert square.polygon.bounds == (E, N, E + 10, N + 10)
    assert [w.code for w in warnings] == ["crs-missing"]
    with pytest.raises(GroundError, match=r"in degrees \(EPSG:4326.*Name the CRS of the surfaces in \[site\] crs"):
        polygons(write(tmp_path / "d.gpkg", [shapely.box(-117, 37, -116, 38)], crs="EPSG:4326"), crs=None)
    nothing = []
    polygons(write(tmp_path / "p.shp", [box(0, 0)], crs=None), crs=None, warnings=nothing)
    assert nothing == []


def geojson(path, coordinates, kind="Polygon"):
    feature = {"type": "Feature", "properties": {"n": 1}, "geometry": {"type": kind, "coordinates": coordinates}}
    path.write_text(json.dumps({"type": "FeatureCollection", "features": [feature]}))
    return path


def test_geojson_in_degrees_is_reprojected(tmp_path):
    lon, lat = Transformer.from_crs("EPSG:32611", "EPSG:4326", always_xy=True).transform(E, N)
    path = geojson(tmp_path / "p.geojson", [[[lon, lat], [lon + 1e-4, lat], [lon + 1e-4, lat + 1e-4], [lon, lat]]])
    (triangle,) = polygons(path)
    assert triangle.polygon.bounds[:2] == pytest.approx((E, N), abs=1e-6)


def test_geojson_with_map_coordinates_is_no_degrees(tmp_path):
    """Without a CRS a GeoJSON counts as degrees; 500,000 is no degree."""
    warnings = []
    path = geojson(tmp_path / "p.geojson", [[[E, N], [E + 9, N], [E + 9, N + 9], [E, N]]])
    (triangle,) = polygons(path, warnings=warnings)
    assert triangle.polygon.area == pytest.approx(40.5)
    assert [w.code for w in warnings] == ["crs-missing"]


def test_an_unknown_datum_shift_is_told(tmp_path):
    odd = (
        'PROJCS["x",GEOGCS["y",DATUM["nobody",SPHEROID["z",6378000,299]],PRIMEM["Greenwich",0],'
        'UNIT["degree",0.0174532925199433]],PROJECTION["Transverse_Mercator"],PARAMETER["central_meridian",-117],'
        'PARAMETER["scale_factor",0.9996],PARAMETER["false_easting",500000],UNIT["metre",1]]'
    )
    warnings = []
    polygons(write(tmp_path / "p.gpkg", [box(0, 0)], crs=odd), warnings=warnings)
    assert [w.code for w in warnings] == ["datum-shift-unknown"]
    assert "may be off by metres" in warnings[0].message


# --- what is refused -----------------------------------------------------------------------------------------------


def test_a_missing_file(tmp_path):
    write(tmp_path / "plan.gpkg", [box(0, 0)])
    with pytest.raises(FileError, match=r"zones: .*plann\.gpkg: no such file; did you mean 'plan\.gpkg'"):
        polygons(tmp_path / "plann.gpkg")


@pytest.mark.parametrize(
    ("name", "content"), [("a.gpkg", b"nothing"), ("a.geojson", b"{"), ("a.shp", b""), ("a.txt", b"x")]
)
def test_no_vector_file(tmp_path, name, content):
    (tmp_path / name).write_bytes(content)
    with pytest.raises(FileError, match=r"zones: .*: (not a vector file, or damaged|cannot be read)"):
        polygons(tmp_path / name)


def test_a_name_that_is_no_attribute(tmp_path):
    path = write(tmp_path / "p.gpkg", [box(0, 0)], phase=[1], kind_of_soil=["x"])
    with pytest.raises(
        FileError, match=r"no attribute 'phases'; there are: phase, kind_of_soil\. Did you mean 'phase'"
    ):
        polygons(path, name="phases")


@pytest.mark.parametrize("where", ["phases = 1", "phase = ", "((", "phase = 'a"])
def test_a_filter_that_cannot_be_read(tmp_path, where):
    path = write(tmp_path / "p.gpkg", [box(0, 0)], phase=[1])
    with pytest.raises(FileError, match=r"where = \".*\" cannot be used \(.*Attributes are: phase"):
        polygons(path, where=where)


def test_nothing_left(tmp_path):
    path = write(tmp_path / "p.gpkg", [box(0, 0)], phase=[1])
    with pytest.raises(FileError, match=r"no feature passes where = 'phase = 3'; it must hold at least one"):
        polygons(path, where="phase = 3")
    (tmp_path / "empty.geojson").write_text('{"type":"FeatureCollection","features":[]}')
    with pytest.raises(FileError, match="the layer holds no feature; it must hold at least one"):
        polygons(tmp_path / "empty.geojson")


def test_a_polygon_that_crosses_itself_is_named_with_the_place(tmp_path):
    bow = shapely.Polygon([(E, N), (E + 10, N + 10), (E + 10, N), (E, N + 10)])
    path = write(tmp_path / "p.gpkg", [box(20, 0), bow], phase=["good", "bow tie"])
    with pytest.raises(
        GroundError, match=r"'bow tie': Self-intersection at \(500005, 4100005\)\. Polygons must not cross"
    ):
        polygons(path, name="phase")


def test_many_broken_polygons_are_counted(tmp_path):
    bows = [shapely.Polygon([(E + i, N), (E + i + 1, N + 1), (E + i + 1, N), (E + i, N + 1)]) for i in range(8)]
    with pytest.raises(GroundError, match=r"'feature 5': Self-intersection .*; and 3 more"):
        polygons(write(tmp_path / "p.gpkg", bows))


@pytest.mark.parametrize(
    ("shape", "reason"),
    [
        (
            shapely.Polygon([(E, N), (E + 9, N), (E + 9, N + 9)], [[(E + 20, N), (E + 21, N), (E + 21, N + 1)]]),
            "outside shell",
        ),
        (shapely.MultiPolygon([box(0, 0), box(5, 5)]), "Self-intersection"),
        (shapely.Polygon([(E, N), (E + 9, N), (E + 4, N)]), "Self-intersection|Too few points"),
    ],
)
def test_other_invalid_shapes(tmp_path, shape, reason):
    with pytest.raises(GroundError, match=reason):
        polygons(write(tmp_path / "p.gpkg", [shape], kind="Unknown"))


def test_points_are_refused(tmp_path):
    path = write(tmp_path / "p.gpkg", [shapely.Point(E, N)], kind="Point")
    with pytest.raises(GroundError, match="is a Point; it must be a polygon"):
        polygons(path)


def test_nothing_else_is_written_to_stderr(tmp_path):
    (tmp_path / "a.gpkg").write_bytes(b"nothing")
    code = (
        "from pathlib import Path\n"
        "from earthwork.errors import FileError\n"
        "from earthwork.files.vectors import read_polygons\n"
        "from earthwork.site.model import AreaSpec\n"
        f"try: read_polygons(AreaSpec(file='a.gpkg'), Path({str(tmp_path)!r}), crs=None)\n"
        "except FileError: print('refused')\n"
    )
    done = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True)
    assert (done.stdout, done.stderr) == ("refused\n", "")


def test_the_reader_of_vector_files_loads_late():
    code = "import sys, earthwork.files.vectors, earthwork.ground.areas; print('pyogrio' in sys.modules)"
    assert subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True).stdout == "False\n"


# --- real data -----------------------------------------------------------------------------------------------------


@needs_data
def test_plots_of_a_town_in_its_national_grid():
    """407 parcels, 278,886.794 m² in EPSG:5514 by their vertices alone (README of the data)."""
    path = DATA / "zones_bubenec_plots/bubenec.gpkg"
    plots = polygons(path, layer="plots", crs=CRS("EPSG:5514"), name="ID")
    assert len(plots) == 407
    assert sum(p.polygon.area for p in plots) == pytest.approx(278_886.794, rel=1e-6)


@needs_data
def test_the_beach_zone_from_the_neighbouring_zone():
    """139,015.067 m² after reprojecting the vertices (README of the data); the edges bend by less than a millimetre."""
    path = DATA / "pair_beach_leo/shoremasks.gpkg"
    (leo,) = polygons(path, crs=CRS("EPSG:32755"), name="location", where="location = 'leo'")
    assert leo.polygon.area == pytest.approx(139_015.067, rel=3e-6)


def test_a_coordinate_that_is_no_number_is_one_message(tmp_path, recwarn):
    corners = ", ".join(f"[{e}, {n}]" for e, n in ((E, N), ("NaN", N), (E, N + 9), (E, N)))
    shape = f'{{"type": "Polygon", "coordinates": [[{corners}]]}}'
    (tmp_path / "plan.geojson").write_text(f'{{"type": "Feature", "properties": {{}}, "geometry": {shape}}}')
    with pytest.raises(GroundError, match="Invalid Coordinate"):
        polygons(tmp_path / "plan.geojson")
    assert [str(w.message) for w in recwarn if issubclass(w.category, RuntimeWarning)] == []
