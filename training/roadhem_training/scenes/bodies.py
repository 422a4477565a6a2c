"""What stands on the ground, as the camera sees it: roofs, walls, cars, posts."""

from __future__ import annotations

import numba
import numpy as np
import shapely
from numpy.typing import NDArray
from shapely import affinity

from roadhem_training.scenes.coverage import Frame, cover_area
from roadhem_training.scenes.flight import Flight
from roadhem_training.scenes.light import sky_colour, sweep_body
from roadhem_training.scenes.materials import linear
from roadhem_training.scenes.noise import GRAIN_M, PATCH_M, PEBBLE_M, SPOT_M, Noise
from roadhem_training.scenes.vehicles import paint_vehicle
from roadhem_training.scenes.world import Body

TILES = ((150, 98, 80), (168, 118, 96), (128, 86, 74), (112, 90, 82), (98, 96, 97), (78, 78, 82), (140, 124, 114))
FLATS = ((92, 92, 92), (136, 134, 130), (176, 173, 168), (204, 202, 198), (118, 112, 104), (150, 158, 164))
PLAIN = {
    "wall": ((176, 168, 156), (150, 140, 130), (198, 190, 176), (146, 104, 86)),
    "fence": ((110, 96, 82), (90, 90, 90), (140, 126, 108), (70, 84, 72)),
    "hedge": ((58, 78, 42), (70, 88, 48), (48, 66, 40)),
    "pole": ((150, 150, 148), (110, 110, 108), (96, 84, 72)),
    "post": ((190, 190, 188), (90, 90, 88), (170, 70, 60)),
    "bin": ((58, 62, 66), (48, 84, 62), (74, 92, 128), (150, 130, 70)),
    "rail": ((150, 150, 150), (126, 118, 112)),
    "shelter": ((176, 190, 196), (120, 130, 134), (200, 204, 204)),
}
FACADES = ((190, 178, 160), (206, 200, 190), (168, 130, 108), (150, 148, 146), (120, 110, 104))

VEHICLES = ("car", "truck")

ROOF_TILT = 0.65
"""Rise per metre of pitched roofs."""

SEEN_LEAN_M = 0.06
"""A body whose top is displaced by less than this shows no side."""


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
    for body in sorted(bodies, key=lambda b: b.top):
        offset = lean_of(body, frame, flight)
        patch = sweep_body(body, (0.0, 0.0), offset, frame)
        if patch is None:
            continue
        hidden[patch.window] |= patch.cover > 0.5
        if body.what in VEHICLES:
            shade = shade_at(body, dark, frame, flight)
            paint_vehicle(image, body, offset, shade, sky_colour(flight), frame, flight, rng)
            continue
        if np.hypot(*offset) > SEEN_LEAN_M:
            _draw_side(image, patch.window, patch.cover, body, offset, flight, noise, rng)
        _draw_top(image, body, offset, frame, flight, noise, rng)


def lean_of(body: Body, frame: Frame, flight: Flight) -> tuple[float, float]:
    """Displacement (east, north, metres) of a body's top in the picture."""
    middle = body.footprint.centroid
    east, north = flight.lean_at(middle.x, middle.y, frame)
    return east * body.top, north * body.top


def shade_at(body: Body, dark: NDArray[np.float32], frame: Frame, flight: Flight) -> float:
    """Share of direct light taken from a low body's top: looked up where its own ray would reach the ground."""
    reach = flight.shadow_per_metre * body.top
    middle = body.footprint.centroid
    col, row = frame.to_pixels([middle.x - flight.to_sun[0] * reach, middle.y - flight.to_sun[1] * reach])
    inside = 0 <= row < frame.rows and 0 <= col < frame.cols
    return float(dark[int(row), int(col)]) if inside else 0.0


def pick(colours: tuple[tuple[int, int, int], ...], tint: float, rng: np.random.Generator) -> NDArray[np.float32]:
    """Return the reflectance (3,) of the colour that `tint` 0..1 points at, slightly varied."""
    chosen = np.asarray(colours[min(int(tint * len(colours)), len(colours) - 1)], np.float32)
    return linear(np.clip(chosen * rng.uniform(0.88, 1.1) * (1 + rng.normal(0, 0.02, 3)), 8, 250))


def facet_light(tilt: float, towards: float, flight: Flight) -> NDArray[np.float32]:
    """Light on a facet that rises `tilt` per metre and faces the direction `towards` (radians), flat ground being 1."""
    slope = np.hypot(1.0, tilt)
    facing = np.cos(towards - flight.sun_azimuth)
    direct = max((1 + tilt * facing * flight.shadow_per_metre) / slope, 0.0)
    sky = sky_colour(flight)
    return (sky * np.float32(0.9) + (1 - sky) * np.float32(min(direct, 1.5))).astype(np.float32)


def _draw_side(image, window, cover, body, offset, flight, noise, rng) -> None:  # type: ignore[no-untyped-def]
    colours = FACADES if body.what in ("house", "hall") else PLAIN.get(body.what, FACADES)
    towards = float(np.arctan2(-offset[1], -offset[0]))
    light = facet_light(8.0, towards, flight)
    colour = pick(colours, (body.tint * 7.3) % 1.0, rng) * light * np.float32(0.9)
    texture = 1 + 0.12 * noise.at(SPOT_M, 5)[window] + 0.1 * noise.at(PEBBLE_M, 5)[window]
    image[window] += cover[..., None] * (colour * texture[..., None].astype(np.float32) - image[window])


