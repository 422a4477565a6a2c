"""A small net of the right shape, made without torch: the field store's test ground."""

from __future__ import annotations

import hashlib
import json
from pathlib import Path
from typing import Any

import numpy as np
import onnx
from numpy.typing import NDArray
from onnx import TensorProto, helper, numpy_helper

from roadhem.fields.inputs import INPUTS
from roadhem.fields.layout import NET_FIELDS
from roadhem.fields.model import CONTRACT

RECEPTIVE_FIELD = 32
"""Radius in working pixels of `deep_net`, counted by hand: 2 + 2 + 4 + 8 (four strided steps) and a cell of 16."""

CALIBRATION = {"a": 0.25, "b": 1.1}


def _graph(nodes: list[onnx.NodeProto], weights: dict[str, NDArray[np.float32]], fields: int) -> onnx.ModelProto:
    tiles = helper.make_tensor_value_info("tiles", TensorProto.FLOAT, [1, len(INPUTS), "height", "width"])
    out = helper.make_tensor_value_info("fields", TensorProto.FLOAT, [1, fields, None, None])
    stored = [numpy_helper.from_array(array, name) for name, array in weights.items()]
    graph = helper.make_graph(nodes, "fields", [tiles], [out], stored)
    return helper.make_model(graph, opset_imports=[helper.make_opsetid("", 17)], ir_version=8)


def deep_net(width: int = 16, fields: int = len(NET_FIELDS)) -> onnx.ModelProto:
    """Strided steps down to 16 px and back by skips, seeded weights, like the real net but shallow."""
    rng = np.random.default_rng(5)
    weights: dict[str, NDArray[np.float32]] = {}
    nodes: list[onnx.NodeProto] = []

    def conv(name: str, source: str, inputs: int, outputs: int, size: int, stride: int) -> str:
        spread = 1.5 / np.sqrt(inputs * size * size)
        weights[f"{name}.w"] = rng.normal(0, spread, (outputs, inputs, size, size)).astype(np.float32)
        weights[f"{name}.b"] = rng.normal(0, 0.1, outputs).astype(np.float32)
        nodes.append(helper.make_node("Conv", [source, f"{name}.w", f"{name}.b"], [f"{name}.c"],
                                      strides=[stride] * 2, pads=[size // 2] * 4))  # fmt: skip
        nodes.append(helper.make_node("Relu", [f"{name}.c"], [name]))
        return name

    levels = [conv("stem", "tiles", len(INPUTS), width, 5, 2)]
    for level in range(3):
        levels.append(conv(f"down{level}", levels[-1], width, width, 3, 2))
    weights["scales"] = np.array([1, 1, 2, 2], np.float32)
    x = levels[-1]
    for level in (2, 1, 0):
        grown = f"grown{level}"
        nodes.append(helper.make_node("Resize", [x, "", "scales"], [grown], mode="nearest",
                                      coordinate_transformation_mode="asymmetric", nearest_mode="floor"))  # fmt: skip
        nodes.append(helper.make_node("Add", [grown, levels[level]], [f"sum{level}"]))
        x = f"sum{level}"
    weights["head.w"] = rng.normal(0, 0.2, (fields, width, 1, 1)).astype(np.float32)
    nodes.append(helper.make_node("Conv", [x, "head.w"], ["head"]))
    nodes.append(helper.make_node("Tanh", ["head"], ["fields"]))
    return _graph(nodes, weights, fields)


def mean_net() -> onnx.ModelProto:
    """Field k is the mean of input k % 6 over the cell's 2 x 2 pixels."""
    weights = np.zeros((len(NET_FIELDS), len(INPUTS), 2, 2), np.float32)
    for k in range(len(NET_FIELDS)):
        weights[k, k % len(INPUTS)] = 0.25
    nodes = [helper.make_node("Conv", ["tiles", "w"], ["fields"], strides=[2, 2])]
    return _graph(nodes, {"w": weights}, len(NET_FIELDS))


def write_model(folder: Path, net: onnx.ModelProto, name: str = "made", **card: Any) -> Path:
    """Write a model folder whose card fits; `card` changes what it says."""
    folder.mkdir(parents=True, exist_ok=True)
    weights = net.SerializeToString()
    (folder / "weights.onnx").write_bytes(weights)
    written = CONTRACT | {
        "name": name,
        "parent": None,
        "receptive_field": RECEPTIVE_FIELD,
        "calibration": CALIBRATION,
        "weights_sha256": hashlib.sha256(weights).hexdigest(),
    }
    (folder / "card.json").write_text(json.dumps(written | card))
    return folder
