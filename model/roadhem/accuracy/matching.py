"""Buffer measures of lines against a reference, and lateral error.

Heipke, Mayer, Wiedemann, Jamet (1997) and Wiedemann (2003) define completeness, correctness, quality, redundancy, RMS
and gaps. Buffers here are round-capped: a part matches when its true distance to the other lines is at most b. (With
flat caps a reference that runs on past the end of an extracted line would not gain the cap's length.)
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np
import shapely
from numpy.typing import NDArray

from roadhem.accuracy.intervals import Segments, Spans, intersect, subtract, whole, within

BUFFER_M = 0.30
SEARCH_M = 2.0
"""Farthest that a line's point still counts as a misplaced point of a reference edge."""
UNSCORED_REACH_M = 1.0
"""A line this close to a reference that is not scored (hidden, unsure) is no error."""
SAMPLE_M = 0.10
"""Step of the lateral samples."""
LEAST_GAP_M = 0.001
"""Shorter unmatched pieces of the reference are rounding, not gaps."""
GAUSS_NODES = np.array([0.5 - np.sqrt(3 / 20), 0.5, 0.5 + np.sqrt(3 / 20)])
GAUSS_WEIGHTS = np.array([5, 8, 5]) / 18


@dataclass(frozen=True)
class LineMeasures:
    """How lines compare with a reference; ratios of pooled lengths, None where nothing can be divided.

    Attributes
    ----------
    buffer_m : the buffer; figures without it say nothing.
    completeness, correctness, quality, redundancy : as published; `redundancy` is negative where caps favour the
        reference.
    rms_m : root mean square distance of the matched lines to the reference.
    lateral_median_m, lateral_p95_m : of the distances, at most SEARCH_M, of points along the lines to the reference.
    reference_m, lines_m : lengths that count; matched_reference_m, matched_lines_m : parts within the buffer.
    unscored_lines_m : length of lines left out because only an unscored reference lies there.
    gaps, gaps_per_km, mean_gap_m : unmatched pieces of the reference.
    """

    buffer_m: float
    completeness: float | None
    correctness: float | None
    quality: float | None
    redundancy: float | None
    rms_m: float | None
    lateral_median_m: float | None
    lateral_p95_m: float | None
    reference_m: float
    lines_m: float
    matched_reference_m: float
    matched_lines_m: float
    unscored_lines_m: float
    gaps: int
    gaps_per_km: float | None
    mean_gap_m: float | None


def measure_lines(
    lines: NDArray[Any],
    reference: NDArray[Any],
    *,
    buffer_m: float = BUFFER_M,
    unscored: NDArray[Any] | None = None,
    areas: Any = None,
    heading_limit: float | None = None,
) -> LineMeasures:
    """Compare lines with a reference.

    Parameters
    ----------
    lines, reference : shapely geometries in metres.
    unscored : reference lines that are neither missed nor wrong (hidden, unsure).
    areas : a polygonal geometry; only what lies in it counts, though it may match what lies outside.
    heading_limit : degrees; lines whose axes differ by more do not match.
    """
    found, truth = Segments.of(lines), Segments.of(shapely.get_parts(_joined(reference)))
    doubtful = Segments.of(np.asarray([] if unscored is None else unscored, dtype=object))
    counted_found, counted_truth = _in_areas(found, areas), _in_areas(truth, areas)

    matched_found = intersect(counted_found, within(found, truth, buffer_m, heading_limit))
    matched_truth = intersect(counted_truth, within(truth, found, buffer_m, heading_limit))
    near_doubtful = intersect(counted_found, within(found, doubtful, UNSCORED_REACH_M))
    left_out = subtract(near_doubtful, matched_found)
    scored_found = subtract(counted_found, left_out)

    lateral = _lateral(scored_found, found, truth)
    gap_m = _gaps(subtract(counted_truth, matched_truth), truth)
    return _measures(
        buffer_m, counted_truth.length, scored_found.length, matched_truth.length, matched_found.length,
        left_out.length, _rms(matched_found, found, truth), lateral, gap_m,
    )  # fmt: skip


def _measures(
    buffer_m: float, reference: float, extracted: float, matched_reference: float, matched_extracted: float,
    unscored: float, rms: float | None, lateral: NDArray[np.float64], gap_m: NDArray[np.float64],
) -> LineMeasures:  # fmt: skip
    missed = reference - matched_reference
    return LineMeasures(
        buffer_m=buffer_m,
        completeness=_ratio(matched_reference, reference),
        correctness=_ratio(matched_extracted, extracted),
        quality=_ratio(matched_extracted, extracted + missed),
        redundancy=_ratio(matched_extracted - matched_reference, extracted),
        rms_m=rms,
        lateral_median_m=float(np.median(lateral)) if len(lateral) else None,
        lateral_p95_m=float(np.percentile(lateral, 95)) if len(lateral) else None,
        reference_m=reference,
        lines_m=extracted,
        matched_reference_m=matched_reference,
        matched_lines_m=matched_extracted,
        unscored_lines_m=unscored,
        gaps=len(gap_m),
        gaps_per_km=_ratio(len(gap_m), reference / 1000),
        mean_gap_m=float(gap_m.mean()) if len(gap_m) else None,
    )


