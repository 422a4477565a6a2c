"""What years do to a road: wheel tracks, patches, cuts, cracks, sealant, covers of shafts, stains."""

from __future__ import annotations

import cv2
import numba
import numpy as np
import shapely
from numpy.typing import NDArray
from shapely import affinity
from shapely.geometry import Polygon

from roadhem_training.scenes.coverage import Frame, Patch, cover_area
from roadhem_training.scenes.distance import SignedDistance
from roadhem_training.scenes.flight import Flight
from roadhem_training.scenes.ground import lay
from roadhem_training.scenes.materials import MATERIALS, linear, pick_colour
from roadhem_training.scenes.noise import DRIFT_M, Noise
from roadhem_training.scenes.world import World

TRACK_CELL = 4
"""Pixels per cell of the coarse distance that wheel tracks follow."""

SUBPIXEL = 4
"""Bits of sub-pixel position handed to the line drawing."""


def wear_surface(
    image: NDArray[np.float32],
    world: World,
    distance: SignedDistance,
    frame: Frame,
    flight: Flight,
    noise: Noise,
    rng: np.random.Generator,
) -> None:
    """Add what lies under the paint to `image` (rows, cols, 3) reflectance: tracks, patches and cuts."""
    road = distance.sdf < 0
    if not road.any():
        return
    if flight.has("tracks"):
        _wheel_tracks(image, road, noise, rng)
    if not flight.has("patched"):
        return
    for _ in range(rng.poisson(0.10 * world.size)):
        area = shapely.intersection(_patch_outline(distance, frame, rng), world.surface)
        patch = cover_area(area, frame)
        if patch is not None and patch.cover.any():
            material = MATERIALS["asphalt"]
            colour = pick_colour(material, rng, rng.normal(-0.3, 0.4))
            lay(image, patch, material, colour, None, 0.0, frame, noise, rng)


def wear_paint(
    image: NDArray[np.float32],
    world: World,
    distance: SignedDistance,
    frame: Frame,
    flight: Flight,
    rng: np.random.Generator,
) -> None:
    """Add what lies over the paint to `image`: cracks, sealant, skid marks, stains, covers of shafts, gullies."""
    if not (distance.sdf < 0).any():
        return
    if flight.has("cracked"):
        strength = rng.uniform(0.15, 0.5)
        _darken(image, distance, _lines(distance, frame, rng, rng.poisson(0.25 * world.size), 0.35, 1), strength)
    if flight.has("sealed"):
        lines = _lines(distance, frame, rng, rng.poisson(0.10 * world.size), 0.12, int(rng.integers(1, 3)))
        _darken(image, distance, lines, rng.uniform(0.3, 0.6))
    if flight.has("skids"):
        lines = _lines(distance, frame, rng, rng.poisson(0.06 * world.size), 0.03, 2)
        _darken(image, distance, cv2.GaussianBlur(lines, (0, 0), 1.0), rng.uniform(0.1, 0.35))
    _stains(image, distance, frame, rng)
    _shaft_covers(image, distance, frame, rng, rng.poisson(0.06 * world.size))
    if flight.has("gullies"):
        _gullies(image, distance, frame, rng, rng.poisson(0.08 * world.size))


def place_on_road(
    distance: SignedDistance, frame: Frame, rng: np.random.Generator, nearest: float = 0.0
) -> tuple[float, float, float]:
    """Draw a place on the road: x, y in metres and the direction of its nearest edge (any where none is near)."""
    for _ in range(40):
        r, c = int(rng.integers(frame.rows)), int(rng.integers(frame.cols))
        if distance.sdf[r, c] < -nearest:
            break
    near = distance.nearest.line_index[r, c] >= 0
    direction = float(distance.nearest.theta[r, c]) if near else float(rng.choice([0, np.pi / 2]) + rng.normal(0, 0.3))
    return frame.left + (c + 0.5) * frame.pixel, frame.top - (r + 0.5) * frame.pixel, direction


def place_by_edge(
    distance: SignedDistance, frame: Frame, rng: np.random.Generator, inset: float
) -> tuple[float, float, float] | None:
    """Draw a place on the road `inset` metres from an edge: x, y and the edge's direction; None if none was found."""
    for _ in range(60):
        r, c = int(rng.integers(frame.rows)), int(rng.integers(frame.cols))
        d = distance.sdf[r, c]
        if -2.4 < d < -0.3:
            share = 1 - inset / -d
            x = frame.left + (c + 0.5) * frame.pixel + distance.nearest.dx[r, c] * share
            y = frame.top - (r + 0.5) * frame.pixel + distance.nearest.dy[r, c] * share
            return float(x), float(y), float(distance.nearest.theta[r, c])
    return None


def _wheel_tracks(image: NDArray[np.float32], road: NDArray[np.bool_], noise: Noise, rng: np.random.Generator) -> None:
    """Lighter and darker bands that follow the edge, as a function of the distance from it."""
    rows, cols = road.shape
    coarse = np.ascontiguousarray(road[::TRACK_CELL, ::TRACK_CELL]).astype(np.uint8)
    inner = cv2.distanceTransform(coarse, cv2.DIST_L2, cv2.DIST_MASK_PRECISE)
    metres = cv2.resize(inner, (cols, rows), interpolation=cv2.INTER_LINEAR) * (TRACK_CELL * noise.frame.pixel)
    knots = rng.normal(0, rng.uniform(0.01, 0.05), 60).astype(np.float32)
    profile = cv2.resize(knots[None], (600, 1), interpolation=cv2.INTER_CUBIC)[0]
    _apply_tracks(image, road, metres, profile, noise.at(DRIFT_M, 1), np.float32(10 / rng.uniform(0.5, 0.9)))


