"""The legend below a picture, and how marks look in picture and legend alike."""

from __future__ import annotations

from typing import Any

import matplotlib.patheffects as effects
from matplotlib.figure import Figure
from matplotlib.lines import Line2D

from roadhem.delivery.palette import CASING, DOUBT, FAINT, INK, SPREAD_COLOURS, UNPLACED, step_names
from roadhem.lines.records import TracedLayers

CAUTION = (
    "Not a survey, and not for steering a vehicle. Spread is one standard error (1σ), relative to the image; "
    "whatever the image is off comes on top."
)
DASHES = (0, (2.2, 1.6))
"""Of hidden, bridged stretches."""


def draw_legend(figure: Figure, share: float, unit: float, layers: TracedLayers, title: str) -> None:
    """Draw title, counts, the steps of spread, marks and a caution into the lowest `share` of a figure.

    Parameters
    ----------
    unit : scale of letters and lines.
    """
    panel = figure.add_axes((0.0, 0.0, 1.0, share))
    panel.set_axis_off()
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
        Line2D([], [], **doubt_style(unit)),
        Line2D([], [], **cross_style(unit)),
    ]
    panel.legend(
        marks, ["hidden, bridged", "doubt: look here first", "unplaced seed"], title="also shown",
        loc="center right", bbox_to_anchor=(0.992, 0.47), ncols=len(marks), **_legend_style(unit),
    )  # fmt: skip
    panel.text(0.015, 0.1, CAUTION, fontsize=13.5 * unit, color=FAINT, va="center")


def _key(colour: str, dashes: Any, unit: float) -> Line2D:
    return Line2D([], [], color=colour, lw=5 * unit, ls=dashes, path_effects=cased(7 * unit))


def _legend_style(unit: float) -> dict[str, Any]:
    return {
        "frameon": False, "fontsize": 14 * unit, "title_fontsize": 13 * unit, "labelcolor": INK, "alignment": "left",
        "columnspacing": 1.6, "handlelength": 2.4,
    }  # fmt: skip


def _count(number: int, what: str) -> str:
    return f"{number} {what}{'' if number == 1 else 's'}"


def doubt_style(unit: float) -> dict[str, Any]:
    """How doubts look: small rings."""
    return _mark("o", 7 * unit, DOUBT, 1.4 * unit)


def cross_style(unit: float) -> dict[str, Any]:
    """How unplaced seeds look: crosses."""
    return _mark("x", 11 * unit, UNPLACED, 2.6 * unit)


def cased(width: float) -> list[Any]:
    """Draw something on a dark casing of a width in points."""
    return [effects.Stroke(linewidth=width, foreground=CASING, alpha=0.8), effects.Normal()]


def _mark(marker: str, size: float, colour: str, pen: float) -> dict[str, Any]:
    return {
        "ls": "", "marker": marker, "ms": size, "mfc": "none", "mec": colour, "mew": pen,
        "path_effects": cased(2 * pen),
    }  # fmt: skip
