"""Tiles on which edges are drawn as numbers, and a net that reads them: whole runs without training.

A tile's red is the signed distance to the nearest edge (left positive), green and blue the edge's direction. The net
turns them into fields, so that every verb can be tried through real files, a real graph and the real tracer.
"""

from __future__ import annotations

import hashlib
import json
from collections.abc import Sequence
from itertools import pairwise
from pathlib import Path

import numpy as np
import onnx
import pyogrio
import rasterio
import shapely
from numpy.typing import ArrayLike, NDArray
from onnx import TensorProto, helper, numpy_helper
from rasterio.transform import from_origin

from roadhem.fields.inputs import DEVIATION, MEAN
from roadhem.fields.layout import NET_FIELDS, REACH_M
from roadhem.fields.model import CONTRACT

EAST, NORTH = 500_000.0, 5_600_000.0
PIXEL = 0.10
RECEPTIVE_FIELD = 16


def drawn_model(folder: Path, name: str = "drawn") -> Path:
    """Write a model folder whose net reads drawn tiles."""
    folder.mkdir(parents=True, exist_ok=True)
    weights = _graph().SerializeToString()
    (folder / "weights.onnx").write_bytes(weights)
    card = {
        **CONTRACT,
        "name": name,
        "parent": None,
        "receptive_field": RECEPTIVE_FIELD,
        "calibration": {"a": 0.0, "b": 1.0},
        "training": {},
        "scores": {},
        "weights_sha256": hashlib.sha256(weights).hexdigest(),
        "licence": "GPL-3.0-or-later",
        "version": "1",
    }
    (folder / "card.json").write_text(json.dumps(card), encoding="utf-8")
    return folder


def drawn_pixels(
    lines: Sequence[ArrayLike], size: int, *, east: float = EAST, north: float = NORTH, pixel: float = PIXEL
) -> NDArray[np.uint8]:
    """Draw edges (lists of CRS points, drive-over surface left) as (3, size, size); `north` is the upper border."""
    x = east + (np.arange(size) + 0.5) * pixel
    y = north - (np.arange(size) + 0.5) * pixel
    places = np.stack(np.meshgrid(x, y), axis=-1).reshape(-1, 2)
    pieces = [piece for line in lines for piece in pairwise(line)]
    best = np.full(len(places), np.inf)
    signed, axis = np.zeros(len(places)), np.tile([1.0, 0.0], (len(places), 1))
    for a, b in np.asarray(pieces, dtype=np.float64):
        along = (b - a) / np.hypot(*(b - a))
        rel = places - a
        foot = np.clip(rel @ along, 0, np.hypot(*(b - a)))
        away = np.hypot(*(rel - foot[:, None] * along).T)
        closer = away < best
        side = np.where(along[0] * rel[:, 1] - along[1] * rel[:, 0] >= 0, 1.0, -1.0)
        best, signed = np.where(closer, away, best), np.where(closer, side * away, signed)
        axis[closer] = along
    red = 0.5 + np.clip(signed, -REACH_M, REACH_M) / (2 * REACH_M)
    planes = np.stack([red, 0.5 + 0.5 * axis[:, 0], 0.5 + 0.5 * axis[:, 1]])
    return np.rint(255 * planes).astype(np.uint8).reshape(3, size, size)


def write_tile(
    path: Path,
    pixels: NDArray[np.generic],
    *,
    east: float = EAST,
    north: float = NORTH,
    pixel: float = PIXEL,
    crs: str | None = "EPSG:25832",
    **profile: object,
) -> Path:
    """Write (bands, H, W) as a GeoTIFF."""
    bands, height, width = pixels.shape
    with rasterio.open(
        path, "w", driver="GTiff", count=bands, height=height, width=width, dtype=pixels.dtype.name, crs=crs,
        transform=from_origin(east, north, pixel, pixel), **profile,
    ) as tile:  # fmt: skip
        tile.write(pixels)
    return path


