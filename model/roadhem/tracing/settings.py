"""The tracer's numbers, each named once with its unit."""

from __future__ import annotations

from dataclasses import dataclass
from typing import NamedTuple


class Pace(NamedTuple):
    """What the compiled loops need.

    Attributes
    ----------
    step_max, step_min : metres between points, on straights and where the line bends most.
    sagitta : metres; a step is so short that its arc leaves its chord by no more.
    profile : metres between the five samples of the lateral profile.
    agree : metres; samples of the profile that disagree more with the middle count less.
    reach : metres; the largest lateral correction of one iteration.
    gate : metres; a point that lies further beside its prediction is not believed.
    present : nearness on the line below which it counts as not seen.
    beyond : metres that a point may lie past the end of its edge before following stops.
    axis_clear : length (0..1) of the mean double-angle vector below which the axis says nothing.
    turn_max : cosine of the largest turn in one step of the least length.
    turn_soft : cosine of the largest turn in one step; a step that turns more is shortened.
    memory : metres over which the curvature is averaged.
    coast : metres followed without seeing the line.
    bend_max : 1/m, the sharpest curvature carried into a prediction.
    loop_close : metres between a loop's end and its start.
    loop_least : metres, the shortest loop.
    overlap : metres within which a line counts as running along itself.
    """

    step_max: float = 0.4
    step_min: float = 0.1
    sagitta: float = 0.005
    profile: float = 0.2
    agree: float = 0.15
    reach: float = 0.3
    gate: float = 0.22
    present: float = 0.35
    beyond: float = 0.25
    axis_clear: float = 0.3
    turn_max: float = 0.7
    turn_soft: float = 0.95
    memory: float = 1.0
    coast: float = 1.2
    bend_max: float = 1.25
    loop_close: float = 0.3
    loop_least: float = 4.0
    overlap: float = 0.15


PACE = Pace()


@dataclass(frozen=True)
class Settings:
    """All numbers with a meaning.

    Attributes
    ----------
    pace : numbers of the compiled loops.
    """

    pace: Pace = PACE

    # Placing a click.
    scout_m: float = 0.2
    """Metres between the places tried around a click."""
    scout_far: float = 0.35
    """What the whole radius costs, in nearness."""
    scout_other: float = 0.3
    """What another line on the same spot costs, in nearness."""
    sure: float = 0.45
    """Nearness a first fix needs."""
    contrast: float = 0.25
    """Difference in drive-over surface, left against right, that an edge needs."""

    # The canonical point.
    lattice_m: float = 1.6
    """Metres between the fixed lines x = k, y = k at which canonical points lie."""
    around_m: float = 25.0
    """Metres either way within which the canonical point of a line cut by its limit is looked for."""

    # Finishing.
    attributes_m: float = 1.0
    """Half window over which kind and sight are averaged; shorter pieces are absorbed."""


SETTINGS = Settings()
