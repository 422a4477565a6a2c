"""The best and the worst cases: which places to show."""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
import shapely

from roadhem_training.bench.compare import RIGHT_M
from roadhem_training.bench.findings import Findings
from roadhem_training.bench.samples import Floats, Samples, along_lines, nearest
from roadhem_training.bench.truth import Lines

SHOWN = 10
LEAST_CASE_M = 10.0
LEAST_BEST_M = 20.0
WINDOW_M = (24.0, 60.0)
ROUND_M = 8.0
"""Least and greatest side of a picture, and what it shows around the case."""


@dataclass(frozen=True)
class Case:
    """A place worth a look. index : of the set among the findings; badness : larger is worse; side : metres."""

    index: int
    words: str
    badness: float
    centre: tuple[float, float]
    side: float


def worst_cases(found: Sequence[Findings]) -> list[Case]:
    """Return the edges with the longest missed length and the lines with the longest wrong length, apart in place."""
    cases = [case for n, one in enumerate(found) for case in _missed(n, one) + _wrong(n, one)]
    return _apart(sorted(cases, key=lambda case: -case.badness))


def best_cases(found: Sequence[Findings]) -> list[Case]:
    """Return the wholly right edges with the least 95 % lateral distance."""
    cases = [case for n, one in enumerate(found) for case in _right(n, one)]
    return _apart(sorted(cases, key=lambda case: case.badness))


def _missed(n: int, one: Findings) -> list[Case]:
    samples = along_lines(_long(one, LEAST_CASE_M))
    bad = nearest(samples, one.lines).distance > RIGHT_M
    return [_case(n, f"{length:.0f} m missed", length, xy) for length, xy in _bad_lines(samples, bad)]


def _wrong(n: int, one: Findings) -> list[Case]:
    samples, bad = one.comparison.places, one.comparison.traced.distance > RIGHT_M
    return [_case(n, f"{length:.0f} m wrong", length, xy) for length, xy in _bad_lines(samples, bad)]


def _right(n: int, one: Findings) -> list[Case]:
    edges = _long(one, LEAST_BEST_M)
    samples = along_lines(edges)
    distance = nearest(samples, one.lines).distance
    cases = []
    for line in np.unique(samples.line):
        mine = samples.line == line
        p95 = float(np.percentile(distance[mine], 95))
        if distance[mine].max() <= RIGHT_M:
            words = f"{edges[line].length:.0f} m right, 95 % within {p95:.2f} m"
            cases.append(_case(n, words, p95, samples.xy[mine]))
    return cases


def _long(one: Findings, least_m: float) -> Lines:
    edges = one.truth.whole_edges()
    return edges[shapely.length(edges) >= least_m]


def _bad_lines(samples: Samples, bad: Any) -> Iterable[tuple[float, Floats]]:
    """Yield, for each line with bad places, their length and the places of the longest bad run."""
    for line in np.unique(samples.line[bad]):
        mine = np.flatnonzero(samples.line == line)
        runs = np.split(mine, np.flatnonzero(np.diff(bad[mine].astype(int))) + 1)
        longest = max((run for run in runs if bad[run[0]]), key=len)
        yield float(samples.weight[mine][bad[mine]].sum()), samples.xy[longest]


def _case(n: int, words: str, badness: float, xy: Floats) -> Case:
    low, high = xy.min(axis=0), xy.max(axis=0)
    side = float(np.clip((high - low).max() + 2 * ROUND_M, *WINDOW_M))
    middle = xy[len(xy) // 2] if (high - low).max() > WINDOW_M[1] else (low + high) / 2
    return Case(n, words, badness, (float(middle[0]), float(middle[1])), side)


def _apart(cases: Sequence[Case]) -> list[Case]:
    """Take the first ones whose pictures do not show each other's middle."""
    taken: list[Case] = []
    for case in cases:
        if len(taken) == SHOWN:
            break
        if not any(_sees(other, case) or _sees(case, other) for other in taken):
            taken.append(case)
    return taken


def _sees(one: Case, other: Case) -> bool:
    apart = max(abs(a - b) for a, b in zip(one.centre, other.centre, strict=True))
    return one.index == other.index and apart < one.side / 2
