"""Round corners where following fails: the line that leads away is looked for at any turn, proved, and joined."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np

from roadhem.fields.layout import CELL_M
from roadhem.tracing.follow import COAST, CORNER, FORM, LEFT, NEAR, RIGHT, TRAVEL, TX, TY, X, Y
from roadhem.tracing.legs import Leg, Vector, between, hermite, straight, turn_of, vertex_row
from roadhem.tracing.scout import lines_at, outward
from roadhem.tracing.settings import Settings
from roadhem.tracing.sheet import NEARNESS, NO_DATA, OUTSIDE, VALID, Sheet, sample
from roadhem.tracing.span import linked, span_rows
from roadhem.tracing.stretch import Rows, side, turned, walk_on


@dataclass(frozen=True)
class _Exit:
    """A line that leads away from where following stopped, proved.

    Attributes
    ----------
    after : rows of the line beyond, from where it comes into sight.
    corner : where both meet; None at a nose, where the line turns back beside itself, and where a curve joins both.
    blur_m : how far the fields bend either side of the corner.
    gap_m : metres not seen, both legs together.
    """

    after: Rows
    corner: Vector | None
    blur_m: float
    gap_m: float


def turn_corner(sheet: Sheet, rows: Rows, settings: Settings) -> Rows | None:
    """Continue round a corner where following stopped.

    Returns
    -------
    The rows up to the corner; its vertex, or a curve where the fields speak for one or the line turns back on itself;
    and the first rows of the line beyond. None if there is no such line.
    """
    tried: list[Rows] = []
    for row, leg, blur_m in _candidates(sheet, rows, settings):
        if any(_same_way(row, other, settings) for other in tried):
            continue
        tried.append(row)
        found = _proved(sheet, rows, row, leg, blur_m, settings)
        if found is not None and (whole := _joined(sheet, rows, found, settings)) is not None:
            return whole
        if len(tried) >= settings.corner_tries:
            return None
    return None


def _same_way(row: Rows, other: Rows, settings: Settings) -> bool:
    turn = abs(turn_of(row[[TX, TY]], other[[TX, TY]]))
    beside = Leg(other[[X, Y]], other[[TX, TY]]).beside(row[[X, Y]])
    return turn < settings.corner_apart and abs(beside) < settings.scout_m


def _candidates(sheet: Sheet, rows: Rows, settings: Settings) -> list[tuple[Rows, Leg, float]]:
    """Rows of lines leading away from the end, each with the leg before the corner and its blur; the best first."""
    end, here = rows[-1], rows[-1, [X, Y]]
    blunt = straight(between(rows, settings.corner_blur_m, settings.corner_leg_m, end[TRAVEL]))
    found = outward(lines_at(sheet, here + _rings(blunt.direction, settings), settings), here)
    away = found[:, [X, Y]] - here
    distance = np.hypot(*away.T)
    fits = (found[:, NEAR] >= settings.pace.present) & (distance >= settings.corner_blur_m)
    fits &= (found[:, LEFT] - found[:, RIGHT]) * np.sign(side(rows[-20:])) >= settings.contrast
    ways = []
    for row, far in zip(found[fits], distance[fits], strict=True):
        turn = abs(turn_of(blunt.direction, row[[TX, TY]]))
        blur = max(settings.corner_blur_m, 0.5 * settings.corner_open_m / math.sin(0.5 * max(math.pi - turn, 0.3)))
        leg = blunt
        if blur > settings.corner_blur_m:
            leg = straight(between(rows, blur, blur + settings.corner_leg_m, end[TRAVEL]))
        if turn >= settings.corner_least and _reachable(here, leg, row, turn, settings):
            ways.append((row[NEAR] - settings.corner_far * far, row, leg, blur))
    ways.sort(key=lambda way: (-round(way[0], 6), *way[1][[X, Y]]))
    return [(row, leg, blur) for _, row, leg, blur in ways]


def _rings(direction: Vector, settings: Settings) -> Vector:
    """Places (n, 2) on rings around an end."""
    ahead = math.atan2(direction[1], direction[0])
    places = []
    for radius in settings.corner_rings_m:
        angles = ahead + np.arange(-math.pi, math.pi, settings.scout_m / radius)
        places.append(radius * np.stack([np.cos(angles), np.sin(angles)], axis=-1))
    return np.concatenate(places)


def _reachable(here: Vector, leg: Leg, row: Rows, turn: float, settings: Settings) -> bool:
    """Whether a line leading away can be the second leg of a corner, or the other side of a nose."""
    place = row[[X, Y]]
    corner = leg.meets(Leg(place, row[[TX, TY]]))
    if corner is not None:
        ahead = leg.along(corner) - leg.along(here)
        longest = settings.corner_gap_m if turn >= settings.corner_gap_turn else settings.corner_reach_m
        if -settings.corner_past_m <= ahead <= longest and (place - corner) @ row[[TX, TY]] > 0.0:
            return True
    if turn >= settings.nose_turn:
        return _beside(leg, here, place, settings)
    return float(np.hypot(*(place - here))) <= settings.corner_link_m


def _beside(leg: Leg, here: Vector, place: Vector, settings: Settings) -> bool:
    """Whether a place lies on the other side of a nose."""
    aside = abs(leg.beside(place))
    behind = leg.along(here) - leg.along(place) >= -settings.corner_reach_m
    return behind and settings.nose_least_m <= aside <= settings.nose_most_m


def _proved(
    sheet: Sheet, rows: Rows, row: Rows, leg: Leg, blur_m: float, settings: Settings
) -> _Exit | None:
    """Follow a line leading away both ways: it must begin near the corner and carry on."""
    start = row[None].copy()
    start[0, [TRAVEL, COAST]] = 0.0
    back, _, _ = walk_on(sheet, turned(start), settings.corner_gap_m + settings.corner_rings_m[-1], settings)
    after, code, _ = walk_on(sheet, turned(back), settings.corner_leg_m, settings)
    after = _beyond(rows[-60:], after, settings)
    meeting = _meeting(sheet, rows[-1, [X, Y]], leg, after, blur_m, settings)
    if meeting is None:
        return None
    corner, gap = meeting
    least = min(max(0.5 * gap, settings.corner_proof_m), settings.bridge_proof_m)
    if after[-1, TRAVEL] - after[0, TRAVEL] < least and code not in (OUTSIDE, NO_DATA):
        return None
    sure = np.mean(after[:, NEAR]) >= settings.sure and gap <= settings.corner_both_m
    return _Exit(after, corner, blur_m, gap) if sure else None


def _meeting(
    sheet: Sheet, here: Vector, leg: Leg, after: Rows, blur_m: float, settings: Settings
) -> tuple[Vector | None, float] | None:
    """Where two lines meet, and how many metres of both are not seen; no vertex at a nose or curve; None if apart."""
    begun = after[0, [X, Y]]
    second = straight(between(after, blur_m, settings.corner_leg_m + blur_m, after[0, TRAVEL]))
    corner = leg.meets(second)
    if corner is not None:
        ahead, behind = leg.along(corner) - leg.along(here), second.along(begun) - second.along(corner)
        if min(ahead, behind) >= -settings.corner_past_m and max(ahead, behind) <= settings.corner_gap_m:
            return corner, max(ahead, 0.0) + max(behind, 0.0)
    gap = float(np.hypot(*(begun - here)))
    if abs(turn_of(leg.direction, second.direction)) >= settings.nose_turn:
        return (None, gap) if gap <= settings.nose_gap_m and _beside(leg, here, begun, settings) else None
    seen = gap <= settings.corner_link_m and _nearness(sheet, _even(here, begun, CELL_M)) >= settings.sure
    return (None, gap) if seen else None


def _beyond(before: Rows, after: Rows, settings: Settings) -> Rows:
    """The line beyond without what lies on the leg before the corner: walked back, it may go round by itself."""
    apart = np.linalg.norm(after[:, None, [X, Y]] - before[None, :, [X, Y]], axis=2)
    parallel = after[:, [TX, TY]] @ before[:, [TX, TY]].T >= settings.pace.turn_max
    shared = np.flatnonzero(np.any((apart < settings.scout_m) & parallel, axis=1))
    return after[min(int(np.max(shared, initial=-1)) + 1, len(after) - 1) :]


def _joined(sheet: Sheet, rows: Rows, found: _Exit, settings: Settings) -> Rows | None:
    """Both lines without the rows near the corner, where the fields bend, and the corner between them."""
    after = found.after
    if found.corner is None:
        a, b = rows[-1], after[0]
        span = hermite(a[[X, Y]], a[[TX, TY]], b[[X, Y]], b[[TX, TY]], settings.pace.step_min)
        curve = span_rows(span, a, b, settings)
        curve[:, FORM] = CORNER
        return linked(rows, curve, after)
    last = len(rows) - 1
    while last > 0 and np.hypot(*(rows[last, [X, Y]] - found.corner)) < found.blur_m:
        last -= 1
    begun = np.hypot(after[:, X] - found.corner[0], after[:, Y] - found.corner[1]) >= found.blur_m
    if (found.corner - rows[last, [X, Y]]) @ rows[last, [TX, TY]] <= 0 or not begun.any():
        return None
    after = after[int(np.argmax(begun)) :]
    vertex = vertex_row(found.corner, rows[last], after[0])
    if found.gap_m <= settings.corner_reach_m:
        return linked(rows[: last + 1], vertex[None], after)
    return _round_or_sharp(sheet, rows[: last + 1], vertex, after, settings)


def _round_or_sharp(sheet: Sheet, before: Rows, vertex: Rows, after: Rows, settings: Settings) -> Rows:
    """Across a corner that is not seen itself: the vertex, or a curve where the fields are nearer to it."""
    corner, a, b = vertex[[X, Y]], before[-1, [X, Y]], after[0, [X, Y]]
    into, out = Leg(a, _unit(corner - a)), Leg(corner, _unit(b - corner))
    tangent = min(into.along(corner), out.along(b))
    start, end = corner - tangent * into.direction, corner + tangent * out.direction
    step = settings.pace.step_max
    sharp = np.concatenate([_even(a, corner, step), [[*corner, *vertex[[TX, TY]]]], _even(corner, b, step)])
    bow = hermite(start, into.direction, end, out.direction, step)
    curve = np.concatenate([_even(a, start, step), bow, _even(end, b, step)])
    if _nearness(sheet, curve) > _nearness(sheet, sharp) + settings.corner_curve:
        return linked(before, span_rows(curve, before[-1], after[0], settings), after)
    span = span_rows(sharp, before[-1], after[0], settings)
    span[np.all(sharp[:, :2] == corner, axis=1), FORM] = CORNER
    return linked(before, span, after)


def _unit(vector: Vector) -> Vector:
    return np.asarray(vector / np.hypot(*vector))


def _even(a: Vector, b: Vector, step_m: float) -> Vector:
    """Inner points (n, 4: x, y, heading) of the straight from a to b, about step_m apart."""
    reach = float(np.hypot(*(b - a)))
    share = np.linspace(0.0, 1.0, max(1, math.ceil(reach / step_m)) + 1)[1:-1, None]
    return np.concatenate([a + share * (b - a), np.tile((b - a) / max(reach, 1e-9), (len(share), 1))], axis=1)


def _nearness(sheet: Sheet, path: Vector) -> float:
    """Mean nearness at the points of a path."""
    values, total = np.zeros(1), 0.0
    for x, y, _, _ in path:
        if sheet.run(sample, x, y, values) == VALID:
            total += values[NEARNESS]
    return total / max(len(path), 1)
