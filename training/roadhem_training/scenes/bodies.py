"""What stands on the ground, as the camera sees it, drawn from low to high over the lit ground."""

from __future__ import annotations

import numpy as np
import shapely
from numpy.typing import NDArray
from shapely import affinity
from shapely.geometry.base import BaseGeometry

from roadhem_training.scenes.coverage import Frame, Patch, cover_area
from roadhem_training.scenes.flight import Flight
from roadhem_training.scenes.light import away_from_sun, facet_light, sky_colour, sweep_body
from roadhem_training.scenes.materials import pick_from
from roadhem_training.scenes.noise import GRAIN_M, PEBBLE_M, SPOT_M, Noise
from roadhem_training.scenes.roofs import draw_roof
from roadhem_training.scenes.vehicles import paint_vehicle
from roadhem_training.scenes.world import Body

PLAIN = {
    "wall": ((176, 168, 156), (150, 140, 130), (190, 183, 170), (146, 108, 92)),
    "fence": ((110, 96, 82), (90, 90, 90), (140, 126, 108), (70, 84, 72)),
    "hedge": ((62, 78, 48), (74, 88, 54), (52, 66, 44)),
    "pole": ((150, 150, 148), (110, 110, 108), (96, 84, 72)),
    "post": ((190, 190, 188), (90, 90, 88), (170, 70, 60)),
    "bin": ((58, 62, 66), (48, 84, 62), (74, 92, 128), (150, 130, 70)),
    "rail": ((150, 150, 150), (126, 118, 112)),
    "shelter": ((176, 190, 196), (120, 130, 134), (200, 204, 204)),
}
FACADES = ((190, 178, 160), (200, 194, 184), (164, 130, 110), (150, 148, 146), (120, 110, 104))

BUILT, VEHICLES = ("house", "hall"), ("car", "truck")

STEEP = 8.0
"""Rise per metre by which a wall is lit."""

SEEN_LEAN_M = 0.06
"""A body whose top is displaced by less than this shows no side."""

HIGHER_M = 0.5
"""A body shades the tops of others at least this much lower."""

ROUGHNESS = {"hedge": 0.35}
"""Relative deviation of brightness over a plain top; 0.05 where not named."""


def draw_bodies(
    image: NDArray[np.float32],
    hidden: NDArray[np.bool_],
    bodies: list[Body],
    dark: NDArray[np.float32],
    frame: Frame,
    flight: Flight,
    noise: Noise,
    rng: np.random.Generator,
) -> None:
    """Draw bodies in order of height over the lit ground.

    Parameters
    ----------
    image : (rows, cols, 3) light; hidden : (rows, cols), True where a body covers the ground; changed in place.
    dark : (rows, cols) share of direct light that large bodies and crowns take from the ground.
    """
    higher = shapely.STRtree([body.footprint for body in bodies])
    for body in sorted(bodies, key=lambda b: b.top):
        middle = body.footprint.centroid
        offset = tuple(body.top * share for share in flight.lean_at(middle.x, middle.y, frame))
        patch = sweep_body(body, (0.0, 0.0), offset, frame)
        if patch is None:
            continue
        hidden[patch.window] |= patch.cover > 0.5
        if body.what in VEHICLES:
            shade = _shade_at(body, dark, frame, flight)
            paint_vehicle(image, body, offset, shade, sky_colour(flight), frame, flight, rng)
            continue
        if np.hypot(*offset) > SEEN_LEAN_M:
            _draw_side(image, patch, body, offset, flight, noise, rng)
        top = affinity.translate(body.footprint, *offset)
        if body.what in BUILT:
            draw_roof(image, body, top, frame, flight, noise, rng)
            _shade_top(image, body, top, [bodies[k] for k in _towards_sun(body, higher, flight)], frame, flight)
        else:
            _draw_plain(image, body, top, frame, flight, noise, rng)


def _shade_at(body: Body, dark: NDArray[np.float32], frame: Frame, flight: Flight) -> float:
    """Share of direct light taken from a low body's top: looked up where its own ray would reach the ground."""
    middle = body.footprint.centroid
    away = np.array(away_from_sun(flight)) * body.top
    col, row = frame.to_pixels([middle.x + away[0], middle.y + away[1]])
    inside = 0 <= row < frame.rows and 0 <= col < frame.cols
    return float(dark[int(row), int(col)]) if inside else 0.0


def _towards_sun(body: Body, tree: shapely.STRtree, flight: Flight) -> list[int]:
    """Indices of the bodies between this one and the sun, near enough to matter."""
    away = away_from_sun(flight)
    seen = affinity.translate(body.footprint, -away[0] * body.top, -away[1] * body.top)
    return tree.query(shapely.union(body.footprint, seen).convex_hull).tolist()


def _shade_top(
    image: NDArray[np.float32],
    body: Body,
    top: BaseGeometry,
    others: list[Body],
    frame: Frame,
    flight: Flight,
) -> None:
    """Darken the top of a body where higher ones stand between it and the sun."""
    away = np.array(away_from_sun(flight))
    for other in others:
        rise = other.top - body.top
        patch = sweep_body(other, (0.0, 0.0), tuple(away * rise), frame) if rise > HIGHER_M else None
        own = cover_area(top, frame) if patch is not None else None
        if patch is None or own is None:
            continue
        rows, cols = (
            slice(max(a.start, b.start), min(a.stop, b.stop)) for a, b in zip(patch.window, own.window, strict=True)
        )
        if rows.start < rows.stop and cols.start < cols.stop:
            taken = _cut(patch, rows, cols) * _cut(own, rows, cols)
            image[rows, cols] *= 1 - taken[..., None] * (1 - sky_colour(flight))


def _cut(patch: Patch, rows: slice, cols: slice) -> NDArray[np.float32]:
    r0, c0 = patch.window[0].start, patch.window[1].start
    return patch.cover[rows.start - r0 : rows.stop - r0, cols.start - c0 : cols.stop - c0]


def _draw_side(
    image: NDArray[np.float32],
    patch: Patch,
    body: Body,
    offset: tuple[float, float],
    flight: Flight,
    noise: Noise,
    rng: np.random.Generator,
) -> None:
    """Draw the walls that a displaced top uncovers."""
    colours = FACADES if body.what in BUILT else PLAIN.get(body.what, FACADES)
    light = facet_light(STEEP, float(np.arctan2(-offset[1], -offset[0])), flight)
    colour = pick_from(colours, (body.tint * 7.3) % 1.0, rng) * light * np.float32(0.9)
    texture = 1 + 0.12 * noise.at(SPOT_M, 1)[patch.window] + 0.1 * noise.at(PEBBLE_M, 1)[patch.window]
    image[patch.window] += patch.cover[..., None] * (colour * texture[..., None] - image[patch.window])


def _draw_plain(
    image: NDArray[np.float32],
    body: Body,
    top: BaseGeometry,
    frame: Frame,
    flight: Flight,
    noise: Noise,
    rng: np.random.Generator,
) -> None:
    """Draw a flat top of one colour."""
    patch = cover_area(top, frame)
    if patch is None:
        return
    colour = pick_from(PLAIN.get(body.what, FACADES), body.tint, rng) * facet_light(0.0, 0.0, flight)
    rough = np.float32(ROUGHNESS.get(body.what, 0.05))
    texture = np.maximum(1 + rough * (noise.at(PEBBLE_M, 1)[patch.window] + noise.at(GRAIN_M)[patch.window]), 0.2)
    image[patch.window] += patch.cover[..., None] * (colour * texture[..., None] - image[patch.window])
