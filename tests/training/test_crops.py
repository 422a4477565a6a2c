"""Crops: turning and mirroring turns the vectors with the pixels."""

from __future__ import annotations

import itertools
import math

import numpy as np
import pytest
from numpy.typing import NDArray

from roadhem_training.crops import turned

CELLS = 8


def line_fields(x0: float, y0: float, theta: float) -> dict[str, NDArray[np.generic]]:
    """Offset and double-angle axis of one straight line through (x0, y0), origin in the middle of the cells."""
    cols, rows = np.meshgrid(np.arange(CELLS), np.arange(CELLS))
    x, y = cols - (CELLS - 1) / 2, (CELLS - 1) / 2 - rows
    distance = (x0 - x) * -math.sin(theta) + (y0 - y) * math.cos(theta)
    axis = np.stack([np.full(x.shape, math.cos(2 * theta)), np.full(x.shape, math.sin(2 * theta))])
    return {"offset": np.stack([-math.sin(theta) * distance, math.cos(theta) * distance]), "axis": axis}


@pytest.mark.parametrize(("quarters", "mirror"), list(itertools.product(range(4), (False, True))))
def test_turning_fields_equals_turning_the_line(quarters: int, mirror: bool) -> None:
    """Should give the fields of the turned line, computed anew from its definition ([built])."""
    x, y, theta = 0.7, -0.4, 0.3
    cut = turned(line_fields(x, y, theta), quarters, mirror)
    for _ in range(quarters):
        x, y, theta = -y, x, theta + math.pi / 2
    if mirror:
        x, theta = -x, math.pi - theta
    expected = line_fields(x, y, theta)
    np.testing.assert_allclose(cut["offset"], expected["offset"], atol=1e-12)
    np.testing.assert_allclose(cut["axis"], expected["axis"], atol=1e-12)
