"""Colours of pictures: five steps of spread that people with any colour vision tell apart on photographs."""

from __future__ import annotations

from itertools import pairwise

SPREAD_LIMITS_M = (0.03, 0.06, 0.12, 0.25)
"""Upper limits of the steps but the last."""

SPREAD_COLOURS = ("#3fd0ff", "#fff48a", "#f58a07", "#cf1b2b", "#a45aff")
"""From sure to unsure."""

CASING = "#101418"
"""Drawn under lines and marks, so that they stand out on light and dark ground."""
PAPER = "#fbfaf7"
INK = "#20262c"
FAINT = "#6c747c"
UNPLACED = "#ffffff"
DOUBT = "#ffffff"
LABEL = "#ffffff"


def step_of(spread_m: float) -> int:
    """Return the step of a spread, 0 for the surest."""
    return sum(spread_m > limit for limit in SPREAD_LIMITS_M)


def step_names() -> list[str]:
    """Return the steps in words."""
    limits = [f"{limit * 100:g}" for limit in SPREAD_LIMITS_M]
    between = [f"{low}–{high} cm" for low, high in pairwise(limits)]
    return [f"up to {limits[0]} cm", *between, f"over {limits[-1]} cm"]
