"""Bodies whose volume is known by hand, cut out of rasters and measured by ``earthwork volumes``.

The rasters carry no CRS: a local grid, on which a map metre is a metre.
"""

import numpy as np
import pytest

from tests.outside.conftest import centres, write_raster, write_site


def body(tmp_path, volumes, height, *, rows, columns, cell):
    """Result for a body of ``height(x, y)`` [m] built on level ground; x, y from the middle of the raster [m]."""
    x, y = centres(rows, columns, cell)
    existing = write_raster(tmp_path / "existing.tif", np.full((rows, columns), 100.0), cell=cell)
    finished = write_raster(tmp_path / "finished.tif", 100.0 + height(x, y), cell=cell)
    return volumes(existing=existing, finished=finished)


def cone(x, y):
    return np.clip(8.0 * (1 - np.hypot(x, y) / 20.0), 0, None)


def mound(x, y):
    return np.clip(4.0 * (1 - (x**2 + y**2) / 30.0**2), 0, None)


def square_frustum(x, y):
    """Base 100 m, top 60 m, height 25 m: the shape of a pad with mitred corners."""
    return np.clip(25.0 * (50 - np.maximum(abs(x), abs(y))) / 20.0, 0, 25.0)


def pyramid(x, y):
    return np.clip(12.0 * (1 - np.maximum(abs(x), abs(y)) / 30.0), 0, None)


def rounded_pad(x, y):
    """100 × 60 m, 3 m high, slopes 2:1 with conical corners."""
    away = np.hypot(np.clip(abs(x) - 50, 0, None), np.clip(abs(y) - 30, 0, None))
    return np.clip(3.0 - away / 2.0, 0, None)


def mitred_pad(x, y):
    """100 × 60 m, 3 m high, slopes 2:1 with planar corners."""
    away = np.maximum(abs(x) - 50, abs(y) - 30)
    return np.clip(3.0 - np.clip(away, 0, None) / 2.0, 0, 3.0)


#: name, height, volume [m³] by hand, side of the raster [m], kinks [m]: Σ length × change of slope across it.
#: The last is worked by hand: rims, and hips of 1.41 times the slope; curved slopes count a third.
BODIES = [
    ("cone, π r² h / 3", cone, 3351.0322, 48, 67),  # π · 20² · 8 / 3
    ("mound, π R² h / 2", mound, 5654.8668, 64, 67),  # π · 30² · 4 / 2
    ("frustum, h/3 (A + B + √AB)", square_frustum, 163_333.3333, 112, 1000),  # 25/3 · (10 000 + 3600 + 6000)
    ("pyramid, a² h / 3", pyramid, 14_400.0, 64, 192),  # 60² · 12 / 3
    ("pad, conical corners", rounded_pad, 20_993.0973, 128, 346),  # LWh + s h² (L + W) + π/3 s² h³
    ("pad, mitred corners", mitred_pad, 21_024.0, 128, 368),  # LWh + s h² (L + W) + 4/3 s² h³
]
NAMES = [body_[0] for body_ in BODIES]


@pytest.mark.parametrize(("height", "volume", "side"), [b[1:4] for b in BODIES], ids=NAMES)
@pytest.mark.parametrize("upside", ["fill", "cut"])
def test_body(tmp_path, volumes, height, volume, side, upside):
    sign = 1 if upside == "fill" else -1
    found = body(tmp_path, volumes, lambda x, y: sign * height(x, y), rows=4 * side, columns=4 * side, cell=0.25)
    total = found["total"]
    other = {"fill": "cut", "cut": "fill"}[upside]
    assert total[f"{upside}_m3"] == pytest.approx(volume, rel=2e-4)
    assert total[f"{other}_m3"] == 0.0
    assert total["area_m2"] == side**2
    assert total["missing_area_m2"] == 0.0


