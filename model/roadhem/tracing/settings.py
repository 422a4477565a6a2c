"""The tracer's numbers, each named once with its unit."""

from __future__ import annotations

import math
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
    memory, memory_unseen : metres over which the curvature is averaged, and over which it is lost where the line is
        not seen.
    coast : metres followed without seeing the line.
    side_memory : metres over which the drive-over surface on the left is weighed against that on the right.
    bare : difference below which the line divides no surface from anything and following stops ...
    dividing : ... at the last place with so large a difference.
    bend_max : 1/m, the sharpest curvature carried into a prediction.
    loop_least : metres, the shortest loop.
    overlap : metres beside itself within which a line counts as running along itself.
    """

    step_max: float = 0.4
    step_min: float = 0.1
    sagitta: float = 0.005
    profile: float = 0.2
    agree: float = 0.15
    reach: float = 0.3
    gate: float = 0.22
    present: float = 0.25
    beyond: float = 0.45
    axis_clear: float = 0.3
    turn_max: float = 0.7
    turn_soft: float = 0.95
    memory: float = 1.0
    memory_unseen: float = 2.0
    coast: float = 1.2
    side_memory: float = 2.0
    bare: float = -0.1
    dividing: float = 0.25
    bend_max: float = 1.25
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
    scout_m: float = 0.3
    """Metres between the places tried around a click, an end, or an arc continued."""
    scout_far: float = 0.35
    """What the whole radius costs, in nearness."""
    scout_other: float = 0.3
    """What another line on the same spot costs, in nearness."""
    sure: float = 0.45
    """Nearness a first fix needs."""
    contrast: float = 0.2
    """Difference in drive-over surface, left against right, that an edge needs."""

    # The canonical point.
    lattice_m: float = 1.6
    """Metres between the fixed lines x = k, y = k at which canonical points lie."""
    around_m: float = 25.0
    """Metres either way within which the canonical point of a line cut by its limit is looked for."""

    # Both ways along the line.
    least_m: float = 1.0
    """Shortest line that is worth giving."""
    loop_tail_m: float = 4.0
    """Metres of its beginning that a loop may lose where it closes."""

    # Corners.
    corner_rings_m: tuple[float, ...] = (0.7, 1.0, 1.4, 2.0, 2.8, 3.8)
    """Radii around the end at which lines leading away are looked for."""
    corner_blur_m: float = 0.6
    """Metres either side of a corner in which the fields bend ..."""
    corner_open_m: float = 0.6
    """... at the least; at an acute one, as far as its legs are less than this apart."""
    corner_leg_m: float = 2.4
    """Metres either side of a corner to which straights are fitted."""
    corner_proof_m: float = 1.2
    """Metres a line beyond a corner must be followed at the least."""
    corner_reach_m: float = 0.8
    """A corner that is seen lies within this of where following stopped."""
    corner_past_m: float = 1.3
    """Metres that either line may run past the corner: rounded fields lead there."""
    corner_link_m: float = 1.6
    """Metres across which a line leading away is joined by a curve, if the fields show one."""
    corner_gap_m: float = 3.0
    corner_both_m: float = 4.5
    """Metres of a leg, and of both, that may be hidden at a corner."""
    corner_far: float = 0.1
    """What a metre to the line beyond costs, in nearness."""
    corner_curve: float = 0.03
    """By how much nearer, on average, a curve must be to the fields than a sharp corner."""
    corner_least: float = math.radians(20.0)
    corner_gap_turn: float = math.radians(35.0)
    """Least turn of a corner, and of one that is hidden."""
    nose_turn: float = math.radians(150.0)
    """A line that turns further and makes no corner turns back beside itself: a nose."""
    nose_least_m: float = 0.25
    nose_most_m: float = 1.6
    nose_gap_m: float = 2.4
    """Distance of a nose's sides, and metres between where each is seen."""
    corner_apart: float = math.radians(20.0)
    corner_tries: int = 4

    # Hidden stretches.
    bridge_m: float = 15.0
    """Longest stretch bridged ..."""
    bridge_ended_m: float = 3.0
    """... and where the line was seen to end."""
    bridge_memory_m: float = 9.0
    """Metres of line before the gap whose arc is continued."""
    bridge_drop_m: float = 0.8
    """Metres of line dropped at either side of a gap: the fields bend there."""
    bridge_aside_m: float = 0.4
    bridge_aside_share: float = 0.14
    """A landing lies within this and this share of the arc beside it."""
    bridge_turn: float = 16.0
    bridge_turn_per_m: float = 1.8
    """Degrees, and degrees per metre of arc, by which a landing may turn from it."""
    bridge_least_m: float = 1.6
    bridge_proof_m: float = 3.6
    bridge_proof_share: float = 0.5
    """This share of a gap must be followed surely before and after it, between the two lengths."""
    bridge_spread: float = 0.025
    """Growth of the standard error with the distance from the nearer end of a bridge, metre per metre."""
    bridge_tries: int = 6

    # The clean curve.
    sharpen_chord_m: float = 0.8
    sharpen_least: float = math.radians(25.0)
    """A turn between chords of this length by at least this may be a corner that the fields rounded,"""
    sharpen_leg_m: float = 1.6
    """... (its legs reach as far as those of other corners, or as this where the next bend is near)"""
    sharpen_within: float = 0.3
    """... if its legs turn by no more than this share of it"""
    sharpen_off_m: float = 0.2
    """... and the vertex lies no further from the points followed."""
    smooth_m: float = 1.2
    """Half window of the averaging along the line."""
    smooth_bend: float = 0.5
    """Largest turn, radians, in half a window."""

    # Finishing.
    attributes_m: float = 1.0
    """Half window over which kind and sight are averaged; shorter pieces are absorbed."""

    # Doubts.
    neighbour_every_m: float = 1.2
    neighbour_asides_m: tuple[float, ...] = (0.5, 0.9, -0.5, -0.9)
    """Metres along the line between looks for other edges, and beside it."""
    fork_spread_m: float = 0.4
    fork_slope: float = 0.1
    """An edge beside the line whose distance changes by this, and by this much a metre, leaves it: a fork."""
    doubt_sigma_m: float = 0.20
    """Standard error from which a stretch counts as of low contrast."""
    doubt_beside: float = 0.0
    """By how much another line must be nearer than the edge to be a doubt."""
    doubt_least_m: float = 2.0
    """Metres such a stretch is long at the least."""

    # Guided lines.
    guide_near_m: float = 0.6
    """A followed line that passes a guiding point within this is bent to it."""
    guide_bend_m: float = 1.5
    """Metres either side over which it is bent."""
    guide_margin_m: float = 6.0
    """Metres around two points in which the least-cost path between them may run."""
    guide_floor: float = 0.02
    """Cost of a metre on a sure edge, where a metre off any edge costs 1."""
    guide_spread_m: float = 0.3
    """Standard error of a path where no edge supports it."""



SETTINGS = Settings()
