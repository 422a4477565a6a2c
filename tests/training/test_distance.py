from __future__ import annotations

import numpy as np
import pytest
import scipy.ndimage
import shapely
from shapely.geometry import LineString, Point, box

from roadhem_training.scenes.coverage import Frame, cover_area, inside
from roadhem_training.scenes.distance import nearest_on_lines, signed_distance
from roadhem_training.scenes.world import TrueEdge, World

SIZE, CELL, REACH = 40.0, 0.2, 2.5
COUNT = round(SIZE / CELL)


def centres() -> tuple[np.ndarray, np.ndarray]:
    steps = (np.arange(COUNT) + 0.5) * CELL
    return np.meshgrid(steps, SIZE - steps)


def wandering_lines(count: int) -> list[LineString]:
    rng = np.random.default_rng(5)
    return [
        LineString(np.cumsum(rng.normal(0, 1.2, (30, 2)), axis=0) + rng.uniform(0, SIZE, 2)) for _ in range(count)
    ]


def test_distances_agree_with_the_euclidean_transform():
    """Should equal scipy's exact transform where lines run through cell centres.  [built] scipy.ndimage."""
    x, y = centres()
    lines = [LineString([(-5, y[60, 0]), (50, y[60, 0])]), LineString([(x[0, 140], -5), (x[0, 140], 50)])]
    away = np.ones((COUNT, COUNT), bool)
    away[60, :] = away[:, 140] = False
    expected = np.minimum(scipy.ndimage.distance_transform_edt(away) * CELL, REACH)
    found = nearest_on_lines(lines, SIZE, CELL, REACH)
    np.testing.assert_allclose(found.distance, expected, atol=1e-5)


def test_distances_agree_with_shapely():
    """Should be within 1 mm of shapely's distances on wandering lines.  [built] shapely."""
    lines = wandering_lines(8)
    found = nearest_on_lines(lines, SIZE, CELL, REACH)
    x, y = centres()
    all_distances = np.stack([shapely.distance(line, shapely.points(x, y)) for line in lines])
    np.testing.assert_allclose(found.distance, np.minimum(all_distances.min(axis=0), REACH), atol=1e-3)
    near = found.line_index >= 0
    chosen = np.take_along_axis(all_distances, np.maximum(found.line_index, 0)[None], axis=0)[0]
    np.testing.assert_allclose(chosen[near], found.distance[near], atol=1e-3)


def test_offsets_end_on_the_line():
    """Should give vectors that end on the named line, and its direction there."""
    line = LineString([(3, 4), (30, 31)])
    found = nearest_on_lines([LineString([(-9, -9), (-8, -9)]), line], SIZE, CELL, REACH)
    x, y = centres()
    near = found.line_index == 1
    assert near.sum() > 1000
    ends = shapely.points((x + found.dx)[near], (y + found.dy)[near])
    assert shapely.distance(line, ends).max() < 1e-4
    np.testing.assert_allclose(found.theta[near], np.pi / 4, atol=1e-6)


def test_no_lines_are_far_away():
    """Should give the reach and no index where there is no line."""
    found = nearest_on_lines([], SIZE, CELL, REACH)
    assert (found.distance == np.float32(REACH)).all()
    assert (found.line_index == -1).all()


def test_sign_follows_the_surface():
    """Should be negative inside the surface, positive outside, and exact on both sides."""
    surface = Point(20, 20).buffer(9, quad_segs=64)
    world = World(SIZE, "suburb", surface, edges=[TrueEdge(LineString(surface.exterior.coords[::-1]), "raised")])
    signed = signed_distance(world, CELL)
    x, y = centres()
    expected = np.hypot(x - 20, y - 20) - 9
    near = abs(expected) < 2.4
    assert abs(signed.sdf - expected)[near].max() < 0.005


@pytest.mark.parametrize("angle", [0.0, 0.3, 1.1])
def test_coverage_is_exact(angle):
    """Should give every pixel its share of a rotated rectangle with a hole.  [built] shapely."""
    shape = shapely.affinity.rotate(box(2.03, 1.11, 6.4, 4.97), angle, use_radians=True).difference(
        Point(4, 3).buffer(0.61)
    )
    frame = Frame.of_size(8.0, 0.25)
    patch = cover_area(shape, frame)
    full = np.zeros((frame.rows, frame.cols), np.float32)
    full[patch.window] = patch.cover
    left, top = np.meshgrid(np.arange(frame.cols) * 0.25, 8 - np.arange(frame.rows) * 0.25)
    cells = shapely.box(left, top - 0.25, left + 0.25, top)
    np.testing.assert_allclose(full, shapely.area(shapely.intersection(cells, shape)) / 0.25**2, atol=2e-4)


def test_coverage_beyond_the_frame():
    """Should cut an area that reaches beyond every side of the frame."""
    frame = Frame.of_size(8.0, 0.5)
    patch = cover_area(box(-30, 3.25, 40, 50), frame)
    assert patch.window == (slice(0, 10), slice(0, 16))
    np.testing.assert_allclose(patch.cover[:9], 1.0, atol=1e-5)
    np.testing.assert_allclose(patch.cover[9], 0.5, atol=1e-5)
    assert cover_area(box(20, 20, 30, 30), frame) is None


def test_inside_asks_pixel_centres():
    """Should agree with shapely on pixel centres, holes included.  [built] shapely."""
    shape = box(1, 1, 33, 35).difference(Point(15, 15).buffer(6.3)).union(Point(15, 15).buffer(2))
    x, y = centres()
    found = inside(shape, Frame.of_size(SIZE, CELL))
    np.testing.assert_array_equal(found, shapely.contains_xy(shape, x, y))


def test_along_counts_from_the_start_of_each_line():
    """Should measure the way along a bent line to the nearest point.  [built] shapely."""
    lines = [LineString([(2, 30), (9, 30), (9, 38)]), LineString([(3, 3), (30, 5), (31, 20)])]
    found = nearest_on_lines(lines, SIZE, CELL, REACH)
    x, y = centres()
    for k, line in enumerate(lines):
        mine = found.line_index == k
        expected = shapely.line_locate_point(line, shapely.points(x, y)[mine])
        np.testing.assert_allclose(found.along[mine], expected, atol=1e-3)