@pytest.mark.parametrize(("height", "volume", "side", "kinks"), [b[1:] for b in BODIES], ids=NAMES)
def test_error_falls_with_the_square_of_the_cell(tmp_path, volumes, height, volume, side, kinks):
    """A middle-point sum errs at a kink by at most (change of slope) × cell² / 8 a metre; elsewhere by less."""
    for cell in (4.0, 2.0, 1.0, 0.5):
        count = round(side / cell)
        found = body(tmp_path, volumes, height, rows=count, columns=count, cell=cell)
        assert found["total"]["fill_m3"] == pytest.approx(volume, abs=kinks * cell**2 / 8)


def test_wedge_is_exact(tmp_path, volumes):
    """A plane from 0 to 3 m over 60 m, 40 m wide: L W h / 2 = 3600 m³, on any cell."""
    for cell in (10.0, 4.0, 0.5):
        found = body(
            tmp_path, volumes, lambda x, y: (x + 30) * 0.05, rows=round(40 / cell), columns=round(60 / cell), cell=cell
        )
        assert found["total"]["fill_m3"] == pytest.approx(3600, rel=1e-12)
        assert found["total"]["cut_m3"] == 0.0
        assert found["total"]["fill_area_m2"] == pytest.approx(2400, rel=1e-12)


@pytest.mark.parametrize("cell", [20.0, 10.0, 4.0, 2.0])
def test_tilted_plane_about_its_middle(tmp_path, volumes, cell):
    """100 × 50 m at 2 %: cut = fill = g L² W / 8 = 1250 m³. The split makes coarse cells exact; plain sums lose."""
    rows, columns = round(50 / cell + 1e-9) or 1, round(100 / cell)
    width = rows * cell
    found = body(tmp_path, volumes, lambda x, y: 0.02 * x, rows=rows, columns=columns, cell=cell)
    exact = 0.02 * 100**2 * width / 8
    assert found["total"]["cut_m3"] == pytest.approx(exact, rel=1e-12)
    assert found["total"]["fill_m3"] == pytest.approx(exact, rel=1e-12)
    if columns % 2:  # a column of cells stands on the zero line: half of each is lost to the other half
        lost = 0.02 * cell**2 * width / 8
        assert found["unsplit"]["cut_m3"] == pytest.approx(exact - lost, rel=1e-12)
    else:
        assert found["unsplit"]["cut_m3"] == pytest.approx(exact, rel=1e-12)


@pytest.mark.parametrize("turn", [10, 30, 45, 77])
def test_oblique_plane_through_a_disc_of_levels(tmp_path, volumes, turn):
    """A plane through the middle of a square of side a, at any angle t: cut = fill.

    By hand, for gradient g along (cos t, sin t) with c ≥ s ≥ 0 the larger and smaller of |cos t| and |sin t|:
    ∫∫ max(c x + s y, 0) over the square = a³ (3 c² + s²) / (24 c).
    """
    c, s = sorted((abs(np.cos(np.radians(turn))), abs(np.sin(np.radians(turn)))), reverse=True)
    exact = 0.03 * 50**3 * (3 * c**2 + s**2) / (24 * c)
    cosine, sine = np.cos(np.radians(turn)), np.sin(np.radians(turn))
    found = body(tmp_path, volumes, lambda x, y: 0.03 * (cosine * x + sine * y), rows=10, columns=10, cell=5.0)
    assert found["total"]["fill_m3"] == pytest.approx(exact, rel=1e-12)
    assert found["total"]["cut_m3"] == pytest.approx(exact, rel=1e-12)
    assert found["unsplit"]["fill_m3"] < exact


def test_split_never_moves_the_difference(tmp_path, volumes):
    """Cut less fill is the plain sum of depth × area, split or not."""
    found = body(tmp_path, volumes, lambda x, y: np.sin(x / 7) + np.cos(y / 5), rows=60, columns=80, cell=2.0)
    x, y = centres(60, 80, 2.0)
    plain = -(np.sin(x / 7) + np.cos(y / 5)).sum() * 4
    assert found["total"]["cut_minus_fill_m3"] == pytest.approx(plain, rel=1e-9, abs=1e-8)
    assert found["unsplit"]["cut_m3"] - found["unsplit"]["fill_m3"] == pytest.approx(plain, rel=1e-9, abs=1e-8)


