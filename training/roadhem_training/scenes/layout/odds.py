"""How often things occur and how large they are: the tables every module of the layout draws from.

Sizes are metres. Cross-section values follow the handbook figures gathered for this project: travel lanes
2.74–3.66 m, parking lanes 2.4–3.0 m, curb returns 1.5–15 m, curbs 0.06–0.20 m, gutters 0.3–0.6 m, curb ramps
1.2–5 m, driveways 3–7 m (the last from memory). Shares are judgement, tuned by eye and by the statistics of real
kerb outlines.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from typing import TypeVar

import numpy as np

T = TypeVar("T")
Span = tuple[float, float]

STYLE_ODDS = {
    "old_town": 0.27, "suburb": 0.25, "industry": 0.15, "car_park": 0.11, "country": 0.1, "motorway": 0.07,
    "no_road": 0.05,
}  # fmt: skip

TOWNS = ("old_town", "suburb", "industry")  # styles with edges enough in any frame of 100 m

CORNER_RADIUS_ODDS: Mapping[Span, float] = {
    (0.0, 0.0): 0.13, (0.3, 1.5): 0.15, (1.5, 4.5): 0.33, (4.5, 8.0): 0.24, (8.0, 11.0): 0.10, (11.0, 15.0): 0.05,
}  # fmt: skip
CURB_HEIGHT: Span = (0.06, 0.20)
LOWERED_HEIGHT: Span = (0.0, 0.04)
GUTTER: Span = (0.3, 0.6)
CURB_STONE: Span = (0.08, 0.30)
STONE_BEHIND_GUTTER = (
    0.94  # share of gutters that end at a curb stone one can see: a bare strip is rarely a gutter
)
DRIVEWAY: Span = (3.0, 7.0)
RAMP: Span = (1.2, 5.0)
ISLAND_FILL = {
    "grass": 0.3, "mown": 0.1, "planting": 0.2, "pavers": 0.15, "setts": 0.05, "asphalt": 0.08, "slabs": 0.12,
}  # fmt: skip
SHOULDER: Mapping[Span, float] = {(0.0, 0.0): 0.15, (0.15, 0.5): 0.4, (0.5, 2.0): 0.45}
FOOTWAY_LIKE_ROAD = 0.12  # share of footways beside asphalt that are asphalt too
THIN_STRIP = 0.12  # share of sides with a strip 0.3–0.9 m wide behind the curb that makes a line of its own
GUTTER_ODDS = {"stone": 0.5, "asphalt": 0.25, "setts": 0.25}
STONE_ODDS = {"curb": 0.4, "stone": 0.4, "asphalt": 0.2}
STONE_TONE_ODDS: Mapping[Span, float] = {(0.2, 0.8): 0.45, (-0.15, 0.2): 0.4, (-0.7, -0.15): 0.15}
FOOTWAY_ODDS = {
    "pavers": 0.28,
    "slabs": 0.25,
    "asphalt": 0.2,
    "concrete": 0.18,
    "setts": 0.04,
    "gravel": 0.05,
}
VERGE_ODDS = {"grass": 0.4, "mown": 0.2, "dry_grass": 0.08, "planting": 0.1, "soil": 0.12, "setts": 0.10}


@dataclass(frozen=True)
class StreetOdds:
    """What the streets of a style look like.

    Attributes
    ----------
    block : shortest side of a block before it is split again; skew : standard deviation of split angles, radians.
    warp : share of places with curved streets; crossing : share of splits that make a four-leg crossing.
    width : kerb to kerb, by rank; surface : materials of the carriageway.
    """

    block: Span
    skew: float
    warp: float
    crossing: float
    width: Mapping[str, Span]
    surface: Mapping[str, float]
    gutter: float
    stone: float
    verge: float
    footway: float
    footway_width: Span
    median: float
    parking: float
    marked: float
    driveway_every: Span
    flush: float
    flush_alley: float
    bays: float
    lots: float
    closes: float
    in_block: bool = False


BOULEVARD, BOULEVARD_WIDTH = 0.12, (17.0, 30.0)  # 24.4–30.5 m curb to curb in one handbook, less elsewhere
SHORT_ISLAND = 0.08  # share of wide stretches with an island at one end
BLOCK_SCALE = {1.0: 0.75, 1.5: 0.25}  # some places have larger blocks
BLOCK_SCALE_LARGE = {1.0: 0.4, 1.6: 0.35, 2.4: 0.25}  # and more of them where the frame shows many
LARGE_FRAME = 200.0
STREETS: Mapping[str, StreetOdds] = {
    "old_town": StreetOdds(
        block=(33, 56), skew=0.16, warp=0.35, crossing=0.35,
        width={"main": (8.5, 14), "street": (5.5, 10.5), "alley": (3.2, 5.5), "close": (3.5, 6)},
        surface={"asphalt": 0.72, "setts": 0.22, "concrete": 0.06},
        gutter=0.4, stone=0.8, verge=0.15, footway=0.96, footway_width=(1.2, 4.0),
        median=0.25, parking=0.6, marked=0.6, driveway_every=(25, 60),
        flush=0.03, flush_alley=0.25, bays=0.3, lots=0.25, closes=0.1,
    ),
    "suburb": StreetOdds(
        block=(40, 68), skew=0.10, warp=0.7, crossing=0.3,
        width={"main": (9, 14), "street": (6, 11), "alley": (3.5, 6), "close": (4.8, 9)},
        surface={"asphalt": 0.86, "concrete": 0.10, "setts": 0.04},
        gutter=0.6, stone=0.65, verge=0.5, footway=0.75, footway_width=(1.2, 2.2),
        median=0.15, parking=0.4, marked=0.45, driveway_every=(12, 28),
        flush=0.1, flush_alley=0.5, bays=0.2, lots=0.12, closes=0.4,
    ),
    "industry": StreetOdds(
        block=(55, 90), skew=0.06, warp=0.3, crossing=0.4,
        width={"main": (10, 18), "street": (7, 12), "alley": (4.5, 8), "close": (6, 9)},
        surface={"asphalt": 0.75, "concrete": 0.25},
        gutter=0.4, stone=0.6, verge=0.5, footway=0.55, footway_width=(1.4, 2.5),
        median=0.25, parking=0.35, marked=0.65, driveway_every=(25, 60),
        flush=0.1, flush_alley=0.5, bays=0.2, lots=0.6, closes=0.2,
    ),
    "car_park": StreetOdds(
        block=(62, 105), skew=0.08, warp=0.2, crossing=0.3,
        width={"main": (9, 17), "street": (6, 10), "alley": (4.5, 7), "close": (6, 9)},
        surface={"asphalt": 0.9, "concrete": 0.1},
        gutter=0.4, stone=0.7, verge=0.5, footway=0.6, footway_width=(1.4, 2.5),
        median=0.35, parking=0.2, marked=0.75, driveway_every=(35, 80),
        flush=0.08, flush_alley=0.3, bays=0.25, lots=1.0, closes=0.0, in_block=True,
    ),
}  # fmt: skip

LAND = {
    "old_town": {"perimeter": 0.72, "detached": 0.05, "park": 0.09, "square": 0.09, "waste": 0.05},
    "suburb": {"detached": 0.78, "perimeter": 0.04, "park": 0.1, "wood": 0.04, "waste": 0.04},
    "industry": {"halls": 0.66, "detached": 0.04, "park": 0.08, "waste": 0.16, "field": 0.06},
    "car_park": {"halls": 0.25, "park": 0.45, "square": 0.15, "waste": 0.1, "wood": 0.05},
    "country": {"field": 0.52, "wood": 0.16, "park": 0.12, "detached": 0.12, "waste": 0.08},
    "motorway": {"park": 0.35, "wood": 0.2, "field": 0.3, "halls": 0.08, "waste": 0.07},
    "no_road": {
        "park": 0.22,
        "detached": 0.14,
        "perimeter": 0.14,
        "field": 0.16,
        "wood": 0.1,
        "halls": 0.08,
        "square": 0.1,
        "waste": 0.06,
    },
}


def chance(rng: np.random.Generator, share: float) -> bool:
    """Whether something that happens with probability `share` happens."""
    return bool(rng.random() < share)


def between(rng: np.random.Generator, span: Span) -> float:
    """A number drawn evenly from `span`."""
    return float(rng.uniform(*span))


def pick(rng: np.random.Generator, odds: Mapping[T, float]) -> T:
    """A key of `odds`, drawn by weight."""
    left = rng.random() * sum(odds.values())
    for key, weight in odds.items():
        left -= weight
        if left < 0:
            return key
    return key


def pick_between(rng: np.random.Generator, odds: Mapping[Span, float]) -> float:
    """A number drawn evenly from a span that was itself drawn by weight."""
    return between(rng, pick(rng, odds))


def gutter_and_stone(rng: np.random.Generator, gutter: float, stone: float) -> tuple[float, float]:
    """Widths of a gutter and a curb stone, 0 where there is none, by their shares."""
    pan = between(rng, GUTTER) if chance(rng, gutter) else 0.0
    return pan, between(rng, CURB_STONE) if chance(rng, STONE_BEHIND_GUTTER if pan else stone) else 0.0
