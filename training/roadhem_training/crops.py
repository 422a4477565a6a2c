"""Random crops of pooled scenes, turned, mirrored and with channels dropped, as batches for the net."""

from __future__ import annotations

from dataclasses import dataclass
from pathlib import Path

import numpy as np
import torch
from numpy.typing import NDArray
from torch import Tensor

from roadhem.fields.inputs import stack_inputs
from roadhem.fields.layout import NET_STRIDE
from roadhem_training import pool

CROP = 256
"""Working pixels along a crop."""

NO_HEIGHT, GREY, JITTER = 0.5, 0.15, 0.5
"""Probabilities: height dropped, colour made grey, colours and contrast shifted."""


@dataclass(frozen=True)
class Batch:
    """Tensors of one step; see `targets.Targets` for meanings.

    inputs (N, 6, H, W); near (N, 2, h, w); offset, axis (N, 2, h, w); kind, sight (N, h, w) int64;
    surface (N, h, w); known (N, h, w): 1 where the tiles hold data.
    """

    inputs: Tensor
    near: Tensor
    offset: Tensor
    axis: Tensor
    kind: Tensor
    sight: Tensor
    surface: Tensor
    known: Tensor


class Crops:
    """Draws batches from the newest scenes of a pool folder; looks for new ones as training goes on."""

    def __init__(self, folder: Path, seed: int, keep: int = 500) -> None:
        self.folder, self.keep = folder, keep
        self.random = np.random.default_rng(seed)
        self.samples: dict[str, pool.Sample] = {}

    def refresh(self, at_most: int = 8) -> int:
        """Take in up to `at_most` scenes not held yet, drop the oldest beyond `keep`; return how many are held."""
        fresh = [p for p in sorted(self.folder.glob("*.npz")) if p.name not in self.samples]
        for path in fresh[-self.keep :][:at_most] if len(self.samples) < self.keep else fresh[-at_most:]:
            self.samples[path.name] = pool.load(path)
        for name in sorted(self.samples)[: -self.keep]:
            del self.samples[name]
        return len(self.samples)

    def draw(self, count: int) -> Batch:
        """Return a batch of `count` crops."""
        names = list(self.samples)
        picks = [self.samples[names[i]] for i in self.random.integers(0, len(names), count)]
        return collate([crop(sample, self.random) for sample in picks])


def crop(sample: pool.Sample, random: np.random.Generator, size: int = CROP) -> dict[str, NDArray[np.generic]]:
    """Cut one crop at a random place, turn it, and spoil its channels at random."""
    rows, cols = sample.valid.shape
    top, left = (NET_STRIDE * int(random.integers(0, (n - size) // NET_STRIDE + 1)) for n in (rows, cols))
    fine = np.s_[..., top : top + size, left : left + size]
    coarse = np.s_[..., top // NET_STRIDE : (top + size) // NET_STRIDE,
                   left // NET_STRIDE : (left + size) // NET_STRIDE]
    image = sample.image[fine].astype(np.float32) / 255
    known = sample.valid[fine]
    cut = {
        "inputs": stack_inputs(
            _spoilt(image, random),
            known,
            pool.scale_relief(sample.relief[fine]),
            sample.relief_valid[fine].astype(np.float32),
        ),
        "near": pool.scale_near(sample.near[coarse]),
        "offset": pool.scale_offset(sample.offset[coarse]),
        "axis": pool.scale_axis(sample.axis[coarse]),
        "kind": sample.kind[coarse].astype(np.int64),
        "sight": sample.sight[coarse].astype(np.int64),
        "surface": pool.scale_near(sample.surface[coarse]),
        "known": known[::NET_STRIDE, ::NET_STRIDE].astype(np.float32),
    }
    if random.random() < NO_HEIGHT:
        cut["inputs"][4:6] = 0
    return turned(cut, int(random.integers(0, 4)), bool(random.integers(0, 2)))


def _spoilt(image: NDArray[np.float32], random: np.random.Generator) -> NDArray[np.float32]:
    if random.random() < GREY:
        image = np.repeat(np.tensordot(np.float32([0.3, 0.59, 0.11]), image, 1)[None], 3, 0)
    if random.random() < JITTER:
        gain = random.normal(1, 0.12, (3, 1, 1)) * random.lognormal(0, 0.2)
        lift = random.normal(0, 0.04, (3, 1, 1)) + random.normal(0, 0.05)
        image = np.clip((image - 0.45) * gain + 0.45 + lift, 0, 1)
    if random.random() < JITTER / 2:
        image = np.clip(image + random.normal(0, random.uniform(0, 0.04), image.shape), 0, 1)
    return image.astype(np.float32)


def turned(cut: dict[str, NDArray[np.generic]], quarters: int, mirror: bool) -> dict[str, NDArray[np.generic]]:
    """Turn by quarter turns counter-clockwise and mirror east-west, the vectors with the pixels."""
    out = {name: np.rot90(array, quarters, (-2, -1)) for name, array in cut.items()}
    east, north = out["offset"]
    for _ in range(quarters):
        east, north = -north, east
    cos2, sin2 = out["axis"] * (-1 if quarters % 2 else 1)
    if mirror:
        out = {name: array[..., ::-1] for name, array in out.items()}
        east, north, cos2, sin2 = -east[:, ::-1], north[:, ::-1], cos2[:, ::-1], -sin2[:, ::-1]
    out["offset"], out["axis"] = np.stack([east, north]), np.stack([cos2, sin2])
    return out


def collate(cuts: list[dict[str, NDArray[np.generic]]]) -> Batch:
    """Stack crops into tensors."""
    return Batch(**{name: torch.from_numpy(np.stack([cut[name] for cut in cuts])) for name in cuts[0]})
