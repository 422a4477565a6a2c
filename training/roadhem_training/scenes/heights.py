"""Heights: the ground with its curbs, what stands on it, and the raster a height sensor makes of them."""

from __future__ import annotations

import cv2
import numba
import numpy as np
from numpy.typing import NDArray

from roadhem_training.scenes.bodies import BUILT
from roadhem_training.scenes.branches import is_bare
from roadhem_training.scenes.coverage import Frame, cover_area
from roadhem_training.scenes.distance import SignedDistance
from roadhem_training.scenes.flight import Flight
from roadhem_training.scenes.noise import DRIFT_M, FIELD_M, Noise
from roadhem_training.scenes.world import World

STEP_REACH_M = 1.0
"""From the height at the curb the ground goes over to the relief of its cover within this distance."""

CELLS_M = (0.25, 0.25, 0.5, 0.5, 1.0)
NOISE_M = (0.01, 0.04)
"""Cells of height rasters, and their noise at 0.5 m cells."""


def ground_height(
    world: World, relief: NDArray[np.float32], distance: SignedDistance, frame: Frame, noise: Noise
) -> NDArray[np.float32]:
    """Height of the bare ground at pixel centres: (rows, cols) float32 metres.

    The land lies as high as its curb right behind it, and as high as its cover says (`relief`) from STEP_REACH_M on.
    """
    x = (np.arange(frame.cols, dtype=np.float32) + np.float32(0.5)) * np.float32(frame.pixel)
    height = np.float32(0.15) * noise.at(FIELD_M) + np.float32(0.02) * noise.at(DRIFT_M)
    height += np.float32(world.slope[0]) * x + np.float32(world.slope[1]) * x[::-1, None]
    steps = np.array([edge.height for edge in world.edges] + [0.0], np.float32)
    numbers = np.array([world.crossfall, STEP_REACH_M, frame.pixel], np.float32)
    _step_up(height, relief, distance.sdf, distance.nearest.line_index, steps, numbers)
    return height


def sense_height(
    world: World, ground: NDArray[np.float32], frame: Frame, flight: Flight, rng: np.random.Generator
) -> NDArray[np.float32]:
    """Return what a height sensor gives: (rows, cols) float32 metres, NaN in holes, bilinear from its own cells."""
    cell = float(rng.choice(CELLS_M))
    coarse = coarse_frame(frame, cell)
    height = cv2.resize(ground, (coarse.cols, coarse.rows), interpolation=cv2.INTER_AREA)
    above = standing_height(world, coarse)
    left_in = np.zeros_like(height)
    removed = np.zeros(height.shape, bool)
    for what, lifted in above.items():
        if flight.has(f"height_with_{what}"):
            np.maximum(left_in, lifted, out=left_in)
        else:
            removed |= lifted > 0
    height += left_in
    if flight.has("height_scattered"):
        height = scatter(height, rng)
    height += rng.normal(0, rng.uniform(*NOISE_M) * min(0.5 / cell, 1.5) ** 0.5, height.shape).astype(np.float32)
    holes = rng.random(height.shape, np.float32) < rng.choice([0.0, 0.0, 0.002, 0.02])
    if flight.has("height_holes"):
        holes |= removed
    if rng.random() < 0.15:
        holes |= _blots(height.shape, rng)
    wide = cv2.resize(height, (frame.cols, frame.rows), interpolation=cv2.INTER_LINEAR)
    gone = cv2.resize(holes.astype(np.uint8), (frame.cols, frame.rows), interpolation=cv2.INTER_NEAREST)
    wide[gone > 0] = np.nan
    return wide


def coarse_frame(frame: Frame, cell: float) -> Frame:
    """Return the frame with cells of about `cell` metres over the same square."""
    side = frame.rows * frame.pixel
    count = max(round(side / cell), 2)
    return Frame(count, count, side / count, frame.left, frame.top)


def standing_height(world: World, coarse: Frame) -> dict[str, NDArray[np.float32]]:
    """Height above ground of "houses", "crowns" and "cars" (all lower bodies): (rows, cols) metres each."""
    above = {what: np.zeros((coarse.rows, coarse.cols), np.float32) for what in ("houses", "crowns", "cars")}
    for body in world.bodies:
        patch = cover_area(body.footprint, coarse)
        if patch is not None:
            target = above["houses" if body.what in BUILT else "cars"][patch.window]
            np.maximum(target, (patch.cover > 0.5) * np.float32(body.top), out=target)
    for crown in (crown for crown in world.crowns if not is_bare(crown)):
        x0, y0, radius = crown.x, crown.y, crown.radius
        window = coarse.window([x0 - radius, y0 - radius, x0 + radius, y0 + radius])
        if window is not None:
            x = coarse.left + (np.arange(window[1].start, window[1].stop) + 0.5) * coarse.pixel - x0
            y = coarse.top - (np.arange(window[0].start, window[0].stop)[:, None] + 0.5) * coarse.pixel - y0
            dome = np.sqrt(np.clip(1 - (x * x + y * y) / radius**2, 0, 1))
            lifted = np.where(dome > 0, crown.height * (0.45 + 0.55 * dome), 0).astype(np.float32)
            np.maximum(above["crowns"][window], lifted, out=above["crowns"][window])
    return above


def scatter(cells: NDArray[np.float32], rng: np.random.Generator) -> NDArray[np.float32]:
    """Let each cell take the value of itself or a neighbour, as the nearest of scattered returns does."""
    rows, cols = cells.shape[:2]
    r = np.clip(np.arange(rows)[:, None] + rng.integers(-1, 2, (rows, cols)), 0, rows - 1)
    c = np.clip(np.arange(cols) + rng.integers(-1, 2, (rows, cols)), 0, cols - 1)
    return cells[r, c]


def _blots(shape: tuple[int, int], rng: np.random.Generator) -> NDArray[np.bool_]:
    knots = rng.standard_normal((9, 9)).astype(np.float32)
    return cv2.resize(knots, (shape[1], shape[0]), interpolation=cv2.INTER_CUBIC) > rng.uniform(1.3, 2.2)


@numba.njit(cache=True)
def _step_up(height, relief, sdf, line, steps, numbers):  # type: ignore[no-untyped-def]
    crossfall, reach, pixel = numbers
    for r in range(height.shape[0]):
        for c in range(height.shape[1]):
            d = sdf[r, c]
            outside = min(max(np.float32(0.5) + d / pixel, np.float32(0)), np.float32(1))
            if outside > 0:
                rise = relief[r, c]
                if line[r, c] >= 0 and d < reach:
                    step = steps[line[r, c]]
                    rise = step + max(d, np.float32(0)) / reach * (rise - step)
                height[r, c] += outside * rise
            if d < 0:
                height[r, c] += crossfall * min(-d, np.float32(2.5))
