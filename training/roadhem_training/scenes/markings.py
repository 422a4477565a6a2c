"""Road markings: paint on the surface, worn where wheels and weather take it."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from roadhem_training.scenes.coverage import Frame, cover_area
from roadhem_training.scenes.materials import linear
from roadhem_training.scenes.noise import GRAIN_M, PATCH_M, PEBBLE_M, Noise
from roadhem_training.scenes.world import Paint

COLOURS = {"white": (224, 224, 220), "yellow": (214, 176, 74), "blue": (64, 110, 176), "red": (168, 74, 62)}


def paint_markings(
    image: NDArray[np.float32], paints: list[Paint], frame: Frame, noise: Noise, rng: np.random.Generator
) -> None:
    """Paint markings into `image` (rows, cols, 3) reflectance."""
    freshness = rng.uniform(0.72, 1.05)
    for paint in paints:
        patch = cover_area(paint.area, frame)
        if patch is None:
            continue
        window = patch.window
        texture = noise.at(PEBBLE_M, 2)[window] * 0.30 + noise.at(GRAIN_M)[window] * 0.18
        texture += noise.at(PATCH_M, 2)[window] * 0.22
        left = np.clip(1.25 - 1.35 * paint.wear + texture * min(1.0, 0.15 + 2 * paint.wear), 0.0, 1.0)
        alpha = (patch.cover * left * 0.95)[..., None].astype(np.float32)
        colour = linear(COLOURS[paint.colour]) * np.float32(freshness)
        image[window] += alpha * (colour - image[window])
