"""Whether errors lie where the doubts say."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
import scipy.spatial

from roadhem_training.bench.compare import RIGHT_M, Comparison, share
from roadhem_training.bench.samples import Floats

NEAR_M = 5.0
HEAVIEST = 0.1


@dataclass(frozen=True)
class Doubted:
    """One set's traced places with their error, beside its doubts.

    Attributes
    ----------
    xy : (n, 2). wrong : (n,) bool. weight : (n,) metres. doubts : (m, 2). heaviness : (m,).
    """

    xy: Floats
    wrong: np.ndarray
    weight: Floats
    doubts: Floats
    heaviness: Floats

    @classmethod
    def of(cls, found: Comparison, doubts: Floats, heaviness: Floats) -> Doubted:
        """Take traced places farther than RIGHT_M from the truth as wrong."""
        return cls(found.places.xy, found.traced.distance > RIGHT_M, found.traced.weight, doubts, heaviness)


def doubt_figures(sets: Sequence[Doubted]) -> dict[str, float]:
    """Share of wrong length, and of all length, within NEAR_M of the heaviest tenth of all doubts."""
    heaviness = np.concatenate([one.heaviness for one in sets])
    figures = {"doubts": len(heaviness), "wrong, m": float(sum(one.weight[one.wrong].sum() for one in sets))}
    if not len(heaviness):
        return {**figures, "of wrong length": float("nan"), "of all length": float("nan")}
    least = np.sort(heaviness)[-max(1, round(HEAVIEST * len(heaviness)))]
    near = np.concatenate([_near(one, least) for one in sets])
    wrong, weight = (np.concatenate([getattr(one, name) for one in sets]) for name in ("wrong", "weight"))
    return {
        **figures,
        "of wrong length": share(weight[near & wrong].sum(), weight[wrong].sum()),
        "of all length": share(weight[near].sum(), weight.sum()),
    }


def _near(one: Doubted, least: float) -> np.ndarray:
    heavy = one.doubts[one.heaviness >= least]
    if not len(heavy) or not len(one.xy):
        return np.zeros(len(one.xy), dtype=bool)
    distance, _ = scipy.spatial.cKDTree(heavy).query(one.xy)
    return distance <= NEAR_M
