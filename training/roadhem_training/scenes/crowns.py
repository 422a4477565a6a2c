"""Trees and bushes from above: domes of leaf clumps, lit from the sun's side."""

from __future__ import annotations

from dataclasses import replace

import numba
import numpy as np
from numpy.typing import NDArray

from roadhem_training.scenes.coverage import Frame
from roadhem_training.scenes.flight import Flight
from roadhem_training.scenes.light import sky_colour
from roadhem_training.scenes.materials import linear
from roadhem_training.scenes.noise import GRAIN_M, PEBBLE_M, SPOT_M, Noise
from roadhem_training.scenes.world import Crown

LEAVES = {
    "summer": ((58, 82, 40), (72, 94, 46), (86, 104, 52), (50, 72, 42), (96, 106, 62)),
    "autumn": ((168, 110, 58), (186, 142, 70), (112, 104, 56), (150, 84, 56), (84, 96, 50)),
    "winter": ((122, 110, 98), (106, 96, 86), (134, 122, 108)),
}
NEEDLES = ((40, 60, 42), (48, 66, 44), (36, 54, 44))
BARE = 0.35
"""Density that deciduous crowns keep in winter."""


def in_season(crown: Crown, flight: Flight) -> Crown:
    """Return the crown as it is in the season of the flight."""
    bare = flight.season == "winter" and crown.species in ("round", "columnar")
    return replace(crown, density=crown.density * BARE) if bare else crown


def draw_crowns(
    image: NDArray[np.float32],
    hidden: NDArray[np.bool_],
    crowns: list[Crown],
    frame: Frame,
    flight: Flight,
    noise: Noise,
    rng: np.random.Generator,
) -> None:
    """Draw crowns, lower ones first, into `image` (rows, cols, 3) light; `hidden` becomes True under them."""
    clumps = noise.at(SPOT_M, 6) * np.float32(0.16) + noise.at(PEBBLE_M, 6) * np.float32(0.11)
    grain = noise.at(GRAIN_M)
    sky = sky_colour(flight)
    half = frame.rows * frame.pixel / 2
    for crown in sorted(crowns, key=lambda t: t.height):
        evergreen = crown.species == "conifer" or (crown.species == "bush" and flight.season == "winter")
        colours = NEEDLES if evergreen else LEAVES[flight.season]
        chosen = np.asarray(colours[int(crown.tint * len(colours)) % len(colours)], np.float32)
        colour = linear(np.clip(chosen * rng.uniform(0.85, 1.2) * (1 + rng.normal(0, 0.03, 3)), 8, 250))
        lean = [(flight.lean[0] + flight.lean_spread * (crown.x - half)) * crown.height * 0.7 * (flight.lean_spread > 0)]
        lean.append((flight.lean[1] + flight.lean_spread * (crown.y - half)) * crown.height * 0.7 * (flight.lean_spread > 0))
        x, y, reach = crown.x + lean[0], crown.y + lean[1], 1.2 * crown.radius
        window = frame.window([x - reach, y - reach, x + reach, y + reach])
        if window is None:
            continue
        bounds = np.array([window[0].start, window[0].stop, window[1].start, window[1].stop])
        numbers = np.array([
            (x - frame.left) / frame.pixel, (frame.top - y) / frame.pixel, crown.radius / frame.pixel,
            crown.density, flight.to_sun[0], -flight.to_sun[1], flight.shadow_per_metre,
            2.2 if crown.species == "conifer" else 1.0 if crown.species != "bush" else 0.7,
        ])
        _crown(image, hidden, clumps, grain, bounds, numbers, colour, sky)


@numba.njit(cache=True)
def _crown(image, hidden, clumps, grain, bounds, numbers, colour, sky):  # type: ignore[no-untyped-def]
    x0, y0, radius, density, sun_x, sun_y, per_metre, steep = numbers
    rows, cols = image.shape[0], image.shape[1]
    step = 2
    for r in range(bounds[0], bounds[1]):
        y = (r + 0.5 - y0) / radius
        for c in range(bounds[2], bounds[3]):
            x = (c + 0.5 - x0) / radius
            square = x * x + y * y
            if square > 1.4:
                continue
            clump = clumps[r, c]
            edge = 1 - np.sqrt(square) + 0.9 * clump
            alpha = min(max(edge * radius * 0.22, 0.0), 1.0)
            alpha *= min(max(1.6 * density - 0.4 + (1 - density) * 7 * clump + (1 - density) * 0.5 * grain[r, c], 0.0), 1.0)
            if alpha <= 0:
                continue
            rr = min(max(int(r + step * sun_y), 0), rows - 1)
            cc = min(max(int(c + step * sun_x), 0), cols - 1)
            bump = (clump - clumps[rr, cc]) * 2.2
            dome = (x * sun_x + y * sun_y) * 0.55 * steep
            lit = min(max(0.75 + dome + bump + 1.2 * clump, 0.0), 1.6)
            tone = 1 + 0.12 * grain[r, c]
            for k in range(3):
                light = sky[k] * (0.75 + 1.2 * clump) + (1 - sky[k]) * lit
                image[r, c, k] += alpha * (colour[k] * max(light, 0.03) * tone - image[r, c, k])
            if alpha > 0.5:
                hidden[r, c] = True
