"""Small shapes: boxes on the ground at a place and heading."""

from __future__ import annotations

import math

import numpy as np
from shapely.geometry import Polygon


def oriented_box(x: float, y: float, length: float, width: float, heading: float) -> Polygon:
    """Rectangle of `length` along `heading` (radians) and `width` across, about (x, y)."""
    c, s = math.cos(heading), math.sin(heading)
    corners = 0.5 * np.array([[length, width], [-length, width], [-length, -width], [length, -width]])
    return Polygon(corners @ np.array([[c, s], [-s, c]]) + [x, y])
