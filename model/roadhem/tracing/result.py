"""What a trace is: points with their spread, and why it began and ended where it did."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

END_REASONS = ("end", "unsure", "met_edge", "tile_border", "looped", "length_limit", "no_data")

DOUBT_REASONS = ("bridged", "competing_line", "low_contrast", "sharp_turn", "fork")


@dataclass(frozen=True)
class Doubt:
    """A place where a person should look first.

    Attributes
    ----------
    x, y : grid metres.
    reason : one of DOUBT_REASONS.
    weight : 0..1, larger means likelier wrong and longer.
    """

    x: float
    y: float
    reason: str
    weight: float


@dataclass(frozen=True)
class Trace:
    """One traced edge, the drive-over surface on its left.

    Attributes
    ----------
    points : (n, 2) float64, grid metres (x east, y north), about 0.4 m apart; a closed line repeats its first point.
    sigma : (n,) float64, lateral standard error in metres (1 sigma), relative to the image.
    kind : (n,) uint8, index into roadhem.fields.layout.KINDS.
    seen : (n,) uint8, index into roadhem.fields.layout.SEEN.
    closed : whether it is a loop.
    start_reason, end_reason : one of END_REASONS.
    doubts : places worth a look.
    """

    points: NDArray[np.float64]
    sigma: NDArray[np.float64]
    kind: NDArray[np.uint8]
    seen: NDArray[np.uint8]
    closed: bool
    start_reason: str
    end_reason: str
    doubts: tuple[Doubt, ...] = ()


@dataclass(frozen=True)
class Unplaced:
    """A seed that gave nothing, and why, in words for the user."""

    reason: str
