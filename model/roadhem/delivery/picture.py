"""The picture: traced lines over their tiles, coloured by spread, so that a person can judge at a glance."""

from __future__ import annotations

import math
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import matplotlib.patheffects as effects
import numpy as np
import shapely
from matplotlib.axes import Axes
from matplotlib.backends.backend_agg import FigureCanvasAgg
from matplotlib.collections import LineCollection
from matplotlib.figure import Figure
from matplotlib.lines import Line2D
from numpy.typing import NDArray

from roadhem.delivery.backdrop import Bounds, Readable, backdrop
from roadhem.delivery.palette import (
    CASING,
    DOUBT,
    FAINT,
    INK,
    PAPER,
    SPREAD_COLOURS,
    UNPLACED,
    step_names,
    step_of,
)
from roadhem.lines.files import whole_file
from roadhem.lines.records import TracedLayers
from roadhem.lines.tables import Table
from roadhem.tiles.grid import WorkingGrid

CAUTION = (
    "Not a survey, and not for steering a vehicle. Spread is one standard error (1σ), relative to the image; "
    "whatever the image is off comes on top."
)
LEAST_WIDTH, MOST_SIDE = 1800, 2600
"""Pixels of the map: its width at least, its longer side at most (unless that would make it narrower)."""
LEGEND_SHARE = 0.095
"""Height of the legend as a share of the width."""
UNIT_INCHES = 19.5
"""Width at which the legend's letters have the sizes given below."""
DASHES = (0, (2.2, 1.6))
MARGIN_M = 8.0
"""Ground shown around the lines."""
DPI = 100
SMALL_DOUBT = 0.3
"""Doubts of a smaller weight are not drawn."""


@dataclass(frozen=True)
class _Map:
    axes: Axes
    pixel_m: float
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
    shown = _Map(axes, max(width_m / width, height_m / height), layers, grid)
    _draw_lines(shown)
    _draw_marks(shown)
    _draw_scale_bar(shown, bounds)
    _draw_legend(figure, share, layers, title)
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
    """Show the tiles a little paler and greyer than they are, so that the lines stand out."""
    colour, cover = image[..., :3], image[..., 3:]
    grey = colour.mean(axis=-1, keepdims=True)
    calm = np.clip(0.55 * colour + 0.45 * grey, 0, 1) ** 0.95
    paper = np.array([0.87, 0.87, 0.86], np.float32)
    axes.imshow(
        np.clip(calm * cover + paper * (1 - cover), 0, 1),
        extent=(bounds[0], bounds[2], bounds[1], bounds[3]),
        interpolation="antialiased",
    )
    axes.set_axis_off()
    axes.set_aspect("equal", adjustable="box")
    axes.set_autoscale_on(False)


def _draw_lines(shown: _Map) -> None:
    stretches = shown.layers.stretches
    paths = _paths(stretches, shown.grid)
    if not paths:
        return
    casing = LineCollection(paths, colors=CASING, linewidths=4.2, alpha=0.55, capstyle="round", zorder=3)
    shown.axes.add_collection(casing)
    steps = np.array([step_of(row["spread_m"]) for row in stretches.rows])
    hidden = np.array([row["seen"] == "bridged" for row in stretches.rows])
    for step, colour in enumerate(SPREAD_COLOURS):
        for dashed in (False, True):
            wanted = [path for path, yes in zip(paths, (steps == step) & (hidden == dashed), strict=True) if yes]
            style: Any = DASHES if dashed else "solid"
            shown.axes.add_collection(
                LineCollection(wanted, colors=colour, linewidths=2.3, linestyles=style, capstyle="butt", zorder=4)
            )


def _draw_marks(shown: _Map) -> None:
    rows = zip(shown.layers.doubts.geometry, shown.layers.doubts.rows, strict=True)
    doubts = _places([shape for shape, row in rows if row["weight"] >= SMALL_DOUBT], shown.grid)
    shown.axes.plot(*doubts.T, **_doubt_style(), zorder=5)
    lost = _places(shown.layers.unplaced.geometry, shown.grid)
    shown.axes.plot(*lost.T, **_cross_style(), zorder=6)


def _doubt_style() -> dict[str, Any]:
    return {"ls": "", "marker": "o", "ms": 6.0, "mfc": "none", "mec": DOUBT, "mew": 1.2, "path_effects": _cased(2.6)}


def _cross_style() -> dict[str, Any]:
    return {"ls": "", "marker": "x", "ms": 9.0, "mec": UNPLACED, "mew": 2.2, "path_effects": _cased(4.4)}


