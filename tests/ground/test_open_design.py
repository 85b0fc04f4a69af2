"""Sites with a [design]: read from files, walked by the engine, and every kind of bad input."""

import math

import numpy as np
import pyogrio
import pytest
import rasterio
import shapely
from rasterio.transform import from_origin
from shapely.geometry import LineString, Polygon, box

import earthwork
from earthwork.errors import GroundError, SiteFileError

CRS = "EPSG:32614"
EAST, NORTH = 500_000.0, 4_400_000.0

SITE = """
[site]
name = "Alder Bench"
units = "{units}"
[ground]
existing = "existing.tif"
ground_scale = 1.0
{ground}
[design]
pads = "pads.gpkg"
name = "pad"
elevation = "grade"
elevation_is = "{elevation_is}"
cut_slope = 2.0
fill_slope = 2.0
{design}
{more}
"""


def at(shape):
    """A shape drawn from (0, 0), moved to where the raster lies."""
    return shapely.transform(shape, lambda c: c + [EAST, NORTH, 0.0][: c.shape[1]], include_z=shape.has_z)


def write_layer(path, shapes, **columns):
    pyogrio.raw.write(
        path,
        shapely.to_wkb(np.array([at(s) for s in shapes], object)),
        [np.array(v) for v in columns.values()],
        list(columns),
        geometry_type={"Polygon": "Polygon", "LineString": "LineString"}[shapes[0].geom_type]
        + (" Z" if shapes[0].has_z else ""),
        crs=CRS,
        layer="plan",
    )


@pytest.fixture
def site(tmp_path):
    """A function that writes a site of 160 m × 160 m on level ground at 100 and opens it."""

    def make(pads, *, elevation_is="finished", design="", more="", ground="", units="metric", height=None, **columns):
        cell, count = 0.5, 320
        east, north = np.meshgrid((np.arange(count) + 0.5) * cell, 160 - (np.arange(count) + 0.5) * cell)
        z = np.broadcast_to(100.0 if height is None else height(east, north), east.shape).astype("float64")
        with rasterio.open(
            tmp_path / "existing.tif", "w", driver="GTiff", height=count, width=count, count=1, dtype="float64",
            crs=CRS, transform=from_origin(EAST, NORTH + 160, cell, cell),
        ) as raster:  # fmt: skip
            raster.write(z, 1)
        write_layer(tmp_path / "pads.gpkg", pads, **columns)
        text = SITE.format(units=units, ground=ground, elevation_is=elevation_is, design=design, more=more)
        (tmp_path / "site.toml").write_text(text)
        return earthwork.Site.open(tmp_path / "site.toml")

    return make


PAD = box(30, 50, 130, 110)
CLOSED = 100 * 60 * 3 + 2 * 9 * 160 + math.pi / 3 * 4 * 27


def test_volumes_of_a_designed_site(site):
    result = earthwork.volumes(site([PAD], pad=["A"], grade=[103.0]))
    assert result.total.fill_m3 == pytest.approx(CLOSED, rel=1e-4)
    assert result.total.cut_m3 == pytest.approx(0, abs=1e-6)
    # The disturbed area is the pad and its slopes: 160 × 60 + 2 · 6 · (100 + 60) + π 6².
    assert result.disturbed_area_m2 == pytest.approx(100 * 60 + 2 * 6 * 160 + math.pi * 36, rel=1e-3)


def test_threads_and_tiles_change_nothing(site):
    opened = site([PAD], pad=["A"], grade=[103.0])
    one = earthwork.volumes(opened, threads=1).to_dict()
    assert earthwork.volumes(opened, threads=4).to_dict() == one


def test_sections_lie_on_top_when_elevations_are_subgrade(site):
    section = '[[section]]\nname = "slab"\nthickness = 0.5\narea = "pads.gpkg"\n'
    finished = earthwork.volumes(site([PAD], pad=["A"], grade=[103.0], more=section))
    subgrade = earthwork.volumes(site([PAD], pad=["A"], grade=[103.0], more=section, elevation_is="subgrade"))
    assert subgrade.total.fill_m3 == pytest.approx(CLOSED, rel=1e-4)
    assert finished.total.fill_m3 == pytest.approx(CLOSED - 0.5 * 6000, rel=1e-4)
    assert finished.total.section_m3 == subgrade.total.section_m3 == pytest.approx(3000)


