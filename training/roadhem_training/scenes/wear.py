"""What traffic and years do to a road: wheel tracks, cracks, sealant, skid marks, gullies let in beside the curb."""

from __future__ import annotations

import cv2
import numba
import numpy as np
import shapely
from numpy.typing import NDArray
from shapely import affinity

from roadhem_training.scenes.coverage import Frame, cover_area
from roadhem_training.scenes.distance import SignedDistance
from roadhem_training.scenes.flight import Flight
from roadhem_training.scenes.materials import linear
from roadhem_training.scenes.noise import DRIFT_M, Noise

TRACK_CELL = 4
"""Pixels per cell of the coarse distance that wheel tracks follow."""

SUBPIXEL = 4
"""Bits of sub-pixel position handed to the line drawing."""

STEP_M = 0.4
"""Length of the straight pieces of a crack."""

TRIES = 60
"""Draws of a place before giving up."""

GRATE = (58, 57, 56)


def wear_surface(
    image: NDArray[np.float32],
    distance: SignedDistance,
    flight: Flight,
    noise: Noise,
    rng: np.random.Generator,
) -> None:
    """Brighten and darken `image` (rows, cols, 3) reflectance in bands along the edges, under the paint."""
    road = distance.sdf < 0
    if not flight.has("tracks") or not road.any():
        return
    rows, cols = road.shape
    coarse = np.ascontiguousarray(road[::TRACK_CELL, ::TRACK_CELL]).astype(np.uint8)
    inner = cv2.distanceTransform(coarse, cv2.DIST_L2, cv2.DIST_MASK_PRECISE)
    metres = cv2.resize(inner, (cols, rows), interpolation=cv2.INTER_LINEAR)
    metres *= TRACK_CELL * noise.frame.pixel
    knots = rng.normal(0, rng.uniform(0.01, 0.05), 60).astype(np.float32)
    profile = cv2.resize(knots[None], (600, 1), interpolation=cv2.INTER_CUBIC)[0]
    _apply_tracks(image, road, metres, profile, noise.at(DRIFT_M, 1), np.float32(10 / rng.uniform(0.5, 0.9)))


def wear_paint(
    image: NDArray[np.float32],
    distance: SignedDistance,
    frame: Frame,
    flight: Flight,
    rng: np.random.Generator,
) -> None:
    """Add to `image` (rows, cols, 3) reflectance what lies over the paint."""
    if not (distance.sdf < 0).any():
        return
    side = frame.rows * frame.pixel
    if flight.has("cracked"):
        _darken(image, distance, _cracks(distance, frame, rng, 0.25 * side, 0.35, 1), rng.uniform(0.15, 0.5))
    if flight.has("sealed"):
        thickness = int(rng.integers(1, 3))
        _darken(image, distance, _cracks(distance, frame, rng, 0.10 * side, 0.12, thickness), rng.uniform(0.3, 0.6))
    if flight.has("skids"):
        marks = cv2.GaussianBlur(_cracks(distance, frame, rng, 0.06 * side, 0.03, 2), (0, 0), 1.0)
        _darken(image, distance, marks, rng.uniform(0.1, 0.35))
    if flight.has("gullies"):
        _gullies(image, distance, frame, rng, rng.poisson(0.08 * side))


def place_on_road(
    distance: SignedDistance, frame: Frame, rng: np.random.Generator
) -> tuple[float, float, float] | None:
    """Draw a place on the road: x, y in metres and the direction of its nearest edge, any if none is near."""
    for _ in range(TRIES):
        r, c = int(rng.integers(frame.rows)), int(rng.integers(frame.cols))
        if distance.sdf[r, c] < 0:
            near = distance.nearest.line_index[r, c] >= 0
            direction = float(distance.nearest.theta[r, c]) if near else float(rng.uniform(0, np.pi))
            return frame.left + (c + 0.5) * frame.pixel, frame.top - (r + 0.5) * frame.pixel, direction
    return None