def test_wall_invents_nothing(tmp_path, volumes):
    """A slab of 2 m with an upright face on level ground: 20 × 30 × 2 m of fill, no cut on either side of the face."""
    found = body(
        tmp_path, volumes, lambda x, y: np.where((abs(x) < 10) & (abs(y) < 15), 2.0, 0.0), rows=40, columns=40, cell=1.0
    )
    assert found["total"]["fill_m3"] == pytest.approx(1200, rel=1e-12)
    assert found["total"]["cut_m3"] == 0.0


def test_non_square_cells(tmp_path, volumes):
    """A cuboid of 1 m over 40 × 30 m on cells of 2 × 0.5 m."""
    existing = write_raster(tmp_path / "a.tif", np.zeros((60, 20)), cell=(2.0, 0.5))
    finished = write_raster(tmp_path / "b.tif", np.ones((60, 20)), cell=(2.0, 0.5))
    found = volumes(existing=existing, finished=finished)
    assert found["total"]["fill_m3"] == pytest.approx(1200, rel=1e-12)
    assert found["grid"]["cell_m"] == [2.0, 0.5]


# --- handbook grid methods: heights at the corners of squares ---


def test_one_grid_square_to_a_design_level(tmp_path, earthwork):
    """Corners at 87.6, 87.6, 87.6 and 88.6 ft under a design level of 90 ft on a square of 50 ft: 199.07 yd³ of fill.

    A worked example of an engineering licence course, read; the corners are grid nodes.
    """
    write_raster(tmp_path / "corners.tif", np.array([[87.6, 87.6], [87.6, 88.6]]), cell=50.0)
    site = write_site(
        tmp_path,
        '[ground]\nexisting = { file = "corners.tif", sample = "node", vertical_unit = "ft" }\nfinished = { level = 90.0 }',
        units="us",
    )
    found = earthwork("volumes", site, "--json").result
    yard = 0.764554857984
    assert found["total"]["fill_m3"] / yard == pytest.approx(199.07, abs=0.005)
    assert found["grid"]["sample"] == "node"


def test_borrow_pit_with_corner_weights(tmp_path, volumes):
    """Three squares of 400 m² in an L, cut depths at their corners: A/4 (Σh₁ + 2 Σh₂ + 3 Σh₃) = 3200 m³.

    Corner weights as in standard surveying texts (borrow-pit levelling); Σh₁ = 15, Σh₂ = 4, Σh₃ = 3, worked by hand.
    """
    depths = np.array([[1.0, 2.0, 3.0], [2.0, 3.0, 4.0], [3.0, 4.0, np.nan]])
    write_raster(tmp_path / "pit.tif", 50.0 + depths, cell=20.0, nodata=np.nan)
    text = '[ground]\nexisting = { file = "pit.tif", sample = "node" }\nfinished = { level = 50.0 }'
    found = volumes(write_site(tmp_path, text))
    assert found["total"]["cut_m3"] == pytest.approx(400 / 4 * (15 + 2 * 4 + 3 * 3), rel=1e-12)
    assert found["total"]["area_m2"] == pytest.approx(1200, rel=1e-12)
    assert found["total"]["missing_area_m2"] == pytest.approx(400, rel=1e-12)


def test_plane_as_a_surface(tmp_path, volumes):
    """A plane rising 1 % to the east and falling 2 % to the north over level ground of 80 × 40 m, zero in a corner.

    Mean height over the rectangle is its height in the middle: 0.01 · 40 + 0.02 · 20 = 0.8 m; 0.8 · 3200 = 2560 m³.
    """
    write_raster(tmp_path / "flat.tif", np.full((20, 40), 10.0), cell=2.0, corner=(1000.0, 540.0))
    text = """
[ground]
existing = "flat.tif"
finished = { plane = { at = [1000.0, 540.0], elevation = 10.0, slope = [0.01, -0.02] } }
"""
    found = volumes(write_site(tmp_path, text))
    assert found["total"]["fill_m3"] == pytest.approx(2560, rel=1e-12)
    assert found["total"]["cut_m3"] == 0.0
    assert found["total"]["max_fill_m"] == pytest.approx(0.01 * 79 + 0.02 * 39, rel=1e-9)
