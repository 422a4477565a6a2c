"""Bare trees: a skeleton of branches in space, seen from above and from the sun."""

from __future__ import annotations

import cv2
import numpy as np
from numpy.typing import NDArray

from roadhem_training.scenes.coverage import Frame
from roadhem_training.scenes.world import Crown

BARE_DENSITY = 0.36
"""Deciduous crowns thinner than this have no leaves."""

MAIN_BRANCHES, FORKS, TURNS = 7, 3, (-0.45, 0.0, 0.45)
"""Branches from the trunk, how often they part, and the turns (radians) of the three parts."""

SUBPIXEL = 4
"""Bits of sub-pixel position handed to the line drawing."""


def is_bare(crown: Crown) -> bool:
    """Tell whether a crown is drawn as branches."""
    return crown.density < BARE_DENSITY and crown.species in ("round", "columnar")


def skeleton(crown: Crown) -> NDArray[np.float64]:
    """Grow branches from the trunk: (n, 2, 3) segments from and to x, y, height in local metres.

    The same crown always gives the same branches.
    """
    rng = np.random.default_rng(np.abs([crown.x * 1000, crown.y * 1000, crown.radius * 1000]).astype(np.int64))
    fork = np.array([crown.x, crown.y, 0.35 * crown.height])
    found = [np.stack([fork * (1, 1, 0), fork])[None]]
    heading = rng.uniform(0, 2 * np.pi) + 0.9 * np.arange(MAIN_BRANCHES) + rng.normal(0, 0.2, MAIN_BRANCHES)
    start, length, rise = np.tile(fork, (MAIN_BRANCHES, 1)), 0.42 * crown.radius, 0.2 * crown.height
    for _ in range(FORKS):
        step = np.stack([length * np.cos(heading), length * np.sin(heading), np.full(len(heading), rise)], axis=1)
        end = start + step * rng.uniform(0.7, 1.2, (len(step), 1))
        found.append(np.stack([start, end], axis=1))
        start, heading = np.repeat(end, 3, axis=0), np.repeat(heading, 3) + np.tile(TURNS, len(heading))
        heading = heading + rng.normal(0, 0.25, len(heading))
        length, rise = 0.72 * length, 0.8 * rise
    return np.concatenate(found)


def draw_segments(
    mask: NDArray[np.uint8], segments: NDArray[np.float64], frame: Frame, shade: int, thickness: int = 1
) -> None:
    """Draw (n, 2, 2) segments in local metres into `mask` (rows, cols) uint8."""
    points = np.round((frame.to_pixels(segments) - 0.5) * 2**SUBPIXEL).astype(np.int32)
    cv2.polylines(mask, list(points), False, shade, thickness, cv2.LINE_AA, SUBPIXEL)


def drop(segments: NDArray[np.float64], per_metre: tuple[float, float]) -> NDArray[np.float64]:
    """Project (n, 2, 3) segments to the ground along a direction of `per_metre` metres (east, north) per metre."""
    return segments[..., :2] + segments[..., 2:] * np.asarray(per_metre)
