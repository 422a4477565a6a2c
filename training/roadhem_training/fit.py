"""Training: draws crops from a pool, keeps a moving average, writes checkpoints it can go on from.

    python -m roadhem_training.fit --pool build/pool --out build/fit --steps 30000 --minutes 120
"""

from __future__ import annotations

import json
import math
import os
import time
from dataclasses import dataclass
from pathlib import Path

import click
import torch
from torch import Tensor, nn

from roadhem_training.crops import Crops
from roadhem_training.losses import losses, total
from roadhem_training.network import FieldNet, Shape

BATCH = 8
LEARNING_RATE, WARM_STEPS, FLOOR = 2e-3, 300, 0.02
"""Peak rate, steps to reach it, and the share of it left at the end of the cosine."""

WEIGHT_DECAY, CLIP_NORM = 1e-4, 5.0
EMA = 0.999
LOG_EVERY, SAVE_EVERY, REFRESH_EVERY = 50, 500, 20
FEWEST_SCENES = 8
"""Training starts once the pool holds this many."""


@dataclass
class Run:
    """Everything a training run is: the net, its moving average, the optimiser, the step."""

    net: FieldNet
    average: FieldNet
    optimiser: torch.optim.Optimizer
    step: int = 0

    @classmethod
    def new(cls, shape: Shape, seed: int) -> Run:
        """Start from random weights."""
        torch.manual_seed(seed)
        net, average = FieldNet(shape), FieldNet(shape)
        average.load_state_dict(net.state_dict())
        net = net.to(memory_format=torch.channels_last)
        return cls(net, average, torch.optim.AdamW(net.parameters(), LEARNING_RATE, weight_decay=WEIGHT_DECAY))

    def save(self, path: Path) -> None:
        """Write the run beside `path` and rename it."""
        part = path.with_suffix(".part")
        state = {"shape": self.net.shape.as_dict(), "step": self.step, "net": self.net.state_dict(),
                 "average": self.average.state_dict(), "optimiser": self.optimiser.state_dict()}
        torch.save(state, part)
        os.replace(part, path)

    @classmethod
    def load(cls, path: Path) -> Run:
        """Read a run; weights only, no code is executed."""
        state = torch.load(path, weights_only=True)
        run = cls.new(Shape(**state["shape"]), 0)
        run.net.load_state_dict(state["net"])
        run.average.load_state_dict(state["average"])
        run.optimiser.load_state_dict(state["optimiser"])
        run.step = state["step"]
        return run


def rate(step: int, steps: int) -> float:
    """Share of the peak rate at a step: linear warm-up, then a cosine down to FLOOR."""
    warm = min(1.0, (step + 1) / WARM_STEPS)
    done = min(1.0, step / steps)
    return warm * (FLOOR + (1 - FLOOR) * 0.5 * (1 + math.cos(math.pi * done)))


def average_into(average: nn.Module, net: nn.Module, step: int) -> None:
    """Move the average towards the net; early on the average is shorter."""
    keep = min(EMA, (step + 1) / (step + 10))
    with torch.no_grad():
        for slow, fast in zip(average.state_dict().values(), net.state_dict().values(), strict=True):
            if slow.dtype.is_floating_point:
                slow.lerp_(fast, 1 - keep)
            else:
                slow.copy_(fast)


def step_once(run: Run, crops: Crops, steps: int) -> dict[str, Tensor]:
    """One step of training; returns the losses."""
    for group in run.optimiser.param_groups:
        group["lr"] = LEARNING_RATE * rate(run.step, steps)
    batch = crops.draw(BATCH)
    with torch.autocast("cpu", torch.bfloat16):
        raw = run.net(batch.inputs.contiguous(memory_format=torch.channels_last))
    parts = losses(raw, batch)
    run.optimiser.zero_grad(set_to_none=True)
    total(parts).backward()
    nn.utils.clip_grad_norm_(run.net.parameters(), CLIP_NORM)
    run.optimiser.step()
    average_into(run.average, run.net, run.step)
    run.step += 1
    return parts


def wait_for_scenes(crops: Crops) -> None:
    """Return once the pool holds enough scenes."""
    while crops.refresh(at_most=crops.keep) < FEWEST_SCENES:
        time.sleep(5)


@click.command()
@click.option("--pool", "folder", type=click.Path(file_okay=False, path_type=Path), required=True)
@click.option("--out", type=click.Path(file_okay=False, path_type=Path), required=True)
@click.option("--steps", type=int, default=30_000, help="Length of the learning-rate schedule.")
@click.option("--minutes", type=float, default=math.inf, help="Stop after this long, whatever the step.")
@click.option("--threads", type=int, default=1)
@click.option("--seed", type=int, default=0)
@click.option("--start", type=click.Path(exists=True, dir_okay=False, path_type=Path),
              help="Take weights from this checkpoint and begin a new schedule.")
def main(
    folder: Path, out: Path, steps: int, minutes: float, threads: int, seed: int, start: Path | None
) -> None:
    """Train, or go on from OUT/run.pt if it is there."""
    torch.set_num_threads(threads)
    out.mkdir(parents=True, exist_ok=True)
    checkpoint = out / "run.pt"
    run = Run.load(checkpoint) if checkpoint.exists() else Run.new(Shape(), seed)
    if start and not checkpoint.exists():
        run.net.load_state_dict(Run.load(start).net.state_dict())
        run.average.load_state_dict(Run.load(start).average.state_dict())
    crops = Crops(folder, seed + run.step)
    wait_for_scenes(crops)
    run.net.train()
    began, sums, since = time.monotonic(), {}, time.monotonic()
    while run.step < steps and time.monotonic() - began < minutes * 60:
        if run.step % REFRESH_EVERY == 0:
            crops.refresh()
        for name, value in step_once(run, crops, steps).items():
            sums[name] = sums.get(name, 0.0) + float(value.detach()) / LOG_EVERY
        if run.step % LOG_EVERY == 0:
            line = {"step": run.step, "scenes": len(crops.samples), "seconds": time.monotonic() - since, **sums}
            with (out / "log.jsonl").open("a") as log:
                log.write(json.dumps({k: round(v, 5) for k, v in line.items()}) + "\n")
            sums, since = {}, time.monotonic()
        if run.step % SAVE_EVERY == 0:
            run.save(checkpoint)
    run.save(checkpoint)


if __name__ == "__main__":
    main()