def place_by_edge(
    distance: SignedDistance, frame: Frame, rng: np.random.Generator, inset: float
) -> tuple[float, float, float] | None:
    """Draw a place on the road `inset` metres from an edge: x, y and the edge's direction."""
    nearest = distance.nearest
    for _ in range(TRIES):
        r, c = int(rng.integers(frame.rows)), int(rng.integers(frame.cols))
        d = distance.sdf[r, c]
        if d < -inset and nearest.line_index[r, c] >= 0:
            share = 1 - inset / -d
            x = frame.left + (c + 0.5) * frame.pixel + nearest.dx[r, c] * share
            y = frame.top - (r + 0.5) * frame.pixel + nearest.dy[r, c] * share
            return float(x), float(y), float(nearest.theta[r, c])
    return None


def _cracks(
    distance: SignedDistance, frame: Frame, rng: np.random.Generator, expected: float, bend: float, thickness: int
) -> NDArray[np.uint8]:
    """Draw wandering lines: (rows, cols) uint8; `bend` is the deviation of heading from piece to piece, radians."""
    mask = np.zeros((frame.rows, frame.cols), np.uint8)
    for _ in range(rng.poisson(expected)):
        place = place_on_road(distance, frame, rng)
        if place is None:
            continue
        steps = int(rng.integers(6, 40))
        across = np.pi / 2 if rng.random() < 0.35 else 0.0
        heading = place[2] + across + np.clip(np.cumsum(rng.normal(0, bend, steps)), -0.9, 0.9)
        track = np.cumsum(STEP_M * np.stack([np.cos(heading), np.sin(heading)], axis=1), axis=0) + place[:2]
        points = np.round((frame.to_pixels(track) - 0.5) * 2**SUBPIXEL).astype(np.int32)
        cv2.polylines(mask, [points], False, int(rng.integers(120, 256)), thickness, cv2.LINE_AA, SUBPIXEL)
    return mask


def _gullies(
    image: NDArray[np.float32], distance: SignedDistance, frame: Frame, rng: np.random.Generator, count: int
) -> None:
    """Let grates into the road beside the curb."""
    for _ in range(count):
        width, long = rng.uniform(0.3, 0.5), rng.uniform(0.4, 0.7)
        place = place_by_edge(distance, frame, rng, width / 2 + rng.uniform(0.0, 0.1))
        if place is None:
            continue
        x, y, direction = place
        box = shapely.box(x - long / 2, y - width / 2, x + long / 2, y + width / 2)
        patch = cover_area(affinity.rotate(box, direction, origin=(x, y), use_radians=True), frame)
        if patch is not None:
            shade = linear(GRATE) * np.float32(rng.uniform(0.6, 1.3))
            image[patch.window] += patch.cover[..., None] * (shade - image[patch.window])


def _darken(
    image: NDArray[np.float32], distance: SignedDistance, mask: NDArray[np.uint8], strength: float
) -> None:
    _apply_mask(image, distance.sdf, mask, np.float32(strength / 255))


@numba.njit(cache=True)
def _apply_tracks(image, road, metres, profile, drift, per_metre):  # type: ignore[no-untyped-def]
    for r in range(image.shape[0]):
        for c in range(image.shape[1]):
            if road[r, c]:
                place = min(int(metres[r, c] * per_metre), len(profile) - 1)
                tone = 1 + profile[place] * (1 + np.float32(0.5) * drift[r, c])
                for k in range(3):
                    image[r, c, k] *= tone


@numba.njit(cache=True)
def _apply_mask(image, sdf, mask, strength):  # type: ignore[no-untyped-def]
    for r in range(image.shape[0]):
        for c in range(image.shape[1]):
            if mask[r, c] > 0 and sdf[r, c] < 0:
                tone = 1 - strength * mask[r, c]
                for k in range(3):
                    image[r, c, k] *= tone
