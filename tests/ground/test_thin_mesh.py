"""Thinned triangles: no cracks, no gaps, within the tolerance; planes by two triangles."""

from __future__ import annotations

import numpy as np
import pytest
from matplotlib.tri import LinearTriInterpolator, Triangulation

from earthwork.ground.thin_mesh import Mesh, thin_mesh


def hills(rows, columns):
    y, x = np.mgrid[:rows, :columns]
    return np.sin(x / 7.0) * 3 + np.cos(y / 5.0) * 2


def doubled_areas(mesh: Mesh) -> np.ndarray:
    """Twice the area of each triangle, + where it faces up (rows run down)."""
    r, c = mesh.rows[mesh.triangles], mesh.columns[mesh.triangles]
    return (c[:, 1] - c[:, 0]) * (r[:, 0] - r[:, 2]) - (r[:, 0] - r[:, 1]) * (c[:, 2] - c[:, 0])


@pytest.mark.parametrize("shape", [(2, 2), (3, 3), (5, 5), (33, 17), (40, 23), (100, 9), (9, 100), (64, 65)])
@pytest.mark.parametrize("tolerance", [0.0, 0.02, 0.5])
def test_triangles_face_up_and_cover_the_grid_once(shape, tolerance):
    areas = doubled_areas(thin_mesh(hills(*shape), tolerance))
    assert (areas > 0).all()
    assert areas.sum() == 2 * (shape[0] - 1) * (shape[1] - 1)


def test_every_inner_edge_has_two_triangles():
    mesh = thin_mesh(hills(33, 33), 0.1)
    t = mesh.triangles
    edges = np.sort(np.concatenate([t[:, [0, 1]], t[:, [1, 2]], t[:, [2, 0]]]), axis=1)
    kinds, counts = np.unique(edges, axis=0, return_counts=True)
    assert counts.max() == 2
    alone = kinds[counts == 1]
    # an edge with one triangle lies on the rim: both its ends in the first or last row, or column
    for values, last in ((mesh.rows, 32), (mesh.columns, 32)):
        on_rim = np.isin(values[alone], (0, last)) & (values[alone][:, :1] == values[alone][:, 1:])
        alone = alone[~on_rim.all(axis=1)]
    assert len(alone) == 0


@pytest.mark.parametrize("tolerance", [0.01, 0.05, 0.3])
def test_all_points_lie_within_the_tolerance_of_another_librarys_interpolation(tolerance):
    z = hills(65, 65)
    mesh = thin_mesh(z, tolerance)
    surface = LinearTriInterpolator(Triangulation(mesh.columns, mesh.rows, mesh.triangles), mesh.heights)
    y, x = np.mgrid[:65, :65]
    assert np.abs(surface(x, y).filled(np.nan) - z).max() <= tolerance
    assert len(mesh.triangles) < 2 * 64 * 64


def test_a_plane_needs_two_triangles_and_a_tolerance_of_nothing_keeps_everything():
    y, x = np.mgrid[:17, :17]
    assert len(thin_mesh(0.25 * x - 0.5 * y, 1e-9).triangles) == 2
    assert len(thin_mesh(np.random.default_rng(2).normal(size=(17, 17)), 0.0).triangles) == 2 * 16 * 16


def test_no_triangle_touches_ground_without_data():
    z = hills(20, 20)
    z[5:9, 6:12] = np.nan
    mesh = thin_mesh(z, 0.2)
    assert np.isfinite(mesh.heights).all()
    # each cell between four points with data is covered: 19² less those that touch the hole (5 × 7)
    assert doubled_areas(mesh).sum() == pytest.approx(2 * (19 * 19 - 5 * 7), abs=2 * 12)
    assert doubled_areas(mesh).sum() >= 2 * (19 * 19 - 5 * 7)


def test_the_tolerance_grows_until_there_are_few_enough():
    mesh = thin_mesh(np.random.default_rng(3).normal(0, 1, (65, 65)), 0.001, 500)
    assert len(mesh.triangles) <= 500
    assert mesh.tolerance_m > 0.001


def test_flat_ground_without_any_data_has_no_triangles():
    mesh = thin_mesh(np.full((6, 7), np.nan), 0.01)
    assert len(mesh.triangles) == 0
    assert len(mesh.heights) == 0
