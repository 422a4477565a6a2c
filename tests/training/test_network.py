"""The network's budget and export."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest
import torch

from roadhem.fields.inputs import INPUTS
from roadhem.fields.layout import NET_FIELDS, REACH_M
from roadhem_training.export import PARITY, parity, write_onnx
from roadhem_training.network import STRIDE, ActivatedNet, FieldNet, flop_per_pixel, receptive_radius

FLOP_BUDGET = 27_000
"""Per working pixel: what a 2-core laptop affords at about 20 km² an hour (yardsticks §7, [built])."""


@pytest.fixture(scope="module")
def net() -> FieldNet:
    """A net with the default shape, random weights and settled batch statistics."""
    torch.manual_seed(3)
    net = FieldNet().train()
    with torch.no_grad():
        for _ in range(4):
            net(torch.randn(2, len(INPUTS), 96, 96))
    return net.eval()


def test_net_costs_what_a_laptop_affords(net: FieldNet) -> None:
    """Should stay within the budget of operations per pixel."""
    assert 10_000 < flop_per_pixel(net) < FLOP_BUDGET


def test_pixels_beyond_the_receptive_field_change_nothing(net: FieldNet) -> None:
    """Should give the same bits when only pixels farther than the measured radius change."""
    radius = receptive_radius(net, 320)
    generator = torch.Generator().manual_seed(5)
    tiles = torch.randn(1, len(INPUTS), 320, 320, generator=generator)
    other = torch.randn(1, len(INPUTS), 320, 320, generator=generator)
    cell, low, high = 80, 160 - radius, 160 + radius + 2
    other[..., low:high, low:high] = tiles[..., low:high, low:high]
    with torch.no_grad():
        assert torch.equal(net(tiles)[..., cell, cell], net(other)[..., cell, cell])
        other[..., 160, 160] += 1
        assert not torch.equal(net(tiles)[..., cell, cell], net(other)[..., cell, cell])


def test_turning_a_tile_by_the_stride_moves_the_fields(net: FieldNet) -> None:
    """Should move the fields with the picture when it moves by the net's stride."""
    tiles = torch.randn(1, len(INPUTS), 384, 384, generator=torch.Generator().manual_seed(7))
    moved = torch.roll(tiles, (STRIDE, 2 * STRIDE), (2, 3))
    with torch.no_grad():
        a = net(tiles)[0, :, 84:100, 84:100]
        b = net(moved)[0, :, 84 + STRIDE // 2 : 100 + STRIDE // 2, 84 + STRIDE : 100 + STRIDE]
    torch.testing.assert_close(a, b, atol=1e-5, rtol=0)


def test_onnx_runtime_agrees_with_torch(net: FieldNet, tmp_path: Path) -> None:
    """Should agree within the parity that a shipped model must keep, on random input."""
    write_onnx(net, tmp_path / "weights.onnx")
    tiles = np.random.default_rng(1).standard_normal((1, len(INPUTS), 192, 256)).astype(np.float32)
    assert parity(net, tmp_path / "weights.onnx", tiles) < PARITY


def test_activated_fields_are_metres_and_probabilities(net: FieldNet) -> None:
    """Should keep offsets within the reach and probabilities summing to one."""
    with torch.no_grad():
        fields = ActivatedNet(net)(10 * torch.randn(1, len(INPUTS), 64, 64))[0]
    named = dict(zip(NET_FIELDS, fields, strict=True))
    assert named["dx"].abs().max() <= REACH_M
    for group in (("raised", "lowered", "flush"), ("seen", "shadow", "hidden")):
        torch.testing.assert_close(sum(named[name] for name in group), torch.ones(32, 32))
    for name in ("nearness", "other", "surface"):
        assert named[name].min() >= 0
        assert named[name].max() <= 1
