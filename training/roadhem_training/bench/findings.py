"""Everything measured on one set, and the figures of several sets together."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import click

from roadhem.jobs.session import Inputs
from roadhem_training.bench.baselines import Nearness
from roadhem_training.bench.compare import Comparison, class_figures, compare, line_figures, share
from roadhem_training.bench.corrections import Clicked, click_edges, click_figures
from roadhem_training.bench.doubts import Doubted, doubt_figures
from roadhem_training.bench.probes import Probed, clear_places, marking_places, probe
from roadhem_training.bench.run import trace_set
from roadhem_training.bench.samples import Floats
from roadhem_training.bench.sets import BenchSet
from roadhem_training.bench.spread import Misses, clopper_pearson, misses, spread_figures
from roadhem_training.bench.truth import Lines, Truth, read_truth

PROBE_SEED = 1


@dataclass(frozen=True)
class Findings:
    """What one set gave. near : the net's nearness over it, for the baselines; unplaced : seeds that gave nothing."""

    bench_set: BenchSet
    inputs: Inputs
    truth: Truth
    lines: Lines
    seeds: Floats
    unplaced: int
    comparison: Comparison
    misses: Misses
    doubted: Doubted
    clear: Probed
    markings: Probed
    clicked: list[Clicked]
    near: Nearness


def examine(bench_set: BenchSet, model: Path, out: Path) -> Findings:
    """Trace a set and measure it."""
    traced = trace_set(bench_set, model, out)
    session = traced.session
    truth = read_truth(bench_set, session.crs, session.grid)
    comparison = compare(traced.lines, truth)
    return Findings(
        bench_set=bench_set,
        inputs=bench_set.inputs(model),
        truth=truth,
        lines=traced.lines,
        seeds=traced.seeds,
        unplaced=traced.unplaced,
        comparison=comparison,
        misses=misses(traced, truth),
        doubted=Doubted.of(comparison, traced.doubts, traced.weights),
        clear=probe(clear_places(truth, session.bounds_m, PROBE_SEED), traced.trace),
        markings=probe(marking_places(truth, PROBE_SEED), traced.trace),
        clicked=click_edges(truth.whole_edges(), traced.seeds, traced.trace),
        near=Nearness.of(session),
    )


def examine_all(sets: Sequence[BenchSet], model: Path, out: Path) -> list[Findings]:
    """Examine sets one after another, saying how it goes."""
    found = []
    for bench_set in sets:
        one = examine(bench_set, model, out)
        found.append(one)
        figures = line_figures([one.comparison])
        click.echo(
            f"{bench_set.group:18s}{bench_set.title:20s}"
            f"{figures['truth, m']:7.0f} m  completeness {figures['completeness at 0.30 m']:.3f}"
            f"  correctness {figures['correctness at 0.30 m']:.3f}"
        )
    return found


def figures_of(found: Sequence[Findings]) -> dict[str, Any]:
    """Pool the figures of sets."""
    comparisons = [one.comparison for one in found]
    return {
        "each set": {one.bench_set.title: line_figures([one.comparison]) for one in found},
        "lines": line_figures(comparisons),
        "clicks": click_figures([edge for one in found for edge in one.clicked]),
        "seeds": _seed_figures(found),
        "by kind": class_figures(comparisons, "kind"),
        "by sight": class_figures(comparisons, "sight"),
        "spread": spread_figures(Misses.joined([one.misses for one in found])),
        "doubts": doubt_figures([one.doubted for one in found]),
    }


def _seed_figures(found: Sequence[Findings]) -> dict[str, Any]:
    placed = sum(len(one.seeds) for one in found)
    return {
        "beside an edge": {"tried": placed, "unplaced": share(sum(one.unplaced for one in found), placed)},
        "far from any edge": _probe_figures([one.clear for one in found]),
        "on a lane line": _probe_figures([one.markings for one in found]),
    }


def _probe_figures(probes: Sequence[Probed]) -> dict[str, float]:
    tried, unplaced = sum(p.tried for p in probes), sum(p.unplaced for p in probes)
    low, high = clopper_pearson(unplaced, tried) if tried else (float("nan"), float("nan"))
    return {"tried": tried, "unplaced": share(unplaced, tried), "low": low, "high": high}
