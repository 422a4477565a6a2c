"""The fields' names, order and quantisation: the contract between net, tracer and training."""

from __future__ import annotations

from roadhem.tiles.grid import NO_DATA, OUTSIDE, PIXEL_M, VALID

NET_STRIDE = 2
"""Working pixels per field cell."""

CELL_M = PIXEL_M * NET_STRIDE
"""Side of a field cell, in ground metres. Cell (i, j) is centred at x = (j + 0.5) * CELL_M, y = -(i + 0.5) * CELL_M
in grid metres."""

REACH_M = 2.0
"""Distance at which nearness reaches 0 and offsets are cut."""

NET_FIELDS = (
    "nearness",  # 1 on a drive-over edge, falling linearly to 0 at REACH_M
    "other",     # the same for other lines beside it (gutter seam, curb back, verge and footway line, marking)
    "dx",        # vector to the nearest drive-over edge, metres east, cut at REACH_M
    "dy",        # ... metres north
    "cos2",      # axis of the nearest edge, double angle; theta counted from east, counter-clockwise
    "sin2",
    "log_sigma", # natural logarithm of the lateral standard error in metres
    "raised",    # kind of the nearest edge: probabilities
    "lowered",
    "flush",
    "seen",      # how the nearest edge is seen: probabilities
    "shadow",
    "hidden",
    "surface",   # probability that the cell is drive-over surface
)
"""Channels of the net's output, in order; the graph's output is already activated (metres, probabilities)."""

COVER = len(NET_FIELDS)
"""Index of the extra channel that says what the tiles hold there: one of the COVER_ codes."""
COVER_OUTSIDE, COVER_NO_DATA, COVER_VALID = OUTSIDE, NO_DATA, VALID

CHANNELS = len(NET_FIELDS) + 1

QUANTUM = {"dx": 1e-3, "dy": 1e-3, "log_sigma": 1e-3}
"""Value of one count in the stored int16 fields; 1e-4 for every field not named here."""

KINDS = ("raised", "lowered", "flush")
SEEN = ("seen", "shadow", "bridged", "by_hand")
