"""What the figures should be, and by how much they fall short."""

from __future__ import annotations

import math
from dataclasses import dataclass

from roadhem_training.bench.sets import INVENTED, LIDAR, REAL


@dataclass(frozen=True)
class Goal:
    """A limit: the figure should be at least it, or at most it."""

    limit: float
    at_most: bool = False

    def short_by(self, figure: float) -> float:
        """Return by how much a figure misses the goal; 0 where it is reached, NaN where there is no figure."""
        if math.isnan(figure):
            return math.nan
        return max(0.0, figure - self.limit if self.at_most else self.limit - figure)

    def __str__(self) -> str:
        return f"{'≤' if self.at_most else '≥'} {self.limit:g}"


GOALS: dict[str, dict[str, Goal]] = {
    INVENTED: {
        "completeness at 0.15 m": Goal(0.90),
        "correctness at 0.15 m": Goal(0.93),
        "completeness at 0.30 m": Goal(0.95),
        "correctness at 0.30 m": Goal(0.97),
        "redundancy": Goal(0.02, at_most=True),
        "lateral median, m": Goal(0.04, at_most=True),
        "lateral 95 %, m": Goal(0.15, at_most=True),
        "on a wrong parallel line": Goal(0.02, at_most=True),
        "hidden stretches bridged": Goal(0.80),
        "corrections per 100 m": Goal(0.8, at_most=True),
        "unplaced far from any edge": Goal(0.95),
        "unplaced on a lane line": Goal(0.90),
        "Spearman": Goal(0.4),
    },
    REAL: {
        "completeness at 0.30 m": Goal(0.80),
        "correctness at 0.30 m": Goal(0.93),
        "lateral median, m": Goal(0.10, at_most=True),
        "unplaced far from any edge": Goal(0.95),
    },
    LIDAR: {},
}

COVERED = {"68%": (0.63, 0.73), "95%": (0.92, 0.97)}
"""Between which shares the intervals should hold the errors, in each fifth of the spread too."""
