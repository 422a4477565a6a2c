"""`roadhem trace`."""

from __future__ import annotations

import sys
from pathlib import Path
from typing import Any

import click

from roadhem.cli.options import (
    PATH,
    ballpark_option,
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
@click.option("--seeds", required=True, metavar="FILE[:LAYER]", help="Points beside the edges to trace.")
@click.option("--out", required=True, type=PATH, metavar="OUT.gpkg", help="GeoPackage or GeoJSON to write.")
@click.option("--workers", type=int, default=1, show_default=True, metavar="N", help="Processes to trace in.")
@click.option("--resume", is_flag=True, help="Go on where a killed run of the same job stopped.")
@click.option("--picture", type=PATH, metavar="P.png", help="Draw the lines over the tiles.")
@ballpark_option
@json_option
def trace(
    seeds: str,
    out: Path,
    workers: int,
    resume: bool,
    picture: Path | None,
    allow_ballpark: bool,
    as_json: bool,
    **tiles_and_model: Any,
) -> None:
    """Trace the edge beside every seed of a set of tiles.

    Writes the layers edges, stretches, doubts, unplaced and seeds; OUT.geojson holds the edges in longitude and
    latitude, with the other layers beside it as OUT.LAYER.geojson. Each edge carries its spread: one standard error
    in metres, relative to the image.

    \b
    Example:
      roadhem trace flight/*.tif --seeds marks.gpkg --out lines.gpkg --picture lines.png
    """
    from roadhem.jobs.session import open_session
    from roadhem.jobs.trace import TraceJob, trace_tiles
    from roadhem.lines.files import check_target

    if picture is not None:
        check_target(picture, (".png",))
    job = TraceJob(inputs_of(**tiles_and_model, workers=workers), seeds, out, workers, resume, allow_ballpark)
    with progress_bar("seeds") as progress:
        summary = trace_tiles(job, open_session, progress)
    if picture is not None:
        from roadhem.delivery.picture import draw_traced

        session = summary.session
        draw_traced(picture, session, session.bounds_m, session.grid, summary.layers, f"Traced edges, {out.name}")
    if as_json:
        print_json(summary.figures())
    else:
        print_figures(
            [
                ("seeds", f"{summary.seeds}"),
                ("lines", f"{summary.lines}"),
                ("km", f"{summary.km:.3f}"),
                ("hidden km", f"{summary.hidden_km:.3f}"),
                ("unplaced", f"{summary.unplaced}"),
                ("seconds", f"{summary.seconds:.1f}"),
                ("Mpx/s", f"{summary.mpx_per_s:.2f}"),
            ]
        )
    sys.exit(tell_faults(summary.faults, summary.warnings))