def _draw_top(image, body, offset, frame, flight, noise, rng) -> None:  # type: ignore[no-untyped-def]
    top = affinity.translate(body.footprint, *offset)
    patch = cover_area(top, frame)
    if patch is None:
        return
    window = patch.window
    grain, pebble = noise.at(GRAIN_M)[window], noise.at(PEBBLE_M, 5)[window]
    if body.what in ("house", "hall"):
        shape = roof_shape(top, body, rng)
        lights = np.stack([facet_light(shape[6], shape[5] + k * np.pi / 2, flight) for k in range(4)])
        colour = pick(TILES if shape[6] > 0 else FLATS, body.tint, rng)
        origin = np.array([frame.left + window[1].start * frame.pixel, frame.top - window[0].start * frame.pixel, frame.pixel])
        _roof(image[window], patch.cover, colour, lights, shape, origin, grain, pebble, noise.at(PATCH_M, 1)[window])
        if shape[6] == 0:
            _furnish_flat(image, top, colour, frame, flight, rng)
        return
    light = facet_light(0.0, 0.0, flight)
    colour = pick(PLAIN.get(body.what, FACADES), body.tint, rng) * light
    rough = (0.35, 0.35) if body.what == "hedge" else (0.06, 0.06)
    texture = np.maximum(1 + rough[0] * pebble + rough[1] * grain, 0.2).astype(np.float32)
    image[window] += patch.cover[..., None] * (colour * texture[..., None] - image[window])


def roof_shape(top, body: Body, rng: np.random.Generator) -> NDArray[np.float64]:  # type: ignore[no-untyped-def]
    """Numbers of a roof: middle x, y, half length, half width, kind (0 flat, 1 gable, 2 hip), direction, tilt, row pitch."""
    box = shapely.minimum_rotated_rectangle(top)
    corners = shapely.get_coordinates(box)[:4]
    sides = np.diff(np.vstack([corners, corners[:1]]), axis=0)
    lengths = np.hypot(*sides.T)
    longest = int(np.argmax(lengths[:2]))
    direction = float(np.arctan2(*sides[longest][::-1]))
    kind = {"flat": 0, "gable": 1, "hip": 2}.get(body.roof, 1)
    tilt = 0.0 if kind == 0 else ROOF_TILT * rng.uniform(0.6, 1.2)
    middle = corners.mean(axis=0)
    pitch = rng.choice([0.0, 0.33, 0.4]) if kind else rng.choice([0.0, 0.0, 1.0])
    return np.array([*middle, lengths[longest] / 2, lengths[1 - longest] / 2, kind, direction, tilt, pitch])


def _furnish_flat(image, top, colour, frame, flight, rng) -> None:  # type: ignore[no-untyped-def]
    """Put a rim and a few vents and boxes on a flat roof."""
    light = facet_light(0.0, 0.0, flight)
    rim = top.difference(top.buffer(-rng.uniform(0.2, 0.45), join_style="mitre"))
    pieces = [(rim, np.clip(colour * np.float32(rng.uniform(0.8, 1.9)), 0.02, 0.8) * light)]
    minx, miny, maxx, maxy = top.bounds
    angle = rng.uniform(0, 90)
    for _ in range(int(min(top.area / 60, 14) * rng.uniform(0, 1.5))):
        x, y = rng.uniform(minx, maxx), rng.uniform(miny, maxy)
        half = rng.uniform(0.25, 1.2, 2)
        box = affinity.rotate(shapely.box(x - half[0], y - half[1], x + half[0], y + half[1]), angle)
        if not top.contains(box):
            continue
        reach = -rng.uniform(0.3, 1.0) * flight.shadow_per_metre * flight.sun
        shadow = affinity.translate(box, reach * flight.to_sun[0], reach * flight.to_sun[1])
        pieces.append((shadow.union(box).convex_hull, colour * sky_colour(flight)))
        pieces.append((box, linear((rng.uniform(90, 230),) * 3) * light))
    for area, shade in pieces:
        patch = cover_area(area, frame)
        if patch is not None:
            image[patch.window] += patch.cover[..., None] * (shade.astype(np.float32) - image[patch.window])


@numba.njit(cache=True)
def _roof(image, cover, colour, lights, shape, origin, grain, pebble, patch):  # type: ignore[no-untyped-def]
    cos, sin = np.cos(shape[5]), np.sin(shape[5])
    for r in range(cover.shape[0]):
        y = origin[1] - (r + 0.5) * origin[2] - shape[1]
        for c in range(cover.shape[1]):
            alpha = cover[r, c]
            if alpha <= 0:
                continue
            x = origin[0] + (c + 0.5) * origin[2] - shape[0]
            u, v = x * cos + y * sin, y * cos - x * sin
            facet = 1 if v > 0 else 3
            along = v
            ridge = abs(v)
            if shape[4] == 2 and shape[2] - abs(u) < shape[3] - abs(v):
                facet = 0 if u > 0 else 2
                along = u
                ridge = shape[2] - abs(u) - (shape[3] - abs(v))
            elif shape[4] == 2:
                ridge = min(abs(v), shape[2] - abs(u) - (shape[3] - abs(v)))
            tone = 1 + 0.07 * grain[r, c] + 0.05 * pebble[r, c] + 0.06 * patch[r, c]
            if shape[7] > 0:
                phase = along / shape[7]
                tone *= 1 + 0.10 * np.sin(2 * np.pi * phase)
            if shape[6] > 0 and abs(ridge) < 0.14:
                tone *= 1.18
            for k in range(3):
                light = lights[facet, k]
                image[r, c, k] += alpha * (colour[k] * light * max(tone, 0.3) - image[r, c, k])
