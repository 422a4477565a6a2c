"""How far raw fields are from the truth."""

from __future__ import annotations

import torch
import torch.nn.functional as F
from torch import Tensor

from roadhem.fields.layout import REACH_M
from roadhem_training.crops import Batch
from roadhem_training.network import activate_log_sigma, activate_offset, split

WEIGHTS = {"edge": 4.0, "other": 1.0, "offset": 2.0, "lateral": 2.0, "axis": 1.0, "spread": 0.2, "kind": 0.2,
           "sight": 0.3, "surface": 1.0}

EDGE_EMPHASIS = 4.0
"""Cells on a line count this much more than cells far from any."""

LATERAL_BAND_M, SPREAD_BAND_M, LABEL_BAND_M = 1.2, 0.6, 1.2
"""Distances from the edge within which lateral error, spread and the labels count."""

LATERAL_SOFT_M = 0.05
"""Where the lateral loss turns from square to straight."""

LATERAL_CUT_M = 1.5
"""Errors beyond this say no more about the spread."""

HIDDEN_WEIGHT = 0.3
"""Offsets along hidden stretches count this much: the truth there can only be guessed."""


def losses(raw: Tensor, batch: Batch) -> dict[str, Tensor]:
    """Return each loss (scalars); raw is (N, 14, h, w). Spread by the Gaussian negative log likelihood (Nix and
    Weigend 1994) of the lateral error, with the error itself held fixed so that it trains the spread alone.
    """
    out = split(raw.float())
    edge, known = batch.near[:, 0], batch.known
    distance = (1 - edge) * REACH_M
    sure = torch.where(batch.sight == 2, HIDDEN_WEIGHT, 1.0)
    near = known * (edge > 0) * sure
    normal = torch.stack([-_half_sin(batch.axis), _half_cos(batch.axis)], 1)
    miss = activate_offset(out["offset"]) - batch.offset
    lateral = (miss * normal).sum(1)
    labels = known * (distance < LABEL_BAND_M)
    emphasis = known * (1 + EDGE_EMPHASIS * batch.near.amax(1) ** 2)
    return {
        "edge": _mean(_bce(out["nearness"][:, 0], edge), known * (1 + EDGE_EMPHASIS * edge**2)),
        "other": _mean(_bce(out["nearness"][:, 1], batch.near[:, 1]), emphasis),
        "offset": _mean(F.smooth_l1_loss(activate_offset(out["offset"]), batch.offset, beta=0.2,
                                         reduction="none").sum(1), near),
        "lateral": _mean(F.smooth_l1_loss(lateral, torch.zeros_like(lateral), beta=LATERAL_SOFT_M,
                                          reduction="none"), near * (distance < LATERAL_BAND_M)),
        "axis": _mean((torch.tanh(out["axis"]) - batch.axis).square().sum(1), near * (distance < LATERAL_BAND_M)),
        "spread": _mean(_spread(out["log_sigma"][:, 0], lateral.detach()), known * (distance < SPREAD_BAND_M)),
        "kind": _mean(F.cross_entropy(out["kind"], batch.kind, reduction="none"), labels),
        "sight": _mean(F.cross_entropy(out["seen"], batch.sight, reduction="none"), labels),
        "surface": _mean(_bce(out["surface"][:, 0], batch.surface), known),
    }


def total(parts: dict[str, Tensor]) -> Tensor:
    """Weighted sum of the losses."""
    return torch.stack([WEIGHTS[name] * value for name, value in parts.items()]).sum()


def _mean(values: Tensor, weight: Tensor) -> Tensor:
    return (values * weight).sum() / weight.sum().clamp_min(1)


def _bce(raw: Tensor, target: Tensor) -> Tensor:
    """Cross entropy above that of a perfect answer, so that 0 is reachable with soft targets."""
    entropy = F.binary_cross_entropy(target, target, reduction="none")
    return F.binary_cross_entropy_with_logits(raw, target, reduction="none") - entropy


def _half_cos(axis: Tensor) -> Tensor:
    return torch.cos(torch.atan2(axis[:, 1], axis[:, 0]) / 2)


def _half_sin(axis: Tensor) -> Tensor:
    return torch.sin(torch.atan2(axis[:, 1], axis[:, 0]) / 2)


def _spread(raw: Tensor, lateral: Tensor) -> Tensor:
    log_sigma = activate_log_sigma(raw)
    error = lateral.clamp(-LATERAL_CUT_M, LATERAL_CUT_M)
    return log_sigma + 0.5 * error.square() * torch.exp(-2 * log_sigma)
