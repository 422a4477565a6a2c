"""Pictures of the page: cases over their image, and the reliability of the spread; each a data address."""

from __future__ import annotations

import base64
import io
from collections.abc import Sequence
from typing import Any

import numpy as np
import shapely
from matplotlib.axes import Axes
from matplotlib.backends.backend_agg import FigureCanvasAgg
from matplotlib.collections import LineCollection
from matplotlib.figure import Figure

from roadhem.delivery.backdrop import Bounds, backdrop
from roadhem.delivery.legend import cased
from roadhem.delivery.palette import CASING, FAINT, INK, PAPER
from roadhem.delivery.picture import round_length
from roadhem.tiles.mosaic import Mosaic
from roadhem_training.bench.cases import Case
from roadhem_training.bench.findings import Findings
from roadhem_training.bench.spread import Misses, held_shares
from roadhem_training.bench.truth import Lines

SIDE_INCHES, DPI = 4.2, 100
JPEG = {"quality": 82}
TRUE_COLOUR, UNSCORED_COLOUR, TRACED_COLOUR, SEED_COLOUR = "#3fd0ff", "#b9b4ff", "#ff9d1c", "#ffffff"
GROUP_STYLES = (("#0a6ea8", "-"), ("#b4540a", "--"), ("#3b7a2a", "-."))
NOMINAL = np.linspace(0.02, 0.98, 49)


def draw_case(case: Case, one: Findings, mosaic: Mosaic) -> str:
    """Draw the image around a case, bare on the left, under truth, lines and seeds on the right."""
    bounds = window(case, mosaic.bounds_m)
    image, filled = backdrop(mosaic, bounds)
    figure = Figure(figsize=(2 * SIDE_INCHES, SIDE_INCHES), dpi=DPI)
    FigureCanvasAgg(figure)
    for half in range(2):
        axes = figure.add_axes((half / 2, 0.0, 0.5, 1.0))
        axes.set_axis_off()
        axes.imshow(np.clip(image[..., :3], 0, 1), extent=(filled[0], filled[2], filled[1], filled[3]))
        if half:
            _draw_lines(axes, one)
        axes.set_xlim(bounds[0], bounds[2])
        axes.set_ylim(bounds[1], bounds[3])
    _scale_bar(axes, bounds)
    return _address(figure, "jpg", pil_kwargs=JPEG)


def _draw_lines(axes: Axes, one: Findings) -> None:
    truth = one.truth
    _draw(axes, truth.lines[~truth.scored], UNSCORED_COLOUR, 1.6, ":")
    _draw(axes, truth.lines[truth.scored], TRUE_COLOUR, 2.6, "-")
    _draw(axes, one.lines, TRACED_COLOUR, 1.1, "-")
    axes.plot(*one.seeds.T, "o", ms=5, color=SEED_COLOUR, mec=CASING, mew=1.2, zorder=5)


def window(case: Case, tiles: Bounds) -> Bounds:
    """Return the square to show, moved inside the tiles as far as they reach."""
    half = case.side / 2
    x, y = (
        (low + high) / 2 if high - low < case.side else min(max(middle, low + half), high - half)
        for middle, low, high in zip(case.centre, tiles[:2], tiles[2:], strict=True)
    )
    return (x - half, y - half, x + half, y + half)


def draw_reliability(groups: Sequence[tuple[str, Misses]]) -> str:
    """Draw, for each group, the share of errors held by the interval of each nominal share."""
    figure = Figure(figsize=(5.2, 4.6), dpi=DPI, facecolor=PAPER, layout="constrained")
    FigureCanvasAgg(figure)
    axes = figure.add_subplot()
    axes.plot([0, 1], [0, 1], color=FAINT, lw=1, ls=":", label="as stated")
    for (name, misses), (colour, dash) in zip(groups, GROUP_STYLES, strict=False):
        label = f"{name}, {len(misses.error)} places"
        axes.plot(NOMINAL, held_shares(misses, NOMINAL), color=colour, ls=dash, lw=2, label=label)
    axes.set(xlim=(0, 1), ylim=(0, 1), xlabel="share the interval should hold", ylabel="share it holds", aspect=1)
    axes.tick_params(colors=INK)
    axes.legend(frameon=False, loc="upper left")
    axes.grid(alpha=0.25)
    return _address(figure, "png")


def _draw(axes: Axes, lines: Lines, colour: str, width: float, dash: str) -> None:
    paths = [shapely.get_coordinates(line) for line in lines]
    for shade, extra, order in ((CASING, 1.6, 2), (colour, 0.0, 3)):
        drawn = LineCollection(paths, colors=shade, linewidths=width + extra, linestyles=dash, zorder=order)
        axes.add_collection(drawn)


def _scale_bar(axes: Axes, bounds: Bounds) -> None:
    side = bounds[2] - bounds[0]
    length = round_length(side / 4)
    x, y = bounds[0] + side * 0.04, bounds[1] + side * 0.05
    axes.plot([x, x + length], [y, y], color="white", lw=4, solid_capstyle="butt", path_effects=cased(6), zorder=6)
    place = (x + length / 2, y + side * 0.018)
    axes.text(*place, f"{length:g} m", color="white", ha="center", va="bottom", fontsize=11, path_effects=cased(3))


def _address(figure: Figure, kind: str, **options: Any) -> str:
    held = io.BytesIO()
    figure.savefig(held, format=kind, dpi=DPI, **options)
    media = "jpeg" if kind == "jpg" else kind
    return f"data:image/{media};base64,{base64.b64encode(held.getvalue()).decode('ascii')}"
