"""Roofs: facets lit by their slope, rows of tiles, what stands on them."""

from __future__ import annotations

from dataclasses import dataclass

import numba
import numpy as np
import shapely
from numpy.typing import NDArray
from shapely import affinity
from shapely.geometry import Polygon
from shapely.geometry.base import BaseGeometry

from roadhem_training.scenes.coverage import Frame, cover_area
from roadhem_training.scenes.flight import Flight
from roadhem_training.scenes.light import facet_light, sky_colour
from roadhem_training.scenes.materials import linear, pick_from
from roadhem_training.scenes.noise import GRAIN_M, PATCH_M, PEBBLE_M, Noise
from roadhem_training.scenes.world import Body

TILES = (
    (150, 98, 80), (168, 118, 96), (128, 86, 74), (112, 90, 82), (98, 96, 97), (78, 78, 82), (140, 124, 114),
)  # fmt: skip
FLATS = ((92, 92, 92), (136, 134, 130), (172, 169, 164), (198, 196, 192), (118, 112, 104), (150, 158, 164))
PANEL, CHIMNEYS = (44, 52, 72), ((150, 104, 88), (120, 118, 116), (176, 170, 162))

KINDS = {"flat": 0, "gable": 1, "hip": 2}
TILT = 0.65
"""Rise per metre of pitched roofs."""

SEAM_LIFT = 1.18
"""Brightness of the ridge tiles relative to the roof."""


@dataclass(frozen=True)
class RoofShape:
    """A roof over the smallest rectangle round its footprint.

    Attributes
    ----------
    middle : x, y; half : half length and half width, metres; direction : of the ridge, radians.
    kind : value of KINDS; tilt : rise per metre; pitch : metres between rows of tiles or ribs, 0 for none.
    """

    middle: tuple[float, float]
    half: tuple[float, float]
    direction: float
    kind: int
    tilt: float
    pitch: float

    @classmethod
    def over(cls, top: BaseGeometry, roof: str, rng: np.random.Generator) -> RoofShape:
        """Fit a roof of a kind ("flat", "gable", "hip") over an outline."""
        corners = shapely.get_coordinates(shapely.minimum_rotated_rectangle(top))[:4]
        sides = corners[1:3] - corners[:2]
        lengths = np.hypot(*sides.T)
        longest = int(np.argmax(lengths))
        x, y = corners.mean(axis=0)
        kind = KINDS.get(roof, 1)
        tilt = TILT * rng.uniform(0.6, 1.2) if kind else 0.0
        pitch = rng.choice([0.0, 0.33, 0.4]) if kind else rng.choice([0.0, 0.0, 0.0, 1.0])
        half = (float(lengths[longest]) / 2, float(lengths[1 - longest]) / 2)
        return cls((float(x), float(y)), half, float(np.arctan2(*sides[longest][::-1])), kind, tilt, float(pitch))

    def box(self, x: float, y: float, length: float, width: float) -> Polygon:
        """Return a rectangle about (x, y), square to the roof."""
        flat = shapely.box(x - length / 2, y - width / 2, x + length / 2, y + width / 2)
        return affinity.rotate(flat, self.direction, origin=(x, y), use_radians=True)


def draw_roof(
    image: NDArray[np.float32],
    body: Body,
    top: BaseGeometry,
    frame: Frame,
    flight: Flight,
    noise: Noise,
    rng: np.random.Generator,
) -> None:
    """Draw the roof of `body` over the outline `top` (its footprint as displaced in the picture)."""
    patch = cover_area(top, frame)
    if patch is None:
        return
    window = patch.window
    shape = RoofShape.over(top, body.roof, rng)
    colour = pick_from(TILES if shape.kind else FLATS, body.tint, rng)
    lights = np.stack([facet_light(shape.tilt, shape.direction + k * np.pi / 2, flight) for k in range(4)])
    corner = (frame.left + window[1].start * frame.pixel, frame.top - window[0].start * frame.pixel)
    numbers = np.array([*shape.middle, *shape.half, shape.direction, shape.pitch, *corner, frame.pixel])
    textures = noise.at(GRAIN_M)[window], noise.at(PEBBLE_M, 1)[window], noise.at(PATCH_M, 1)[window]
    _roof(image[window], patch.cover, colour, lights, shape.kind, numbers, *textures)
    pieces = _on_pitched(top, shape, flight, rng) if shape.kind else _on_flat(top, shape, colour, flight, rng)
    for area, shade in pieces:
        placed = cover_area(area, frame)
        if placed is not None:
            image[placed.window] += placed.cover[..., None] * (shade.astype(np.float32) - image[placed.window])


