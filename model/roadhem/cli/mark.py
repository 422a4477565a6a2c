"""`roadhem mark`."""

from __future__ import annotations

import sys
from dataclasses import asdict
from pathlib import Path
from typing import Any

import click

from roadhem.cli.options import (
    PATH,
    inputs_of,
    json_option,
    print_figures,
    print_json,
    progress_bar,
    tell_faults,
    tiles_options,
)


@click.command
@tiles_options
@click.option("--out", required=True, type=PATH, metavar="SEEDS.gpkg", help="GeoPackage to write.")
@json_option
def mark(out: Path, as_json: bool, **tiles_and_model: Any) -> None:
    """Propose seeds where an edge is sure.

    Looks over all tiles and sets one seed on every edge that shows beyond doubt. Look them over before you trace.

    \b
    Example:
      roadhem mark flight/*.tif --out marks.gpkg
    """
    from roadhem.jobs.mark import MarkJob, mark_tiles
    from roadhem.jobs.session import open_session

    with progress_bar("pages") as progress:
        summary = mark_tiles(MarkJob(inputs_of(**tiles_and_model), out), open_session, progress)
    if as_json:
        print_json(asdict(summary))
    else:
        print_figures([("seeds", f"{summary.seeds}"), ("km they give", f"{summary.km:.3f}")])
    nothing = [] if summary.seeds else ["no edge is sure enough to propose a seed; set seeds by hand"]
    sys.exit(tell_faults(summary.faults, summary.warnings + nothing))
