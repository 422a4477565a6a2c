"""A world as one flight would bring it home."""

from __future__ import annotations

import cv2
import numpy as np

from roadhem_training.scenes.bodies import VEHICLES, draw_bodies
from roadhem_training.scenes.camera import take_picture
from roadhem_training.scenes.coverage import Frame
from roadhem_training.scenes.crowns import draw_crowns, in_season
from roadhem_training.scenes.distance import signed_distance
from roadhem_training.scenes.flight import Flight, draw_flight
from roadhem_training.scenes.ground import lay_ground
from roadhem_training.scenes.heights import ground_height, sense_height
from roadhem_training.scenes.light import cast_bodies, cast_crowns, dim_sky, light_up, shade_curbs
from roadhem_training.scenes.litter import litter_edges
from roadhem_training.scenes.markings import paint_markings
from roadhem_training.scenes.noise import Noise
from roadhem_training.scenes.scene import Scene
from roadhem_training.scenes.wear import wear_paint, wear_surface
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


def render(world: World, seed: int, pixel: float = PIXEL_M, flight: Flight | None = None) -> Scene:
    """Photograph a world and sense its heights.

    Parameters
    ----------
    world : what is there.
    seed : draws the flight's conditions, textures and noise.
    pixel : metres.
    flight : given conditions instead of drawn ones.
    """
    cv2.setNumThreads(1)
    streams = [np.random.default_rng([seed, k]) for k in range(6)]
    flight = flight or draw_flight(streams[0])
    frame = Frame.of_size(world.size, pixel)
    noise = Noise(seed, frame)
    distance = signed_distance(world, pixel)
    ground = ground_height(world, distance, frame, noise)

    image = lay_ground(world, frame, noise, streams[1])
    wear_surface(image, world, distance, frame, flight, noise, streams[1])
    paint_markings(image, world.paints, frame, noise, streams[1])
    wear_paint(image, world, distance, frame, flight, streams[1])
    litter_edges(image, world, distance, flight, noise, streams[1])
    large = [body for body in world.bodies if body.what not in VEHICLES]
    cars = [body for body in world.bodies if body.what in VEHICLES]
    dark = cast_bodies(large, frame, flight)
    cast_crowns(dark, [in_season(crown, flight) for crown in world.crowns], frame, flight, noise)
    above = dark.copy()
    np.maximum(dark, cast_bodies(cars, frame, flight), out=dark)
    shadow = (dark > SHADED) & (flight.sun > SHADED)
    sky = dim_sky(world.bodies, frame)
    shade_curbs(dark, sky, world, distance, flight, pixel, streams[2])
    light_up(image, dark, sky, flight)

    hidden = np.zeros(dark.shape, bool)
    draw_bodies(image, hidden, world.bodies, above, frame, flight, noise, streams[3])
    draw_crowns(image, hidden, [in_season(crown, flight) for crown in world.crowns], frame, flight, noise, streams[3])
    picture, valid = take_picture(image, pixel, flight, streams[4])
    height = sense_height(world, ground, frame, flight, streams[5])
    return Scene(world, pixel, picture, valid, height, shadow, hidden)
