"""The picture: traced lines over their tiles, coloured by spread, so that a person can judge at a glance."""

from __future__ import annotations

import math
from dataclasses import dataclass
from itertools import groupby
from pathlib import Path
from typing import Any

import numpy as np
import shapely
from matplotlib.axes import Axes
from matplotlib.backends.backend_agg import FigureCanvasAgg
from matplotlib.collections import LineCollection
from matplotlib.figure import Figure
from matplotlib.lines import Line2D
from numpy.typing import NDArray

from roadhem.delivery.backdrop import Bounds, Readable, backdrop
from roadhem.delivery.legend import DASHES, cased, cross_style, doubt_style, draw_legend
from roadhem.delivery.palette import CASING, LABEL, PAPER, SPREAD_COLOURS, step_of
from roadhem.lines.files import whole_file
from roadhem.lines.records import TracedLayers
from roadhem.lines.tables import Table
from roadhem.tiles.grid import WorkingGrid

LEAST_WIDTH, MOST_SIDE = 1800, 2600
"""Pixels of the map: its width at least, its longer side at most (unless that would make it narrower)."""
LEGEND_SHARE = 0.095
"""Height of the legend as a share of the width."""
UNIT_INCHES = 19.5
"""Width at which letters and lines have the sizes, in points, that are given here and in the legend."""
MARGIN_M = 8.0
"""Ground shown around the lines."""
DPI = 100
GREYED = 0.45
"""Share of grey in the backdrop."""
NO_TILE = 0.87
"""Grey where no tile lies."""
LINE_POINTS = 2.3
SMALL_DOUBT = 0.3
"""Doubts of a smaller weight are not drawn."""


@dataclass(frozen=True)
class _Map:
    axes: Axes
    pixel_m: float
    unit: float
    layers: TracedLayers
    grid: WorkingGrid


def draw_traced(
    path: Path, mosaic: Readable, bounds_m: Bounds, grid: WorkingGrid, layers: TracedLayers, title: str
) -> None:
    """Draw traced layers over a mosaic and write a PNG, whole or not at all.

    Parameters
    ----------
    bounds_m : of the mosaic, grid metres; the picture shows the part of it that has lines or seeds.
    grid : brings the layers' coordinates to grid metres.
    """
    image, bounds = backdrop(mosaic, frame(bounds_m, grid, layers))
    width_m, height_m = bounds[2] - bounds[0], bounds[3] - bounds[1]
    pixels = min(MOST_SIDE / max(width_m, height_m), MOST_SIDE / width_m)
    width = max(LEAST_WIDTH, round(width_m * pixels))
    height = min(round(height_m * width / width_m), MOST_SIDE)
    legend = round(LEGEND_SHARE * width)
    figure = Figure(figsize=(width / DPI, (height + legend) / DPI), dpi=DPI, facecolor=PAPER)
    FigureCanvasAgg(figure)
    share = legend / (height + legend)
    axes = figure.add_axes((0.0, share, 1.0, 1.0 - share))
    _show_backdrop(axes, image, bounds)
    shown = _Map(axes, max(width_m / width, height_m / height), width / DPI / UNIT_INCHES, layers, grid)
    _draw_lines(shown)
    _draw_marks(shown)
    _draw_scale_bar(shown, bounds)
    _draw_north(shown, bounds)
    draw_legend(figure, share, shown.unit, layers, title)
    with whole_file(path) as part:
        figure.savefig(part, format="png", dpi=DPI, facecolor=PAPER)


def frame(bounds_m: Bounds, grid: WorkingGrid, layers: TracedLayers) -> Bounds:
    """Return the part of the mosaic around lines and seeds; all of it when there are none."""
    shapes = np.array([*layers.edges.geometry, *layers.unplaced.geometry, *layers.seeds.geometry], dtype=object)
    if not len(shapes) or np.isnan(shapely.total_bounds(shapes)).any():
        return bounds_m
    minx, miny, maxx, maxy = grid.to_metres(shapely.total_bounds(shapes))
    box = shapely.box(minx, miny, maxx, maxy).buffer(MARGIN_M, join_style="mitre")
    seen = box.intersection(shapely.box(*bounds_m))
    if seen.is_empty or seen.area == 0:
        return bounds_m
    left, bottom, right, top = seen.bounds
    return left, bottom, right, top


