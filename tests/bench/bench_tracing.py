"""Time of tracing on fields at hand: median and 95th percentile, milliseconds; first call and compilation apart.

    python tests/bench/bench_tracing.py
"""

from __future__ import annotations

import sys
import time
from pathlib import Path

import numpy as np

sys.path.insert(0, str(Path(__file__).resolve().parents[1]))
from fields_made import Edge, MadeFields

ROUNDS = 100


def views() -> dict[str, tuple[MadeFields, tuple[float, float]]]:
    """Fields and seeds: 100 m of edge between borders, with free ends, with a gap, round an island."""
    a = np.radians(np.linspace(360, 0, 720))
    ring = np.stack([50 + 16 * np.cos(a), -50 + 16 * np.sin(a)], axis=1)
    slanted, long = [(0, 10), (98, 30)], [(-50, 0), (200, 50)]
    return {
        "border to border": (MadeFields([Edge(long)], noise_m=0.02, bounds=(0, 0, 98, 60)), (50, 20.3)),
        "two free ends": (MadeFields([Edge(slanted)], noise_m=0.02), (50, 20.3)),
        "gap of 8 m": (MadeFields([Edge(slanted)], noise_m=0.02, gaps=[(70, 24.3, 4)]), (50, 20.3)),
        "island": (MadeFields([Edge(ring)], noise_m=0.02), (66.3, -50)),
    }


def main() -> None:
    """Print one line a case."""
    began = time.perf_counter()
    from roadhem.tracing.trace import attempt

    print(f"import {time.perf_counter() - began:.2f} s")
    for name, (view, seed) in views().items():
        began = time.perf_counter()
        attempt(view, [seed])
        first = time.perf_counter() - began
        taken = []
        for _ in range(ROUNDS):
            began = time.perf_counter()
            attempt(view, [seed])
            taken.append(1e3 * (time.perf_counter() - began))
        median, late = np.percentile(taken, (50, 95))
        print(f"{name:18s} first {first:6.2f} s   median {median:6.2f}   p95 {late:6.2f}")


if __name__ == "__main__":
    main()
