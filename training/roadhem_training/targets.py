"""What the fields should be, from the vector truth of a scene."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from roadhem.fields.layout import CELL_M, KINDS, NET_STRIDE, REACH_M
from roadhem_training.scenes.distance import NearestField, nearest_on_lines
from roadhem_training.scenes.scene import Scene

SIGHTS = ("seen", "shadow", "hidden")
"""How an edge is seen, in the order of the net's channels."""


@dataclass(frozen=True)
class Targets:
    """Truth on the field grid, cells of CELL_M, row 0 north.

    Attributes
    ----------
    nearness, other : (h, w) float32, 1 on a line falling linearly to 0 at REACH_M.
    offset : (2, h, w) float32 metres (east, north) to the nearest drive-over edge; 0 beyond REACH_M.
    axis : (2, h, w) float32, (cos, sin) of twice the nearest edge's angle; 0 beyond REACH_M.
    kind, sight : (h, w) uint8, of the nearest edge.
    surface : (h, w) float32, share of drive-over surface.
    """

    nearness: NDArray[np.float32]
    other: NDArray[np.float32]
    offset: NDArray[np.float32]
    axis: NDArray[np.float32]
    kind: NDArray[np.uint8]
    sight: NDArray[np.uint8]
    surface: NDArray[np.float32]


def targets_of(scene: Scene, surface: NDArray[np.float32]) -> Targets:
    """Draw the targets of a scene at PIXEL_M; `surface` is its coverage (H, W) by the drive-over surface."""
    world = scene.world
    edges = nearest_on_lines([edge.line for edge in world.edges], world.size, CELL_M, REACH_M)
    others = nearest_on_lines([other.line for other in world.others], world.size, CELL_M, REACH_M)
    near = edges.distance < REACH_M
    axis = np.stack([np.cos(2 * edges.theta), np.sin(2 * edges.theta)]) * near
    kinds = np.array([KINDS.index(edge.kind) for edge in world.edges] or [0], np.uint8)
    return Targets(
        nearness=_nearness(edges.distance),
        other=_nearness(others.distance),
        offset=(np.stack([edges.dx, edges.dy]) * near).astype(np.float32),
        axis=axis.astype(np.float32),
        kind=np.where(near, kinds[np.maximum(edges.line_index, 0)], 0).astype(np.uint8),
        sight=_sight(scene, edges, near),
        surface=_pooled(surface),
    )


def _nearness(distance: NDArray[np.float32]) -> NDArray[np.float32]:
    return np.clip(1 - distance / REACH_M, 0, 1).astype(np.float32)


def _pooled(image: NDArray[np.float32]) -> NDArray[np.float32]:
    rows, cols = image.shape[0] // NET_STRIDE, image.shape[1] // NET_STRIDE
    return image.reshape(rows, NET_STRIDE, cols, NET_STRIDE).mean((1, 3), dtype=np.float32)


def _sight(scene: Scene, edges: NearestField, near: NDArray[np.bool_]) -> NDArray[np.uint8]:
    """Look up, at each cell's nearest point of the edge, whether that point is hidden or in shadow."""
    rows, cols = near.shape
    y, x = np.mgrid[0:rows, 0:cols].astype(np.float32)
    col = np.clip(((x + 0.5) * CELL_M + edges.dx) / scene.pixel, 0, scene.hidden.shape[1] - 1).astype(int)
    row = np.clip(((y + 0.5) * CELL_M - edges.dy) / scene.pixel, 0, scene.hidden.shape[0] - 1).astype(int)
    sight = np.where(scene.hidden[row, col], 2, np.where(scene.shadow[row, col], 1, 0))
    return np.where(near, sight, 0).astype(np.uint8)
