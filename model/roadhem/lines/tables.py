"""Tables: rows of plain values with a geometry, ready to be written to any format."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, field
from typing import Any

import numpy as np
import shapely
from numpy.typing import NDArray


@dataclass
class Table:
    """One layer's rows.

    Attributes
    ----------
    name : of the layer.
    geometry_type : "Point", "LineString", ...
    columns : name to type: "text", "integer", "real", "boolean" or "time" (ISO 8601 text, UTC).
    geometry : shapely geometries, None where a row has none.
    rows : one dict per row; a column that a row lacks is null there.
    """

    name: str
    geometry_type: str
    columns: dict[str, str]
    geometry: list[Any] = field(default_factory=list)
    rows: list[dict[str, Any]] = field(default_factory=list)

    def add(self, geometry: Any, **values: Any) -> None:
        """Append a row."""
        unknown = set(values) - set(self.columns)
        if unknown:
            raise KeyError(f"layer {self.name} has no columns {sorted(unknown)}")
        self.geometry.append(geometry)
        self.rows.append(values)

    def wkb(self) -> NDArray[np.object_]:
        """Geometries as WKB, None kept."""
        shapes = np.empty(len(self.geometry), dtype=object)
        shapes[:] = self.geometry
        return np.asarray(shapely.to_wkb(shapes), dtype=object)

    def column(self, name: str) -> tuple[NDArray[Any], NDArray[np.bool_]]:
        """Return a column's values in its type, and where it is null."""
        raw = [row.get(name) for row in self.rows]
        return typed(raw, self.columns[name])


def typed(values: Sequence[Any], kind: str) -> tuple[NDArray[Any], NDArray[np.bool_]]:
    """Bring values to an array of a column type; nulls hold a filler."""
    null = np.array([value is None for value in values], dtype=bool)
    filler: Any
    filler, dtype = _ARRAY_OF[kind]
    filled = [filler if value is None else value for value in values]
    if kind == "time":
        filled = [str(value).removesuffix("Z") for value in filled]
    return np.array(filled, dtype=dtype), null


_ARRAY_OF: dict[str, tuple[Any, Any]] = {
    "text": ("", object),
    "integer": (0, np.int32),
    "real": (np.nan, np.float64),
    "boolean": (False, np.bool_),
    "time": ("NaT", "datetime64[ms]"),
}
