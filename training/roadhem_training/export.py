r"""From a training run to a model folder: weights.onnx and its card.

    python -m roadhem_training.export --run build/fit/run.pt --pool build/pool --held-out build/held_out \
        --name NAME --out model/roadhem/shelf
"""

from __future__ import annotations

import hashlib
import json
import warnings
from collections.abc import Iterator
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import click
import numpy as np
import onnxruntime
import torch
from numpy.typing import NDArray

from roadhem import __version__
from roadhem.errors import RoadhemError
from roadhem.fields.inputs import DEVIATION, INPUTS, MEAN, stack_inputs
from roadhem.fields.layout import NET_FIELDS, NET_STRIDE, QUANTUM, REACH_M
from roadhem.tiles.grid import PIXEL_M
from roadhem_training import pool
from roadhem_training.fit import Run
from roadhem_training.losses import SPREAD_BAND_M
from roadhem_training.network import STRIDE, ActivatedNet, FieldNet, receptive_radius

OPSET = 17
PARITY = 1e-4
"""Largest difference allowed between torch and ONNX Runtime, in the fields' own units."""

LICENCE = "GPL-3.0-or-later"


def write_onnx(net: FieldNet, path: Path) -> None:
    """Export the activated net with free height and width."""
    with warnings.catch_warnings():
        warnings.simplefilter("ignore", DeprecationWarning)
        torch.onnx.export(
            ActivatedNet(net).eval(),
            (torch.zeros(1, len(INPUTS), 256, 256),),
            str(path),
            dynamo=False,
            opset_version=OPSET,
            input_names=["tiles"],
            output_names=["fields"],
            dynamic_axes={"tiles": {2: "height", 3: "width"}},
        )


def parity(net: FieldNet, onnx: Path, tiles: NDArray[np.float32]) -> float:
    """Largest absolute difference between torch and ONNX Runtime on `tiles` (1, 6, H, W)."""
    session = onnxruntime.InferenceSession(str(onnx), providers=["CPUExecutionProvider"])
    with torch.no_grad():
        ours = ActivatedNet(net).eval()(torch.from_numpy(tiles)).numpy()
    return float(np.abs(ours - session.run(None, {"tiles": tiles})[0]).max())


@dataclass(frozen=True)
class Calibration:
    """log sigma' = a + b * log sigma, by least negative log likelihood on held-out scenes."""

    a: float
    b: float


def _whole(sample: pool.Sample) -> NDArray[np.float32]:
    return stack_inputs(sample.image.astype(np.float32) / 255, sample.valid,
                        pool.scale_relief(sample.relief), sample.relief_valid.astype(np.float32))[None]


def _spread_pairs(net: FieldNet, folder: Path) -> Iterator[tuple[NDArray[np.float32], NDArray[np.float32]]]:
    """Yield (predicted log sigma, lateral error in metres) of cells beside edges, scene by scene."""
    activated = ActivatedNet(net).eval()
    for path in sorted(folder.glob("*.npz")):
        sample = pool.load(path)
        with torch.no_grad():
            fields = activated(torch.from_numpy(_whole(sample)))[0].numpy()
        near = pool.scale_near(sample.near[0]) > 1 - SPREAD_BAND_M / REACH_M
        cos2, sin2 = pool.scale_axis(sample.axis)
        theta = np.arctan2(sin2, cos2) / 2
        miss = fields[2:4] - pool.scale_offset(sample.offset)
        lateral = miss[1] * np.cos(theta) - miss[0] * np.sin(theta)
        yield fields[NET_FIELDS.index("log_sigma")][near], lateral[near]


def calibrate(net: FieldNet, folder: Path) -> Calibration:
    """Fit the calibration on the scenes of `folder`."""
    pairs = list(_spread_pairs(net, folder))
    log_sigma = torch.from_numpy(np.concatenate([p[0] for p in pairs]).astype(np.float64))
    error = torch.from_numpy(np.concatenate([p[1] for p in pairs]).astype(np.float64)).clamp(-1.5, 1.5)
    parameters = torch.tensor([0.0, 1.0], dtype=torch.float64, requires_grad=True)
    optimiser = torch.optim.LBFGS([parameters], max_iter=50)

    def closure() -> torch.Tensor:
        optimiser.zero_grad()
        calibrated = parameters[0] + parameters[1] * log_sigma
        loss = (calibrated + 0.5 * error.square() * torch.exp(-2 * calibrated)).mean()
        loss.backward()
        return loss

    optimiser.step(closure)
    return Calibration(*(round(float(v), 4) for v in parameters))


def card(
    net: FieldNet, name: str, weights: Path, calibration: Calibration, training: dict[str, Any]
) -> dict[str, Any]:
    """Return everything a user of the weights must know."""
    return {
        "name": name,
        "version": __version__,
        "parent": None,
        "pixel_m": PIXEL_M,
        "inputs": list(INPUTS),
        "normalisation": {"mean": MEAN, "deviation": DEVIATION},
        "fields": list(NET_FIELDS),
        "quantum": {field: QUANTUM.get(field, 1e-4) for field in NET_FIELDS},
        "field_stride": NET_STRIDE,
        "stride": STRIDE,
        "receptive_field": receptive_radius(net),
        "network": net.shape.as_dict(),
        "calibration": vars(calibration),
        "training": training,
        "scores": {},
        "weights_sha256": hashlib.sha256(weights.read_bytes()).hexdigest(),
        "licence": LICENCE,
    }


def data_hash(folder: Path) -> str:
    """Hash of the names and sizes of a pool's scenes: which seeds were there."""
    listing = "\n".join(f"{p.name} {p.stat().st_size}" for p in sorted(folder.glob("*.npz")))
    return hashlib.sha256(listing.encode()).hexdigest()


@click.command()
@click.option("--run", "run_path", type=click.Path(exists=True, path_type=Path), required=True)
@click.option("--pool", "trained_on", type=click.Path(exists=True, path_type=Path), required=True)
@click.option("--held-out", type=click.Path(exists=True, path_type=Path), required=True)
@click.option("--name", required=True)
@click.option("--command", default="", help="The command that trained it, for the card.")
@click.option("--out", type=click.Path(path_type=Path), required=True)
def main(run_path: Path, trained_on: Path, held_out: Path, name: str, command: str, out: Path) -> None:
    """Export the moving average of a run with its card, calibrated on held-out scenes."""
    run = Run.load(run_path)
    net = run.average.eval()
    out.mkdir(parents=True, exist_ok=True)
    part, weights = out / "weights.part.onnx", out / "weights.onnx"
    write_onnx(net, part)
    first = pool.load(min(held_out.glob("*.npz")))
    noise = np.random.default_rng(0).standard_normal((1, len(INPUTS), 256, 256)).astype(np.float32)
    worst = max(parity(net, part, noise), parity(net, part, _whole(first)))
    if worst > PARITY:
        raise RoadhemError(f"torch and ONNX Runtime differ by {worst:.1e}, more than {PARITY:.0e}; not exported.")
    training = {"command": command, "steps": run.step, "scenes": len(list(trained_on.glob("*.npz"))),
                "data_sha256": data_hash(trained_on), "parity": worst}
    written = card(net, name, part, calibrate(net, held_out), training)
    (out / "card.part.json").write_text(json.dumps(written, indent=2) + "\n")
    part.replace(weights)
    (out / "card.part.json").replace(out / "card.json")
    print(f"{name}: step {run.step}, parity {worst:.1e}, calibration {written['calibration']}, "
          f"receptive field {written['receptive_field']} px")


if __name__ == "__main__":
    main()
