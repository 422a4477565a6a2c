"""Line measures against worked examples, and shape distances against their closed forms.

Definitions: Heipke, Mayer, Wiedemann, Jamet 1997 and Wiedemann 2003 (abstracts read; formulas from memory). The
numbers of W1 to W4 and of the shape distances are [built] from the definitions: anyone can recompute them.
"""

from __future__ import annotations

import math

import numpy as np
import pytest
import shapely
from shapely import LineString, Point

from roadhem.accuracy.intervals import Segments, within
from roadhem.accuracy.matching import LineMeasures, measure_lines

STRAIGHT = [LineString([(0, 0), (100, 0)])]
PARTLY = [LineString([(20, 0.4), (100, 0.4)]), LineString([(0, 5), (20, 5)])]
CROSSING = [LineString([(50, -5), (50, 5)])]


def measured(reference: list[LineString], lines: list[LineString], buffer_m: float, **options: float) -> LineMeasures:
    """Compare plain lists."""
    return measure_lines(
        np.array(lines, dtype=object), np.array(reference, dtype=object), buffer_m=buffer_m, **options
    )


@pytest.mark.parametrize(
    ("lines", "buffer_m", "matched", "completeness", "correctness", "quality", "redundancy", "rms"),
    [
        (PARTLY, 1.0, (80.9165, 80), 0.809165, 0.8, 0.671798, -0.009165, 0.4),  # W1
        ([LineString([(0, 0), (100, 1)])], 0.5, (50.0025, 50.0025), 0.500025, 0.5, 0.333344, 0, 0.288675),  # W2
        (CROSSING, 1.0, (2, 2), 0.02, 0.2, 0.018519, 0, 0.577350),  # W3
        ([LineString([(0, y), (100, y)]) for y in (0.3, -0.3)], 1.0, (100, 200), 1, 1, 1, 0.5, 0.3),  # W4
    ],
    ids=["W1", "W2", "W3", "W4"],
)
def test_worked_examples(
    lines: list[LineString],
    buffer_m: float,
    matched: tuple[float, float],
    completeness: float,
    correctness: float,
    quality: float,
    redundancy: float,
    rms: float,
) -> None:
    """Should give every printed digit of the worked examples [built]."""
    found = measured(STRAIGHT, lines, buffer_m)
    assert (found.matched_reference_m, found.matched_lines_m) == pytest.approx(matched, abs=5e-5)
    assert (found.completeness, found.correctness) == pytest.approx((completeness, correctness), abs=5e-7)
    assert (found.quality, found.redundancy) == pytest.approx((quality, redundancy), abs=6e-7)
    assert found.rms_m == pytest.approx(rms, abs=6e-7)


def test_nothing_matched_has_no_rms() -> None:
    """Should say None, not 0, where no line lies within the buffer (W1b [built])."""
    found = measured(STRAIGHT, PARTLY, 0.3)
    assert (found.completeness, found.correctness, found.quality) == (0, 0, 0)
    assert found.rms_m is None


def test_heading_limit_refuses_a_crossing() -> None:
    """Should match nothing of a crossing line once headings must agree (W3h [built])."""
    found = measured(STRAIGHT, CROSSING, 1.0, heading_limit=89.0)
    assert (found.matched_reference_m, found.matched_lines_m) == (0, 0)
    assert found.rms_m is None


def test_round_caps_not_flat_ones() -> None:
    """Should gain the cap's sqrt(1 - 0.16) m over flat caps at the one free end (W1 against W1f [built])."""
    assert measured(STRAIGHT, PARTLY, 1.0).matched_reference_m - 80.0 == pytest.approx(math.sqrt(1 - 0.16), abs=1e-9)


def test_matched_lengths_agree_with_buffer_polygons() -> None:
    """Should agree with shapely's round buffers, 2e-5 short of a circle at 256 sides a quarter."""
    rng = np.random.default_rng(3)
    lines = [LineString(rng.uniform(0, 40, (6, 2))) for _ in range(25)]
    reference = [LineString(rng.uniform(0, 40, (6, 2))) for _ in range(25)]
    found, truth = (Segments.of(np.array(some, dtype=object)) for some in (lines, reference))
    exact = within(found, truth, 0.7)
    polygon = shapely.union_all([line.buffer(0.7, quad_segs=256) for line in reference])
    assert exact.length == pytest.approx(sum(line.intersection(polygon).length for line in lines), rel=2e-5)


def test_rms_agrees_with_dense_sampling() -> None:
    """Should agree with the distances of points every millimetre, by shapely."""
    line = LineString([(0, 0.1), (10, -0.2), (20, 0.25), (30, 0)])
    reference = LineString([(-1, 0), (12, 0.05), (31, 0)])
    places = shapely.line_interpolate_point(line, np.arange(0.0005, line.length, 0.001))
    distance = shapely.distance(places, reference)
    rms = float(np.sqrt(np.mean(distance[distance <= 0.15] ** 2)))
    assert measured([reference], [line], 0.15).rms_m == pytest.approx(rms, abs=2e-5)


PAIRS = {
    "parallel": ([(0, 0), (10, 0)], [(0, 1), (10, 1)], 1.0, 1.0),
    "gable": ([(0, 0), (10, 0)], [(0, 0), (5, 3), (10, 0)], 3.0, 3.0),
    "doubling back": ([(0, 0), (10, 0)], [(0, 0), (10, 0), (0, 0), (10, 0)], 0.0, 5.0),
    "reversed": ([(0, 0), (10, 0)], [(10, 0), (0, 0)], 0.0, 10.0),
}


@pytest.mark.parametrize(("one", "other", "hausdorff", "frechet"), PAIRS.values(), ids=PAIRS)
def test_shape_distances(
    one: list[tuple[float, float]], other: list[tuple[float, float]], hausdorff: float, frechet: float
) -> None:
    """Should have shapely's distances agree with the closed forms [built], so that tracer tests may lean on them."""
    p, q = LineString(one), LineString(other)
    assert shapely.hausdorff_distance(p, q, densify=0.01) == pytest.approx(hausdorff, abs=1e-9)
    dense_p, dense_q = p.segmentize(0.1), q.segmentize(0.1)
    assert shapely.frechet_distance(dense_p, dense_q) == pytest.approx(frechet, abs=0.051)


def test_directed_hausdorff_of_a_gable() -> None:
    """Should be 5 * 3 / sqrt(34) from the base to the gable [built], by the distances used for lateral errors."""
    gable = LineString([(0, 0), (5, 3), (10, 0)])
    assert gable.distance(Point(5, 0)) == pytest.approx(15 / math.sqrt(34), abs=1e-9)


def test_pooling_over_tiles_beats_averaging() -> None:
    """Should pool lengths: quality is no closed form of mean figures (Wiedemann 2003, [built])."""
    far = [LineString([(0, 1000), (300, 1000)])]
    found = measured([*STRAIGHT, *far], [*PARTLY, LineString([(0, 1000.5), (300, 1000.5)])], 1.0)
    assert found.quality == pytest.approx((80 + 300) / (400 + 19.0835), abs=1e-6)
