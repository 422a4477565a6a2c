"""The baselines tuned on the very sets they are measured on, which favours them, and their figures."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass
from typing import Any

import shapely

from roadhem_training.bench.baselines import (
    PATH_TRIED,
    SKELETON_TRIED,
    click_count,
    minimal_paths,
    skeleton_lines,
)
from roadhem_training.bench.compare import compare, line_figures, share
from roadhem_training.bench.findings import Findings
from roadhem_training.bench.truth import Lines

PATH, SKELETON = "minimal path between clicks", "threshold and skeleton"


@dataclass(frozen=True)
class Tuned:
    """A baseline with every setting that was tried.

    Attributes
    ----------
    name : of the baseline. log : (setting, line figures) of each. best : index into the log.
    """

    name: str
    log: list[tuple[str, dict[str, float]]]
    best: int

    @property
    def figures(self) -> dict[str, float]:
        """Line figures at the best setting."""
        return self.log[self.best][1]


def tuned_rivals(found: Sequence[Findings]) -> list[Tuned]:
    """Try every setting of both baselines on sets; the best has the largest completeness + correctness at 0.30 m."""
    edges = [one.truth.whole_edges() for one in found]
    clicks = {"clicks per 100 m": _clicks_per_100_m(edges)}
    of_set = {id(one): lines for one, lines in zip(found, edges, strict=True)}
    return [
        _tune(PATH, PATH_TRIED, found, lambda one, setting: minimal_paths(one.near, of_set[id(one)], setting), clicks),
        _tune(SKELETON, SKELETON_TRIED, found, lambda one, setting: skeleton_lines(one.near, setting), {}),
    ]


def _tune(
    name: str,
    settings: Sequence[Any],
    found: Sequence[Findings],
    draw: Callable[[Findings, Any], Lines],
    more: dict[str, float],
) -> Tuned:
    log = []
    for setting in settings:
        figures = line_figures([compare(draw(one, setting), one.truth) for one in found])
        log.append((str(setting), {**figures, **more}))
    merit = [f["completeness at 0.30 m"] + f["correctness at 0.30 m"] for _, f in log]
    return Tuned(name, log, max(range(len(log)), key=merit.__getitem__))


def _clicks_per_100_m(edges: Sequence[Lines]) -> float:
    length = sum(float(shapely.length(lines).sum()) for lines in edges)
    return share(sum(click_count(lines) for lines in edges), length / 100)
