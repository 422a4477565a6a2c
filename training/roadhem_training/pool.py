"""A pool of scenes on disk: made by one process, drawn from by training, so that training never waits.

    python -m roadhem_training.pool --out build/pool --first 0 --count 400
"""

from __future__ import annotations

import os
from dataclasses import dataclass
from pathlib import Path

import click
import cv2
import numpy as np
from numpy.typing import NDArray

from roadhem.fields.inputs import RELIEF_REACH, relief
from roadhem.fields.layout import REACH_M
from roadhem_training.scenes.distance import signed_distance
from roadhem_training.scenes.render import make_scene
from roadhem_training.targets import Targets, targets_of

SIZE = 1024
"""Pixels along a scene of the pool."""

HELD_OUT = 900_000
"""Scenes with seeds from here on are for measuring only; training never sees them."""

_NEARNESS_COUNT, _OFFSET_COUNT, _AXIS_COUNT, _RELIEF_COUNT = 250, 15_000, 127, 127


@dataclass(frozen=True)
class Sample:
    """One scene as the net sees it, packed into small integers.

    Attributes
    ----------
    image : (3, H, W) uint8; valid : (H, W) bool; relief : (H, W) int8 (127 = 1); relief_valid : (H, W) bool.
    near : (2, h, w) uint8 nearness of edge and other lines; offset : (2, h, w) int16; axis : (2, h, w) int8.
    kind, sight, surface : (h, w) uint8.
    """

    image: NDArray[np.uint8]
    valid: NDArray[np.bool_]
    relief: NDArray[np.int8]
    relief_valid: NDArray[np.bool_]
    near: NDArray[np.uint8]
    offset: NDArray[np.int16]
    axis: NDArray[np.int8]
    kind: NDArray[np.uint8]
    sight: NDArray[np.uint8]
    surface: NDArray[np.uint8]


def pack(seed: int, size: int = SIZE, style: str | None = None) -> Sample:
    """Make scene `seed` and pack it."""
    scene = make_scene(seed, size, style=style)
    distance = signed_distance(scene.world, scene.pixel).sdf
    surface = np.clip(0.5 - distance / scene.pixel, 0, 1).astype(np.float32)
    return _packed(scene.image, scene.valid, scene.height, targets_of(scene, surface))


def _packed(
    image: NDArray[np.uint8], valid: NDArray[np.bool_], height: NDArray[np.float32], targets: Targets
) -> Sample:
    relief_, relief_valid = relief(np.pad(height, RELIEF_REACH, mode="edge"))
    return Sample(
        image=np.ascontiguousarray(image.transpose(2, 0, 1)),
        valid=valid,
        relief=np.rint(relief_ * _RELIEF_COUNT).astype(np.int8),
        relief_valid=relief_valid > 0,
        near=np.rint(np.stack([targets.nearness, targets.other]) * _NEARNESS_COUNT).astype(np.uint8),
        offset=np.rint(targets.offset / REACH_M * _OFFSET_COUNT).astype(np.int16),
        axis=np.rint(targets.axis * _AXIS_COUNT).astype(np.int8),
        kind=targets.kind,
        sight=targets.sight,
        surface=np.rint(targets.surface * _NEARNESS_COUNT).astype(np.uint8),
    )


def save(sample: Sample, path: Path) -> None:
    """Write a sample beside `path` and rename it, so that a reader never meets half of one."""
    part = path.with_suffix(f".{os.getpid()}.part")
    with part.open("wb") as file:
        np.savez(file, **vars(sample))
    part.replace(path)


def load(path: Path) -> Sample:
    """Read a sample that `save` wrote."""
    with np.load(path, allow_pickle=False) as arrays:
        return Sample(**{name: arrays[name] for name in arrays.files})


def scale_relief(values: NDArray[np.int8]) -> NDArray[np.float32]:
    """Packed relief to (-1, 1)."""
    return values.astype(np.float32) / _RELIEF_COUNT


def scale_near(values: NDArray[np.uint8]) -> NDArray[np.float32]:
    """Packed nearness or surface to 0..1."""
    return values.astype(np.float32) / _NEARNESS_COUNT


def scale_offset(values: NDArray[np.int16]) -> NDArray[np.float32]:
    """Packed offsets to metres."""
    return values.astype(np.float32) * (REACH_M / _OFFSET_COUNT)


def scale_axis(values: NDArray[np.int8]) -> NDArray[np.float32]:
    """Packed double-angle axis to -1..1."""
    return values.astype(np.float32) / _AXIS_COUNT


@click.command()
@click.option("--out", type=click.Path(file_okay=False, path_type=Path), required=True)
@click.option("--first", type=int, default=0, help="Seed of the first scene.")
@click.option("--count", type=int, default=400, help="How many scenes.")
def main(out: Path, first: int, count: int) -> None:
    """Fill a folder with packed scenes; those already there are kept."""
    cv2.setNumThreads(1)
    out.mkdir(parents=True, exist_ok=True)
    for seed in range(first, first + count):
        path = out / f"{seed:07d}.npz"
        if not path.exists():
            save(pack(seed), path)


if __name__ == "__main__":
    main()