def _ratio(part: float, all_of: float) -> float | None:
    return part / all_of if all_of > 0 else None


def _joined(reference: NDArray[Any]) -> Any:
    """Join stretches that share an end, so that a gap across it counts once."""
    return shapely.line_merge(shapely.multilinestrings(shapely.get_parts(shapely.get_parts(reference))))


def _in_areas(these: Segments, areas: Any) -> Spans:
    """Return the parts of the segments inside the areas; all of them where there are none."""
    if areas is None:
        return whole(these, np.ones(len(these.line), dtype=bool))
    shapely.prepare(areas)
    cut = shapely.intersection(these.shapes, areas)
    parts, segment = shapely.get_parts(cut, return_index=True)
    straight = shapely.length(parts) > 0
    parts, segment = parts[straight], segment[straight]
    ends = np.stack([shapely.get_coordinates(shapely.get_point(parts, place)) for place in (0, -1)], axis=1)
    along = np.sort(np.hypot(*np.moveaxis(ends - these.start[segment][:, None], -1, 0)), axis=1)
    return Spans(segment, along[:, 0], along[:, 1])


def _gaps(missed: Spans, truth: Segments) -> NDArray[np.float64]:
    """Length of each unmatched piece of the reference; pieces that touch across a vertex are one."""
    if not len(missed.segment):
        return np.empty(0)
    length = truth.length[missed.segment]
    goes_on = (
        (missed.segment[1:] == missed.segment[:-1] + 1)
        & (truth.line[missed.segment[1:]] == truth.line[missed.segment[:-1]])
        & (missed.high[:-1] >= length[:-1] - 1e-9)
        & (missed.low[1:] <= 1e-9)
    )
    gap = np.cumsum(np.append(False, ~goes_on))
    piece = np.bincount(gap, weights=missed.high - missed.low)
    return np.asarray(piece[piece > LEAST_GAP_M], dtype=np.float64)


def _rms(spans: Spans, found: Segments, truth: Segments) -> float | None:
    """Root of the mean squared distance along the spans.

    The squared distance is quadratic between changes of the nearest segment, which three Gauss nodes per piece of at
    most SAMPLE_M integrate exactly; only a piece with a change in it is approximate.
    """
    if spans.length <= 0:
        return None
    segment, low, step = _pieces(spans)
    total = 0.0
    for node, weight in zip(GAUSS_NODES, GAUSS_WEIGHTS, strict=True):
        distance = _distances(_places(found, segment, low + node * step), truth)
        total += float((weight * step * distance**2).sum())
    return float(np.sqrt(total / spans.length))


def _lateral(spans: Spans, found: Segments, truth: Segments) -> NDArray[np.float64]:
    """Distances to the reference of points every SAMPLE_M, those beyond SEARCH_M left out."""
    if spans.length <= 0 or not len(truth.line):
        return np.empty(0)
    segment, low, step = _pieces(spans)
    distance = _distances(_places(found, segment, low + step / 2), truth)
    return distance[distance <= SEARCH_M]


def _pieces(spans: Spans) -> tuple[NDArray[np.int64], NDArray[np.float64], NDArray[np.float64]]:
    """Cut spans into equal pieces of at most SAMPLE_M: their segment, start and length."""
    length = spans.high - spans.low
    count = np.maximum(np.ceil(length / SAMPLE_M), 1).astype(np.int64)
    rank = np.arange(count.sum()) - np.repeat(np.cumsum(count) - count, count)
    step = np.repeat(length / count, count)
    return np.repeat(spans.segment, count), np.repeat(spans.low, count) + rank * step, step


def _places(these: Segments, segment: NDArray[np.int64], at: NDArray[np.float64]) -> NDArray[np.float64]:
    share = (at / these.length[segment])[:, None]
    return these.start[segment] + share * (these.end - these.start)[segment]


def _distances(places: NDArray[np.float64], truth: Segments) -> NDArray[np.float64]:
    tree = shapely.STRtree(truth.shapes)
    (_, _), distance = tree.query_nearest(shapely.points(places), all_matches=False, return_distance=True)
    return np.asarray(distance)
