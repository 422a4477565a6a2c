"""The network: a small encoder-decoder from the net's input to the fields, on half the working grid."""

from __future__ import annotations

import itertools
from dataclasses import asdict, dataclass

import torch
from torch import Tensor, nn

from roadhem.fields.inputs import INPUTS
from roadhem.fields.layout import NET_FIELDS, REACH_M

STRIDE = 16
"""Working pixels by which the deepest level is coarser than the input."""

LOG_SIGMA_RANGE = (-4.6, 1.0)
"""Natural logarithms of 1 cm and 2.7 m: the spread stays between them."""


@dataclass(frozen=True)
class Shape:
    """Channels and convolutions of each level, from stride 2 to stride 16."""

    widths: tuple[int, int, int, int] = (32, 48, 96, 128)
    encoder: tuple[int, int, int, int] = (0, 1, 1, 2)
    decoder: tuple[int, int, int] = (1, 1, 1)

    def as_dict(self) -> dict[str, tuple[int, ...]]:
        """Return the shape as plain values, for the card and the checkpoint."""
        return asdict(self)


def _conv(inputs: int, outputs: int, size: int = 3, stride: int = 1) -> nn.Sequential:
    return nn.Sequential(
        nn.Conv2d(inputs, outputs, size, stride, size // 2, bias=False),
        nn.BatchNorm2d(outputs),
        nn.ReLU(inplace=True),
    )


class _Residual(nn.Module):
    """x + relu(norm(conv(x))): one convolution, so that the receptive field stays small."""

    def __init__(self, width: int) -> None:
        super().__init__()
        self.conv = _conv(width, width)

    def forward(self, x: Tensor) -> Tensor:
        return x + self.conv(x)


class FieldNet(nn.Module):
    """Raw fields from tiles.

    Input (N, 6, H, W) per `roadhem.fields.inputs`, H and W multiples of 16; output (N, 14, H/2, W/2), not yet
    activated.
    """

    def __init__(self, shape: Shape | None = None) -> None:
        super().__init__()
        self.shape = shape or Shape()
        widths = self.shape.widths
        self.stem = _conv(len(INPUTS), widths[0], 5, 2)
        self.encoder = nn.ModuleList(
            nn.Sequential(*[_Residual(width) for _ in range(depth)])
            for width, depth in zip(widths, self.shape.encoder, strict=True)
        )
        self.down = nn.ModuleList(_conv(a, b, 3, 2) for a, b in itertools.pairwise(widths))
        self.up = nn.ModuleList(nn.Conv2d(b, a, 1) for a, b in itertools.pairwise(widths))
        self.decoder = nn.ModuleList(
            nn.Sequential(*[_Residual(width) for _ in range(depth)])
            for width, depth in zip(widths, self.shape.decoder, strict=False)
        )
        self.head = nn.Conv2d(widths[0], len(NET_FIELDS), 1)
        self.grow = nn.Upsample(scale_factor=2, mode="nearest")

    def forward(self, tiles: Tensor) -> Tensor:
        """Return raw fields (N, 14, H/2, W/2)."""
        x = self.encoder[0](self.stem(tiles))
        skips = [x]
        for down, encoder in zip(self.down, list(self.encoder)[1:], strict=True):
            x = encoder(down(x))
            skips.append(x)
        for level in reversed(range(len(self.up))):
            x = self.decoder[level](skips[level] + self.grow(self.up[level](x)))
        return self.head(x)


_SLICES = {"nearness": slice(0, 2), "offset": slice(2, 4), "axis": slice(4, 6), "log_sigma": slice(6, 7),
           "kind": slice(7, 10), "seen": slice(10, 13), "surface": slice(13, 14)}


def split(raw: Tensor) -> dict[str, Tensor]:
    """Name the groups of raw channels: nearness (2), offset (2), axis (2), log_sigma, kind (3), seen (3), surface."""
    return {name: raw[:, where] for name, where in _SLICES.items()}


def activate_offset(raw: Tensor) -> Tensor:
    """Raw offset to metres within the reach, with slope 1 at zero."""
    return REACH_M * torch.tanh(raw / REACH_M)


def activate_log_sigma(raw: Tensor) -> Tensor:
    """Raw spread to a logarithm of metres within LOG_SIGMA_RANGE."""
    low, high = LOG_SIGMA_RANGE
    return low + (high - low) * torch.sigmoid(raw)


class ActivatedNet(nn.Module):
    """The net with its outputs in metres and probabilities: what is exported."""

    def __init__(self, net: FieldNet) -> None:
        super().__init__()
        self.net = net

    def forward(self, tiles: Tensor) -> Tensor:
        """Return fields (N, 14, H/2, W/2) in the order of `roadhem.fields.layout.NET_FIELDS`."""
        raw = split(self.net(tiles))
        return torch.cat(
            [
                torch.sigmoid(raw["nearness"]),
                activate_offset(raw["offset"]),
                torch.tanh(raw["axis"]),
                activate_log_sigma(raw["log_sigma"]),
                torch.softmax(raw["kind"], 1),
                torch.softmax(raw["seen"], 1),
                torch.sigmoid(raw["surface"]),
            ],
            1,
        )


def receptive_radius(net: nn.Module, size: int = 512) -> int:
    """Working pixels beyond which a changed input pixel changes no output, by gradient of the middle cell."""
    net = net.eval()
    probe = torch.randn(1, len(INPUTS), size, size, requires_grad=True)
    out = net(probe)
    reach = 0
    middle = size // 4
    for cell in range(middle, middle + STRIDE // 2):  # every phase of the coarsest level
        probe.grad = None
        out[0, :, cell, cell].sum().backward(retain_graph=True)
        assert probe.grad is not None
        touched = probe.grad[0].abs().sum(0).nonzero()
        reach = max(reach, int((touched - 2 * cell).abs().max()))
    return reach


def flop_per_pixel(net: nn.Module, size: int = 256) -> float:
    """Multiply-adds times two of all convolutions, per working pixel."""
    total = 0.0

    def count(layer: nn.Conv2d, _: object, out: Tensor) -> None:
        nonlocal total
        kernel = layer.kernel_size[0] * layer.kernel_size[1] * layer.in_channels
        total += 2.0 * kernel * out.numel()

    hooks = [m.register_forward_hook(count) for m in net.modules() if isinstance(m, nn.Conv2d)]
    with torch.no_grad():
        net(torch.zeros(1, len(INPUTS), size, size))
    for hook in hooks:
        hook.remove()
    return total / size**2
