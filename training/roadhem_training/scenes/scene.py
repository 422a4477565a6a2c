"""A scene: an invented world as tiles with their truth."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from roadhem_training.scenes.world import World


@dataclass(frozen=True)
class Scene:
    """What one flight would bring home of a world.

    Row 0 is the north edge; pixel (r, c) covers x in [c, c + 1) * pixel and y in size - [r, r + 1) * pixel (local
    metres of the world).

    Attributes
    ----------
    world : the vector truth.
    pixel : metres per pixel.
    image : (H, W, 3) uint8.
    valid : (H, W) bool; False in nodata wedges.
    height : (H, W) float32 metres, NaN in holes; resampled bilinearly from its own cells.
    shadow : (H, W) bool, ground in the shadow of something.
    hidden : (H, W) bool, ground that something stands or hangs over, as the camera sees it.
    """

    world: World
    pixel: float
    image: NDArray[np.uint8]
    valid: NDArray[np.bool_]
    height: NDArray[np.float32]
    shadow: NDArray[np.bool_]
    hidden: NDArray[np.bool_]
