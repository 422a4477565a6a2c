"""The main job on an invented town: scene, lines, figures, picture and page.

    python tools/demo.py --seed 7 --out build/demo

Calls the public command line for each step, so that what it shows is what a user gets.
"""

from __future__ import annotations

import argparse
import json
import subprocess
import sys
from pathlib import Path
from typing import Any

from roadhem.delivery.page import Figures, write_page

SIZE = 3072
"""Pixels of 0.10 m along a side of the town: 307 m."""


def main() -> None:
    """Run all steps and say where everything is."""
    parser = argparse.ArgumentParser(description="The main job on an invented town.")
    parser.add_argument("--seed", type=int, default=7, help="another number, another town")
    parser.add_argument("--size", type=int, default=SIZE, help="pixels along a side")
    parser.add_argument("--out", type=Path, default=Path("build/demo"), help="folder to write to")
    options = parser.parse_args()
    out: Path = options.out
    out.mkdir(parents=True, exist_ok=True)
    lines, picture, page = out / "lines.gpkg", out / "lines.png", out / "index.html"

    roadhem("scene", "--seed", options.seed, "--size", options.size, "--out", out)
    traced = figures(
        "trace", out / "image.tif", "--height", out / "height.tif", "--seeds", out / "seeds.gpkg", "--out", lines,
        "--picture", picture,
    )  # fmt: skip
    measured = figures("measure", lines, "--truth", out / "edges.gpkg", "--areas", out / "edges.gpkg")
    tables = [trace_table(traced), place_table(measured), whole_table(measured)]
    side = options.size / 10
    write_page(
        page,
        f"Road edges of invented town {options.seed}",
        f"{side:.0f} × {side:.0f} m with heights; every seed traced unattended, then measured against the truth.",
        tables,
        picture,
        "Traced lines over the town, coloured by their spread.",
    )
    for table in tables:
        print(f"\n{table.title}")
        for name, figure in table.rows:
            print(f"  {name:<34}{figure:>12}")
    print(f"\nlines    {lines.resolve()}\npicture  {picture.resolve()}\npage     {page.resolve()}")


def roadhem(*arguments: object) -> str:
    """Run a verb; return what it printed, or end with its exit status if it failed."""
    command = [sys.executable, "-m", "roadhem.cli", *map(str, arguments)]
    done = subprocess.run(command, stdout=subprocess.PIPE, text=True, encoding="utf-8", check=False)
    if done.returncode != 0:
        sys.exit(done.returncode)
    return done.stdout


def figures(*arguments: object) -> dict[str, Any]:
    """Run a verb with --json and return its object."""
    values: dict[str, Any] = json.loads(roadhem(*arguments, "--json"))
    return values


def trace_table(traced: dict[str, Any]) -> Figures:
    """What came of the seeds, and how fast."""
    rows = [
        ("seeds", f"{traced['seeds']}"),
        ("lines", f"{traced['lines']}"),
        ("length", f"{traced['km']:.2f} km"),
        ("of it hidden and bridged", f"{traced['hidden_km'] * 1000:.0f} m"),
        ("seeds unplaced", f"{traced['unplaced']}"),
        ("time", f"{traced['seconds']:.1f} s"),
        ("net", f"{traced['mpx_per_s']:.2f} Mpx/s"),
    ]
    return Figures("Traced", rows)


def place_table(measured: dict[str, Any]) -> Figures:
    """How far the lines are off."""
    rows = [
        ("lateral error, median", metres(measured["lateral_median_m"])),
        ("lateral error, 95 %", metres(measured["lateral_p95_m"])),
        ("RMS of matched lines", metres(measured["rms_m"])),
    ]
    return Figures(
        "Placement", rows, "Against the town's exact truth, relative to the image; lines up to 2 m off it."
    )


def whole_table(measured: dict[str, Any]) -> Figures:
    """How much of the truth was found, and how much of what was found is true."""
    rows = [(name, share(measured[name])) for name in ("completeness", "correctness", "quality", "redundancy")]
    rows.append(("gaps per km", f"{measured['gaps_per_km']:.1f}"))
    return Figures("Completeness", rows, f"A line matches within {measured['buffer_m']:.2f} m of the truth.")


def metres(value: float | None) -> str:
    """Write a length."""
    return "–" if value is None else f"{value:.3f} m"


def share(value: float | None) -> str:
    """Write a share."""
    return "–" if value is None else f"{value:.3f}"


if __name__ == "__main__":
    main()