def _cased(width: float) -> list[Any]:
    return [effects.Stroke(linewidth=width, foreground=CASING, alpha=0.8), effects.Normal()]


def _draw_scale_bar(shown: _Map, bounds: Bounds) -> None:
    length = round_length(220 * shown.pixel_m)
    x = bounds[0] + 28 * shown.pixel_m
    y = bounds[1] + 30 * shown.pixel_m
    bar = Line2D(
        [x, x + length], [y, y], color="white", lw=5, solid_capstyle="butt", path_effects=_cased(8), zorder=7
    )
    shown.axes.add_line(bar)
    shown.axes.text(
        x + length / 2, y + 9 * shown.pixel_m, f"{length:g} m",
        ha="center", va="bottom", color="white", fontsize=15, path_effects=_cased(3.5), zorder=7,
    )  # fmt: skip
    right, top = bounds[2] - 40 * shown.pixel_m, bounds[3] - 30 * shown.pixel_m
    shown.axes.annotate(
        "N", (right, top), (right, top - 62 * shown.pixel_m), ha="center", va="center", color="white", fontsize=15,
        path_effects=_cased(3.5), zorder=7,
        arrowprops={"arrowstyle": "-|>", "color": "white", "lw": 2, "path_effects": _cased(4)},
    )  # fmt: skip


def round_length(wanted: float) -> float:
    """Return the largest of 1, 2, 5 times a power of ten that is not above `wanted`."""
    power = 10.0 ** math.floor(math.log10(wanted))
    return max(step * power for step in (1, 2, 5) if step * power <= wanted)


def _draw_legend(figure: Figure, share: float, layers: TracedLayers, title: str) -> None:
    panel = figure.add_axes((0.0, 0.0, 1.0, share))
    panel.set_axis_off()
    unit = figure.get_figwidth() / UNIT_INCHES
    km = sum(row["length_m"] for row in layers.edges.rows) / 1000
    hidden = sum(row["hidden_m"] for row in layers.edges.rows)
    counts = (
        f"{_count(len(layers.edges.rows), 'line')}, {km:.2f} km, of it {hidden:.0f} m hidden; "
        f"{_count(len(layers.unplaced.rows), 'seed')} unplaced"
    )
    panel.text(0.015, 0.84, title, fontsize=19 * unit, weight="bold", color=INK, va="center")
    panel.text(0.985, 0.84, counts, fontsize=15 * unit, color=INK, va="center", ha="right")
    lines = [_key(colour, "solid", unit) for colour in SPREAD_COLOURS]
    steps = panel.legend(
        lines, step_names(), title="spread (1σ) of the line", loc="center left", bbox_to_anchor=(0.008, 0.47),
        ncols=len(lines), **_legend_style(unit),
    )  # fmt: skip
    panel.add_artist(steps)
    marks = [
        _key(SPREAD_COLOURS[0], DASHES, unit),
        Line2D([], [], **_doubt_style()),
        Line2D([], [], **_cross_style()),
    ]
    panel.legend(
        marks, ["hidden, bridged", "doubt: look here first", "unplaced seed"], title="also shown",
        loc="center right", bbox_to_anchor=(0.992, 0.47), ncols=len(marks), **_legend_style(unit),
    )  # fmt: skip
    panel.text(0.015, 0.1, CAUTION, fontsize=13.5 * unit, color=FAINT, va="center")


def _key(colour: str, dashes: Any, unit: float) -> Line2D:
    return Line2D([], [], color=colour, lw=5 * unit, ls=dashes, path_effects=_cased(7 * unit))


def _legend_style(unit: float) -> dict[str, Any]:
    return {
        "frameon": False, "fontsize": 14 * unit, "title_fontsize": 13 * unit, "labelcolor": INK, "alignment": "left",
        "columnspacing": 1.6, "handlelength": 2.4,
    }  # fmt: skip


def _count(number: int, what: str) -> str:
    return f"{number} {what}{'' if number == 1 else 's'}"


def _paths(table: Table, grid: WorkingGrid) -> list[NDArray[np.float64]]:
    return [grid.to_metres(shapely.get_coordinates(shape)) for shape in table.geometry]


def _places(shapes: list[Any], grid: WorkingGrid) -> NDArray[np.float64]:
    known = np.array([shape for shape in shapes if shape is not None], dtype=object)
    return grid.to_metres(shapely.get_coordinates(known)).reshape(-1, 2)
