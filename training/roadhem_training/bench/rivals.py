"""The baselines tuned on the very sets they are measured on, which favours them, and their figures."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

import shapely

from roadhem.accuracy.matching import measure_lines
from roadhem_training.bench.baselines import (
    PATH_TRIED,
    SKELETON_TRIED,
    click_count,
    minimal_paths,
    skeleton_lines,
)
from roadhem_training.bench.compare import RIGHT_M, compare, line_figures, share
from roadhem_training.bench.findings import Findings
from roadhem_training.bench.truth import Lines
from roadhem_training.score import pooled

PATH, SKELETON = "minimal path between clicks", "threshold and skeleton"


@dataclass(frozen=True)
class Logged:
    """A setting that was tried, with completeness and correctness at RIGHT_M."""

    setting: str
    completeness: float
    correctness: float


@dataclass(frozen=True)
class Tuned:
    """A baseline. log : every setting that was tried. best : index into the log. figures : at the best setting."""

    name: str
    log: list[Logged]
    best: int
    figures: dict[str, float]


def tuned_rivals(found: Sequence[Findings]) -> list[Tuned]:
    """Try every setting of both baselines on sets; the best has the largest completeness + correctness at 0.30 m."""
    edges = [one.truth.whole_edges(across_hidden=True) for one in found]
    clicks = {"clicks per 100 m": _clicks_per_100_m(edges)}
    paths = [[minimal_paths(one.near, lines, s) for one, lines in zip(found, edges, strict=True)] for s in PATH_TRIED]
    thin = [[skeleton_lines(one.near, s) for one in found] for s in SKELETON_TRIED]
    return [_tuned(PATH, PATH_TRIED, paths, found, clicks), _tuned(SKELETON, SKELETON_TRIED, thin, found, {})]


def _tuned(
    name: str,
    settings: Sequence[Any],
    drawn: Sequence[Sequence[Lines]],
    found: Sequence[Findings],
    more: dict[str, float],
) -> Tuned:
    log = [_logged(setting, lines, found) for setting, lines in zip(settings, drawn, strict=True)]
    best = max(range(len(log)), key=lambda n: log[n].completeness + log[n].correctness)
    compared = [compare(lines, one.truth) for lines, one in zip(drawn[best], found, strict=True)]
    return Tuned(name, log, best, {**line_figures(compared), **more})


def _logged(setting: Any, drawn: Sequence[Lines], found: Sequence[Findings]) -> Logged:
    parts = []
    for lines, one in zip(drawn, found, strict=True):
        truth = one.truth
        scored, unscored = truth.lines[truth.scored], truth.lines[~truth.scored]
        parts.append(measure_lines(lines, scored, buffer_m=RIGHT_M, unscored=unscored, areas=truth.areas))
    return Logged(str(setting), *pooled(parts))


def _clicks_per_100_m(edges: Sequence[Lines]) -> float:
    length = sum(float(shapely.length(lines).sum()) for lines in edges)
    return share(sum(click_count(lines) for lines in edges), length / 100)
