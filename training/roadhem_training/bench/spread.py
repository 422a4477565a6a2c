"""Whether the stated spread holds what it promises."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
import scipy.stats
from numpy.typing import NDArray

from roadhem.accuracy.matching import SEARCH_M, UNSCORED_REACH_M
from roadhem_training.bench.run import Traced
from roadhem_training.bench.samples import Floats, along_lines, nearest
from roadhem_training.bench.truth import Truth

EVERY_M = 10.0
"""Neighbouring places are not independent; one in this length counts."""
SHARES = (0.68, 0.95)
FIFTHS = 5
LEAST_SPREAD_M = 0.001


@dataclass(frozen=True)
class Misses:
    """Stated spread (1 sigma) and lateral error of places along lines, metres; an error beyond SEARCH_M is inf."""

    spread: Floats
    error: Floats

    @classmethod
    def joined(cls, parts: Sequence[Misses]) -> Misses:
        """Put the places of several sets together."""
        return cls(np.concatenate([p.spread for p in parts]), np.concatenate([p.error for p in parts]))


def misses(traced: Traced, truth: Truth) -> Misses:
    """Take a place every EVERY_M along the lines, in the areas; beside edges that are not scored none counts."""
    places = along_lines(traced.lines, EVERY_M)
    spread = np.array([_spread_at(traced, n, at) for n, at in zip(places.line, places.along, strict=True)])
    error = nearest(places, truth.lines[truth.scored]).distance
    doubtful = nearest(places, truth.lines[~truth.scored]).distance <= UNSCORED_REACH_M
    chosen = ~doubtful | (error <= UNSCORED_REACH_M)
    chosen &= truth.contains(places.xy)
    return Misses(spread[chosen], np.where(error <= SEARCH_M, error, np.inf)[chosen])


def _spread_at(traced: Traced, line: int, along: float) -> float:
    stretch = np.searchsorted(traced.spread_from[line], along, side="right") - 1
    return max(float(traced.spread[line][max(stretch, 0)]), LEAST_SPREAD_M)


def clopper_pearson(hits: int, count: int, level: float = 0.95) -> tuple[float, float]:
    """Exact bounds of a share from `hits` of `count` (Clopper & Pearson 1934), by quantiles of beta distributions."""
    tail = (1 - level) / 2
    low = scipy.stats.beta.ppf(tail, hits, count - hits + 1) if hits else 0.0
    high = scipy.stats.beta.ppf(1 - tail, hits + 1, count - hits) if hits < count else 1.0
    return float(low), float(high)


def coverage(these: Misses, share: float) -> dict[str, Any]:
    """Share of errors inside the central interval of a normal distribution of the stated spread."""
    half = scipy.stats.norm.ppf(0.5 + share / 2)
    hits, count = int((these.error <= half * these.spread).sum()), len(these.error)
    low, high = clopper_pearson(hits, count)
    return {"held": hits / count if count else float("nan"), "low": low, "high": high, "places": count}


def fifths(these: Misses) -> list[Misses]:
    """Cut the places into five equal parts, from the least spread to the largest."""
    order = np.argsort(these.spread, kind="stable")
    return [Misses(these.spread[part], these.error[part]) for part in np.array_split(order, FIFTHS)]


def likelihood(these: Misses) -> float:
    """Mean negative log likelihood of the errors, nats; an error counts as SEARCH_M at most.

    0.5 ln(2 pi s^2) + e^2 / (2 s^2) (Nix & Weigend 1994).
    """
    error = np.minimum(these.error, SEARCH_M)
    return float(np.mean(0.5 * np.log(2 * np.pi * these.spread**2) + error**2 / (2 * these.spread**2)))


def rank(these: Misses) -> float:
    """Spearman's rank correlation of spread and error; NaN where either never varies."""
    if np.ptp(these.spread) == 0 or np.ptp(np.minimum(these.error, SEARCH_M)) == 0:
        return float("nan")
    return float(scipy.stats.spearmanr(these.spread, np.minimum(these.error, SEARCH_M)).statistic)


def sparsification(error: Floats, spread: Floats) -> float:
    """Mean excess of the error left, removing the most uncertain first, over the best possible; in the error's unit.

    AUSE of Ilg et al. (2018): the mean, over removing 0 .. n - 1 places, of the mean error left when sorted by spread
    minus that when sorted by error.
    """
    return float(np.mean(_left(error[np.argsort(spread, kind="stable")]) - _left(np.sort(error))))


def _left(error: Floats) -> Floats:
    """Mean of the first n, for n = all .. 1."""
    return (np.cumsum(error) / np.arange(1, len(error) + 1))[::-1]


def held_shares(these: Misses, shares: NDArray[np.float64]) -> Floats:
    """Share of errors inside the central interval for each nominal share: the reliability curve."""
    half = scipy.stats.norm.ppf(0.5 + shares / 2)
    return np.array([(these.error <= h * these.spread).mean() for h in half])


def spread_figures(these: Misses) -> dict[str, Any]:
    """Everything about the spread, by name."""
    error = np.minimum(these.error, SEARCH_M)
    return {
        "places": len(error),
        "coverage": {f"{share:.0%}": coverage(these, share) for share in SHARES},
        "fifths": [
            {
                "spread from, m": float(part.spread.min(initial=np.inf)),
                "spread to, m": float(part.spread.max(initial=0)),
                **{f"{share:.0%}": coverage(part, share) for share in SHARES},
            }
            for part in fifths(these)
        ],
        "Spearman": rank(these),
        "NLL, nats": likelihood(these),
        "AUSE, m": sparsification(error, these.spread),
    }
