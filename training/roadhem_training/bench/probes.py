"""Seeds where no edge is: they should give nothing."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np
import shapely

from roadhem_training.bench.run import TraceFrom
from roadhem_training.bench.samples import Floats, along_lines, nearest
from roadhem_training.bench.truth import Truth

CLEAR_M = 3.0
"""A seed this far from every edge, hidden ones too, is far from any edge."""
MARKING_CLEAR_M = 1.5
"""A lane line this far from every edge is no edge's, even for a click 1 m off."""
PROBES = 40
"""Seeds of each sort in a set, at most."""
MARKING_STEP_M = 2.0


@dataclass(frozen=True)
class Probed:
    """How many seeds were tried, and how many gave nothing."""

    tried: int
    unplaced: int


def probe(places: Floats, trace: TraceFrom) -> Probed:
    """Trace from each place."""
    return Probed(len(places), sum(trace(place[None]) is None for place in places))


def clear_places(truth: Truth, bounds: tuple[float, float, float, float], seed: int) -> Floats:
    """Draw places in the areas (the bounds if there are none) more than CLEAR_M from any edge."""
    rng = np.random.default_rng(seed)
    minx, miny, maxx, maxy = bounds if truth.areas is None else truth.areas.bounds
    drawn = rng.uniform((minx, miny), (maxx, maxy), (PROBES * 50, 2))
    drawn = drawn[truth.contains(drawn)]
    return drawn[_distance(drawn, truth) > CLEAR_M][:PROBES]


def marking_places(truth: Truth, seed: int) -> Floats:
    """Draw places on lane lines more than MARKING_CLEAR_M from any edge."""
    on = along_lines(truth.markings, MARKING_STEP_M)
    on = on.pick(truth.contains(on.xy) & (nearest(on, truth.lines).distance > MARKING_CLEAR_M))
    return np.random.default_rng(seed).permutation(on.xy)[:PROBES]


def _distance(places: Floats, truth: Truth) -> Any:
    tree = shapely.STRtree(truth.lines)
    (_, _), distance = tree.query_nearest(shapely.points(places), all_matches=False, return_distance=True)
    return distance
