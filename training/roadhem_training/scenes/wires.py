"""Wires overhead: thin straight lines across everything, and their shadows."""

from __future__ import annotations

import cv2
import numpy as np
from numpy.typing import NDArray

from roadhem_training.scenes.branches import draw_segments, drop
from roadhem_training.scenes.coverage import Frame

HEIGHT_M = (5.0, 9.0)


def string_wires(size: float, rng: np.random.Generator) -> NDArray[np.float64]:
    """Draw a bundle or two of parallel wires across a world of `size` metres: (n, 2, 3) x, y, height."""
    found = []
    for _ in range(int(rng.integers(1, 3))):
        middle, heading = rng.uniform(0.1, 0.9, 2) * size, rng.uniform(0, np.pi)
        along = np.array([np.cos(heading), np.sin(heading)])
        across = np.array([-along[1], along[0]]) * rng.uniform(0.3, 0.9)
        for k in range(int(rng.integers(1, 5))):
            start, end = middle + k * across - 2 * size * along, middle + k * across + 2 * size * along
            height = rng.uniform(*HEIGHT_M)
            found.append([[*start, height], [*end, height]])
    return np.array(found)


def mask_wires(wires: NDArray[np.float64], per_metre: tuple[float, float], frame: Frame) -> NDArray[np.float32]:
    """Coverage (rows, cols) by wires projected along `per_metre` metres (east, north) per metre of height."""
    mask = np.zeros((frame.rows, frame.cols), np.uint8)
    draw_segments(mask, drop(wires, per_metre), frame, 150)
    return cv2.GaussianBlur(mask, (0, 0), 0.4).astype(np.float32) / 255
