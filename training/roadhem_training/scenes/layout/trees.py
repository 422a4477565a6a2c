"""Trees: along streets, over the edge at times, and in gardens."""

from __future__ import annotations

import numpy as np
import shapely
from shapely.geometry.base import BaseGeometry

from roadhem_training.scenes.layout.odds import chance, pick
from roadhem_training.scenes.layout.stretches import OpenChain, Stretch
from roadhem_training.scenes.world import Crown

SEASON_DENSITY = {(0.85, 1.0): 0.6, (0.5, 0.85): 0.2, (0.05, 0.35): 0.2}
GARDEN_SPECIES = {"round": 0.55, "conifer": 0.15, "bush": 0.25, "columnar": 0.05}
AVENUE_SHARE = 0.4
PER_HECTARE = {
    "perimeter": 25, "detached": 60, "halls": 12, "park": 90, "field": 4, "wood": 420, "square": 25, "waste": 25,
    "island": 160,
}  # fmt: skip


class Season:
    """How leafy the trees of a place are."""

    def __init__(self, rng: np.random.Generator):
        self.density = pick(rng, SEASON_DENSITY)

    def crown(self, rng: np.random.Generator, x: float, y: float, radius: float, species: str) -> Crown:
        """A tree of this season."""
        density = 0.95 if species == "conifer" else rng.uniform(*self.density)
        height = radius * {"round": 2.2, "columnar": 4.5, "conifer": 3.5, "bush": 0.9}[species]
        return Crown(float(x), float(y), float(radius), float(height), float(density), species, rng.random())


def avenue(rng: np.random.Generator, season: Season, stretch: Stretch) -> list[Crown]:
    """A row of street trees behind the curb, in the verge where there is one."""
    e = stretch.edging
    if stretch.line.length < 8 or e.kind == "lowered" or not chance(rng, AVENUE_SHARE):
        return []
    chain, every, radius = OpenChain(stretch.line), rng.uniform(6, 14), rng.uniform(1.2, 4.5)
    back = e.stone + (0.5 * e.verge if e.verge else rng.uniform(0.5, 1.2))
    species = pick(rng, {"round": 0.85, "columnar": 0.15})
    out = []
    for s in np.arange(rng.uniform(1, every), chain.length, every):
        if chance(rng, 0.8):
            (x, y), d = chain.frame(s)
            size = radius * rng.uniform(0.7, 1.25) * (0.5 if species == "columnar" else 1)
            out.append(season.crown(rng, x + d[1] * back, y - d[0] * back, size, species))
    return out


def scattered(
    rng: np.random.Generator, season: Season, land: BaseGeometry, per_hectare: float
) -> list[Crown]:
    """Trees anywhere on `land`."""
    x0, y0, x1, y1 = land.bounds if not land.is_empty else (0, 0, 0, 0)
    n = rng.poisson(per_hectare * (x1 - x0) * (y1 - y0) / 1e4 * rng.uniform(0.3, 1.7))
    xy = rng.uniform((x0, y0), (x1, y1), (n, 2))
    radius = np.clip(rng.lognormal(0.9, 0.5, n), 0.6, 7.0)
    inside = shapely.contains(land, shapely.points(xy)) if n else np.zeros(0, bool)
    out = []
    for (x, y), r, ok in zip(xy, radius, inside, strict=True):
        species = pick(rng, GARDEN_SPECIES)
        if ok:
            out.append(season.crown(rng, x, y, min(r, 1.5) if species == "bush" else r, species))
    return out
