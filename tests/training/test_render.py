from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from shapely.geometry import LineString, Polygon, box

from roadhem_training.scenes.camera import take_picture
from roadhem_training.scenes.flight import CHANCES, Flight, draw_flight
from roadhem_training.scenes.materials import MATERIALS, material_of
from roadhem_training.scenes.render import render, view
from roadhem_training.scenes.world import MARGIN, Body, Cover, Crown, TrueEdge, World

SIZE, PIXEL = 40.0, 0.10
ANGLE = 0.31
CURB_M = 0.12
NORMAL = np.array([-np.sin(ANGLE), np.cos(ANGLE)])
"""Of the straight edge through the middle; the road lies on its left, where this points to."""

OVERCAST = Flight(
    sun_azimuth=-1.2, sun_elevation=0.8, sun=0.0, sky=(0.3, 0.3, 0.32), season="summer", lean=(0.0, 0.0),
    lean_spread=0.0, events=frozenset(),
)  # fmt: skip


def straight_world(kind: str = "flush", height: float = 0.0, relief: float = 0.0) -> World:
    """Asphalt on one side of a slanted line through the middle, concrete on the other."""
    along = np.array([np.cos(ANGLE), np.sin(ANGLE)])
    middle = np.array([SIZE / 2, SIZE / 2])
    start, end = middle - 100 * along, middle + 100 * along
    frame = box(-MARGIN, -MARGIN, SIZE + MARGIN, SIZE + MARGIN)
    road = Polygon([start, end, end + 100 * NORMAL, start + 100 * NORMAL]).intersection(frame)
    world = World(SIZE, "suburb", road, edges=[TrueEdge(LineString([start, end]), kind, height)])
    world.ground = [Cover(frame, "sand", relief=relief), Cover(road, "asphalt")]
    world.crossfall = 0.0
    return world


def distance_outside() -> np.ndarray:
    """Metres from the straight edge to every pixel centre, positive off the road."""
    steps = (np.arange(round(SIZE / PIXEL)) + 0.5) * PIXEL
    x, y = np.meshgrid(steps, SIZE - steps)
    return -((x - SIZE / 2) * NORMAL[0] + (y - SIZE / 2) * NORMAL[1])


def crossing(image: np.ndarray, distance: np.ndarray) -> float:
    """Where the mean profile across the edge passes half way between both sides, metres."""
    bins = np.arange(-1.0, 1.001, 0.02)
    number = np.digitize(distance.ravel(), bins)
    total = np.bincount(number, image.ravel(), len(bins) + 1)[1:-1]
    profile = total / np.bincount(number, minlength=len(bins) + 1)[1:-1]
    middles = (bins[:-1] + bins[1:]) / 2
    road, land = profile[middles < -0.5].mean(), profile[middles > 0.5].mean()
    share = (profile - road) / (land - road)
    first = int(np.argmax(share > 0.5))
    return float(np.interp(0.5, share[first - 1 : first + 1], middles[first - 1 : first + 1]))


def test_edge_lies_where_the_truth_says():
    """Should place the change of material within 0.01 m of a slanted flush edge."""
    seen = view(straight_world(), OVERCAST, 3)
    assert abs(crossing(seen.light[..., 1], distance_outside())) < 0.01


@pytest.mark.parametrize("seed", range(6))
def test_camera_does_not_shift_the_edge(seed):
    """Should keep a slanted edge within 0.02 m through blur, resampling, halo, noise and compression."""
    flight = replace(OVERCAST, events=frozenset({"coarser", "halo", "jpeg", "haze"}))
    seen = view(straight_world(), OVERCAST, 3)
    picture, valid = take_picture(seen.light, PIXEL, flight, np.random.default_rng(seed))
    assert valid.all()
    # The tone curve bends the profile; back to light before asking where it is half way.
    light = (picture[..., 1].astype(float) / 255) ** 2.2
    assert abs(crossing(light, distance_outside())) < 0.02


def test_curb_shadow_begins_at_the_foot():
    """Should darken the road for height / tan(elevation) from the foot of a curb that stands towards the sun."""
    away = np.arctan2(-NORMAL[1], -NORMAL[0])
    flight = replace(OVERCAST, sun=1.0, sun_azimuth=float(away), sun_elevation=0.5)
    expected = 0.2 / np.tan(0.5)
    raised = view(straight_world("raised", 0.2, 0.2), flight, 3).light[..., 1]
    plain = view(straight_world(), flight, 3).light[..., 1]
    ratio = raised / plain
    outside = distance_outside()
    in_shadow = (outside < -0.08) & (outside > -expected + 0.08)
    beyond = (outside < -expected - 0.7) & (outside > -expected - 1.5)
    assert in_shadow.sum() > 500
    assert np.median(ratio[in_shadow]) < 0.45
    assert np.median(ratio[beyond]) > 0.9


