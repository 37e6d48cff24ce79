"""The depth buffer against what a pixel's centre lies in, computed another way."""

from __future__ import annotations

import numpy as np
import pytest

from sfcpart.report.raster import nearest_triangles


def test_two_halves_of_a_square_cover_it_once():
    square = np.array([[1, 1, 0], [9, 1, 0], [9, 7, 0], [1, 7, 0]], float)
    seen = nearest_triangles(square[[[0, 1, 2], [0, 2, 3]]], (8, 10))
    assert (seen[1:7, 1:9] >= 0).all()
    assert (seen >= 0).sum() == 48


def test_the_nearer_triangle_hides_the_other_whatever_the_order():
    far = np.array([[0, 0, 5], [20, 0, 5], [0, 20, 5]], float)
    near = np.array([[0, 0, 1], [10, 0, 1], [0, 10, 1]], float)
    for order in ([far, near], [near, far]):
        seen = nearest_triangles(np.array(order), (20, 20))
        hidden = 1 if order[1] is near else 0
        assert seen[2, 2] == hidden
        assert seen[8, 8] == 1 - hidden
        assert seen[19, 19] == -1


def test_depth_is_interpolated_over_the_triangle():
    tilted = np.array([[0, 0, 0], [40, 0, 10], [0, 40, 0]], float)  # depth x / 4
    flat = np.array([[0, 0, 5], [40, 0, 5], [0, 40, 5]], float)
    seen = nearest_triangles(np.array([tilted, flat]), (40, 40))
    assert seen[3].tolist()[:20] == [0] * 20
    assert seen[3].tolist()[20:36] == [1] * 16


@pytest.mark.parametrize("seed", range(4))
def test_every_pixel_agrees_with_areas_of_three_triangles(seed):
    random = np.random.default_rng(seed)
    corners = random.uniform(-4, 16, (5, 3, 3))
    seen = nearest_triangles(corners, (12, 12))
    for row, column in np.ndindex(12, 12):
        point = np.array([column + 0.5, row + 0.5])
        depths = [_depth_at(point, triangle) for triangle in corners]
        best = min(range(5), key=lambda k: depths[k])
        assert seen[row, column] == (best if np.isfinite(depths[best]) else -1)


def _depth_at(point: np.ndarray, triangle: np.ndarray) -> float:
    """Depth of a triangle at a point by solving for its barycentric shares; inf outside."""
    system = np.vstack([triangle[:, :2].T, np.ones(3)])
    share = np.linalg.solve(system, np.append(point, 1.0))
    return float(share @ triangle[:, 2]) if share.min() >= 0 else np.inf


def test_nothing_to_draw_gives_an_empty_picture():
    seen = nearest_triangles(np.zeros((0, 3, 3)), (4, 5))
    assert seen.shape == (4, 5)
    assert (seen == -1).all()


def test_triangles_outside_and_without_area_leave_no_trace():
    outside = np.array([[-9, -9, 0], [-5, -9, 0], [-9, -5, 0]], float)
    line = np.array([[0, 0, 0], [4, 4, 0], [2, 2, 0]], float)
    assert (nearest_triangles(np.array([outside, line]), (6, 6)) == -1).all()
