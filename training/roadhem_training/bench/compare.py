"""Lines against a truth: exact buffer measures, and samples from which every other figure is pooled."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
import shapely
from numpy.typing import NDArray

from roadhem.accuracy.matching import SEARCH_M, UNSCORED_REACH_M, LineMeasures, measure_lines
from roadhem_training.bench.samples import Floats, Samples, along_lines, nearest, runs_of
from roadhem_training.bench.truth import HIDDEN, TOUCH_M, Lines, Truth, joined

BUFFERS_M = (0.15, 0.30)
RIGHT_M = BUFFERS_M[-1]
"""A place is right when the other line passes within this."""

PARALLEL_M = (0.30, 1.5)
PARALLEL_TURN = np.radians(15)
PARALLEL_RUN_M = 2.0
"""A line lies on a wrong parallel one where it runs this far beside the truth, heading the same way, this long."""

BRIDGE_LONGEST_M = 8.0
BRIDGE_WITHIN_M = 0.5


@dataclass(frozen=True)
class Sampled:
    """Samples of one side with their distance to the other.

    Attributes
    ----------
    distance : (n,) metres, inf where nothing is. weight : (n,) metres. kind, sight : (n,) of the truth there.
    wrong_parallel : (n,) bool, of traced lines alone.
    """

    distance: Floats
    weight: Floats
    kind: NDArray[Any]
    sight: NDArray[Any]
    wrong_parallel: NDArray[np.bool_]


@dataclass(frozen=True)
class Comparison:
    """One set's lines against its truth.

    Attributes
    ----------
    measures : one for each of BUFFERS_M. traced : the lines that count. places : where these samples lie.
    beside : all lines in the areas against all of the truth, hidden and unsure too. drawn : all of the truth.
    bridged : for each short hidden stretch, whether it was bridged.
    """

    measures: tuple[LineMeasures, ...]
    traced: Sampled
    places: Samples
    beside: Sampled
    drawn: Sampled
    bridged: NDArray[np.bool_]


def compare(lines: Lines, truth: Truth) -> Comparison:
    """Compare lines with a truth; both in metres."""
    scored, unscored = truth.lines[truth.scored], truth.lines[~truth.scored]
    measures = tuple(
        measure_lines(lines, scored, buffer_m=buffer, unscored=unscored, areas=truth.areas) for buffer in BUFFERS_M
    )
    places = counted(lines, truth)
    traced, beside = _traced(places, truth, truth.scored), _traced(in_areas(lines, truth), truth, truth.scored | True)
    return Comparison(measures, traced, places, beside, _drawn(lines, truth), bridged(lines, truth))


def in_areas(lines: Lines, truth: Truth) -> Samples:
    """Sample the lines inside the areas."""
    samples = along_lines(lines)
    return samples.pick(truth.contains(samples.xy))


def counted(lines: Lines, truth: Truth) -> Samples:
    """Sample the lines inside the areas; what only an unscored edge lies beside is left out."""
    samples = in_areas(lines, truth)
    scored = nearest(samples, truth.lines[truth.scored]).distance <= RIGHT_M
    doubtful = nearest(samples, truth.lines[~truth.scored]).distance <= UNSCORED_REACH_M
    return samples.pick(scored | ~doubtful)


def wrong_parallel(samples: Samples, lines: Lines) -> NDArray[np.bool_]:
    """Mark the samples that run beside one of `lines` without being on any."""
    near = nearest(samples, lines)
    beside = (near.distance > PARALLEL_M[0]) & (near.distance <= PARALLEL_M[1]) & (near.turn <= PARALLEL_TURN)
    return runs_of(beside, samples.line, samples.weight, PARALLEL_RUN_M)


def bridged(lines: Lines, truth: Truth) -> NDArray[np.bool_]:
    """Tell, for each hidden stretch up to BRIDGE_LONGEST_M between visible ones, whether lines run all along it."""
    short = [line for line in joined(truth.lines[truth.sight == HIDDEN]) if _between(line, truth)]
    samples = along_lines(np.array(short, dtype=object))
    missed = nearest(samples, lines).distance > BRIDGE_WITHIN_M
    return np.bincount(samples.line, weights=missed, minlength=len(short)) == 0


def _between(line: Any, truth: Truth) -> bool:
    if not 0 < line.length <= BRIDGE_LONGEST_M:
        return False
    visible = truth.lines[truth.scored]
    ends = shapely.points([line.coords[0], line.coords[-1]])
    return all((shapely.distance(visible, end) <= TOUCH_M).any() for end in ends)


def _traced(samples: Samples, truth: Truth, against: NDArray[np.bool_]) -> Sampled:
    near = nearest(samples, truth.lines)
    distance = nearest(samples, truth.lines[against]).distance
    beside = wrong_parallel(samples, truth.lines)
    return Sampled(distance, samples.weight, truth.kind[near.line], truth.sight[near.line], beside)


def _drawn(lines: Lines, truth: Truth) -> Sampled:
    samples = in_areas(truth.lines, truth)
    distance = nearest(samples, lines).distance
    never = np.zeros(len(distance), dtype=bool)
    return Sampled(distance, samples.weight, truth.kind[samples.line], truth.sight[samples.line], never)


def lateral(traced: Sampled, share: float) -> float:
    """Quantile of the distances of traced places to the truth; those beyond SEARCH_M count as outside, inf."""
    if not len(traced.distance):
        return float("nan")
    order = np.argsort(traced.distance)
    total = np.cumsum(traced.weight[order])
    value = traced.distance[order][np.searchsorted(total, share * total[-1])]
    return float(value) if value <= SEARCH_M else float("inf")


def line_figures(found: Sequence[Comparison]) -> dict[str, float]:
    """Pool comparisons by length."""
    figures: dict[str, float] = {}
    for n, buffer in enumerate(BUFFERS_M):
        parts = [one.measures[n] for one in found]
        reference, extracted = sum(p.reference_m for p in parts), sum(p.lines_m for p in parts)
        right_reference = sum(p.matched_reference_m for p in parts)
        right = sum(p.matched_lines_m for p in parts)
        figures[f"completeness at {buffer:.2f} m"] = share(right_reference, reference)
        figures[f"correctness at {buffer:.2f} m"] = share(right, extracted)
        figures["truth, m"], figures["traced, m"] = reference, extracted
        figures["redundancy"] = share(right - right_reference, extracted)
    traced = pooled([one.traced for one in found])
    bridges = np.concatenate([one.bridged for one in found])
    return {
        **figures,
        "lateral median, m": lateral(traced, 0.5),
        "lateral 95 %, m": lateral(traced, 0.95),
        "on a wrong parallel line": share(traced.weight[traced.wrong_parallel].sum(), traced.weight.sum()),
        "hidden stretches": len(bridges),
        "hidden stretches bridged": share(bridges.sum(), len(bridges)),
    }


def class_figures(found: Sequence[Comparison], by: str) -> dict[str, dict[str, float]]:
    """Pool by a class of the truth, "kind" or "sight": what was found of it, and how far off lines beside it are."""
    drawn, traced = pooled([one.drawn for one in found]), pooled([one.beside for one in found])
    return {
        str(name): _class(_where(drawn, getattr(drawn, by) == name), _where(traced, getattr(traced, by) == name))
        for name in sorted({*getattr(drawn, by)})
    }


def _class(drawn: Sampled, traced: Sampled) -> dict[str, float]:
    length = drawn.weight.sum()
    figures = {"truth, m": float(length)}
    for buffer in BUFFERS_M:
        figures[f"completeness at {buffer:.2f} m"] = share(drawn.weight[drawn.distance <= buffer].sum(), length)
    near = _where(traced, traced.distance <= SEARCH_M)
    return {**figures, "lateral median, m": lateral(near, 0.5), "lateral 95 %, m": lateral(near, 0.95)}


def pooled(parts: Sequence[Sampled]) -> Sampled:
    """Put samples one after another."""
    names = ("distance", "weight", "kind", "sight", "wrong_parallel")
    return Sampled(*(np.concatenate([getattr(part, name) for part in parts]) for name in names))


def share(part: float, whole: float) -> float:
    """Return part / whole, NaN where there is nothing."""
    return float(part / whole) if whole > 0 else float("nan")


def _where(these: Sampled, chosen: NDArray[np.bool_]) -> Sampled:
    names = ("distance", "weight", "kind", "sight", "wrong_parallel")
    return Sampled(*(getattr(these, name)[chosen] for name in names))


