"""Training targets against general libraries."""

from __future__ import annotations

import numpy as np
import pytest
from scipy import ndimage
from shapely.geometry import LineString, box
from skimage.feature import structure_tensor

from roadhem.fields.layout import CELL_M, REACH_M
from roadhem.tiles.grid import PIXEL_M
from roadhem_training.scenes.scene import Scene
from roadhem_training.scenes.world import OtherLine, TrueEdge, World
from roadhem_training.targets import Targets, targets_of

SIZE_M = 25.6
CELLS = round(SIZE_M / CELL_M)


def targets(lines: list[LineString], others: list[LineString] | None = None) -> Targets:
    """Targets of a world that holds these lines alone."""
    world = World(SIZE_M, "suburb", box(0, 0, SIZE_M, SIZE_M), [TrueEdge(line, "raised") for line in lines],
                  [OtherLine(line, "verge") for line in others or []])
    n = round(SIZE_M / PIXEL_M)
    nothing = np.zeros((n, n), bool)
    scene = Scene(world, PIXEL_M, np.zeros((n, n, 3), np.uint8), ~nothing, np.zeros((n, n), np.float32), nothing,
                  nothing)
    return targets_of(scene, np.zeros((n, n), np.float32))


def test_nearness_is_the_euclidean_distance_transform() -> None:
    """Should equal scipy's exact Euclidean distance transform of a line drawn through cell centres."""
    column = 61
    x = (column + 0.5) * CELL_M
    drawn = np.ones((CELLS, CELLS), bool)
    drawn[:, column] = False
    distance = ndimage.distance_transform_edt(drawn) * CELL_M
    made = targets([LineString([(x, -5), (x, SIZE_M + 5)])])
    np.testing.assert_allclose(made.nearness, np.clip(1 - distance / REACH_M, 0, 1), atol=1e-5)


def test_offsets_lead_to_the_feature_that_the_distance_transform_names() -> None:
    """Should point where scipy's feature transform points, for two crossing lines through cell centres."""
    row, column = 40, 75
    x, y = (column + 0.5) * CELL_M, SIZE_M - (row + 0.5) * CELL_M
    drawn = np.ones((CELLS, CELLS), bool)
    drawn[row, :] = drawn[:, column] = False
    distance, (rows, cols) = ndimage.distance_transform_edt(drawn, return_indices=True)
    made = targets([LineString([(x, -5), (x, SIZE_M + 5)]), LineString([(-5, y), (SIZE_M + 5, y)])])
    here_row, here_col = np.mgrid[0:CELLS, 0:CELLS]
    east, north = (cols - here_col) * CELL_M, (here_row - rows) * CELL_M
    one_nearest = (np.abs(here_row - row) != np.abs(here_col - column)) & (distance * CELL_M < REACH_M - 1e-6)
    np.testing.assert_allclose(made.offset[0][one_nearest], east[one_nearest], atol=1e-4)
    np.testing.assert_allclose(made.offset[1][one_nearest], north[one_nearest], atol=1e-4)


@pytest.mark.parametrize("degrees", [0, 20, 45, 77, 90, 133, 179])
def test_axis_is_the_structure_tensor_s_along_direction(degrees: float) -> None:
    """Should agree within 1 degree with scikit-image's structure tensor of the drawn nearness."""
    theta = np.radians(degrees)
    middle = np.array([SIZE_M, SIZE_M]) / 2 + [0.03, -0.05]
    step = 40 * np.array([np.cos(theta), np.sin(theta)])
    made = targets([LineString([middle - step, middle + step])])
    tensor = structure_tensor(made.nearness, sigma=2, order="rc")
    across = 0.5 * np.arctan2(2 * tensor[1], tensor[0] - tensor[2])
    gradient_row, gradient_col = np.cos(across), np.sin(across)
    along = np.arctan2(gradient_col, gradient_row)  # north is minus row: the normal of (col, -row) is (row, col)
    inner = np.s_[20:-20, 20:-20]
    near = made.nearness[inner] > 0.5
    ours = 0.5 * np.arctan2(made.axis[1], made.axis[0])[inner][near]
    apart = np.degrees(np.angle(np.exp(2j * (ours - along[inner][near]))) / 2)
    assert np.abs(apart).max() < 1.0
    np.testing.assert_allclose(np.hypot(*made.axis[:, inner[0], inner[1]])[near], 1, atol=1e-5)


def test_other_lines_have_a_channel_of_their_own() -> None:
    """Should leave the edge's nearness alone when another line runs 0.5 m beside it."""
    edge, beside = (LineString([(x, -5), (x, SIZE_M + 5)]) for x in (10.05, 10.55))
    alone, both = targets([edge]), targets([edge], [beside])
    np.testing.assert_array_equal(alone.nearness, both.nearness)
    assert alone.other.max() == 0
    assert both.other.max() > 0.9
