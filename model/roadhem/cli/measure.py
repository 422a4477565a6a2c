"""`roadhem measure`."""

from __future__ import annotations

from dataclasses import asdict

import click

from roadhem.cli.options import ballpark_option, json_option, print_figures, print_json, tell_faults


@click.command
@click.argument("lines", metavar="LINES")
@click.option("--truth", required=True, metavar="FILE[:LAYER]", help="Edges drawn with care.")
@click.option("--areas", metavar="FILE[:LAYER]", help="Polygons in which every edge is drawn; only they count.")
@click.option("--buffer", "buffer_m", type=float, default=0.30, show_default=True, metavar="M", help="Ground metres.")
@ballpark_option
@json_option
def measure(lines: str, truth: str, areas: str | None, buffer_m: float, allow_ballpark: bool, as_json: bool) -> None:
    """Compare lines with the truth.

    A part of a line matches when the truth is within the buffer, measured round its ends too. Truth whose column
    "visible" says hidden or unsure counts neither as missed nor as wrong.

    \b
    Example:
      roadhem measure lines.gpkg --truth checked.gpkg --areas checked.gpkg --buffer 0.30
    """
    from roadhem.jobs.measure import MeasureJob, measure_truth, unused_areas

    job = MeasureJob(lines, truth, areas, buffer_m, allow_ballpark)
    measures = measure_truth(job)
    if unused_areas(job):
        tell_faults([], [f"{truth} holds checked areas too; --areas {truth} counts only what lies in them"])
    if as_json:
        print_json({name: _plain(value) for name, value in asdict(measures).items()})
        return
    print_figures([(TITLES[name], _shown(name, value)) for name, value in asdict(measures).items()])


TITLES = {
    "buffer_m": "buffer, m",
    "completeness": "completeness",
    "correctness": "correctness",
    "quality": "quality",
    "redundancy": "redundancy",
    "rms_m": "RMS of matched lines, m",
    "lateral_median_m": "lateral error, median, m",
    "lateral_p95_m": "lateral error, 95 %, m",
    "reference_m": "truth, m",
    "lines_m": "lines, m",
    "matched_reference_m": "truth matched, m",
    "matched_lines_m": "lines matched, m",
    "unscored_lines_m": "lines on hidden truth, m",
    "gaps": "gaps",
    "gaps_per_km": "gaps per km",
    "mean_gap_m": "mean gap, m",
}


def _plain(value: float | int | None) -> float | int | None:
    return round(value, 6) if isinstance(value, float) else value


def _shown(name: str, value: float | int | None) -> str:
    if value is None:
        return "-"
    if name == "gaps":
        return str(value)
    return f"{value:.1f}" if name.endswith("_m") and "rms" not in name and value >= 10 else f"{value:.3f}"
