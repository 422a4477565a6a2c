"""Training: what a stopped run goes on from."""

from __future__ import annotations

import json
from pathlib import Path

import numpy as np
import pytest
import torch
from click.testing import CliRunner

from roadhem_training import pool
from roadhem_training.crops import Crops
from roadhem_training.fit import FEWEST_SCENES, Run, main, rate, step_once
from roadhem_training.losses import losses
from roadhem_training.network import Shape

SIZE = 256
SMALL = Shape(widths=(8, 8, 16, 16))


def noise_sample(seed: int) -> pool.Sample:
    """A sample with a straight vertical edge between a dark and a bright half, under noise."""
    random = np.random.default_rng(seed)
    half = SIZE // 2
    offset_m = (half / 2 - 0.5 - np.arange(half)) * 0.2
    near = np.clip(1 - np.abs(offset_m) / 2, 0, 1)
    row = np.where(np.abs(offset_m) < 2, offset_m, 0)
    flat = np.zeros((half, half))
    return pool.Sample(
        image=(random.integers(0, 60, (3, SIZE, SIZE)) + 150 * (np.arange(SIZE) > SIZE // 2)).astype(np.uint8),
        valid=np.ones((SIZE, SIZE), bool),
        relief=np.zeros((SIZE, SIZE), np.int8),
        relief_valid=np.zeros((SIZE, SIZE), bool),
        near=np.rint(250 * np.stack([flat + near, flat])).astype(np.uint8),
        offset=np.rint(7500 * np.stack([flat + row, flat])).astype(np.int16),
        axis=np.rint(127 * np.stack([flat - 1, flat]) * (near > 0)).astype(np.int8),
        kind=flat.astype(np.uint8),
        sight=flat.astype(np.uint8),
        surface=np.rint(250 * (flat + (offset_m > 0))).astype(np.uint8),
    )


@pytest.fixture
def scenes(tmp_path: Path) -> Path:
    """A pool folder with the fewest scenes that training begins with."""
    folder = tmp_path / "pool"
    folder.mkdir()
    for seed in range(FEWEST_SCENES):
        pool.save(noise_sample(seed), folder / f"{seed:07d}.npz")
    return folder


def test_a_stopped_run_goes_on_where_it_was(scenes: Path, tmp_path: Path) -> None:
    """Should reach the same weights through a checkpoint as without one."""
    torch.set_num_threads(1)
    whole = Run.new(SMALL, 1)
    halves = Run.new(SMALL, 1)
    batches = Crops(scenes, 1)
    batches.refresh(FEWEST_SCENES)
    for _ in range(2):
        step_once(whole, batches, 10)
    batches = Crops(scenes, 1)
    batches.refresh(FEWEST_SCENES)
    step_once(halves, batches, 10)
    halves.save(tmp_path / "run.pt")
    halves = Run.load(tmp_path / "run.pt")
    step_once(halves, batches, 10)
    assert halves.step == whole.step == 2
    for a, b in zip(whole.average.state_dict().values(), halves.average.state_dict().values(), strict=True):
        torch.testing.assert_close(a, b)


def test_training_lowers_its_losses_and_logs_them(scenes: Path, tmp_path: Path) -> None:
    """Should learn one straight edge in a hundred steps and write a log and a checkpoint."""
    out = tmp_path / "fit"
    arguments = ["--pool", str(scenes), "--out", str(out), "--steps", "100"]
    result = CliRunner().invoke(main, arguments, catch_exceptions=False)
    assert result.exit_code == 0
    first, last = (json.loads(line) for line in (out / "log.jsonl").read_text().splitlines())
    assert last["edge"] < 0.6 * first["edge"]
    assert last["surface"] < 0.6 * first["surface"]
    assert Run.load(out / "run.pt").step == 100


def test_a_perfect_answer_costs_nothing(scenes: Path) -> None:
    """Should give losses near zero for the truth itself; the spread is least where sigma equals the error
    (Nix and Weigend 1994; yardsticks §6, from memory there)."""
    crops = Crops(scenes, 2)
    crops.refresh(FEWEST_SCENES)
    batch = crops.draw(2)
    near = torch.logit(batch.near.clamp(1e-6, 1 - 1e-6))
    offset = 2 * torch.atanh(batch.offset / 2 * 0.999999)
    axis = torch.atanh(batch.axis * 0.999999)
    kind = 20 * torch.nn.functional.one_hot(batch.kind, 3).permute(0, 3, 1, 2).float()
    surface = torch.logit(batch.surface.clamp(1e-6, 1 - 1e-6))[:, None]
    raw = torch.cat([near, offset, axis, torch.full_like(surface, -20.0), kind, kind, surface], 1)
    parts = losses(raw, batch)
    for name in ("edge", "other", "offset", "lateral", "axis", "kind", "sight", "surface"):
        assert parts[name] < 2e-3, name


def test_rate_warms_up_and_cools_down() -> None:
    """Should rise first, be highest early and end at a small share of its peak."""
    rates = [rate(step, 1000) for step in range(1001)]
    assert rates[0] < 0.01
    assert max(rates) == pytest.approx(rates[300], abs=0.25)
    assert rates[-1] == pytest.approx(0.02)
