"""Sun and sky on the ground: cast shadows, the curb face lit or shaded, dim corners."""

from __future__ import annotations

import cv2
import numba
import numpy as np
from numpy.typing import NDArray

from roadhem_training.scenes.branches import draw_segments, drop, is_bare, skeleton
from roadhem_training.scenes.coverage import Frame, Patch, cover_area, cover_rings, polygon_rings
from roadhem_training.scenes.distance import SignedDistance
from roadhem_training.scenes.flight import Flight
from roadhem_training.scenes.noise import LEAF_M, PEBBLE_M, Noise
from roadhem_training.scenes.world import Body, Crown, World

PENUMBRA = 0.0093
"""Width of the half shadow per metre of ray: the sun's angular diameter, 0.53 degrees (common knowledge)."""

BRANCH_PENUMBRA_PX = 0.6

STANDING = ("house", "hall", "wall", "shelter")
"""Bodies large enough to dim the sky beside them."""

THIN = ("pole", "post", "fence", "rail")
"""Bodies too thin to dim anything."""

TALL_M = 5.0
"""Bodies higher than this dim the sky some metres away."""


def sweep_body(body: Body, first: tuple[float, float], last: tuple[float, float], frame: Frame) -> Patch | None:
    """Coverage of what a footprint passes over while it moves from offset `first` to `last` (metres east, north)."""
    xy, starts, signs = polygon_rings(body.footprint)
    if len(signs) == 0:
        return None
    a, b = xy + np.asarray(first), xy + np.asarray(last)
    both = np.vstack([a, b])
    window = frame.window([*both.min(axis=0), *both.max(axis=0)], 2 * frame.pixel)
    if window is None:
        return None
    within = np.ones(len(xy) - 1, bool)
    within[starts[1:-1] - 1] = False
    sides = np.stack([a[:-1], a[1:], b[1:], b[:-1], a[:-1]], axis=1)[within]
    rings = np.vstack([a, b, sides.reshape(-1, 2)])
    offsets = np.concatenate([starts, len(xy) + starts[1:], 2 * len(xy) + 5 * np.arange(1, len(sides) + 1)])
    every = np.concatenate([signs, signs, np.ones(len(sides))])
    return Patch(window, cover_rings(rings, offsets, every, window, frame))


def cast_bodies(bodies: list[Body], frame: Frame, flight: Flight) -> NDArray[np.float32]:
    """Share of direct light that bodies take from the ground: (rows, cols) float32."""
    dark = np.zeros((frame.rows, frame.cols), np.float32)
    away = np.array(away_from_sun(flight))
    for body in bodies:
        patch = sweep_body(body, tuple(away * body.base), tuple(away * body.top), frame)
        if patch is None:
            continue
        blur = 0.3 * PENUMBRA * body.top / np.sin(flight.sun_elevation) / frame.pixel
        cover = cv2.GaussianBlur(patch.cover, (0, 0), blur) if blur > 0.3 else patch.cover
        np.maximum(dark[patch.window], cover, out=dark[patch.window])
    return dark


def cast_crowns(
    dark: NDArray[np.float32], crowns: list[Crown], frame: Frame, flight: Flight, noise: Noise
) -> None:
    """Add the shadows of crowns to `dark`: an ellipse with flecks of light, and the trunk."""
    length = flight.shadow_per_metre
    sx, sy = flight.to_sun
    leaves = noise.at(PEBBLE_M) * np.float32(0.6) + noise.at(LEAF_M, 2) * np.float32(0.7)
    bare = [crown for crown in crowns if is_bare(crown)]
    if bare:
        _cast_bare(dark, bare, frame, away_from_sun(flight))
    for crown in crowns:
        if is_bare(crown):
            continue
        middle, half = (0.66, 0.34) if crown.species != "bush" else (0.5, 0.5)
        x = crown.x - sx * length * crown.height * middle
        y = crown.y - sy * length * crown.height * middle
        stretch = float(np.hypot(crown.radius, half * crown.height * length))
        reach = 1.25 * max(stretch, crown.radius)
        window = frame.window([x - reach, y - reach, x + reach, y + reach])
        if window is not None:
            place = np.array([(x - frame.left) / frame.pixel, (frame.top - y) / frame.pixel])
            size = np.array([stretch, crown.radius]) / frame.pixel
            _shade_ellipse(dark, leaves, _bounds(window), place, size, np.array([sx, -sy]), crown.density)