def rise(kind: str, height: float, relief: float) -> np.ndarray:
    """What a curb and the relief behind it add to the bare ground, metres."""
    raised = view(straight_world(kind, height, relief), OVERCAST, 3).ground
    return raised - view(straight_world(), OVERCAST, 3).ground


def test_height_steps_up_at_the_curb():
    """Should rise by the curb's height within a pixel of its foot, and stay on the road as it is."""
    added, outside = rise("raised", CURB_M, CURB_M), distance_outside()
    np.testing.assert_allclose(added[outside < -PIXEL], 0.0, atol=1e-5)
    np.testing.assert_allclose(added[outside > PIXEL], CURB_M, atol=1e-3)


def test_lowered_curb_rises_to_the_footway():
    """Should leave only the lowered height at the foot and reach the footway's relief a metre behind it."""
    added, outside = rise("lowered", 0.02, 0.15), distance_outside()
    assert added[(outside > 0.1) & (outside < 0.15)].max() < 0.05
    np.testing.assert_allclose(added[outside > 1.05], 0.15, atol=1e-3)


def with_house(lean: float = 0.0) -> tuple[World, Flight]:
    world = straight_world()
    world.bodies = [Body(box(10, 10, 18, 16), 6.0, "house")]
    flight = replace(
        OVERCAST, sun=1.0, sun_azimuth=np.pi, sun_elevation=np.pi / 4, lean=(0.0, lean), lean_spread=1e-9
    )
    return world, flight


def at(mask: np.ndarray, x: float, y: float) -> bool:
    return bool(mask[int((SIZE - y) / PIXEL), int(x / PIXEL)])


def test_house_hides_its_footprint_and_shades_behind():
    """Should hide the ground under a house and shade it for height / tan(elevation) away from the sun."""
    world, flight = with_house()
    seen = view(world, flight, 3)
    assert at(seen.hidden, 10.3, 13)
    assert not at(seen.hidden, 9.7, 13)
    assert at(seen.shadow, 23.7, 13)
    assert not at(seen.shadow, 24.4, 13)
    assert not at(seen.shadow, 9.7, 13)
    assert seen.hidden.sum() * PIXEL**2 == pytest.approx(48, rel=0.02)


def test_lean_hides_more():
    """Should displace the top of a house by its lean and hide what lies between."""
    world, flight = with_house(lean=0.2)
    hidden = view(world, flight, 3).hidden
    assert at(hidden, 14, 17.1)
    assert not at(hidden, 14, 17.4)
    assert at(hidden, 14, 10.1)


def test_overcast_throws_no_shadow():
    """Should mark no ground as shaded under an overcast sky."""
    world, _ = with_house()
    assert not view(world, OVERCAST, 3).shadow.any()


def test_crown_hides_and_shades():
    """Should hide most of the ground under a closed crown and shade ground away from the sun."""
    world = straight_world()
    world.crowns = [Crown(20, 20, 3.0, 8.0, 1.0)]
    _, flight = with_house()
    seen = view(world, flight, 3)
    assert 0.6 * np.pi * 9 < seen.hidden.sum() * PIXEL**2 < 1.4 * np.pi * 9
    assert at(seen.shadow, 20 + 8 * 0.66, 20)


def test_car_hides_the_road():
    """Should mark exactly the ground under a parked car."""
    world = straight_world()
    world.bodies = [Body(box(20, 25, 24.4, 26.8), 1.5, "car", base=0.15)]
    hidden = view(world, OVERCAST, 3).hidden
    assert hidden.sum() * PIXEL**2 == pytest.approx(4.4 * 1.8, rel=0.05)


def test_the_same_seed_gives_the_same_scene():
    """Should repeat every array bit by bit, and differ for another seed."""
    world = straight_world("raised", CURB_M, CURB_M)
    one, two, other = render(world, 5), render(world, 5), render(world, 6)
    for name in ("image", "valid", "height", "shadow", "hidden"):
        np.testing.assert_array_equal(getattr(one, name), getattr(two, name))
    assert (one.image != other.image).any()


def test_arrays_fit_the_contract():
    """Should give the shapes and types that a scene promises."""
    scene = render(straight_world(), 4, 0.125)
    assert scene.image.shape == (320, 320, 3)
    assert scene.image.dtype == np.uint8
    assert scene.height.dtype == np.float32
    assert scene.valid.dtype == scene.shadow.dtype == scene.hidden.dtype == np.bool_


def test_every_chance_is_one():
    """Should draw flights whose events all come from the table, each neither never nor always."""
    flights = [draw_flight(np.random.default_rng(k)) for k in range(800)]
    for name, chance in CHANCES.items():
        share = np.mean([flight.has(name) for flight in flights])
        assert abs(share - chance) < 5 * np.sqrt(chance * (1 - chance) / 800), name


def test_unknown_material_is_named():
    """Should say which materials there are."""
    with pytest.raises(KeyError, match="asphalt"):
        material_of("treacle")
    assert all(material_of(name) is MATERIALS[name] for name in MATERIALS)