def _patch_outline(distance: SignedDistance, frame: Frame, rng: np.random.Generator) -> Polygon:
    x, y, direction = place_on_road(distance, frame, rng)
    kind = rng.random()
    if kind < 0.45:
        length, width = rng.uniform(0.6, 5), rng.uniform(0.5, 2.5)
    elif kind < 0.8:
        length, width = rng.uniform(4, 25), rng.uniform(0.4, 1.2)
    else:
        length, width = rng.uniform(12, 45), rng.uniform(2.2, 4.0)
    if rng.random() < 0.25:
        direction += np.pi / 2
    box = shapely.box(x - length / 2, y - width / 2, x + length / 2, y + width / 2)
    return affinity.rotate(box, direction + rng.normal(0, 0.02), origin=(x, y), use_radians=True)


def _lines(
    distance: SignedDistance, frame: Frame, rng: np.random.Generator, count: int, bend: float, thickness: int
) -> NDArray[np.uint8]:
    """Draw wandering lines on the road: (rows, cols) uint8; `bend` is the deviation of heading per step, radians."""
    mask = np.zeros((frame.rows, frame.cols), np.uint8)
    for _ in range(count):
        x, y, direction = place_on_road(distance, frame, rng)
        steps = int(rng.integers(6, 40))
        across = np.pi / 2 if rng.random() < 0.35 else 0.0
        heading = direction + across + np.clip(np.cumsum(rng.normal(0, bend, steps)), -0.9, 0.9)
        track = np.cumsum(0.4 * np.stack([np.cos(heading), np.sin(heading)], axis=1), axis=0) + (x, y)
        points = np.round((frame.to_pixels(track) - 0.5) * 2**SUBPIXEL).astype(np.int32)
        cv2.polylines(mask, [points], False, int(rng.integers(120, 256)), thickness, cv2.LINE_AA, SUBPIXEL)
    return mask


def _darken(
    image: NDArray[np.float32], distance: SignedDistance, mask: NDArray[np.uint8], strength: float
) -> None:
    _apply_mask(image, distance.sdf, mask, np.float32(strength / 255))


def _stains(
    image: NDArray[np.float32], distance: SignedDistance, frame: Frame, rng: np.random.Generator
) -> None:
    """Oil and damp spots."""
    small = np.zeros((frame.rows // 2 + 1, frame.cols // 2 + 1), np.uint8)
    for _ in range(rng.poisson(12)):
        x, y, direction = place_on_road(distance, frame, rng)
        col, row = frame.to_pixels([x, y]) / 2
        size = rng.uniform(0.15, 1.2, 2) / (2 * frame.pixel)
        axes = (max(int(size[0] * 1.6), 1), max(int(size[1]), 1))
        shade = int(rng.integers(60, 255))
        cv2.ellipse(small, (int(col), int(row)), axes, -np.degrees(direction), 0, 360, shade, -1)
    blurred = cv2.GaussianBlur(small, (0, 0), 1.5)
    wide = cv2.resize(blurred, (2 * small.shape[1], 2 * small.shape[0]), interpolation=cv2.INTER_LINEAR)
    mask = np.ascontiguousarray(wide[: frame.rows, : frame.cols])
    _darken(image, distance, mask, rng.uniform(0.05, 0.35))


def _shaft_covers(
    image: NDArray[np.float32], distance: SignedDistance, frame: Frame, rng: np.random.Generator, count: int
) -> None:
    """Round covers of shafts with their frame."""
    tone = rng.uniform(0.5, 1.3)
    for _ in range(count):
        x, y, _ = place_on_road(distance, frame, rng, 0.5)
        disc = shapely.Point(x, y)
        _fill(image, cover_area(disc.buffer(rng.uniform(0.38, 0.5)), frame), (104, 102, 99), rng.uniform(0.4, 1.2))
        _fill(image, cover_area(disc.buffer(rng.uniform(0.26, 0.34)), frame), (86, 84, 82), tone)


def _gullies(
    image: NDArray[np.float32], distance: SignedDistance, frame: Frame, rng: np.random.Generator, count: int
) -> None:
    """Grates beside the curb."""
    for _ in range(count):
        width = rng.uniform(0.3, 0.5)
        place = place_by_edge(distance, frame, rng, width / 2 + rng.uniform(0.0, 0.1))
        if place is None:
            continue
        x, y, direction = place
        long = rng.uniform(0.4, 0.7)
        box = shapely.box(x - long / 2, y - width / 2, x + long / 2, y + width / 2)
        grate = affinity.rotate(box, direction, origin=(x, y), use_radians=True)
        _fill(image, cover_area(grate, frame), (58, 57, 56), rng.uniform(0.6, 1.3))


def _fill(image: NDArray[np.float32], patch: Patch | None, colour: tuple[int, int, int], tone: float) -> None:
    if patch is not None:
        shade = linear(colour) * np.float32(tone)
        image[patch.window] += patch.cover[..., None] * (shade - image[patch.window])


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
