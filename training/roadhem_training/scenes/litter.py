"""What wind and growth lay over an edge: dust, soil, leaves, grass, gravel, snow, water in the gutter."""

from __future__ import annotations

import numba
import numpy as np
from numpy.typing import NDArray

from roadhem_training.scenes.distance import SignedDistance
from roadhem_training.scenes.flight import Flight
from roadhem_training.scenes.materials import MATERIALS, pick_colour
from roadhem_training.scenes.noise import GRAIN_M, PATCH_M, PEBBLE_M, SPOT_M, Noise
from roadhem_training.scenes.world import TrueEdge, World

LITTER: dict[str, tuple[str, tuple[float, float], tuple[float, float], tuple[float, float]]] = {
    "dusty": ("sand", (0.05, 0.6), (0.05, 0.8), (0.2, 0.8)),
    "muddy": ("soil", (0.05, 0.4), (0.05, 0.6), (0.3, 0.9)),
    "overgrown": ("grass", (0.03, 0.22), (0.05, 0.5), (0.6, 1.0)),
    "leafy": ("leaves", (0.1, 0.7), (0.1, 1.0), (0.4, 0.95)),
    "gravelly": ("gravel", (0.05, 0.5), (0.1, 0.8), (0.3, 0.9)),
    "snowy": ("snow", (0.1, 0.8), (0.2, 1.2), (0.7, 1.0)),
    "damp": ("wet", (0.15, 0.9), (0.0, 0.02), (0.2, 0.7)),
}
"""Event: material, reach onto the road, reach behind the edge (metres), opacity."""

SHARE = 0.35
"""Share of a scene's edges that its kind of litter lies on."""


def litter_edges(
    image: NDArray[np.float32],
    world: World,
    distance: SignedDistance,
    flight: Flight,
    noise: Noise,
    rng: np.random.Generator,
) -> None:
    """Lay the flight's kinds of litter over edges in `image` (rows, cols, 3) reflectance; the truth stays."""
    for event, (material, onto, behind, opacity) in LITTER.items():
        if not flight.has(event) or not world.edges:
            continue
        colour = pick_colour(MATERIALS[material], rng, rng.normal(0, 0.2))
        rows = [_numbers(edge, onto, behind, opacity, rng) for edge in world.edges]
        nearest = distance.nearest
        _litter(
            image, distance.sdf, nearest.line_index, np.array(rows, np.float32), colour, noise.at(GRAIN_M),
            noise.at(PEBBLE_M, 7), noise.at(SPOT_M, 7), noise.at(PATCH_M, 7),
        )  # fmt: skip
    if flight.has("snowy"):
        _snow_remains(image, distance, noise, rng)


def _numbers(
    edge: TrueEdge,
    onto: tuple[float, float],
    behind: tuple[float, float],
    opacity: tuple[float, float],
    rng: np.random.Generator,
) -> tuple[float, float, float]:
    """Reach onto the road, reach behind it, opacity (0 where this edge stays clean)."""
    numbers = rng.uniform(*onto), rng.uniform(*behind), rng.uniform(*opacity)
    share = SHARE * (1.6 if edge.kind == "flush" else 1.0)
    return numbers if rng.random() < share else (0.0, 0.0, 0.0)


def _snow_remains(
    image: NDArray[np.float32], distance: SignedDistance, noise: Noise, rng: np.random.Generator
) -> None:
    """Patches of snow left beside the road."""
    colour = pick_colour(MATERIALS["snow"], rng, 0.0)
    field = noise.at(PATCH_M, 7) + 0.6 * noise.at(SPOT_M, 7) + 0.3 * noise.at(PEBBLE_M, 7)
    alpha = np.clip((field - rng.uniform(0.3, 1.8)) * 4, 0, 1) * (distance.sdf > 0.1)
    image += alpha[..., None].astype(np.float32) * (colour - image)


@numba.njit(cache=True)
def _litter(image, sdf, line, numbers, colour, grain, pebble, spot, patch):  # type: ignore[no-untyped-def]
    for r in range(sdf.shape[0]):
        for c in range(sdf.shape[1]):
            index = line[r, c]
            if index < 0 or numbers[index, 2] <= 0:
                continue
            d = sdf[r, c]
            wander = 0.45 + 0.35 * patch[r, c] + 0.25 * spot[r, c] + 0.12 * pebble[r, c]
            if d < 0:
                reach = numbers[index, 0] * wander
                into = -d
            else:
                reach = numbers[index, 1] * (0.6 + wander)
                into = d
            if reach <= 0:
                continue
            alpha = min(max((reach - into) / (0.35 * reach + 0.08), 0.0), 1.0)
            alpha *= numbers[index, 2] * min(max(0.85 + 0.25 * pebble[r, c] + 0.2 * grain[r, c], 0.0), 1.0)
            if alpha > 0:
                tone = max(1 + 0.14 * grain[r, c] + 0.12 * pebble[r, c], 0.3)
                for k in range(3):
                    image[r, c, k] += alpha * (colour[k] * tone - image[r, c, k])