def _show_backdrop(axes: Axes, image: NDArray[np.float32], bounds: Bounds) -> None:
    """Show the tiles greyer than they are, so that the lines stand out."""
    colour, cover = image[..., :3], image[..., 3:]
    grey = colour.mean(axis=-1, keepdims=True)
    calm = np.clip((1 - GREYED) * colour + GREYED * grey, 0, 1)
    axes.imshow(
        np.clip(calm * cover + NO_TILE * (1 - cover), 0, 1),
        extent=(bounds[0], bounds[2], bounds[1], bounds[3]),
        interpolation="antialiased",
    )
    axes.set_axis_off()
    axes.set_aspect("equal", adjustable="box")
    axes.set_autoscale_on(False)


def _draw_lines(shown: _Map) -> None:
    runs = _runs(shown.layers.stretches, shown.grid)
    width = LINE_POINTS * shown.unit
    paths = [path for path, _, _ in runs]
    casing = LineCollection(paths, colors=CASING, linewidths=1.8 * width, alpha=0.55, capstyle="round", zorder=3)
    shown.axes.add_collection(casing)
    for path, step, hidden in runs:
        style = {"ls": DASHES, "dash_capstyle": "butt"} if hidden else {"solid_capstyle": "round"}
        shown.axes.add_line(Line2D(*path.T, color=SPREAD_COLOURS[step], lw=width, zorder=4, **style))


def _runs(stretches: Table, grid: WorkingGrid) -> list[tuple[NDArray[np.float64], int, bool]]:
    """Join neighbouring stretches that look alike: points in grid metres, step of spread, whether hidden."""
    looks = [(row["edge_id"], step_of(row["spread_m"]), row["seen"] == "bridged") for row in stretches.rows]
    rows = zip(looks, stretches.geometry, strict=True)
    runs = []
    for (_, step, hidden), alike in groupby(rows, key=lambda row: row[0]):
        parts = [shapely.get_coordinates(shape) for _, shape in alike]
        runs.append((grid.to_metres(np.concatenate(parts)), step, hidden))
    return runs


def _draw_marks(shown: _Map) -> None:
    rows = zip(shown.layers.doubts.geometry, shown.layers.doubts.rows, strict=True)
    doubts = _places([shape for shape, row in rows if row["weight"] >= SMALL_DOUBT], shown.grid)
    shown.axes.plot(*doubts.T, **doubt_style(shown.unit), zorder=5)
    lost = _places(shown.layers.unplaced.geometry, shown.grid)
    shown.axes.plot(*lost.T, **cross_style(shown.unit), zorder=6)


def _draw_scale_bar(shown: _Map, bounds: Bounds) -> None:
    pixel, unit = shown.pixel_m, shown.unit
    length = round_length(260 * unit * pixel)
    x, y = bounds[0] + 28 * pixel, bounds[1] + 30 * pixel
    bar = Line2D([x, x + length], [y, y], color=LABEL, lw=6 * unit, solid_capstyle="butt", zorder=7)
    bar.set_path_effects(cased(9 * unit))
    shown.axes.add_line(bar)
    shown.axes.text(x + length / 2, y + 9 * pixel, f"{length:g} m", ha="center", va="bottom", **_label(unit))


def _draw_north(shown: _Map, bounds: Bounds) -> None:
    pixel, unit = shown.pixel_m, shown.unit
    x, y = bounds[2] - 42 * unit * pixel, bounds[3] - 28 * unit * pixel
    arrow = {"arrowstyle": "-|>", "color": LABEL, "lw": 2.4 * unit, "path_effects": cased(5 * unit)}
    place = (x, y - 66 * unit * pixel)
    shown.axes.annotate("N", (x, y), place, ha="center", va="center", arrowprops=arrow, **_label(unit))


def _label(unit: float) -> dict[str, Any]:
    return {"color": LABEL, "fontsize": 16 * unit, "path_effects": cased(4 * unit), "zorder": 7}


def round_length(wanted: float) -> float:
    """Return the largest of 1, 2, 5 times a power of ten that is not above `wanted`."""
    power = 10.0 ** math.floor(math.log10(wanted))
    return max(step * power for step in (1, 2, 5) if step * power <= wanted)


def _places(shapes: list[Any], grid: WorkingGrid) -> NDArray[np.float64]:
    known = np.array([shape for shape in shapes if shape is not None], dtype=object)
    return grid.to_metres(shapely.get_coordinates(known)).reshape(-1, 2)
