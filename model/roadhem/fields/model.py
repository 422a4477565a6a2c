"""A model: the net's weights and the card that says what they are."""

from __future__ import annotations

import hashlib
import json
import os
from dataclasses import dataclass, field
from functools import cache, cached_property
from pathlib import Path
from typing import Any

import numpy as np
import onnxruntime

from roadhem.errors import BadInput
from roadhem.fields.inputs import DEVIATION, INPUTS, MEAN
from roadhem.fields.layout import NET_FIELDS, NET_STRIDE, QUANTUM
from roadhem.state import CARD, WEIGHTS, find_model
from roadhem.tiles.grid import PIXEL_M

STRIDE = 16
"""Working pixels per cell of the net's coarsest level: the corners of blocks are multiples of it."""

QUANTA = {name: QUANTUM.get(name, 1e-4) for name in NET_FIELDS}
"""Value of one count of each stored field."""

CONTRACT: dict[str, Any] = {
    "pixel_m": PIXEL_M,
    "inputs": list(INPUTS),
    "normalisation": {"mean": MEAN, "deviation": DEVIATION},
    "fields": list(NET_FIELDS),
    "quantum": QUANTA,
    "stride": STRIDE,
}
"""What a card must say word for word, for this runtime to use its model."""


@dataclass(frozen=True, eq=False)
class Model:
    """Weights that fit their card and this runtime.

    Attributes
    ----------
    name : as lines name it.
    card : the card's content.
    weights : the ONNX file's bytes.
    """

    name: str
    card: dict[str, Any]
    weights: bytes = field(repr=False)

    @classmethod
    def load(cls, path_or_name: str | os.PathLike[str] | None = None) -> Model:
        """Load a model.

        Parameters
        ----------
        path_or_name : a model's folder, its weights' file, or a name on the shelf; None for the shipped model.

        Raises
        ------
        BadInput
            If there is none, or its weights do not fit its card or this version of Roadhem.
        """
        folder = find_model(None if path_or_name is None else os.fspath(path_or_name))
        card = _card(folder)
        name = str(card.get("name", ""))
        weights = folder.joinpath(WEIGHTS).read_bytes()
        if not name or hashlib.sha256(weights).hexdigest() != card.get("weights_sha256"):
            raise BadInput(f"The model {name or folder.name}'s weights do not match its card; fetch the model again.")
        model = cls(name, card, weights)
        model._check()
        return model

    @property
    def halo(self) -> int:
        """Working pixels that a block needs around it: the receptive field's radius in whole strides."""
        return -(-int(self.card["receptive_field"]) // STRIDE) * STRIDE

    @cached_property
    def calibration(self) -> tuple[float, float]:
        """(a, b) of log_sigma' = a + b * log_sigma."""
        return float(self.card["calibration"]["a"]), float(self.card["calibration"]["b"])

    def session(self, rows: int, cols: int, threads: int) -> onnxruntime.InferenceSession:
        """Return a session for inputs of (1, 6, rows, cols)."""
        _share_arena()
        options = onnxruntime.SessionOptions()
        options.intra_op_num_threads = threads
        options.inter_op_num_threads = 1
        options.execution_mode = onnxruntime.ExecutionMode.ORT_SEQUENTIAL
        options.add_session_config_entry("session.intra_op.allow_spinning", "0")
        options.add_session_config_entry("session.use_env_allocators", "1")
        options.add_free_dimension_override_by_name("height", rows)
        options.add_free_dimension_override_by_name("width", cols)
        options.log_severity_level = 4
        return onnxruntime.InferenceSession(self.weights, options, providers=["CPUExecutionProvider"])

    def _check(self) -> None:
        """Refuse a card that says something else than CONTRACT, and a graph that does something else."""
        strange = [key for key, value in CONTRACT.items() if not _same(self.card.get(key), value)]
        for key, part in (("receptive_field", "halo"), ("calibration", "calibration")):
            try:
                getattr(self, part)
            except (KeyError, TypeError, ValueError):
                strange.append(key)
        if strange:
            what = ", ".join(strange)
            raise BadInput(f"The model {self.name} was made for another version of Roadhem ({what}); use another.")
        try:
            session = self.session(STRIDE, STRIDE, 1)
            (fields,) = session.run(["fields"], {"tiles": np.zeros((1, len(INPUTS), STRIDE, STRIDE), np.float32)})
        except Exception as error:  # onnxruntime raises a dozen kinds, none with a common root
            raise BadInput(f"The model {self.name} is not a Roadhem net; name another model.") from error
        if fields.shape != (1, len(NET_FIELDS), STRIDE // NET_STRIDE, STRIDE // NET_STRIDE):
            raise BadInput(f"The model {self.name} gives other fields than Roadhem traces; name another model.")


@cache
def _share_arena() -> None:
    """Let all sessions of the process draw on one arena: a session for each shape of block costs no memory then."""
    kind, use = onnxruntime.OrtAllocatorType.ORT_ARENA_ALLOCATOR, onnxruntime.OrtMemType.DEFAULT
    defaults = onnxruntime.OrtArenaCfg(0, -1, -1, -1)
    onnxruntime.create_and_register_allocator(onnxruntime.OrtMemoryInfo("Cpu", kind, 0, use), defaults)


def _card(folder: Path) -> dict[str, Any]:
    for file in (CARD, WEIGHTS):
        if not (folder / file).is_file():
            raise BadInput(f"The model folder {folder} has no {file}; name a folder that holds a whole model.")
    try:
        card = json.loads((folder / CARD).read_text(encoding="utf-8"))
    except ValueError as error:
        raise BadInput(f"The card {folder / CARD} cannot be read; fetch the model again.") from error
    if not isinstance(card, dict):
        raise BadInput(f"The card {folder / CARD} is no model's card; fetch the model again.")
    return card


def _same(found: Any, wanted: Any) -> bool:
    """Compare values of a card, numbers to 1e-9."""
    if isinstance(wanted, dict):
        return isinstance(found, dict) and found.keys() == wanted.keys() and all(
            _same(found[key], wanted[key]) for key in wanted
        )
    if isinstance(wanted, float):
        return isinstance(found, (int, float)) and abs(found - wanted) < 1e-9
    return bool(found == wanted)
