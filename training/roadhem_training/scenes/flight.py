"""The conditions of one flight: sun, sky, season, camera, height sensor. Every probability is in CHANCES."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from roadhem_training.scenes.coverage import Frame

CHANCES = {
    "overcast": 0.22,
    "lean": 0.55,
    "grey": 0.07,
    "intensity": 0.05,
    "stretched": 0.06,
    "seam": 0.12,
    "smear": 0.08,
    "no_data": 0.10,
    "haze": 0.25,
    "halo": 0.55,
    "fringe": 0.15,
    "jpeg": 0.65,
    "coarser": 0.55,
    "tracks": 0.7,
    "cracked": 0.5,
    "sealed": 0.25,
    "skids": 0.25,
    "gullies": 0.6,
    "dusty": 0.15,
    "muddy": 0.08,
    "overgrown": 0.22,
    "leafy": 0.06,
    "gravelly": 0.08,
    "snowy": 0.03,
    "damp": 0.10,
    "wires": 0.12,
    "autumn": 0.15,
    "height_with_cars": 0.4,
    "height_with_crowns": 0.4,
    "height_with_houses": 0.5,
    "height_holes": 0.4,
    "height_scattered": 0.3,
}
"""How often each thing happens, 0..1.

intensity: the strength of LiDAR returns instead of a photograph. height_with_...: what the ground filter leaves
in; height_holes: what it takes out leaves holes rather than filled ground; height_scattered: cells take the nearest
return.
"""


@dataclass(frozen=True)
class Flight:
    """What held while one scene was taken.

    Attributes
    ----------
    sun_azimuth : direction to the sun, radians counter-clockwise from east; sun_elevation : radians.
    sun : share of the direct light, 0 overcast .. 1; sky : colour of shadow light relative to full sun, (3,).
    season : "summer" or "autumn"; bare trees are told by their density.
    lean : metres of displacement per metre of height, (east, north) at the frame's middle; lean_spread : its change
        per metre away from the middle.
    events : names out of CHANCES that happen.
    """

    sun_azimuth: float
    sun_elevation: float
    sun: float
    sky: tuple[float, float, float]
    season: str
    lean: tuple[float, float]
    lean_spread: float
    events: frozenset[str]

    @property
    def to_sun(self) -> tuple[float, float]:
        """Horizontal unit vector towards the sun (east, north)."""
        return float(np.cos(self.sun_azimuth)), float(np.sin(self.sun_azimuth))

    @property
    def shadow_per_metre(self) -> float:
        """Length of the shadow of a metre's height."""
        return float(1 / np.tan(self.sun_elevation))

    def lean_at(self, x: float, y: float, frame: Frame) -> tuple[float, float]:
        """Displacement (east, north) in the picture per metre of height at a place."""
        half = frame.rows * frame.pixel / 2
        return self.lean[0] + self.lean_spread * (x - half), self.lean[1] + self.lean_spread * (y - half)

    def has(self, event: str) -> bool:
        """Tell whether something out of CHANCES happens."""
        return event in self.events


def draw_flight(rng: np.random.Generator) -> Flight:
    """Draw the conditions of one flight."""
    events = frozenset(name for name, chance in CHANCES.items() if rng.random() < chance)
    shade = rng.uniform(0.16, 0.40)
    blue = rng.uniform(0.0, 0.25)
    lean = rng.normal(0, 0.12, 2) if "lean" in events else np.zeros(2)
    season = "autumn" if "autumn" in events else "summer"
    return Flight(
        sun_azimuth=float(rng.uniform(-np.pi, 0) if rng.random() < 0.8 else rng.uniform(0, np.pi)),
        sun_elevation=float(np.radians(rng.uniform(24, 64))),
        sun=float(rng.uniform(0, 0.12) if events & {"overcast", "intensity"} else rng.uniform(0.75, 1.0)),
        sky=(shade * (1 - 0.5 * blue), shade, shade * (1 + blue)),
        season=season,
        lean=(float(lean[0]), float(lean[1])),
        lean_spread=float(rng.uniform(0, 0.0012)) if "lean" in events else 0.0,
        events=events,
    )
