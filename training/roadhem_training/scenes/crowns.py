"""Trees and bushes from above: domes of leaf clumps, lit from the sun's side; bare ones as branches."""

from __future__ import annotations

import numba
import numpy as np
from numpy.typing import NDArray

from roadhem_training.scenes.branches import draw_segments, drop, is_bare, skeleton
from roadhem_training.scenes.coverage import Frame
from roadhem_training.scenes.flight import Flight
from roadhem_training.scenes.light import sky_colour
from roadhem_training.scenes.materials import linear
from roadhem_training.scenes.noise import GRAIN_M, LEAF_M, PEBBLE_M, Noise
from roadhem_training.scenes.world import Crown

LEAVES = {
    "summer": ((62, 80, 46), (74, 92, 52), (90, 104, 60), (54, 70, 44), (104, 110, 70), (46, 62, 42)),
    "autumn": ((150, 108, 66), (166, 132, 76), (112, 106, 62), (136, 86, 62), (88, 96, 56), (120, 96, 70)),
}
NEEDLES = ((44, 60, 46), (52, 66, 48), (38, 54, 44))
BARK = (128, 118, 108)

STEEPNESS = {"conifer": 1.8, "bush": 0.6, "columnar": 1.2}
"""How much the flanks of a crown darken and brighten; 1 where not named."""

LEAN_SHARE = 0.75
"""The part of its height at which a crown is widest."""


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
    clumps = noise.at(LEAF_M) * np.float32(0.75) + noise.at(PEBBLE_M) * np.float32(0.55)
    sky = sky_colour(flight)
    draw_bare(image, [crown for crown in crowns if is_bare(crown)], frame, flight, sky)
    for crown in sorted(crowns, key=lambda t: t.height):
        if is_bare(crown):
            continue
        colours = NEEDLES if crown.species == "conifer" else LEAVES[flight.season]
        chosen = np.asarray(colours[int(crown.tint * len(colours)) % len(colours)], np.float32)
        colour = linear(np.clip(chosen * rng.uniform(0.8, 1.2) * (1 + rng.normal(0, 0.03, 3)), 8, 250))
        lean = np.array(flight.lean_at(crown.x, crown.y, frame)) * LEAN_SHARE * crown.height
        x, y, reach = crown.x + lean[0], crown.y + lean[1], 1.3 * crown.radius
        window = frame.window([x - reach, y - reach, x + reach, y + reach])
        if window is None:
            continue
        bounds = np.array([window[0].start, window[0].stop, window[1].start, window[1].stop])
        col, row = frame.to_pixels([x, y])
        steep = STEEPNESS.get(crown.species, 1.0)
        sun = flight.to_sun[0], -flight.to_sun[1], flight.shadow_per_metre
        numbers = np.array([col, row, crown.radius / frame.pixel, crown.density, *sun, steep, frame.pixel])
        _crown(image, hidden, clumps, noise.at(GRAIN_M), bounds, numbers, colour, sky)


def draw_bare(
    image: NDArray[np.float32], crowns: list[Crown], frame: Frame, flight: Flight, sky: NDArray[np.float32]
) -> None:
    """Draw the branches of bare trees; they hide nothing."""
    if not crowns:
        return
    mask = np.zeros((frame.rows, frame.cols), np.uint8)
    for crown in crowns:
        draw_segments(mask, drop(skeleton(crown), flight.lean_at(crown.x, crown.y, frame)), frame, 170)
    alpha = mask[..., None].astype(np.float32) / 255
    image += alpha * (linear(BARK) * (sky + (1 - sky) * np.float32(0.8)) - image)


@numba.njit(cache=True)
def _crown(image, hidden, clumps, grain, bounds, numbers, colour, sky):  # type: ignore[no-untyped-def]
    x0, y0, radius, density, sun_x, sun_y, per_metre, steep, pixel = numbers
    rows, cols = image.shape[0], image.shape[1]
    ahead = 0.3 / pixel
    low = min(per_metre, 2.0)
    for r in range(bounds[0], bounds[1]):
        y = (r + 0.5 - y0) / radius
        for c in range(bounds[2], bounds[3]):
            x = (c + 0.5 - x0) / radius
            square = x * x + y * y
            if square > 1.7:
                continue
            clump = clumps[r, c]
            alpha = min(max((1 - np.sqrt(square)) * radius * pixel * 2.5 + 0.5 + 0.8 * clump, 0.0), 1.0)
            leaf = (1 - density) * (1.6 * clump + 0.7 * grain[r, c])
            alpha *= min(max(0.5 + 2.6 * (density - 0.55) + leaf, 0.0), 1.0)
            if alpha <= 0:
                continue
            rr = min(max(int(r + ahead * sun_y + 0.5), 0), rows - 1)
            cc = min(max(int(c + ahead * sun_x + 0.5), 0), cols - 1)
            bump = 0.42 * (clump - clumps[rr, cc])
            dome = (x * sun_x + y * sun_y) * 0.38 * steep
            lit = min(max(0.62 + (dome + bump) * low, 0.0), 1.5)
            cavity = min(max(0.72 + 0.30 * clump, 0.25), 1.2)
            tone = 1 + 0.10 * grain[r, c]
            for k in range(3):
                light = sky[k] * cavity + (1 - sky[k]) * lit * min(cavity + 0.2, 1.1)
                image[r, c, k] += alpha * (colour[k] * max(light * tone, 0.02) - image[r, c, k])
            if alpha > 0.5:
                hidden[r, c] = True