def write_seeds(
    path: Path,
    points: Sequence[tuple[float, float] | None],
    ids: Sequence[str] | None = None,
    *,
    crs: str = "EPSG:25832",
    layer: str = "seeds",
) -> Path:
    """Write a seeds layer; None is a seed without geometry."""
    shapes = np.array([None if p is None else shapely.Point(p) for p in points], dtype=object)
    names = np.array(ids or [str(n) for n in range(1, len(points) + 1)], dtype=object)
    pyogrio.raw.write(
        str(path), shapely.to_wkb(shapes), [names], ["seed_id"], geometry_type="Point", crs=crs, layer=layer,
        driver="GPKG" if path.suffix == ".gpkg" else "GeoJSON", append=path.exists(),
    )  # fmt: skip
    return path


def _graph() -> onnx.ModelProto:
    """Fields from drawn colours: undo the scaling, pool to the stride, then write each field as a formula."""
    nodes, constants = [], {}

    def constant(name: str, *values: float) -> str:
        constants[name] = np.array(values, np.float32).reshape(1, -1, 1, 1)
        return name

    def node(kind: str, inputs: Sequence[str], output: str, **attributes: object) -> str:
        nodes.append(helper.make_node(kind, list(inputs), [output], **attributes))
        return output

    node("AveragePool", ["tiles"], "pooled", kernel_shape=[2, 2], strides=[2, 2])
    parts = ["red", "green", "blue", "valid", "rest"]
    constants["sizes"] = np.array([1, 1, 1, 1, 2], np.int64)
    nodes.append(helper.make_node("Split", ["pooled", "sizes"], parts, axis=1))
    deviation, mean = constant("deviation", DEVIATION), constant("mean", MEAN)
    half, two, one = constant("half", 0.5), constant("two", 2.0), constant("one", 1.0)
    for colour in parts[:3]:
        scaled = node("Mul", [colour, deviation], f"{colour}_scaled")
        node("Sub", [node("Add", [scaled, mean], f"{colour}_01"), half], f"{colour}_centred")
    signed = node("Mul", ["red_centred", constant("span", 2 * REACH_M)], "signed")
    ax, ay = (node("Mul", [f"{c}_centred", two], a) for c, a in (("green", "ax"), ("blue", "ay")))
    away = node("Div", [node("Abs", [signed], "abs"), constant("reach", REACH_M)], "away")
    near = node("Mul", [node("Sub", [one, away], "near"), "valid"], "nearness")
    zero = node("Mul", [near, constant("nothing", 0.0)], "zero")
    full = node("Add", [zero, one], "full")
    dx = node("Mul", [signed, ay], "dx")
    dy = node("Neg", [node("Mul", [signed, ax], "signed_ax")], "dy")
    xx, yy = node("Mul", [ax, ax], "xx"), node("Mul", [ay, ay], "yy")
    cos2 = node("Sub", [xx, yy], "cos2")
    sin2 = node("Mul", [node("Mul", [ax, ay], "xy"), two], "sin2")
    sigma = node("Add", [zero, constant("log_sigma", float(np.log(0.04)))], "sigma")
    surface = node("Sigmoid", [node("Mul", [signed, constant("steep", 8.0)], "steeper")], "surface")
    given = {
        "nearness": near, "other": zero, "dx": dx, "dy": dy, "cos2": cos2, "sin2": sin2, "log_sigma": sigma,
        "raised": full, "lowered": zero, "flush": zero, "seen": full, "shadow": zero, "hidden": zero,
        "surface": surface,
    }  # fmt: skip
    node("Concat", [given[name] for name in NET_FIELDS], "fields", axis=1)
    graph = helper.make_graph(
        nodes,
        "drawn",
        [helper.make_tensor_value_info("tiles", TensorProto.FLOAT, [1, 6, "height", "width"])],
        [helper.make_tensor_value_info("fields", TensorProto.FLOAT, [1, len(NET_FIELDS), "rows", "cols"])],
        [numpy_helper.from_array(value, name) for name, value in constants.items()],
    )
    return helper.make_model(graph, opset_imports=[helper.make_opsetid("", 17)], ir_version=8)
