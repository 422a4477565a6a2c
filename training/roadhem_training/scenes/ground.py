"""The ground seen from above in even light: covers laid over one another, curb stones, wear."""

from __future__ import annotations

from dataclasses import dataclass

import cv2
import numba
import numpy as np
from numpy.typing import NDArray

from roadhem_training.scenes.coverage import Frame, Patch, cover_area
from roadhem_training.scenes.distance import SignedDistance
from roadhem_training.scenes.materials import Material, linear, material_of, pick_colour
from roadhem_training.scenes.noise import DRIFT_M, GRAIN_M, PATCH_M, PEBBLE_M, SPOT_M, Noise
from roadhem_training.scenes.world import Cover, World

RAGGED = 0.5
"""How much of a soft edge's width its outline wanders."""

SHARP_PX = 0.5
"""An edge that fades over less than this is drawn sharp."""

STONE_M = (0.5, 0.8, 1.0, 1.0, 2.0, 3.0)
"""Lengths of curb stones."""

OWN_COLOUR = 0.25
"""Share of covers that get a colour of their own rather than the place's usual one of their material."""


@dataclass(frozen=True)
class Ground:
    """The bare ground in pixels.

    Attributes
    ----------
    colour : (rows, cols, 3) float32 relative reflectance.
    relief : (rows, cols) float32 metres added by the covers.
    """

    colour: NDArray[np.float32]
    relief: NDArray[np.float32]


def lay_ground(
    world: World, distance: SignedDistance, frame: Frame, noise: Noise, rng: np.random.Generator
) -> Ground:
    """Paint the covers, then the curb stones of a world."""
    shape = (frame.rows, frame.cols)
    ground = Ground(np.full((*shape, 3), 0.15, np.float32), np.zeros(shape, np.float32))
    means: dict[str, NDArray[np.float32]] = {}
    _lay_covers(ground, world.ground, means, frame, noise, rng)
    before = ground.colour.copy()
    _lay_covers(ground, world.curb_stones, means, frame, noise, rng)
    nearest = distance.nearest
    numbers = np.array([rng.choice(STONE_M), rng.uniform(0.0, 0.12), rng.uniform(0.0, 0.4), frame.pixel], np.float32)
    _vary_stones(ground.colour, before, nearest.line_index, nearest.along, numbers)
    return ground


def _lay_covers(
    ground: Ground,
    covers: list[Cover],
    means: dict[str, NDArray[np.float32]],
    frame: Frame,
    noise: Noise,
    rng: np.random.Generator,
) -> None:
    """Lay covers in order; `means` keeps the place's usual colour of each material."""
    for cover in covers:
        patch = cover_area(cover.area, frame, 2 * cover.edge_softness)
        if patch is None:
            continue
        _raise(ground.relief[patch.window], patch.cover, np.float32(cover.relief))
        material = material_of(cover.material)
        if cover.material not in means or rng.random() < OWN_COLOUR:
            means[cover.material] = pick_colour(material, rng, 0.0)
        colour = means[cover.material] * np.float32((1 + 0.28 * cover.tone) ** 2.2)
        soft = _soften(patch, cover.edge_softness, noise)
        lay(ground.colour, soft, material, colour, cover.direction, frame, noise, rng)


def _soften(patch: Patch, softness: float, noise: Noise) -> Patch:
    """Let a soft edge fade over `softness` metres and wander about the true one."""
    pixels = softness / noise.frame.pixel
    if pixels < SHARP_PX:
        return patch
    faded = cv2.GaussianBlur(patch.cover, (0, 0), pixels / 2)
    wander = 0.3 * RAGGED * (noise.at(PEBBLE_M, 3)[patch.window] + noise.at(SPOT_M, 3)[patch.window])
    sharper = np.clip(0.5 + 1.6 * (faded - 0.5 + 4 * faded * (1 - faded) * wander), 0, 1)
    return Patch(patch.window, sharper.astype(np.float32))


def lay(
    image: NDArray[np.float32],
    patch: Patch,
    material: Material,
    colour: NDArray[np.float32],
    direction: float,
    frame: Frame,
    noise: Noise,
    rng: np.random.Generator,
) -> None:
    """Blend a material into `image` (rows, cols, 3) where `patch` covers it."""
    which = int(rng.integers(2))
    window = patch.window
    origin = (frame.left + window[1].start * frame.pixel, frame.top - window[0].start * frame.pixel)
    _lay(
        image[window],
        patch.cover,
        colour,
        linear(material.second) * np.float32(rng.uniform(0.8, 1.2)),
        np.float32(material.share * rng.uniform(0.3, 1.8)),
        noise.at(GRAIN_M)[window],
        noise.at(PEBBLE_M, which)[window],
        noise.at(SPOT_M, which)[window],
        noise.at(PATCH_M, which)[window],
        noise.at(DRIFT_M, which)[window],
        2 * np.array([material.grain, material.pebble, material.spot, material.patch, material.drift], np.float32),
        _row_numbers(material, direction, rng),
        np.array([origin[0], origin[1], frame.pixel], np.float32),
    )


