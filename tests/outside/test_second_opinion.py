"""The same figures by other libraries: exactextract for zonal shares, meshes for volumes, quadrature for smooth ground."""

import itertools

import numpy as np
import pytest
import shapely
import trimesh
from exactextract import exact_extract

from tests.outside.conftest import centres, data, write_polygons, write_raster, write_site


def hills(rows, columns, cell, seed=0):
    """Rolling ground and a plan over it that cuts and fills [m]."""
    x, y = centres(rows, columns, cell)
    r = np.random.default_rng(seed)
    ground = 50 + 3 * np.sin(x / 31) * np.cos(y / 23) + r.normal(0, 0.02, x.shape)
    return ground, 50 + 0.01 * x + 0.8 * np.cos(x / 40 + y / 60)


def blobs(seed, count, west, south, east, north):
    """Star-shaped polygons anywhere in a rectangle, some with a hole; they may overlap."""
    r = np.random.default_rng(seed)
    shapes = []
    for _ in range(count):
        angles = np.sort(r.uniform(0, 2 * np.pi, 23))
        radius = r.uniform(4, 22) * r.uniform(0.5, 1.0, 23)
        centre = r.uniform((west + 23, south + 23), (east - 23, north - 23))
        ring = centre + np.column_stack([radius * np.cos(angles), radius * np.sin(angles)])
        shape = shapely.make_valid(shapely.Polygon(ring))
        if r.random() < 0.4:
            shape = shape.difference(shapely.Point(*centre).buffer(1.7))
        shapes.append(max(shapely.get_parts(shape), key=shapely.area))
    return shapes


def apart(shapes):
    """Those that do not touch an earlier one, and pairs of halves that share an edge."""
    kept = []
    for shape in shapes:
        if all(shape.distance(other) > 1e-6 for other in kept):
            kept.append(shape)
    return kept


def zonal_sums(raster, polygons):
    """Sum of value × share, and sum of shares, for each polygon, by exactextract."""
    features = [
        {"type": "Feature", "properties": {"id": i}, "geometry": shapely.geometry.mapping(p)}
        for i, p in enumerate(polygons)
    ]
    rows = exact_extract(str(raster), features, ["sum", "count"])
    return [(row["properties"]["sum"], row["properties"]["count"]) for row in rows]


def test_zones_by_exactextract(tmp_path, volumes):
    cell, corner = 2.0, (4000.0, 9000.0)
    ground, plan = hills(110, 150, cell)
    files = {
        "existing": write_raster(tmp_path / "a.tif", ground, cell=cell, corner=corner),
        "finished": write_raster(tmp_path / "b.tif", plan, cell=cell, corner=corner),
    }
    depth = write_raster(tmp_path / "d.tif", plan - ground, cell=cell, corner=corner)
    zones = apart(blobs(3, 60, corner[0], corner[1] - 220, corner[0] + 300, corner[1]))
    assert len(zones) > 15
    found = volumes("--zones", write_polygons(tmp_path / "zones.gpkg", zones), "--zone-name", "name", **files)
    for polygon, zone, (total, share) in zip(zones, found["zones"], zonal_sums(depth, zones), strict=True):
        assert zone["area_m2"] == pytest.approx(polygon.area, rel=1e-10)
        assert zone["area_m2"] == pytest.approx(share * cell**2, rel=1e-7)  # its shares are float32
        assert -zone["cut_minus_fill_m3"] == pytest.approx(total * cell**2, rel=1e-6, abs=1e-4)


