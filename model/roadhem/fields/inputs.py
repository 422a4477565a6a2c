"""The net's input: colour, validity and local relief, stacked the same way in training and at run time."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

INPUTS = ("red", "green", "blue", "valid", "relief", "relief_valid")

MEAN, DEVIATION = 0.45, 0.25
"""Colours in 0..1 are brought to (value - MEAN) / DEVIATION."""

RELIEF_TAPS = (-30, -15, 0, 15, 30)
"""Working pixels at which the surrounding ground is sampled, each way."""

RELIEF_REACH = 30
"""Working pixels of height needed around the wanted area."""

RELIEF_SOFT_M = 0.2
"""Relief h becomes h / (RELIEF_SOFT_M + |h|): curbs stay large, houses do not drown them."""


def relief(height: NDArray[np.float32]) -> tuple[NDArray[np.float32], NDArray[np.float32]]:
    """Height above the mean of 5 x 5 samples within 3 m, squeezed into (-1, 1).

    Parameters
    ----------
    height : (H + 60, W + 60) metres, NaN where there is none.

    Returns
    -------
    relief, valid : (H, W) float32 each; relief is 0 where valid is 0. Sums run in a fixed order, so that any window
        gives the same bits.
    """
    reach = RELIEF_REACH
    rows, cols = height.shape[0] - 2 * reach, height.shape[1] - 2 * reach
    known = np.isfinite(height)
    filled = np.where(known, height, np.float32(0)).astype(np.float32)
    total = np.zeros((rows, cols), np.float32)
    count = np.zeros((rows, cols), np.float32)
    centre = filled[reach : reach + rows, reach : reach + cols]
    centre_known = known[reach : reach + rows, reach : reach + cols]
    for dr in RELIEF_TAPS:
        for dc in RELIEF_TAPS:
            window = np.s_[reach + dr : reach + dr + rows, reach + dc : reach + dc + cols]
            total += np.where(known[window], filled[window] - centre, np.float32(0))
            count += known[window]
    above = -total / np.maximum(count, np.float32(1))
    squeezed = above / (np.float32(RELIEF_SOFT_M) + np.abs(above))
    valid = centre_known.astype(np.float32)
    return (squeezed * valid).astype(np.float32), valid


def stack_inputs(
    colour: NDArray[np.float32],
    valid: NDArray[np.bool_],
    relief_: NDArray[np.float32] | None = None,
    relief_valid: NDArray[np.float32] | None = None,
) -> NDArray[np.float32]:
    """Stack the net's input.

    Parameters
    ----------
    colour : (3, H, W) in 0..1 (grey images: three equal planes).
    valid : (H, W), False where the tiles hold no data; colour counts as 0 after scaling there.
    relief_, relief_valid : (H, W) as `relief` returns them, or None without height.

    Returns
    -------
    (6, H, W) float32, in the order of INPUTS.
    """
    stacked = np.zeros((len(INPUTS), *valid.shape), np.float32)
    stacked[:3] = (colour - np.float32(MEAN)) / np.float32(DEVIATION) * valid
    stacked[3] = valid
    if relief_ is not None and relief_valid is not None:
        stacked[4] = relief_
        stacked[5] = relief_valid
    return stacked
