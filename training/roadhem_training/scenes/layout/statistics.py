"""Sizes of a place as its outline shows them, to compare invented places with real ones.

python -m roadhem_training.scenes.layout.statistics OUTLINES.geojson [--style S] [--worlds N]
"""

from __future__ import annotations

import argparse
from pathlib import Path

import numpy as np
import shapely
from numpy.typing import NDArray
from shapely.geometry import LineString, MultiPolygon, Polygon, box
from shapely.geometry.base import BaseGeometry

from roadhem_training.scenes.layout.overlay import polygons
from roadhem_training.scenes.layout.stretches import Chain

STEP = 0.5  # metres between samples of an outline
TURNING = 1 / 25.0  # curvature beyond which a sample belongs to a corner, 1/m
LEAST_TURN = np.radians(40)  # less is no corner
WINDOW = 3  # samples on each side over which the heading is taken
ISLAND = 400.0  # square metres; smaller holes are islands, larger ones blocks
FAR = 45.0  # metres; no carriageway is wider
PERCENTILES = (5, 25, 50, 75, 95)


def outline_statistics(surface: BaseGeometry, window: Polygon) -> dict[str, NDArray[np.float64]]:
    """Measure the outline of a drive-over surface inside `window`.

    Returns
    -------
    corner_radius : radii of corners of the land (curb returns), metres; below 1 is sharp.
    bend_radius : radii of gentle bends, sampled every STEP metres, metres, those below 1000.
    width : distance from an outline to the one opposite, sampled, metres.
    island_area, block_area : of the holes wholly inside, square metres.
    """
    names = ("corner_radius", "bend_radius", "width", "island_area", "block_area")
    found: dict[str, list[float]] = {name: [] for name in names}
    border = shapely.boundary(surface)
    tree = shapely.STRtree(shapely.get_parts(border))
    for part in polygons(surface):
        part = shapely.geometry.polygon.orient(part)
        for ring in (part.exterior, *part.interiors):
            if ring.length > 6:
                _measure(Chain(shapely.get_coordinates(ring)), window, tree, found)
        for ring in part.interiors:
            hole = Polygon(ring)
            if window.contains(hole):
                found["island_area" if hole.area < ISLAND else "block_area"].append(hole.area)
    return {k: np.array(v) for k, v in found.items()}


def _measure(ring: Chain, window: Polygon, tree: shapely.STRtree, found: dict[str, list[float]]) -> None:
    n = max(8, round(ring.length / STEP))
    step = ring.length / n
    xy = ring.points(np.arange(n) * step)
    chord = np.roll(xy, -WINDOW, axis=0) - np.roll(xy, WINDOW, axis=0)
    heading = np.arctan2(chord[:, 1], chord[:, 0])
    turn = np.angle(np.exp(1j * (np.roll(heading, -1) - heading)))
    inside = shapely.contains_xy(window, *xy.T)
    corner = turn < -TURNING * step
    for run in _runs(corner):
        total = -turn[run].sum()
        if total > LEAST_TURN and inside[run].all():
            blur = 2 * WINDOW * step
            found["corner_radius"].append(max(0.0, (len(run) * step - blur)) / total if total > 0 else 0.0)
    gentle = np.abs(turn) < TURNING * step
    smooth = np.convolve(np.concatenate([turn[-10:], turn, turn[:10]]), np.ones(21) / 21, "valid")
    calm = np.convolve(np.concatenate([gentle[-10:], gentle, gentle[:10]]), np.ones(21), "valid") > 20.5
    radius = step / np.maximum(np.abs(smooth), 1e-9)
    found["bend_radius"] += radius[calm & inside & (radius < 1000)].tolist()
    left = np.stack([-chord[:, 1], chord[:, 0]], axis=1) / np.maximum(np.hypot(*chord.T), 1e-9)[:, None]
    for k in np.flatnonzero(calm & inside)[:: int(10 / STEP)]:
        wide = _across(xy[k], left[k], tree)
        if wide:
            found["width"].append(wide)


def _runs(mask: NDArray[np.bool_]) -> list[NDArray[np.intp]]:
    """Indices of the runs of a circular mask."""
    if mask.all() or not mask.any():
        return [np.arange(len(mask))] if mask.any() else []
    first = int(np.flatnonzero(~mask)[0])
    index = (np.arange(len(mask)) + first) % len(mask)
    cuts = np.flatnonzero(np.diff(mask[index].astype(int))) + 1
    return [part for part in np.split(index, cuts) if mask[part[0]]]


def _across(start: NDArray[np.float64], left: NDArray[np.float64], tree: shapely.STRtree) -> float | None:
    ray = LineString([start + 0.2 * left, start + FAR * left])
    hits = [tree.geometries[k].intersection(ray) for k in tree.query(ray, predicate="intersects")]
    return min((shapely.Point(start).distance(h) for h in hits), default=None)


def summary(measured: dict[str, NDArray[np.float64]]) -> str:
    """The percentiles of each measure, one line each."""
    lines = []
    for name, values in measured.items():
        marks = " ".join(f"{v:9.2f}" for v in np.percentile(values, PERCENTILES)) if len(values) else "none"
        sharp = (
            f"  sharp (< 1 m) {np.mean(values < 1):.2f}" if name == "corner_radius" and len(values) else ""
        )
        lines.append(f"{name:14s} n={len(values):6d}  {marks}{sharp}")
    return "\n".join(lines)


def _pooled(parts: list[dict[str, NDArray[np.float64]]]) -> dict[str, NDArray[np.float64]]:
    return {k: np.concatenate([p[k] for p in parts]) for k in parts[0]}


def real_statistics(path: Path, crs: str) -> dict[str, NDArray[np.float64]]:
    """Statistics of outlines in a vector file, transformed to `crs` (metres)."""
    import pyogrio
    from pyproj import Transformer

    meta, _, geometry, _ = pyogrio.raw.read(path)
    to = Transformer.from_crs(meta["crs"], crs, always_xy=True)
    shapes = shapely.transform(shapely.from_wkb(geometry), lambda c: np.stack(to.transform(*c.T), axis=1))
    surface = shapely.union_all(shapely.make_valid(shapes))
    return outline_statistics(MultiPolygon(polygons(surface)), box(*surface.bounds))


def main() -> None:
    """Print the statistics of a file of outlines beside those of invented worlds."""
    from roadhem_training.scenes.layout import make_world

    parser = argparse.ArgumentParser(description=__doc__)
    parser.add_argument("outlines", type=Path)
    parser.add_argument("--crs", default="EPSG:25833")
    parser.add_argument("--styles", default="old_town,suburb,industry")
    parser.add_argument("--worlds", type=int, default=6)
    parser.add_argument("--size", type=float, default=200.0)
    given = parser.parse_args()
    print(
        f"percentiles {PERCENTILES}\n{given.outlines.name}\n{summary(real_statistics(given.outlines, given.crs))}"
    )
    for style in given.styles.split(","):
        frame = box(0, 0, given.size, given.size)
        worlds = [make_world(seed, given.size, style) for seed in range(given.worlds)]
        print(f"{style}\n{summary(_pooled([outline_statistics(w.surface, frame) for w in worlds]))}")


if __name__ == "__main__":
    main()