def test_gross_fill_of_zones_by_exactextract(tmp_path, volumes):
    """Where nothing crosses zero, cut and fill are plain sums, and exactextract gives them too."""
    cell = 3.0
    ground, _ = hills(80, 90, cell)
    files = {
        "existing": write_raster(tmp_path / "a.tif", ground, cell=cell),
        "finished": write_raster(tmp_path / "b.tif", ground * 0 + 60.0, cell=cell),
    }
    depth = write_raster(tmp_path / "d.tif", 60.0 - ground, cell=cell)
    zones = apart(blobs(8, 40, 500, 900 - 240, 500 + 270, 900))
    found = volumes("--zones", write_polygons(tmp_path / "zones.geojson", zones), "--zone-name", "name", **files)
    for zone, (total, _share) in zip(found["zones"], zonal_sums(depth, zones), strict=True):
        assert zone["fill_m3"] == pytest.approx(total * cell**2, rel=1e-6)
        assert zone["cut_m3"] == 0.0


def test_limits_by_exactextract(tmp_path, volumes):
    cell = 2.5
    ground, plan = hills(90, 90, cell, seed=5)
    files = {
        "existing": write_raster(tmp_path / "a.tif", ground, cell=cell),
        "finished": write_raster(tmp_path / "b.tif", plan, cell=cell),
    }
    depth = write_raster(tmp_path / "d.tif", plan - ground, cell=cell)
    (limits,) = blobs(21, 1, 560, 740, 640, 840)
    found = volumes("--limits", write_polygons(tmp_path / "limits.gpkg", [limits]), **files)["total"]
    ((total, share),) = zonal_sums(depth, [limits])
    assert found["area_m2"] == pytest.approx(limits.area, rel=1e-10)
    assert found["area_m2"] == pytest.approx(share * cell**2, rel=1e-7)
    assert -found["cut_minus_fill_m3"] == pytest.approx(total * cell**2, rel=1e-6, abs=1e-4)


def test_parcels_of_a_town_by_the_ellipsoid(tmp_path, volumes):
    """Parcels in Web Mercator on level ground: their areas against geodesic ones, where the map says 2.4 times too much."""
    import pyogrio
    import pyproj

    path = data("zones_bubenec_plots") / "bubenec.gpkg"
    meta, _, geometry, _columns = pyogrio.raw.read(path, layer="plots", columns=["ID"])
    parcels = apart([shapely.force_2d(g) for g in shapely.from_wkb(geometry)][::9])
    assert len(parcels) > 25
    west, south, east, north = shapely.total_bounds(parcels)
    rows, columns = int((north - south) / 2) + 2, int((east - west) / 2) + 2
    level = np.full((rows, columns), 190.0)
    frame = {"cell": 2.0, "corner": (west - 1, north + 1), "crs": meta["crs"]}
    files = {
        "existing": write_raster(tmp_path / "a.tif", level, **frame),
        "finished": write_raster(tmp_path / "b.tif", level + 1.5, **frame),
    }
    zones = write_polygons(tmp_path / "parcels.gpkg", parcels, crs=meta["crs"])
    found = volumes("--zones", zones, "--zone-name", "name", **files)
    to_degrees = pyproj.Transformer.from_crs(meta["crs"], 4326, always_xy=True).transform
    geod = pyproj.Geod(ellps="WGS84")
    for parcel, zone in zip(parcels, found["zones"], strict=True):
        true = abs(geod.geometry_area_perimeter(shapely.transform(parcel, to_degrees, interleaved=False))[0])
        assert zone["area_m2"] == pytest.approx(true, rel=1e-3)
        assert zone["fill_m3"] == pytest.approx(1.5 * zone["area_m2"], rel=1e-9)


def test_overlapping_parcels_are_named(tmp_path, earthwork):
    """Of the 407 parcels, 30 overlap another: a partition that counts ground twice is refused, with names."""
    site = write_site(
        tmp_path,
        f'''
[ground]
existing = "a.tif"
finished = {{ level = 191.0 }}
[zones]
area = {{ file = "{data("zones_bubenec_plots") / "bubenec.gpkg"}", layer = "plots" }}
name = "ID"
''',
    )
    write_raster(
        tmp_path / "a.tif", np.full((400, 400), 190.0), cell=3.0, corner=(1602000.0, 6466500.0), crs="EPSG:3857"
    )
    ran = earthwork("volumes", site, "--json")
    assert (ran.code, ran.stdout) == (2, "")
    assert "overlap" in ran.stderr
    assert "m²" in ran.stderr


