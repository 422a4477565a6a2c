"""From the net's floats to the stored counts."""

from __future__ import annotations

import numpy as np
from numba import njit
from numpy.typing import NDArray

from roadhem.fields.layout import CHANNELS, COVER, COVER_OUTSIDE, NET_FIELDS
from roadhem.fields.model import QUANTA

_COUNTS = np.array([1 / QUANTA[name] for name in NET_FIELDS], np.float32)
_LOG_SIGMA = NET_FIELDS.index("log_sigma")
_LARGEST = float(np.iinfo(np.int16).max)


def quantise(
    fields: NDArray[np.float32], cover: NDArray[np.uint8], calibration: tuple[float, float]
) -> NDArray[np.int16]:
    """Bring fields to counts, half to even, clipped; cells outside the tiles are all zero.

    Parameters
    ----------
    fields : (14, H, W) as the net gives them.
    cover : (H, W) COVER_ codes.
    calibration : (a, b) of log_sigma' = a + b * log_sigma.

    Returns
    -------
    (H, W, CHANNELS) int16, read-only.
    """
    counts = np.empty((*cover.shape, CHANNELS), np.int16)
    shift, slope = np.zeros(len(_COUNTS), np.float32), _COUNTS.copy()
    shift[_LOG_SIGMA] = calibration[0] * _COUNTS[_LOG_SIGMA]
    slope[_LOG_SIGMA] *= np.float32(calibration[1])
    _quantise(fields, cover, shift, slope, counts)
    counts.flags.writeable = False
    return counts


@njit(cache=True, nogil=True)
def _quantise(fields, cover, shift, slope, counts):  # type: ignore[no-untyped-def]
    channels = fields.shape[0]
    for i in range(cover.shape[0]):
        for j in range(cover.shape[1]):
            counts[i, j, COVER] = cover[i, j]
            outside = cover[i, j] == COVER_OUTSIDE
            for channel in range(channels):
                value = np.rint(shift[channel] + slope[channel] * fields[channel, i, j])
                clipped = min(max(value, -_LARGEST), _LARGEST)
                counts[i, j, channel] = 0 if outside or np.isnan(value) else np.int16(clipped)
