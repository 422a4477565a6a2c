"""Measuring lines against drawn truth: which lines count, and in whose metres."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np
import pyproj
import shapely
from numpy.typing import NDArray

from roadhem.accuracy.matching import BUFFER_M, LineMeasures, measure_lines
from roadhem.errors import BadInput
from roadhem.lines.ground import Ground
from roadhem.lines.vectors import Layer, layers_of, read_layer, to_crs

UNSCORED = ("hidden", "unsure")
"""Values of the truth's column `visible` that are neither missed nor wrong."""


@dataclass(frozen=True)
class MeasureJob:
    """What to compare.

    Attributes
    ----------
    lines, truth, areas : as `read_layer` takes them; areas None for everywhere.
    buffer_m : ground metres within which a line matches.
    allow_ballpark : accept coarse transformations.
    """

    lines: str
    truth: str
    areas: str | None = None
    buffer_m: float = BUFFER_M
    allow_ballpark: bool = False


def unused_areas(job: MeasureJob) -> bool:
    """Say whether the truth's file holds checked areas that the job does not use."""
    return job.areas is None and "areas" in layers_of(job.truth)


def measure_truth(job: MeasureJob) -> LineMeasures:
    """Compare lines with the truth, in ground metres.

    Raises
    ------
    BadInput : a layer cannot be used, or there is no truth to compare with.
    """
    if not (np.isfinite(job.buffer_m) and job.buffer_m > 0):
        raise BadInput("--buffer must be a number of metres above 0")
    lines, truth = read_layer(job.lines, "edges"), read_layer(job.truth, "edges")
    crs = _projected(truth, lines)
    found = _lines(to_crs(lines, crs, job.allow_ballpark), lines)
    drawn = _lines(to_crs(truth, crs, job.allow_ballpark), truth)
    unscored = np.isin(_visible(truth), UNSCORED)
    if not (shapely.length(drawn[~unscored]) > 0).any():
        raise BadInput(f"{job.truth} holds no line that can be scored; name a layer with drawn edges")
    areas = _areas(job, crs) if job.areas is not None else None
    scale = Ground(crs).metres_per_unit(shapely.total_bounds(drawn))
    return measure_lines(
        _scaled(found, scale),
        _scaled(drawn[~unscored], scale),
        buffer_m=job.buffer_m,
        unscored=_scaled(drawn[unscored], scale),
        areas=None if areas is None else _scaled(np.array([areas]), scale)[0],
    )


def _projected(truth: Layer, lines: Layer) -> pyproj.CRS:
    for layer in (truth, lines):
        if layer.crs is None:
            raise BadInput(f"{layer.source} has no CRS; set the one its coordinates are in before using it")
    for layer in (truth, lines):
        if layer.crs is not None and layer.crs.is_projected:
            return layer.crs
    raise BadInput(f"{lines.source} and {truth.source} are both in degrees; bring one to a CRS in metres or feet")


def _lines(geometry: NDArray[Any], layer: Layer) -> NDArray[Any]:
    known = geometry[~(shapely.is_missing(geometry) | shapely.is_empty(geometry))]
    if (shapely.get_dimensions(known) != 1).any():
        raise BadInput(f"{layer.source} holds something else than lines; name a layer of lines")
    return geometry


def _visible(truth: Layer) -> NDArray[Any]:
    return truth.columns.get("visible", np.full(len(truth.geometry), "yes", dtype=object))


def _areas(job: MeasureJob, crs: pyproj.CRS) -> Any:
    layer = read_layer(str(job.areas), "areas")
    union = shapely.union_all(shapely.make_valid(to_crs(layer, crs, job.allow_ballpark)))
    if union.is_empty or union.area <= 0:
        raise BadInput(f"{job.areas} holds no polygon; name a layer of areas")
    return union


def _scaled(geometry: NDArray[Any], scale: float) -> NDArray[Any]:
    return np.asarray(shapely.transform(geometry, lambda xy: xy * scale), dtype=object)
