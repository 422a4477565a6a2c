"""Scores of a model on sets of tiles with truth: one line a set, then all pooled by length.

    python -m roadhem_training.score --model model/roadhem/shelf build/scenes/*
"""

from __future__ import annotations

import json
import tempfile
from collections.abc import Sequence
from pathlib import Path

import click
import pyogrio

from roadhem.accuracy.matching import LineMeasures
from roadhem.jobs.measure import MeasureJob, measure_truth
from roadhem.jobs.session import Inputs, open_session
from roadhem.jobs.trace import TraceJob, trace_tiles

BUFFERS_M = (0.15, 0.30)


def score(folder: Path, model: Path, out: Path) -> dict[float, LineMeasures]:
    """Trace the seeds of a set and measure the lines against its edges, at each buffer.

    The folder holds image.tif or intensity.tif, perhaps height.tif, seeds.gpkg and edges.gpkg.
    """
    tiles = tuple(p for p in (folder / "image.tif", folder / "intensity.tif") if p.exists())
    height = tuple(p for p in (folder / "height.tif",) if p.exists())
    inputs = Inputs(tiles, height, None, model, threads=1)
    lines = out / f"{folder.name}.gpkg"
    trace_tiles(TraceJob(inputs, str(folder / "seeds.gpkg"), lines), open_session, lambda done, total: None)
    truth = str(folder / "edges.gpkg")
    areas = f"{truth}:areas" if "areas" in pyogrio.list_layers(truth)[:, 0] else None
    return {buffer: measure_truth(MeasureJob(str(lines), f"{truth}:edges", areas, buffer)) for buffer in BUFFERS_M}


def pooled(measures: Sequence[LineMeasures]) -> tuple[float, float]:
    """Completeness and correctness over all lengths together."""
    reference, found = sum(m.reference_m for m in measures), sum(m.lines_m for m in measures)
    matched = sum(m.matched_reference_m for m in measures)
    right = sum(m.matched_lines_m for m in measures)
    return matched / reference if reference else float("nan"), right / found if found else float("nan")


def _shown(name: str, by_buffer: dict[float, LineMeasures]) -> str:
    narrow, wide = (by_buffer[b] for b in BUFFERS_M)
    cells = [narrow.completeness, narrow.correctness, wide.completeness, wide.correctness, wide.redundancy,
             wide.lateral_median_m, wide.lateral_p95_m]
    return f"{name:24s} {wide.reference_m:8.0f} " + " ".join("   –  " if c is None else f"{c:6.3f}" for c in cells)


def write_scores(card: Path, group: str, sets: Sequence[str], scores: dict[str, tuple[float, float]]) -> None:
    """Note in a model's card how it did on sets it was not trained on."""
    content = json.loads(card.read_text())
    content["scores"][group] = {
        "sets": list(sets),
        **{f"{name}_at_{buffer}_m": round(value, 3) for buffer, pair in scores.items()
           for name, value in zip(("completeness", "correctness"), pair, strict=True)},
    }  # fmt: skip
    part = card.with_suffix(".part")
    part.write_text(json.dumps(content, indent=2) + "\n")
    part.replace(card)


@click.command()
@click.argument("folders", nargs=-1, required=True, type=click.Path(exists=True, file_okay=False, path_type=Path))
@click.option("--model", type=click.Path(exists=True, path_type=Path), required=True)
@click.option("--out", type=click.Path(file_okay=False, path_type=Path), help="Keep the traced lines here.")
@click.option("--card", "group", metavar="GROUP", help="Write the pooled scores into the model's card as GROUP.")
def main(folders: tuple[Path, ...], model: Path, out: Path | None, group: str | None) -> None:
    """Score a model on FOLDERS."""
    print(f"{'set':24s} {'truth m':>8s}  c.15   r.15   c.30   r.30   redun  median  p95")
    with tempfile.TemporaryDirectory() as scratch:
        kept = out or Path(scratch)
        kept.mkdir(parents=True, exist_ok=True)
        results = {folder.name: score(folder, model, kept) for folder in folders}
    for name, by_buffer in results.items():
        print(_shown(name, by_buffer))
    all_pooled = {f"{buffer:.2f}": pooled([r[buffer] for r in results.values()]) for buffer in BUFFERS_M}
    for buffer, (completeness, correctness) in all_pooled.items():
        print(f"pooled at {buffer} m: completeness {completeness:.3f}, correctness {correctness:.3f}")
    if group:
        write_scores(model / "card.json", group, sorted(results), all_pooled)



if __name__ == "__main__":
    main()
