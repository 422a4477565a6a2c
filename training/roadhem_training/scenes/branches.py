"""Bare trees: a skeleton of branches in space, seen from above and from the sun."""

from __future__ import annotations

import cv2
import numpy as np
from numpy.typing import NDArray

from roadhem_training.scenes.coverage import Frame
from roadhem_training.scenes.world import Crown

BARE_DENSITY = 0.36
"""Deciduous crowns thinner than this have no leaves."""

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
    base = np.array([[crown.x, crown.y, 0.0], [crown.x, crown.y, 0.35 * crown.height]])
    found, tips = [base], []
    for heading in rng.uniform(0, 2 * np.pi) + np.arange(7) * 0.9:
        tips.append((base[1], heading + rng.normal(0, 0.2), 0.42 * crown.radius, 0.2 * crown.height))
    for _ in range(3):
        grown = []
        for start, heading, length, rise in tips:
            step = np.array([np.cos(heading) * length, np.sin(heading) * length, rise])
            end = start + step * rng.uniform(0.7, 1.2)
            found.append(np.array([start, end]))
            for turn in (-0.45, 0.0, 0.45):
                grown.append((end, heading + turn + rng.normal(0, 0.25), length * 0.72, rise * 0.8))
        tips = grown
    return np.array(found)


def draw_segments(
    mask: NDArray[np.uint8], segments: NDArray[np.float64], frame: Frame, shade: int, thickness: int = 1
) -> None:
    """Draw (n, 2, 2) segments in local metres into `mask` (rows, cols) uint8."""
    points = np.round((frame.to_pixels(segments) - 0.5) * 2**SUBPIXEL).astype(np.int32)
    cv2.polylines(mask, list(points), False, shade, thickness, cv2.LINE_AA, SUBPIXEL)


def drop(segments: NDArray[np.float64], per_metre: tuple[float, float]) -> NDArray[np.float64]:
    """Project (n, 2, 3) segments to the ground along a direction of `per_metre` metres (east, north) per metre."""
    return segments[..., :2] + segments[..., 2:] * np.asarray(per_metre)
