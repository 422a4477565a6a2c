"""What grounds are made of: colours in sunlight, grain at several sizes, rows and joints."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

Colour = tuple[int, int, int]


@dataclass(frozen=True)
class Rows:
    """Units laid in rows.

    Attributes
    ----------
    length, width : of a unit, metres (along and across the rows).
    joint : width of the joints, metres; joint_tone : their brightness relative to the units'.
    bond : shift of every second row, as a share of the length; vary : relative deviation from unit to unit.
    """

    length: float
    width: float
    joint: float
    joint_tone: float
    bond: float = 0.5
    vary: float = 0.05


@dataclass(frozen=True)
class Material:
    """How a ground looks.

    Attributes
    ----------
    colours : sRGB in full sun; a piece takes a random mixture of neighbours in the list (old .. new, dry .. fresh).
    second : sRGB it is mottled with; share : how much of it there is on average, 0..1.
    grain, pebble, spot, patch, drift : relative deviation of brightness at the grain sizes of `noise`.
    rows : units and joints, if laid.
    """

    colours: tuple[Colour, ...]
    second: Colour
    share: float = 0.1
    grain: float = 0.04
    pebble: float = 0.03
    spot: float = 0.03
    patch: float = 0.04
    drift: float = 0.04
    rows: Rows | None = None


MATERIALS: dict[str, Material] = {
    "asphalt": Material(
        ((50, 51, 55), (74, 75, 79), (98, 99, 102), (122, 121, 120), (142, 140, 136), (156, 152, 146)),
        (134, 128, 120), 0.06, 0.026, 0.012, 0.010, 0.012, 0.025,
    ),
    "concrete": Material(
        ((168, 164, 156), (186, 181, 171), (201, 196, 186)),
        (150, 143, 132), 0.08, 0.025, 0.012, 0.012, 0.018, 0.025,
    ),
    "curb": Material(
        ((122, 119, 115), (136, 133, 128), (128, 122, 116)),
        (112, 106, 98), 0.2, 0.06, 0.05, 0.03, 0.04, 0.04,
    ),
    "stone": Material(
        ((150, 146, 140), (168, 162, 153), (132, 128, 124)),
        (128, 120, 110), 0.2, 0.05, 0.04, 0.03, 0.03, 0.03,
    ),
    "slabs": Material(
        ((158, 153, 147), (178, 173, 166), (150, 140, 132), (190, 180, 168)),
        (138, 130, 121), 0.15, 0.03, 0.02, 0.012, 0.018, 0.025, Rows(0.5, 0.5, 0.02, 0.75, 0.5, 0.05),
    ),
    "pavers": Material(
        ((150, 140, 132), (163, 127, 112), (172, 164, 152), (140, 108, 96), (138, 136, 134)),
        (125, 115, 104), 0.15, 0.04, 0.03, 0.012, 0.018, 0.025, Rows(0.2, 0.1, 0.012, 0.7, 0.5, 0.07),
    ),
    "setts": Material(
        ((118, 115, 113), (136, 132, 128), (110, 102, 98), (146, 140, 130)),
        (100, 96, 88), 0.15, 0.035, 0.035, 0.012, 0.018, 0.025, Rows(0.16, 0.16, 0.03, 0.7, 0.5, 0.05),
    ),
    "gravel": Material(
        ((168, 158, 142), (186, 177, 162), (150, 143, 134)),
        (140, 128, 108), 0.15, 0.07, 0.03, 0.02, 0.025, 0.03,
    ),
    "soil": Material(
        ((128, 104, 80), (150, 124, 96), (110, 92, 74), (176, 150, 120)),
        (98, 82, 62), 0.2, 0.05, 0.04, 0.035, 0.04, 0.04,
    ),
    "sand": Material(
        ((205, 188, 158), (218, 204, 178), (192, 172, 140)),
        (180, 160, 128), 0.2, 0.04, 0.03, 0.03, 0.04, 0.05,
    ),
    "grass": Material(
        ((64, 88, 52), (80, 106, 62), (92, 110, 68), (108, 118, 78), (122, 124, 86)),
        (142, 134, 88), 0.12, 0.06, 0.045, 0.035, 0.035, 0.04,
    ),
    "dry_grass": Material(
        ((150, 138, 96), (164, 152, 112), (136, 130, 86)),
        (110, 112, 68), 0.25, 0.06, 0.05, 0.045, 0.045, 0.04,
    ),
    "mown": Material(
        ((74, 104, 56), (92, 120, 66), (106, 130, 76)),
        (134, 136, 84), 0.15, 0.06, 0.05, 0.03, 0.04, 0.05, Rows(400.0, 1.6, 0.0, 1.0, 0.0, 0.035),
    ),
    "planting": Material(
        ((66, 84, 46), (84, 96, 54), (98, 86, 60)),
        (104, 88, 68), 0.3, 0.10, 0.14, 0.10, 0.07, 0.05,
    ),
    "field": Material(
        ((146, 132, 100), (118, 124, 74), (168, 150, 112), (132, 112, 88)),
        (104, 106, 64), 0.2, 0.06, 0.05, 0.04, 0.05, 0.06, Rows(400.0, 0.7, 0.22, 0.86, 0.0, 0.05),
    ),
    "leaves": Material(
        ((140, 98, 62), (158, 116, 72), (120, 86, 58)),
        (104, 84, 54), 0.4, 0.12, 0.14, 0.09, 0.08, 0.06,
    ),
    "snow": Material(
        ((226, 229, 234), (238, 240, 243), (206, 208, 212)),
        (176, 174, 172), 0.25, 0.02, 0.03, 0.04, 0.05, 0.04,
    ),
    "water": Material(
        ((52, 66, 70), (64, 78, 72), (44, 52, 60)),
        (72, 88, 80), 0.2, 0.01, 0.02, 0.03, 0.03, 0.04,
    ),
    "wet": Material(
        ((58, 60, 64), (70, 71, 74), (80, 80, 82)),
        (96, 98, 102), 0.2, 0.03, 0.02, 0.03, 0.05, 0.05,
    ),
    "metal": Material(((120, 122, 124), (150, 151, 152)), (110, 84, 66), 0.15, 0.03, 0.02, 0.02, 0.03, 0.03),
    "ballast": Material(((132, 122, 112), (118, 106, 96)), (104, 86, 72), 0.3, 0.12, 0.08, 0.04, 0.04, 0.04),
    "red_asphalt": Material(((146, 92, 82), (158, 108, 96)), (130, 112, 104), 0.2, 0.05, 0.02, 0.02, 0.04, 0.04),
    "rubber": Material(((150, 76, 62), (76, 112, 84)), (120, 90, 76), 0.1, 0.03, 0.02, 0.02, 0.03, 0.03),
}


def material_of(name: str) -> Material:
    """Return the material of a name; KeyError with the known names if there is none."""
    if name not in MATERIALS:
        raise KeyError(f"no material {name!r}; known are {', '.join(sorted(MATERIALS))}")
    return MATERIALS[name]


def linear(colour: Colour | NDArray[np.float32]) -> NDArray[np.float32]:
    """SRGB 0..255 as seen in full sun to relative reflectance (the tone curve of `camera` undoes it)."""
    return (np.asarray(colour, np.float32) / 255) ** np.float32(2.2)


def pick_colour(material: Material, rng: np.random.Generator, tone: float) -> NDArray[np.float32]:
    """Draw a colour between two neighbours of the material's list and shift it by tone -1..1: (3,) reflectance."""
    colours = np.asarray(material.colours, np.float32)
    place = rng.uniform(0, len(colours) - 1)
    low = min(int(place), len(colours) - 2)
    mixed = colours[low] + (place - low) * (colours[low + 1] - colours[low])
    warm, bright = rng.normal(0, 0.012), rng.normal(0, 0.03)
    mixed = mixed * (1 + bright + warm * np.array([1.0, 0.1, -1.0])) * (1 + 0.28 * tone)
    return linear(np.clip(mixed, 8, 250))


def pick_from(colours: Sequence[Colour], tint: float, rng: np.random.Generator) -> NDArray[np.float32]:
    """Return the reflectance (3,) of the colour that `tint` 0..1 points at, slightly varied."""
    chosen = np.asarray(colours[min(int(tint * len(colours)), len(colours) - 1)], np.float32)
    return linear(np.clip(chosen * rng.uniform(0.88, 1.1) * (1 + rng.normal(0, 0.02, 3)), 8, 250))