def test_strip_default_area_is_pads_and_slopes(site):
    strip = '[[strip]]\nmaterial = "topsoil"\ndepth = 0.2\n'
    result = earthwork.volumes(site([PAD], pad=["A"], grade=[103.0], more=strip))
    assert result.total.strip_m3 == pytest.approx(0.2 * (6000 + 1920 + math.pi * 36), rel=1e-3)


def test_feet(site):
    # 103 ft over ground at 100 ft: the raster is in metres and UTM, so ground is at 100 m = 328.08 ft.
    result = earthwork.volumes(site([PAD], pad=["A"], grade=[103 / 0.3048], units="us"))
    assert result.total.fill_m3 == pytest.approx(CLOSED, rel=1e-4)


def test_heights_of_vertices_and_falls(site):
    tilted = Polygon([(30, 50, 103.0), (130, 50, 101.0), (130, 110, 101.0), (30, 110, 103.0)])
    by_vertex = earthwork.volumes(site([tilted], pad=["A"], grade=[0.0], design='elevation_from = "vertices"'))
    by_fall = earthwork.volumes(
        site([PAD], pad=["A"], grade=[102.0], f=[2.0], to=[90.0], design='fall = "f"\nfall_direction = "to"')
    )
    assert by_vertex.total.fill_m3 == pytest.approx(by_fall.total.fill_m3, rel=1e-9)
    assert by_fall.total.fill_m3 > 100 * 60 * 2


def test_own_slopes_benches_mitres_and_roads(site, tmp_path):
    plain = earthwork.volumes(site([PAD], pad=["A"], grade=[103.0])).total.fill_m3
    own = site([PAD], pad=["A"], grade=[103.0], s=[1.0], design='own_fill_slope = "s"')
    assert earthwork.volumes(own).total.fill_m3 == pytest.approx(18000 + 9 * 160 + math.pi / 3 * 27, rel=1e-4)
    mitred = earthwork.volumes(site([PAD], pad=["A"], grade=[103.0], design='corners = "mitred"'))
    assert mitred.total.fill_m3 == pytest.approx(21024, rel=1e-4)
    benched = site([PAD], pad=["A"], grade=[103.0], design="bench_every = 1.5\nbench_width = 2.0")
    assert earthwork.volumes(benched).total.fill_m3 > plain
    write_layer(tmp_path / "roads.gpkg", [LineString([(5, 80), (32, 80)])], name=["ramp"])
    road = (
        '[design.roads]\nlines = "roads.gpkg"\nwidth = 8\ncrossfall = 2.0\n'
        '[[design.roads.profile]]\nroad = "ramp"\npoints = [[0, 100.0], [25, 103.0], [40, 103.0]]'
    )
    assert earthwork.volumes(site([PAD], pad=["A"], grade=[103.0], more=road)).total.fill_m3 > plain + 8 * 19 * 1.5


def test_what_cannot_be_built_is_a_warning(site):
    result = earthwork.volumes(site([box(2, 50, 60, 110)], pad=["A"], grade=[106.0]))
    (warning,) = [w for w in result.warnings if w.code == "slope-off-data"]
    assert 'the fill slope of "A" does not meet the ground inside the data' in warning.message


def test_a_grade_in_feet_on_a_metric_site_is_a_warning(site):
    # 100 m of ground, and 103 m written as 337.93 ft.
    result = earthwork.volumes(site([box(70, 70, 90, 90)], pad=["A"], grade=[337.93]))
    (warning,) = [w for w in result.warnings if w.code == "far-from-ground"]
    assert '"A" lies in fill of 237.93 m' in warning.message
    assert "check that its elevation is in the site's unit" in warning.message