def _cast_bare(
    dark: NDArray[np.float32], crowns: list[Crown], frame: Frame, per_metre: tuple[float, float]
) -> None:
    mask = np.zeros((frame.rows, frame.cols), np.uint8)
    for crown in crowns:
        draw_segments(mask, drop(skeleton(crown), per_metre), frame, 190)
    soft = cv2.GaussianBlur(mask, (0, 0), BRANCH_PENUMBRA_PX)
    np.maximum(dark, soft * np.float32(0.8 / 255), out=dark)


def dim_sky(bodies: list[Body], frame: Frame) -> NDArray[np.float32]:
    """Share of sky light that reaches the ground beside buildings and under cars: (rows, cols) float32."""
    tall = [body for body in bodies if body.what in STANDING and body.top > TALL_M]
    low = [body for body in bodies if body.what not in THIN and body.top <= TALL_M]
    lost = 0.5 * _blurred(tall, frame, 8, 2.5) + 0.55 * _blurred(low + tall, frame, 2, 0.3)
    return np.clip(1 - lost, 0.25, 1)


def _blurred(bodies: list[Body], frame: Frame, step: int, reach: float) -> NDArray[np.float32]:
    """Footprints on cells of `step` pixels, blurred by `reach` metres, brought back to pixels."""
    coarse = Frame(frame.rows // step + 1, frame.cols // step + 1, frame.pixel * step, frame.left, frame.top)
    taken = np.zeros((coarse.rows, coarse.cols), np.float32)
    for body in bodies:
        patch = cover_area(body.footprint, coarse)
        if patch is not None:
            np.maximum(taken[patch.window], patch.cover, out=taken[patch.window])
    soft = cv2.GaussianBlur(taken, (0, 0), reach / coarse.pixel)
    wide = cv2.resize(soft, None, fx=step, fy=step, interpolation=cv2.INTER_LINEAR)
    return np.ascontiguousarray(wide[: frame.rows, : frame.cols])


def shade_curbs(
    dark: NDArray[np.float32],
    sky: NDArray[np.float32],
    world: World,
    distance: SignedDistance,
    flight: Flight,
    pixel: float,
    rng: np.random.Generator,
) -> None:
    """Shade along raised edges: the curb's own shadow on the road, its face, dirt at its foot.

    Parameters
    ----------
    dark, sky : (rows, cols) share of direct light taken and of sky light left; changed in place.
    """
    heights = np.array([edge.height for edge in world.edges] + [0.0], np.float32)
    face, dirt, dirt_reach = rng.uniform(0.0, 0.05), rng.normal(0.08, 0.10), rng.uniform(0.05, 0.2)
    sun = (*flight.to_sun, flight.shadow_per_metre)
    numbers = np.array([*sun, face, dirt, dirt_reach, pixel], np.float32)
    nearest = distance.nearest
    _shade_curbs(dark, sky, distance.sdf, nearest.dx, nearest.dy, nearest.theta, nearest.line_index, heights, numbers)


def light_up(
    image: NDArray[np.float32], dark: NDArray[np.float32], sky: NDArray[np.float32], flight: Flight
) -> None:
    """Turn reflectance into light in place: sky light everywhere, the sun's where nothing takes it away."""
    _light_up(image, dark, sky, sky_colour(flight))


def away_from_sun(flight: Flight) -> tuple[float, float]:
    """Displacement (east, north) of a shadow per metre of height."""
    return -flight.shadow_per_metre * flight.to_sun[0], -flight.shadow_per_metre * flight.to_sun[1]


def facet_light(tilt: float, towards: float, flight: Flight) -> NDArray[np.float32]:
    """Light on a facet that rises `tilt` per metre and faces `towards` (radians), flat ground being 1: (3,)."""
    facing = np.cos(towards - flight.sun_azimuth)
    direct = max((1 + tilt * facing * flight.shadow_per_metre) / np.hypot(1.0, tilt), 0.0)
    sky = sky_colour(flight)
    return (sky * np.float32(0.9) + (1 - sky) * np.float32(min(direct, 1.5))).astype(np.float32)


def sky_colour(flight: Flight) -> NDArray[np.float32]:
    """Light in full shadow relative to full sun, (3,); near 1 under an overcast sky."""
    clear = np.array(flight.sky, np.float32)
    return clear + np.float32(1 - flight.sun) * (np.float32(0.96) - clear)


def _bounds(window: tuple[slice, slice]) -> NDArray[np.int64]:
    return np.array([window[0].start, window[0].stop, window[1].start, window[1].stop], np.int64)


@numba.njit(cache=True)
def _light_up(image, dark, sky, colour):  # type: ignore[no-untyped-def]
    for r in range(image.shape[0]):
        for c in range(image.shape[1]):
            direct = np.float32(1) - dark[r, c]
            for k in range(3):
                image[r, c, k] *= colour[k] * sky[r, c] + (np.float32(1) - colour[k]) * direct


@numba.njit(cache=True)
def _shade_ellipse(dark, leaves, bounds, place, size, axis, density):  # type: ignore[no-untyped-def]
    for r in range(bounds[0], bounds[1]):
        y = r + 0.5 - place[1]
        for c in range(bounds[2], bounds[3]):
            x = c + 0.5 - place[0]
            u = (x * axis[0] + y * axis[1]) / size[0]
            v = (y * axis[0] - x * axis[1]) / size[1]
            radius = np.sqrt(u * u + v * v)
            if radius > 1.25:
                continue
            leaf = leaves[r, c]
            alpha = min(max((1 - radius + 0.10 * leaf) * 5, 0.0), 1.0)
            alpha *= min(max(0.6 + 2.2 * (density - 0.55) + 0.9 * (1 - density) * leaf, 0.0), 0.97)
            dark[r, c] = max(dark[r, c], np.float32(alpha))


@numba.njit(cache=True)
def _shade_curbs(dark, sky, sdf, dx, dy, theta, line, heights, numbers):  # type: ignore[no-untyped-def]
    sun_x, sun_y, per_metre, face, dirt, dirt_reach, pixel = numbers
    half = np.float32(0.5)
    for r in range(sdf.shape[0]):
        for c in range(sdf.shape[1]):
            d = sdf[r, c]
            if line[r, c] < 0 or abs(d) > 1.0:
                continue
            height = heights[line[r, c]]
            if height <= 0.0:
                continue
            nx, ny = -np.sin(theta[r, c]), np.cos(theta[r, c])
            outward = nx * dx[r, c] + ny * dy[r, c]
            if (outward > 0) != (d < 0):
                nx, ny = -nx, -ny
            facing = nx * sun_x + ny * sun_y
            road = min(max(half - d / pixel, np.float32(0)), np.float32(1))
            shadow = height * per_metre * max(facing, np.float32(0))
            if shadow > 0:
                band = min(max(half + (shadow + d) / pixel, np.float32(0)), np.float32(1)) * road
                band = min(band, shadow / pixel)
                dark[r, c] = max(dark[r, c], band)
            share = min(max(half - (d - face) / pixel, np.float32(0)), np.float32(1)) - road
            if share > 0 and height > 0.04:
                lit = 1 - min(max(-facing, np.float32(0)) * np.float32(1.3), np.float32(1.15))
                if dark[r, c] < 0.5:
                    dark[r, c] += share * (lit - dark[r, c])
                sky[r, c] *= 1 - np.float32(0.3) * share
            if d < dirt_reach * 3:
                near = np.exp(-abs(d) / dirt_reach) * road
                sky[r, c] *= 1 - np.float32(0.25) * near * min(height / np.float32(0.1), np.float32(1))
                dark[r, c] = min(dark[r, c] + dirt * near * (1 - dark[r, c]), np.float32(1))