def _row_numbers(material: Material, direction: float, rng: np.random.Generator) -> NDArray[np.float32]:
    """Flatten the laying pattern for the compiled loop; a length of 0 says there is none."""
    rows = material.rows
    if rows is None:
        return np.zeros(8, np.float32)
    scale = rng.uniform(0.85, 1.2)
    size = (rows.length * scale, rows.width * scale)
    turn = (np.cos(direction), np.sin(direction))
    return np.array([*size, rows.joint, rows.joint_tone, rows.bond, 2 * rows.vary, *turn], np.float32)


@numba.njit(cache=True)
def _vary_stones(image, before, line, along, numbers):  # type: ignore[no-untyped-def]
    """Give each curb stone its own tone and a dark joint, where stones changed the picture."""
    length, vary, joint, pixel = numbers
    for r in range(image.shape[0]):
        for c in range(image.shape[1]):
            if line[r, c] < 0 or image[r, c, 1] == before[r, c, 1]:
                continue
            place = along[r, c] / length
            stone = np.floor(place)
            tone = 1 + vary * _hash(stone, np.float32(line[r, c]))
            gap = min(place - stone, stone + 1 - place) * length
            tone *= 1 - joint * min(max(np.float32(1) - gap / pixel, np.float32(0)), np.float32(1))
            for k in range(3):
                image[r, c, k] *= tone


@numba.njit(cache=True)
def _raise(relief, cover, height):  # type: ignore[no-untyped-def]
    for r in range(cover.shape[0]):
        for c in range(cover.shape[1]):
            relief[r, c] += cover[r, c] * (height - relief[r, c])


@numba.njit(cache=True)
def _lay(image, cover, first, second, share, grain, pebble, spot, patch, drift, weights, rows, place):  # type: ignore[no-untyped-def]
    zero, quarter, half, one = np.float32(0), np.float32(0.25), np.float32(0.5), np.float32(1)
    base, spread = np.float32(1.6) * share, np.float32(0.35) * min(np.float32(3) * share, one)
    pixel = place[2]
    for r in range(cover.shape[0]):
        y = place[1] - (np.float32(r) + half) * pixel
        for c in range(cover.shape[1]):
            alpha = cover[r, c]
            if alpha <= zero:
                continue
            mottle = quarter * pebble[r, c] + half * (spot[r, c] + patch[r, c])
            mix = min(max(base + spread * mottle, zero), one)
            tone = one + weights[0] * grain[r, c] + weights[1] * pebble[r, c]
            tone += weights[2] * spot[r, c] + weights[3] * patch[r, c] + weights[4] * drift[r, c]
            if rows[0] > 0:
                tone *= _unit_tone(place[0] + (np.float32(c) + half) * pixel, y, rows, pixel)
            tone = max(tone, quarter)
            for k in range(3):
                value = (first[k] + mix * (second[k] - first[k])) * tone
                image[r, c, k] += alpha * (value - image[r, c, k])


@numba.njit(cache=True)
def _unit_tone(x, y, rows, pixel):  # type: ignore[no-untyped-def]
    """Brightness of the unit or joint at a place; joints narrower than a pixel dim it by their share."""
    length, width, joint = rows[0], rows[1], rows[2]
    u = x * rows[6] + y * rows[7]
    v = (y * rows[6] - x * rows[7]) / width
    row = np.floor(v)
    u = u / length + rows[4] * (row % 2)
    unit = np.floor(u)
    fine = min(width / (2 * pixel), np.float32(1))
    tone = 1 + rows[5] * fine * _hash(unit, row)
    gap = min(min(u - unit, unit + 1 - u) * length, min(v - row, row + 1 - v) * width)
    reach = np.float32(0.5) * (joint + pixel)
    if joint > 0 and gap < reach:
        inside = min((reach - gap) / pixel, min(joint / pixel, np.float32(1)))
        tone *= 1 - (1 - rows[3]) * inside * fine
    return tone


@numba.njit(cache=True)
def _hash(a, b):  # type: ignore[no-untyped-def]
    """Return a number in -1.7..1.7 that looks random, from two whole numbers."""
    mixed = (np.int64(a) * 73856093) ^ (np.int64(b) * 19349663)
    mixed = (mixed ^ (mixed >> 13)) * 1274126177
    return np.float32((mixed >> 8) & 0xFFFF) * np.float32(3.4 / 65535) - np.float32(1.7)
