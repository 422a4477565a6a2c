"""The net's input: colour, validity and local relief, stacked the same way in training and at run time."""

from __future__ import annotations

import numpy as np
from numba import njit
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
    known = np.isfinite(height)
    filled = np.where(known, height, np.float32(0)).astype(np.float32)
    shape = height.shape[0] - 2 * RELIEF_REACH, height.shape[1] - 2 * RELIEF_REACH
    squeezed, valid = np.empty(shape, np.float32), np.empty(shape, np.float32)
    _relief(filled, known.astype(np.float32), squeezed, valid)
    return squeezed, valid


@njit(cache=True, nogil=True)
def _relief(filled, known, squeezed, valid):  # type: ignore[no-untyped-def]
    rows, cols = valid.shape
    total, count = np.empty(cols, np.float32), np.empty(cols, np.float32)
    for r in range(rows):
        total[:] = np.float32(0)
        count[:] = np.float32(0)
        centre = filled[RELIEF_REACH + r, RELIEF_REACH : RELIEF_REACH + cols]
        for dr in RELIEF_TAPS:
            for dc in RELIEF_TAPS:
                left = RELIEF_REACH + dc
                tap = filled[RELIEF_REACH + r + dr, left : left + cols]
                there = known[RELIEF_REACH + r + dr, left : left + cols]
                for c in range(cols):
                    total[c] += (tap[c] - centre[c]) * there[c]
                    count[c] += there[c]
        for c in range(cols):
            above = -total[c] / max(count[c], np.float32(1))
            valid[r, c] = known[RELIEF_REACH + r, RELIEF_REACH + c]
            squeezed[r, c] = above / (np.float32(RELIEF_SOFT_M) + abs(above)) * valid[r, c]


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
    stacked = np.empty((len(INPUTS), *valid.shape), np.float32)
    np.subtract(colour, np.float32(MEAN), out=stacked[:3])
    stacked[:3] /= np.float32(DEVIATION)
    if not valid.all():
        stacked[:3] *= valid
    stacked[3] = valid
    stacked[4] = 0 if relief_ is None else relief_
    stacked[5] = 0 if relief_valid is None else relief_valid
    return stacked