@pytest.mark.parametrize(
    ("pads", "columns", "design", "message"),
    [
        ([PAD], {"pad": ["A"], "grade": [math.nan]}, "", r'pad "A": grade is empty; it must be its elevation'),
        ([PAD], {"pad": ["A"], "grade": ["high"]}, "", r'pad "A": grade is "high"; it must be its elevation'),
        ([PAD], {"pad": ["A"], "Grade": [1.0]}, "", r'there is no attribute "grade"; did you mean "Grade"'),
        ([PAD, box(100, 60, 140, 80)], {"pad": ["A", "B"], "grade": [103.0, 103.0]}, "",
         r'pads "A" and "B" overlap by 600 m²'),
        ([PAD, box(10, 10, 20, 20)], {"pad": ["A", "A"], "grade": [103.0, 103.0]}, "", r'the name "A" is given 2 times'),
        ([PAD], {"pad": ["A"], "grade": [103.0], "s": [0.0]}, 'own_cut_slope = "s"',
         r'pad "A": s is 0; it must be a ratio of run to height, 0.05 to 100'),
        ([PAD], {"pad": ["A"], "grade": [103.0], "s": [1e9]}, 'own_cut_slope = "s"',
         r'pad "A": s is 1e\+09; it must be a ratio'),
        ([PAD], {"pad": ["A"], "grade": [1e300]}, "",
         r'pad "A": grade is 1e\+300; it must be its elevation, -1,500 to 9,000 m'),
        ([PAD, box(100, 60, 140, 80)], {"pad": ["A", "A"], "grade": [math.nan, 103.0]}, "",
         r'(?s)site\.toml: design:.*grade is empty.*given 2 times.*overlap by 600 m²'),
        ([PAD], {"pad": ["A"], "grade": [103.0], "f": [0.02], "to": [90.0]}, 'fall = "f"\nfall_direction = "to"',
         r'pad "A": f is 0\.02; it must be 0, or a percentage from 0\.1 to 50'),
        ([PAD], {"pad": ["A"], "grade": [103.0]}, 'elevation_from = "vertices"',
         r'pad "A": its vertices carry no heights'),
        ([box(150, 50, 170, 60)], {"pad": ["far"], "grade": [103.0]}, "", r'pad "far" at .* is not wholly on the ground'),
        ([PAD], {"pad": ['<b>"A";🙂' + "x" * 300], "grade": [math.nan]}, "", r'pad "<b>"A";🙂xxx.*grade is empty'),
    ],
)  # fmt: skip
def test_bad_pads(site, pads, columns, design, message):
    with pytest.raises(GroundError, match=message):
        earthwork.volumes(site(pads, design=design, **columns))


@pytest.mark.parametrize(
    ("design", "message"),
    [
        ("bench_every = 10", r"design: give bench_every and bench_width together"),
        ('fall = "f"', r"design: give fall and fall_direction together"),
        ('fall = "f"\nfall_direction = "d"\nelevation_from = "vertices"', r"give elevations by vertices, or one"),
        ('corner = "round"', r"design\.corner: unknown key; did you mean 'corners'"),
    ],
)
def test_bad_design_sections(site, design, message):
    with pytest.raises(SiteFileError, match=message):
        site([PAD], pad=["A"], grade=[103.0], design=design)


@pytest.mark.parametrize("ratio", ["0", "-2", "1e-9", "1e9"])
def test_a_slope_ratio_of_zero_or_out_of_all_reason_is_refused(site, tmp_path, ratio):
    site([PAD], pad=["A"], grade=[103.0])
    path = tmp_path / "site.toml"
    path.write_text(path.read_text().replace("cut_slope = 2.0", f"cut_slope = {ratio}"))
    with pytest.raises(SiteFileError, match=r"design\.cut_slope = .*: it must be"):
        earthwork.Site.open(path)


@pytest.mark.parametrize(
    ("line", "profile", "message"),
    [
        (LineString([(5, 80), (32, 80)]), "", r'road "ramp": its vertices carry no heights'),
        (LineString([(5, 80), (32, 80)]), "[[0, 100.0], [20, 103.0]]",
         r'road "ramp": its profile runs from 0 to 20; the line is 27\.00 long'),
    ],
)  # fmt: skip
def test_bad_roads(site, tmp_path, line, profile, message):
    write_layer(tmp_path / "roads.gpkg", [line], name=["ramp"])
    road = '[design.roads]\nlines = "roads.gpkg"\nwidth = 8\n'
    if profile:
        road += f'[[design.roads.profile]]\nroad = "ramp"\npoints = {profile}\n'
    with pytest.raises(GroundError, match=message):
        earthwork.volumes(site([PAD], pad=["A"], grade=[103.0], more=road))


def test_profile_of_an_unknown_road(site, tmp_path):
    write_layer(tmp_path / "roads.gpkg", [LineString([(5, 80, 100), (32, 80, 103)])], name=["ramp"])
    road = '[design.roads]\nlines = "roads.gpkg"\nwidth = 8\n[[design.roads.profile]]\nroad = "rmp"\n'
    with pytest.raises(GroundError, match=r'there is no road "rmp"; did you mean "ramp"'):
        earthwork.volumes(site([PAD], pad=["A"], grade=[103.0], more=road + "points = [[0, 1.0], [30, 2.0]]"))
