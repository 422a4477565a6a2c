"""Cars and trucks from above: paint, glass, lights."""

from __future__ import annotations

import numba
import numpy as np
import shapely
from numpy.typing import NDArray

from roadhem_training.scenes.coverage import Frame
from roadhem_training.scenes.flight import Flight
from roadhem_training.scenes.materials import linear
from roadhem_training.scenes.world import Body

PAINTS = (
    (228, 229, 230), (236, 236, 234), (218, 220, 222), (232, 230, 226), (196, 198, 201), (176, 179, 183),
    (150, 153, 157), (128, 131, 135), (92, 95, 99), (74, 76, 80), (56, 58, 61), (42, 43, 46), (34, 35, 38),
    (30, 31, 34), (48, 50, 56), (142, 40, 38), (178, 48, 42), (112, 40, 44), (46, 70, 118), (62, 96, 150),
    (40, 54, 84), (120, 116, 100), (70, 88, 72), (150, 128, 100), (206, 176, 60),
)  # fmt: skip
GLASS = (38, 44, 50)
SAMPLES = 3
"""Sub-samples per pixel side."""


def paint_vehicle(
    image: NDArray[np.float32],
    body: Body,
    offset: tuple[float, float],
    shade: float,
    sky: NDArray[np.float32],
    frame: Frame,
    flight: Flight,
    rng: np.random.Generator,
) -> None:
    """Paint one car or truck into `image` (rows, cols, 3); its top is displaced by `offset` metres."""
    corners = shapely.get_coordinates(shapely.minimum_rotated_rectangle(body.footprint))[:4]
    sides = corners[1:3] - corners[:2]
    lengths = np.hypot(*sides.T)
    longest = int(np.argmax(lengths))
    direction = float(np.arctan2(*sides[longest][::-1])) + (np.pi if rng.random() < 0.5 else 0.0)
    middle = corners.mean(axis=0) + np.asarray(offset) * 0.7
    reach = 0.5 * float(lengths.sum())
    window = frame.window([*(middle - reach), *(middle + reach)])
    if window is None:
        return
    place = np.array([
        (middle[0] - frame.left) / frame.pixel - window[1].start,
        (frame.top - middle[1]) / frame.pixel - window[0].start,
        lengths[longest] / 2 / frame.pixel,
        lengths[1 - longest] / 2 / frame.pixel,
        np.cos(direction),
        np.sin(direction),
        1.0 if body.what == "truck" else 0.0,
        rng.uniform(-0.08, 0.08),
    ])
    light = (sky * np.float32(0.9) + (1 - sky) * np.float32(1 - shade)).astype(np.float32)
    paint = linear(PAINTS[min(int(body.tint * len(PAINTS)), len(PAINTS) - 1)]) * np.float32(rng.uniform(0.85, 1.1))
    cab = linear(PAINTS[int(rng.integers(len(PAINTS)))])
    across = np.cos(direction - flight.sun_azimuth), np.sin(direction - flight.sun_azimuth)
    colours = np.stack([paint, cab, linear(GLASS)]) * light
    _vehicle(image[window], colours.astype(np.float32), place, np.array(across) * flight.sun * (1 - shade))


@numba.njit(cache=True)
def _vehicle(image, colours, place, sun):  # type: ignore[no-untyped-def]
    pixel_u, pixel_v = 1 / place[2], 1 / place[3]
    for r in range(image.shape[0]):
        for c in range(image.shape[1]):
            hits = 0
            total = np.zeros(3)
            for i in range(SAMPLES):
                for j in range(SAMPLES):
                    x = c + (j + 0.5) / SAMPLES - place[0]
                    y = -(r + (i + 0.5) / SAMPLES - place[1])
                    u = (x * place[4] + y * place[5]) * pixel_u
                    v = (y * place[4] - x * place[5]) * pixel_v
                    part, tone = _truck(u, v, place[2] / place[3]) if place[6] > 0 else _car(u, v, sun, place[7])
                    if part >= 0:
                        hits += 1
                        for k in range(3):
                            total[k] += colours[part, k] * tone
            for k in range(3):
                share = hits / (SAMPLES * SAMPLES)
                image[r, c, k] += total[k] / (SAMPLES * SAMPLES) - share * image[r, c, k]


@numba.njit(cache=True)
def _car(u, v, sun, shift):  # type: ignore[no-untyped-def]
    """Part (-1 none, 0 paint, 2 glass) and tone at u along (-1..1, front 1) and v across (-1..1)."""
    w = abs(v)
    if abs(u) > 1 or w > 1 - 0.22 * max(abs(u) - 0.72, 0.0) / 0.28 or abs(u) > 1 - 0.10 * w * w:
        return -1, 1.0
    u -= shift
    if 0.16 < u < 0.40 and w < 0.80 - 0.25 * (0.40 - u):
        return 2, 1.0 + 2.0 * max(sun[0], 0.0)
    if -0.82 < u < -0.62 and w < 0.76:
        return 2, 1.0 + 1.5 * max(-sun[0], 0.0)
    if -0.62 <= u <= 0.20 and 0.74 < w < 0.90:
        side = sun[1] * (1 if v > 0 else -1)
        return 2, 1.0 + 2.5 * max(side, 0.0)
    if -0.62 <= u <= 0.16:
        return 0, 1.06
    rim = 0.82 if w > 0.93 or abs(u) > 0.95 else 0.94
    return 0, rim + 0.12 * sun[0] * u


@numba.njit(cache=True)
def _truck(u, v, aspect):  # type: ignore[no-untyped-def]
    """Part (-1 none, 0 load, 1 cab, 2 glass) and tone of a truck, bus or trailer `aspect` times as long as wide."""
    if abs(u) > 1 or abs(v) > 1:
        return -1, 1.0
    cab = 1 - 1.7 / aspect
    if u > 1 - 0.25 / aspect:
        return 2, 1.0
    if u > cab:
        return 1, 0.95
    if u > cab - 0.2 / aspect:
        return 2, 0.6
    return 0, 0.9 if abs(v) > 0.92 else 1.0
