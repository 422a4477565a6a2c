"""A world as one flight would bring it home."""

from __future__ import annotations

from dataclasses import dataclass

import cv2
import numpy as np
from numpy.typing import NDArray

from roadhem_training.scenes.bodies import VEHICLES, draw_bodies
from roadhem_training.scenes.camera import take_picture
from roadhem_training.scenes.coverage import Frame
from roadhem_training.scenes.crowns import draw_crowns
from roadhem_training.scenes.distance import SignedDistance, signed_distance
from roadhem_training.scenes.flight import Flight, draw_flight
from roadhem_training.scenes.ground import Ground, lay_ground
from roadhem_training.scenes.heights import ground_height, sense_height
from roadhem_training.scenes.light import away_from_sun, cast_bodies, cast_crowns, dim_sky, light_up, shade_curbs
from roadhem_training.scenes.litter import litter_edges
from roadhem_training.scenes.markings import paint_markings
from roadhem_training.scenes.noise import Noise
from roadhem_training.scenes.scene import Scene
from roadhem_training.scenes.wear import wear_paint, wear_surface
from roadhem_training.scenes.wires import mask_wires, string_wires
from roadhem_training.scenes.world import World

SHADED = 0.5
"""Share of direct light lost from which the ground counts as in shadow."""

PIXEL_M = 0.10


def make_scene(seed: int, size: int = 1024, pixel: float = PIXEL_M, style: str | None = None) -> Scene:
    """Invent a world of size * pixel metres and photograph it.

    Parameters
    ----------
    seed : the same seed gives the same scene.
    size : pixels per side; pixel : metres; style : a style of `World`, or None for any.
    """
    from roadhem_training.scenes.layout import make_world

    return render(make_world(seed, size * pixel, style), seed, pixel)


@dataclass(frozen=True)
class View:
    """What light reaches the camera, before it takes the picture.

    Attributes
    ----------
    light : (H, W, 3) float32, relative to white in full sun.
    ground : (H, W) float32 height of the bare ground, metres.
    shadow, hidden : (H, W) bool, as in `Scene`.
    """

    light: NDArray[np.float32]
    ground: NDArray[np.float32]
    shadow: NDArray[np.bool_]
    hidden: NDArray[np.bool_]


def render(world: World, seed: int, pixel: float = PIXEL_M) -> Scene:
    """Photograph a world and sense its heights.

    Parameters
    ----------
    world : what is there.
    seed : draws the flight's conditions, textures and noise.
    pixel : metres.
    """
    cv2.setNumThreads(1)
    flight = draw_flight(np.random.default_rng([seed, 0]))
    seen = view(world, flight, seed, pixel)
    picture, valid = take_picture(seen.light, pixel, flight, np.random.default_rng([seed, 1]))
    if flight.has("intensity") and flight.has("height_holes"):
        valid &= ~seen.hidden
        picture = picture * valid[..., None]
    frame = Frame.of_size(world.size, pixel)
    height = sense_height(world, seen.ground, frame, flight, np.random.default_rng([seed, 2]))
    return Scene(world, pixel, picture, valid, height, seen.shadow, seen.hidden)


def view(world: World, flight: Flight, seed: int, pixel: float = PIXEL_M) -> View:
    """Light the world under a flight's sun and look down on it; `seed` draws textures and wear."""
    frame = Frame.of_size(world.size, pixel)
    noise = Noise(seed, frame)
    distance = signed_distance(world, pixel)
    ground = _surface(world, distance, frame, flight, noise, np.random.default_rng([seed, 3]))
    image = ground.colour
    cars = [body for body in world.bodies if body.what in VEHICLES]
    dark = cast_bodies([body for body in world.bodies if body.what not in VEHICLES], frame, flight)
    cast_crowns(dark, world.crowns, frame, flight, noise)
    wires = string_wires(world.size, np.random.default_rng([seed, 6])) if flight.has("wires") else None
    if wires is not None:
        np.maximum(dark, mask_wires(wires, away_from_sun(flight), frame), out=dark)
    above = dark.copy()
    np.maximum(dark, cast_bodies(cars, frame, flight), out=dark)
    shadow = (dark > SHADED) & (flight.sun > SHADED)
    sky = dim_sky(world.bodies, frame)
    shade_curbs(dark, sky, world, distance, flight, pixel, np.random.default_rng([seed, 4]))
    light_up(image, dark, sky, flight)
    hidden = np.zeros(dark.shape, bool)
    rng = np.random.default_rng([seed, 5])
    draw_bodies(image, hidden, world.bodies, above, frame, flight, noise, rng)
    draw_crowns(image, hidden, world.crowns, frame, flight, noise, rng)
    if wires is not None:
        image *= 1 - mask_wires(wires, flight.lean_at(world.size / 2, world.size / 2, frame), frame)[..., None]
    return View(image, ground_height(world, ground.relief, distance, frame, noise), shadow, hidden)


def _surface(
    world: World,
    distance: SignedDistance,
    frame: Frame,
    flight: Flight,
    noise: Noise,
    rng: np.random.Generator,
) -> Ground:
    """Lay the ground and all that lies on it: wear, paint, more wear, litter."""
    ground = lay_ground(world, distance, frame, noise, rng)
    image = ground.colour
    wear_surface(image, distance, flight, noise, rng)
    paint_markings(image, world.paints, frame, noise, rng)
    wear_paint(image, distance, frame, flight, rng)
    litter_edges(image, world, distance, flight, noise, rng)
    return ground