def test_fill_of_a_node_grid_by_meshes(tmp_path, volumes):
    """A patch of four nodes holds the mean of the two ways to cut it into triangles: closed meshes, by trimesh."""
    r = np.random.default_rng(4)
    heights = 5 + r.uniform(0, 3, (9, 12))
    write_raster(tmp_path / "nodes.tif", heights, cell=4.0)
    text = '[ground]\nexisting = { file = "nodes.tif", sample = "node" }\nfinished = { level = 0.0 }'
    found = volumes(write_site(tmp_path, text))["total"]["cut_m3"]
    both = [prism_mesh(heights, 4.0, diagonal).volume for diagonal in (0, 1)]
    assert both[0] != pytest.approx(both[1], rel=1e-6)
    assert found == pytest.approx(sum(both) / 2, rel=1e-12)


def prism_mesh(heights, cell, diagonal):
    """A watertight body between the nodes and level 0."""
    rows, columns = heights.shape
    row, column = np.mgrid[:rows, :columns]
    top = np.column_stack([column.ravel() * cell, -row.ravel() * cell, heights.ravel()])
    bottom = top * [1, 1, 0]
    index = np.arange(rows * columns).reshape(rows, columns)
    a, b, c, d = index[:-1, :-1], index[:-1, 1:], index[1:, 1:], index[1:, :-1]
    halves = [(a, d, b), (b, d, c)] if diagonal else [(a, d, c), (a, c, b)]
    faces = np.vstack([np.column_stack([v.ravel() for v in half]) for half in halves])
    rim = np.concatenate([index[0, ::-1], index[1:, 0], index[-1, 1:], index[-2:0:-1, -1]])
    ahead, lower = np.roll(rim, -1), rows * columns
    walls = np.vstack(
        [np.column_stack([rim, rim + lower, ahead]), np.column_stack([ahead, rim + lower, ahead + lower])]
    )
    mesh = trimesh.Trimesh(np.vstack([top, bottom]), np.vstack([faces, faces[:, ::-1] + lower, walls]), process=False)
    mesh.fix_normals()
    assert mesh.is_watertight
    return mesh


def test_smooth_ground_by_quadrature(tmp_path, volumes):
    """Cut and fill between two smooth surfaces: adaptive quadrature by scipy along each line between zeros."""
    from scipy.integrate import quad
    from scipy.optimize import brentq

    def depth(x, y):
        return np.sin(x / 17) * np.cos(y / 13) + 0.004 * x

    def positive(y):
        edges = np.linspace(-60, 60, 240)  # 0, where the depth is 0, is none of them
        signs = depth(edges, y)
        zeros = [brentq(depth, edges[i], edges[i + 1], args=(y,)) for i in np.flatnonzero(signs[1:] * signs[:-1] < 0)]
        ends = [-60.0, *zeros, 60.0]
        parts = [quad(depth, a, b, args=(y,))[0] for a, b in itertools.pairwise(ends)]
        return sum(p for p in parts if p > 0)

    lines, weights = np.polynomial.legendre.leggauss(60)
    fill = 40 * sum(w * positive(40 * y) for y, w in zip(lines, weights, strict=True))
    x, y = centres(160, 240, 0.5)
    files = {
        "existing": write_raster(tmp_path / "a.tif", np.full(x.shape, 30.0), cell=0.5),
        "finished": write_raster(tmp_path / "b.tif", 30.0 + depth(x, y), cell=0.5),
    }
    total = volumes(**files)["total"]
    # The depth is odd under (x, y) → (−x, y): cut and fill are the same.
    assert total["fill_m3"] == pytest.approx(fill, rel=2e-4)
    assert total["cut_m3"] == pytest.approx(fill, rel=2e-4)
