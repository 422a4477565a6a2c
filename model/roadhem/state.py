"""Where Roadhem keeps what outlives a run: the model shelf and the logs."""

from __future__ import annotations

import json
import os
from dataclasses import dataclass
from pathlib import Path
from typing import Any

from roadhem.errors import BadInput

HOME_VARIABLE = "ROADHEM_HOME"
SHIPPED = Path(__file__).parent / "shelf"
CARD, WEIGHTS = "card.json", "weights.onnx"


@dataclass(frozen=True)
class ShelvedModel:
    """A model folder on the shelf.

    Attributes
    ----------
    name : as its card says.
    folder : holds weights.onnx and card.json.
    shipped : whether it lies in the package, where nothing may be changed.
    card : the card's content.
    """

    name: str
    folder: Path
    shipped: bool
    card: dict[str, Any]


def home() -> Path:
    """Return the folder of all state: $ROADHEM_HOME, else the platform's user-data folder."""
    named = os.environ.get(HOME_VARIABLE)
    if named:
        return Path(named)
    from platformdirs import user_data_path

    return user_data_path("roadhem", appauthor=False)


def logs() -> Path:
    """Return the folder of logs, made if need be."""
    folder = home() / "logs"
    folder.mkdir(parents=True, exist_ok=True)
    return folder


def shelf() -> list[ShelvedModel]:
    """Return every model on the shelf, shipped ones first, then by name."""
    own = home() / "shelf"
    found = [(card, True) for card in _cards(SHIPPED)] + [(card, False) for card in _cards(own)]
    models = [_shelved(card, shipped) for card, shipped in found]
    return sorted(models, key=lambda m: (not m.shipped, m.name))


def shipped_model() -> Path:
    """Return the folder of the model that is used when none is named.

    Raises
    ------
    BadInput : the package was installed without a model.
    """
    models = [model for model in shelf() if model.shipped]
    if not models:
        raise BadInput(f"No model is shipped in {SHIPPED}; reinstall roadhem, or name a model folder with --model")
    return models[0].folder


def find_model(name: str | None) -> Path:
    """Return the folder of a model named by its shelf name or by its path; None means the shipped one.

    Raises
    ------
    BadInput : no such model; the sentence lists what there is.
    """
    if name is None:
        return shipped_model()
    models = shelf()
    for model in models:
        if model.name == name:
            return model.folder
    path = Path(name)
    folder = path.parent if path.is_file() else path
    if (folder / CARD).is_file():
        return folder
    known = ", ".join(model.name for model in models) or "none"
    if path.is_file() or path.is_dir():
        raise BadInput(f"{name} is not a Roadhem model; a model folder holds {WEIGHTS} and {CARD}.")
    raise BadInput(f"There is no model '{name}', neither on the shelf ({known}) nor as a folder.")


def _cards(folder: Path) -> list[Path]:
    return [path for path in [folder / CARD, *sorted(folder.glob(f"*/{CARD}"))] if path.is_file()]


def _shelved(card_path: Path, shipped: bool) -> ShelvedModel:
    try:
        card = json.loads(card_path.read_text(encoding="utf-8"))
        name = str(card["name"])
    except (ValueError, KeyError, TypeError) as error:
        raise BadInput(f"{card_path} is not a model card; restore it or remove its folder") from error
    return ShelvedModel(name, card_path.parent, shipped, card)
