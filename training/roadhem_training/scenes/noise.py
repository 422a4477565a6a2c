"""Smooth random fields of given grain, drawn once per scene and shared by everything painted in it."""

from __future__ import annotations

import cv2
import numpy as np
from numpy.typing import NDArray

from roadhem_training.scenes.coverage import Frame

GRAIN_M, PEBBLE_M, LEAF_M, SPOT_M, PATCH_M, DRIFT_M, FIELD_M = 0.0, 0.35, 0.7, 1.2, 4.0, 14.0, 45.0
"""Grain sizes in use: 0 is independent from pixel to pixel."""

DRAWN = 2
TURNS = (np.s_[:, :], np.s_[::-1, :], np.s_[:, ::-1], np.s_[::-1, ::-1])
"""Fields drawn for a grain; further ones are these mirrored, which no one sees and costs nothing."""

COARSE_PX = 3.0
GAIN_LINEAR, GAIN_CUBIC = 1.5, 1.25
"""Interpolation between independent knots loses deviation; this brings it back."""


class Noise:
    """Fields of value noise over a frame, each with zero mean and unit deviation."""

    def __init__(self, seed: int, frame: Frame):
        self.frame = frame
        self._seed = seed
        self._known: dict[tuple[float, int], NDArray[np.float32]] = {}

    def at(self, grain: float, which: int = 0) -> NDArray[np.float32]:
        """Return the (rows, cols) field of a grain in metres; `which` 0..7 picks among different ones."""
        turned, drawn = divmod(which, DRAWN)
        key = (grain, drawn)
        if key not in self._known:
            self._known[key] = self._draw(*key)
        return self._known[key][TURNS[turned]]

    def _draw(self, grain: float, which: int) -> NDArray[np.float32]:
        rng = np.random.default_rng([self._seed, round(grain * 1000), which])
        shape = (self.frame.rows, self.frame.cols)
        step = grain / self.frame.pixel
        if step < 1.5:
            return rng.standard_normal(shape, np.float32)
        knots = rng.standard_normal((int(shape[0] / step) + 3, int(shape[1] / step) + 3), np.float32)
        return smooth(knots, shape, step)


def smooth(knots: NDArray[np.float32], shape: tuple[int, int], step: float) -> NDArray[np.float32]:
    """Interpolate random knots `step` pixels apart to `shape`, with about unit deviation again.

    Cubic to every few pixels, linear from there: as smooth to the eye and several times faster.
    """
    middle = max(int(step / COARSE_PX), 1)
    field = cv2.resize(knots, None, fx=middle, fy=middle, interpolation=cv2.INTER_CUBIC) if middle > 1 else knots
    rest = step / middle
    rows, cols = int(np.ceil(shape[0] / rest)), int(np.ceil(shape[1] / rest))
    size = (max(round(cols * rest), shape[1]), max(round(rows * rest), shape[0]))
    wide = cv2.resize(field[:rows, :cols], size, interpolation=cv2.INTER_LINEAR)
    return np.ascontiguousarray(wide[: shape[0], : shape[1]]) * np.float32(GAIN_CUBIC if middle > 1 else GAIN_LINEAR)
