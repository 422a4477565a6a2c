"""Traced lines against their truth by published shape distances, computed by a general library.

Hausdorff and Fréchet distances: shapely.hausdorff_distance, shapely.frechet_distance (GEOS), [read: their
documentation: both are discrete, over vertices and the densification asked for]. Definitions: Alt & Godau 1995,
Eiter & Mannila 1994, from memory.
"""

from __future__ import annotations

import numpy as np
import pytest
import shapely
from fields_made import Edge, MadeFields

from roadhem.tracing.result import Trace
from roadhem.tracing.trace import attempt

FINE = 0.01
"""Share of a segment to which the library densifies the short shapes."""

STEP_M = 0.1
"""Vertices of traces and truths lie this close before their distances are taken."""

# Polylines P, Q and their Hausdorff and continuous Fréchet distances: [built] from the definitions.
SHAPES = [
    ([(0, 0), (10, 0)], [(0, 1), (10, 1)], 1.0, 1.0),
    ([(0, 0), (10, 0)], [(0, 0), (5, 3), (10, 0)], 3.0, 3.0),
    ([(0, 0), (10, 0)], [(0, 0), (10, 0), (0, 0), (10, 0)], 0.0, 5.0),
    ([(0, 0), (10, 0)], [(10, 0), (0, 0)], 0.0, 10.0),
]


@pytest.mark.parametrize(("p", "q", "hausdorff", "frechet"), SHAPES)
def test_distances_mean_what_we_think(p: list, q: list, hausdorff: float, frechet: float) -> None:
    """Should find by the library the distances built by hand: Fréchet alone tells a line that doubles back."""
    a, b = shapely.LineString(p), shapely.LineString(q)
    assert shapely.hausdorff_distance(a, b, densify=FINE) == pytest.approx(hausdorff, abs=0.05)
    assert shapely.frechet_distance(a, b, densify=FINE) == pytest.approx(frechet, abs=0.1)


def traced(view: MadeFields, seed: tuple[float, float]) -> Trace:
    result = attempt(view, [seed])
    assert isinstance(result, Trace), result
    return result


def _wave() -> np.ndarray:
    x = np.linspace(0, 60, 301)
    return np.stack([x, 6 * np.sin(x / 8) - 20], axis=1)


def _driveway() -> np.ndarray:
    return np.array([(0, -20), (20, -20), (22, -17), (22, -8), (28, -8), (28, -17), (30, -20), (60, -20)], float)


@pytest.mark.parametrize("line", [_wave(), _driveway()], ids=["wave", "driveway"])
@pytest.mark.parametrize("gap", [0.0, 6.0])
def test_no_doubling_back(line: np.ndarray, gap: float) -> None:
    """Should give a line whose Fréchet distance is as small as its Hausdorff distance: it never doubles back."""
    middle = line[np.argmin(np.abs(line[:, 0] - 45))] if len(line) > 10 else np.array([45.0, -20.0])
    gaps = [(*middle, gap / 2)] if gap else []
    trace = traced(MadeFields([Edge(line)], gaps=gaps, noise_m=0.02), tuple(line[0] + 0.02 * (line[-1] - line[0])))
    truth, found = (shapely.segmentize(shapely.LineString(xy), STEP_M) for xy in (line, trace.points))
    hausdorff = shapely.hausdorff_distance(truth, found)
    assert hausdorff < 0.3
    assert shapely.frechet_distance(truth, found) < hausdorff + 2 * STEP_M
    assert found.is_simple
    assert found.length == pytest.approx(truth.length, rel=0.01)


def test_one_line_once() -> None:
    """Should cover its truth once: matched length of the trace over that of the truth is 1 (redundancy 0).

    Redundancy after Heipke et al. 1997 / Wiedemann 2003, from memory.
    """
    line = _wave()
    trace = traced(MadeFields([Edge(line)], noise_m=0.02), (30.0, 6 * np.sin(30 / 8) - 20))
    truth, found = shapely.LineString(line), shapely.LineString(trace.points)
    matched_found = found.intersection(truth.buffer(0.3)).length
    matched_truth = truth.intersection(found.buffer(0.3)).length
    assert abs(matched_found - matched_truth) / found.length < 0.01
    assert matched_truth / truth.length > 0.99


def test_circle_has_its_length_and_area() -> None:
    """Should close a circle of radius 4 m with circumference 2πr within 1 % and area πr² within 2 %."""
    a = np.radians(np.linspace(360, 0, 720))
    ring = np.stack([30 + 4 * np.cos(a), -30 + 4 * np.sin(a)], axis=1)
    trace = traced(MadeFields([Edge(ring)], noise_m=0.02), (34.2, -30.0))
    assert trace.closed
    assert shapely.LineString(trace.points).length == pytest.approx(2 * np.pi * 4, rel=0.01)
    assert shapely.Polygon(trace.points).area == pytest.approx(np.pi * 16, rel=0.02)
