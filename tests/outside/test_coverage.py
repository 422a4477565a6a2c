"""The spread's figures against published definitions and general libraries."""

from __future__ import annotations

from itertools import pairwise

import numpy as np
import pytest
import scipy.stats

from roadhem_training.bench.spread import (
    Misses,
    clopper_pearson,
    coverage,
    fifths,
    held_shares,
    likelihood,
    rank,
    sparsification,
)

N = 200_000


def drawn(stated_over_true: float, seed: int = 0) -> Misses:
    """Errors of normal distributions whose sigma is stated wrongly by a factor."""
    rng = np.random.default_rng(seed)
    true = rng.uniform(0.05, 0.2, N)
    return Misses(stated_over_true * true, np.abs(rng.normal(0, true)))


@pytest.mark.parametrize(
    ("hits", "count", "low", "high"),
    [(34, 50, 0.533, 0.805), (68, 100, 0.579, 0.770), (340, 500, 0.637, 0.721), (48, 50, 0.863, 0.995),
     (95, 100, 0.887, 0.984), (475, 500, 0.927, 0.967)],
)  # fmt: skip
def test_bounds_of_a_share(hits, count, low, high):
    """Should give the exact binomial bounds [built: table of yardsticks, from the beta distribution's definition]."""
    assert clopper_pearson(hits, count) == pytest.approx((low, high), abs=6e-4)


@pytest.mark.parametrize(("hits", "count"), [(0, 20), (20, 20), (7, 20), (131, 500)])
def test_bounds_as_another_library(hits, count):
    """Should agree with scipy's own exact interval of a binomial test, at the ends too."""
    other = scipy.stats.binomtest(hits, count).proportion_ci(0.95, method="exact")
    assert clopper_pearson(hits, count) == pytest.approx((other.low, other.high), abs=1e-9)


@pytest.mark.parametrize(
    ("factor", "at_68", "at_95", "excess"),
    [(2, 0.953, 0.9999, 0.318), (1.25, 0.786, 0.986, 0.043), (1, 0.680, 0.950, 0), (0.8, 0.574, 0.883, 0.058),
     (0.5, 0.381, 0.673, 0.807)],
)  # fmt: skip
def test_coverage_and_likelihood_of_a_wrong_spread(factor, at_68, at_95, excess):
    """Should hold what a normal distribution does when sigma is off by a factor [built: closed form]."""
    stated, right = drawn(factor), drawn(1)
    assert coverage(stated, 0.68)["held"] == pytest.approx(at_68, abs=0.004)
    assert coverage(stated, 0.95)["held"] == pytest.approx(at_95, abs=0.004)
    assert likelihood(stated) - likelihood(right) == pytest.approx(excess, abs=0.015)


def test_likelihood_is_least_at_the_error():
    """Should be least where the squared spread is the squared error (Nix & Weigend 1994, from memory)."""
    spreads = np.linspace(0.05, 0.4, 351)
    values = [likelihood(Misses(np.array([s]), np.array([0.2]))) for s in spreads]
    assert spreads[np.argmin(values)] == pytest.approx(0.2, abs=1e-3)


def test_reliability_of_a_right_spread():
    """Should lie on the diagonal, in each fifth of the spread too."""
    nominal = np.linspace(0.1, 0.9, 9)
    right = drawn(1)
    assert held_shares(right, nominal) == pytest.approx(nominal, abs=0.006)
    parts = fifths(right)
    assert [len(part.error) for part in parts] == [N // 5] * 5
    assert all(a.spread.max() <= b.spread.min() for a, b in pairwise(parts))
    assert all(coverage(part, 0.68)["held"] == pytest.approx(0.68, abs=0.01) for part in parts)


def test_misses_beyond_reach_are_never_held():
    """Should count an error beyond the search radius as outside of every interval."""
    far = Misses(np.array([5.0, 5.0]), np.array([0.1, np.inf]))
    assert coverage(far, 0.95)["held"] == 0.5


def test_sparsification_example():
    """Should give 1/3 for errors 1, 2, 3, 4 with spreads 2, 1, 4, 3 [built: yardsticks, after Ilg et al. 2018]."""
    error = np.array([1.0, 2, 3, 4])
    assert sparsification(error, np.array([2.0, 1, 4, 3])) == pytest.approx(1 / 3, abs=1e-4)
    assert sparsification(error, error) == 0


def test_rank_of_known_orders():
    """Should be 1 for the same order, -1 for the reverse (Spearman)."""
    spread = np.array([0.01, 0.02, 0.05, 0.1])
    assert rank(Misses(spread, spread * 3)) == pytest.approx(1)
    assert rank(Misses(spread, spread[::-1])) == pytest.approx(-1)
