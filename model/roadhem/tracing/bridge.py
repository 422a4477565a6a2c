"""Across hidden stretches: the arc continued, landed on a line that carries on, and drawn as a smooth curve."""

from __future__ import annotations

import math

import numpy as np

from roadhem.tracing.follow import COAST, CORNER, FORM, LEFT, NEAR, RIGHT, TRAVEL, TX, TY, X, Y
from roadhem.tracing.legs import hermite, turn_of
from roadhem.tracing.scout import lines_at
from roadhem.tracing.settings import Settings
from roadhem.tracing.sheet import NO_DATA, OUTSIDE, Sheet
from roadhem.tracing.span import linked, span_rows
from roadhem.tracing.stretch import Arc, Rows, fit_arc, side, turned, walk_on


def bridge(sheet: Sheet, rows: Rows, settings: Settings, *, ended: bool) -> Rows | None:
    """Continue beyond a hidden stretch where following stopped.

    Parameters
    ----------
    ended : whether the line was seen to end: then only a short gap is bridged.

    Returns
    -------
    The rows up to the gap without the last of them, where the fields bend; the rows across; and the rows proved
    beyond. None where nothing beyond continues the arc.
    """
    last_corner = np.flatnonzero(rows[:, FORM] == CORNER)
    solid = rows[last_corner[-1] + 1 :] if len(last_corner) else rows
    if len(solid) == 0:
        return None
    back_m = solid[-1, TRAVEL] - solid[:, TRAVEL]
    kept = solid[(back_m <= settings.bridge_memory_m) & (back_m >= settings.bridge_drop_m)]
    if len(kept) < 2 or kept[-1, TRAVEL] - kept[0, TRAVEL] < settings.bridge_least_m:
        return None
    arc = fit_arc(kept, settings.bridge_memory_m / 2)
    surface = side(kept)
    longest = settings.bridge_ended_m if ended else settings.bridge_m
    longest = min(longest, (kept[-1, TRAVEL] - kept[0, TRAVEL]) / settings.bridge_proof_share)
    tried: list[Rows] = []
    for row in _landings(sheet, arc, surface, longest, settings):
        if _ahead(row, rows[-1]) < settings.pace.step_max or any(_lies_on(row, proof) for proof in tried):
            continue
        proof, sure = _proof(sheet, row, rows[-1], settings)
        if sure and side(proof) * np.sign(surface) >= settings.contrast:
            before = rows[rows[:, TRAVEL] <= kept[-1, TRAVEL]]
            return _across(before, arc, proof, settings)
        tried.append(proof)
        if len(tried) >= settings.bridge_tries:
            return None
    return None


def _landings(sheet: Sheet, arc: Arc, surface: float, longest_m: float, settings: Settings) -> list[Rows]:
    """Rows of lines ahead that continue the arc, the likeliest first."""
    ahead = np.arange(settings.bridge_drop_m, longest_m + settings.bridge_drop_m, settings.pace.step_max)
    middle, heading = arc.at(ahead)
    wide = settings.bridge_aside_m + settings.bridge_aside_share * ahead
    across = np.arange(-wide[-1], wide[-1], settings.scout_m)
    index, column = np.nonzero(np.abs(across) <= wide[:, None])
    normal = np.stack([-np.sin(heading), np.cos(heading)], axis=-1)
    places = middle[index] + across[column, None] * normal[index]
    headings = np.stack([np.cos(heading), np.sin(heading)], axis=-1)[index]
    found = lines_at(sheet, places, settings, headings)
    away = found[:, [X, Y]] - middle[index]
    aside = away[:, 1] * headings[:, 0] - away[:, 0] * headings[:, 1]
    along = np.abs(np.sum(away * headings, axis=1))
    turn = np.arccos(np.clip(np.sum(found[:, [TX, TY]] * headings, axis=1), -1.0, 1.0))
    allowed = np.radians(settings.bridge_turn + settings.bridge_turn_per_m * ahead[index])
    fits = (found[:, NEAR] >= settings.sure) & (np.abs(aside) <= wide[index]) & (turn <= allowed)
    fits &= (found[:, LEFT] - found[:, RIGHT]) * np.sign(surface) >= settings.contrast
    fits &= along <= settings.pace.step_max
    cost = (aside / wide[index]) ** 2 + (turn / allowed) ** 2 + ahead[index] / settings.bridge_m - found[:, NEAR]
    order = np.lexsort((found[:, Y], found[:, X], np.round(cost, 6)))
    return [found[k] for k in order if fits[k]]


def _ahead(row: Rows, end: Rows) -> float:
    return float((row[X] - end[X]) * end[TX] + (row[Y] - end[Y]) * end[TY])


def _lies_on(row: Rows, line: Rows) -> bool:
    return bool(np.min(np.hypot(line[:, X] - row[X], line[:, Y] - row[Y])) < 0.3)


def _proof(sheet: Sheet, row: Rows, end: Rows, settings: Settings) -> tuple[Rows, bool]:
    """The line through a landing, from its first sight beyond the end to as far as proves it; whether it does."""
    gap = float(np.hypot(row[X] - end[X], row[Y] - end[Y]))
    proof = min(max(settings.bridge_proof_share * gap, settings.bridge_least_m), settings.bridge_proof_m)
    least = proof + settings.bridge_drop_m
    start = row[None].copy()
    start[0, [TRAVEL, COAST]] = 0.0
    back, _, _ = walk_on(sheet, turned(start), settings.bridge_m, settings)
    whole, code, _ = walk_on(sheet, turned(back), least, settings)
    ahead = (whole[:, X] - end[X]) * end[TX] + (whole[:, Y] - end[Y]) * end[TY]
    behind = np.flatnonzero((ahead < settings.pace.step_max) & (whole[:, TRAVEL] < 0.0))
    whole = whole[min(int(np.max(behind, initial=-1)) + 1, len(whole) - 1) :]
    seen = whole[whole[:, COAST] == 0.0]
    length = whole[-1, TRAVEL] - whole[0, TRAVEL]
    sure = length >= least or (code in (OUTSIDE, NO_DATA) and length >= 0.5 * least)
    return whole, bool(sure and np.mean(seen[:, NEAR]) >= settings.sure)


def _across(before: Rows, arc: Arc, proof: Rows, settings: Settings) -> Rows | None:
    """Join what was walked before a gap and what was proved beyond it by a smooth curve."""
    begun = proof[proof[:, TRAVEL] - proof[0, TRAVEL] >= settings.bridge_drop_m]
    landing = fit_arc(turned(begun), settings.bridge_memory_m / 2)
    start, end = np.array([arc.x, arc.y]), np.array([landing.x, landing.y])
    leave = np.array([math.cos(arc.heading), math.sin(arc.heading)])
    arrive = -np.array([math.cos(landing.heading), math.sin(landing.heading)])
    reach = float(np.hypot(*(end - start)))
    if (end - start) @ leave <= 0 or reach > settings.bridge_m + 4.0 * settings.bridge_drop_m:
        return None
    if abs(turn_of(leave, arrive)) > math.pi / 2:
        return None
    span = hermite(start, leave, end, arrive, settings.pace.step_max)
    return linked(before, span_rows(span, before[-1], begun[0], settings), begun)