Piece = tuple[BaseGeometry, NDArray[np.float32]]
"""An area and the light that comes from it."""


def _places(top: BaseGeometry, count: int, rng: np.random.Generator) -> NDArray[np.float64]:
    minx, miny, maxx, maxy = top.bounds
    return rng.uniform((minx, miny), (maxx, maxy), (count, 2))


def _on_flat(
    top: BaseGeometry, shape: RoofShape, colour: NDArray[np.float32], flight: Flight, rng: np.random.Generator
) -> list[Piece]:
    """Rim, vents, boxes and skylights."""
    light = facet_light(0.0, 0.0, flight)
    rim = top.difference(top.buffer(-rng.uniform(0.2, 0.45), join_style="mitre"))
    pieces = [(rim, np.clip(colour * np.float32(rng.uniform(0.8, 1.7)), 0.02, 0.7) * light)]
    for x, y in _places(top, int(min(top.area / 60, 14) * rng.uniform(0, 1.5)), rng):
        box = shape.box(x, y, *rng.uniform(0.5, 2.4, 2))
        if top.contains(box):
            tone = linear((rng.uniform(90, 220),) * 3)
            pieces += _standing(box, rng.uniform(0.3, 1.0), tone * light, colour, flight)
    return pieces


def _on_pitched(top: BaseGeometry, shape: RoofShape, flight: Flight, rng: np.random.Generator) -> list[Piece]:
    """Chimneys, skylights and solar panels."""
    light = facet_light(0.0, 0.0, flight)
    pieces: list[Piece] = []
    if rng.random() < 0.25:
        x, y = _places(top, 1, rng)[0]
        array = shape.box(x, y, rng.uniform(2, 7), rng.uniform(1.6, 3.4))
        if top.contains(array):
            pieces.append((array, linear(PANEL) * light * np.float32(rng.uniform(0.7, 1.6))))
    for x, y in _places(top, int(rng.integers(0, 5)), rng):
        if rng.random() < 0.5:
            box = shape.box(x, y, rng.uniform(0.5, 1.0), rng.uniform(0.4, 0.7))
            tone = pick_from(CHIMNEYS, rng.random(), rng)
            found = _standing(box, rng.uniform(0.6, 1.4), tone * light, np.float32(0.08), flight)
        else:
            box = shape.box(x, y, rng.uniform(0.7, 1.2), rng.uniform(0.9, 1.4))
            found = [(box, linear((70, 84, 98)) * light * np.float32(rng.uniform(0.6, 3.0)))]
        if top.contains(box):
            pieces += found
    return pieces


def _standing(
    box: Polygon,
    height: float,
    light: NDArray[np.float32],
    under: NDArray[np.float32] | np.float32,
    flight: Flight,
) -> list[Piece]:
    """A box of some height and its shadow on what lies `under` it."""
    reach = -height * flight.shadow_per_metre * flight.sun
    shadow = affinity.translate(box, reach * flight.to_sun[0], reach * flight.to_sun[1])
    return [(shadow.union(box).convex_hull, under * sky_colour(flight)), (box, light)]


@numba.njit(cache=True)
def _roof(image, cover, colour, lights, kind, numbers, grain, pebble, patch):  # type: ignore[no-untyped-def]
    x0, y0, half_length, half_width, direction, pitch, left, top, pixel = numbers
    cos, sin = np.cos(direction), np.sin(direction)
    for r in range(cover.shape[0]):
        y = top - (r + 0.5) * pixel - y0
        for c in range(cover.shape[1]):
            alpha = cover[r, c]
            if alpha <= 0:
                continue
            x = left + (c + 0.5) * pixel - x0
            u, v = x * cos + y * sin, y * cos - x * sin
            facet, along, ridge = 1 if v > 0 else 3, v, abs(v)
            if kind == 2:
                end = half_length - abs(u) - (half_width - abs(v))
                ridge = min(ridge, abs(end))
                if end < 0:
                    facet, along, ridge = 0 if u > 0 else 2, u, -end
            tone = 1 + 0.07 * grain[r, c] + 0.05 * pebble[r, c] + 0.05 * patch[r, c]
            if pitch > 0:
                tone *= 1 + 0.09 * np.sin(2 * np.pi * along / pitch)
            if kind > 0 and ridge < 0.14:
                tone *= SEAM_LIFT
            for k in range(3):
                image[r, c, k] += alpha * (colour[k] * lights[facet, k] * max(tone, 0.3) - image[r, c, k])
