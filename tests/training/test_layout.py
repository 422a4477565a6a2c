from __future__ import annotations

from functools import cache

import numpy as np
import pytest
import shapely
from shapely.geometry import LineString, Point, Polygon, box

from roadhem.errors import BadInput
from roadhem_training.scenes.layout import STYLE_ODDS, TOWNS, make_world
from roadhem_training.scenes.layout.alignment import Alignment, from_curvature, rounded
from roadhem_training.scenes.layout.junctions import closing
from roadhem_training.scenes.layout.odds import CORNER_RADIUS_ODDS
from roadhem_training.scenes.layout.statistics import outline_statistics
from roadhem_training.scenes.layout.streets import plan_town
from roadhem_training.scenes.world import MARGIN, World

STYLES = list(STYLE_ODDS)
SIDE_STEP = 0.05  # metres to either side of an edge at which the surface is asked
CHORD_ERROR = 0.005  # metres
SAME = 1e-5  # metres within which two lines are one
PUBLISHED_RADII = (1.5, 3.0, 4.5, 7.5, 10.7, 15.0)  # spread of handbook curb returns: yardsticks.md §3 [read]


@cache
def _world(seed: int, size: float, style: str) -> World:
    return make_world(seed, size, style)


def _outline(world: World) -> shapely.Geometry:
    """The surface's own boundary, without the cut at the frame plus margin."""
    reach = MARGIN - 1e-3
    return world.surface.boundary.intersection(box(-reach, -reach, world.size + reach, world.size + reach))


@pytest.mark.parametrize("style", STYLES)
def test_same_seed_same_world(style: str):
    """Should give the same world for the same seed, and another for another."""
    again = make_world(3, 60.0, style)
    assert repr(_world(3, 60.0, style)) == repr(again)
    assert repr(_world(4, 60.0, style)) != repr(again)


@pytest.mark.parametrize("style", STYLES)
def test_makes_every_small_place(style: str):
    """Should run for thirty seeds and fill the frame and its margin with ground."""
    for seed in range(30):
        world = _world(seed, 30.0, style)
        frame = box(-MARGIN, -MARGIN, world.size + MARGIN, world.size + MARGIN)
        assert world.ground[0].area.covers(frame)
        assert world.surface.difference(frame.buffer(1e-6)).is_empty
        assert bool(world.edges) == (not world.surface.is_empty and not _outline(world).is_empty)


@pytest.mark.parametrize("style", STYLES)
@pytest.mark.parametrize("seed", [3, 4])
def test_surface_lies_left_of_every_edge(style: str, seed: int):
    """Should have drive-over surface 5 cm left of each edge and none 5 cm right of it."""
    world = _world(seed, 60.0, style)
    frame = box(0, 0, world.size, world.size)
    wrong = total = 0
    for edge in world.edges:
        mids = np.arange(0.25, edge.line.length - 0.2, 0.5)
        mids = mids[shapely.contains(frame, shapely.line_interpolate_point(edge.line, mids))]
        here = shapely.get_coordinates(shapely.line_interpolate_point(edge.line, mids))
        along = shapely.get_coordinates(shapely.line_interpolate_point(edge.line, mids + 0.05)) - here
        normal = np.stack([-along[:, 1], along[:, 0]], axis=1) / np.hypot(*along.T)[:, None] * SIDE_STEP
        wrong += int(np.sum(~shapely.contains_xy(world.surface, *(here + normal).T)))
        wrong += int(np.sum(shapely.contains_xy(world.surface, *(here - normal).T)))
        total += 2 * len(mids)
    assert total > 100 or style in ("no_road", "car_park")
    assert wrong <= 0.002 * total


@pytest.mark.parametrize("style", STYLES)
def test_edges_cover_the_outline_exactly(style: str):
    """Should name every piece of the surface's outline once, and nothing else."""
    world = _world(3, 60.0, style)
    outline = _outline(world)
    assert sum(e.line.length for e in world.edges) == pytest.approx(outline.length, abs=0.05)
    if world.edges:
        drawn = shapely.union_all([e.line for e in world.edges])
        assert drawn.difference(outline.buffer(SAME)).length < 0.05
        assert outline.difference(drawn.buffer(SAME)).length < 0.05


@pytest.mark.parametrize("style", TOWNS)
def test_stretches_share_end_points(style: str):
    """Should begin every stretch inside the frame exactly where another one ends."""
    world = _world(3, 60.0, style)
    inside = box(0, 0, world.size, world.size)
    starts = {e.line.coords[0] for e in world.edges}
    ends = {e.line.coords[-1] for e in world.edges}
    assert {p for p in starts ^ ends if inside.contains(Point(p))} == set()


@pytest.mark.parametrize("style", STYLES)
def test_kinds_and_heights_agree(style: str):
    """Should use the three kinds only, with no height where the pavement ends flush."""
    for seed in range(10):
        for edge in _world(seed, 30.0, style).edges:
            assert edge.kind in ("raised", "lowered", "flush")
            assert edge.height == 0.0 if edge.kind == "flush" else 0.0 <= edge.height <= 0.30


def test_all_kinds_occur():
    """Should show raised, lowered and flush edges, each on at least 3 % of the length of many towns."""
    length = dict.fromkeys(("raised", "lowered", "flush"), 0.0)
    for style in TOWNS:
        for seed in range(30):
            for edge in _world(seed, 30.0, style).edges:
                length[edge.kind] += edge.line.length
    assert min(length.values()) > 0.03 * sum(length.values())


@pytest.mark.parametrize("style", STYLES)
def test_no_house_on_the_road(style: str):
    """Should keep houses and halls off the drive-over surface, and vehicles apart."""
    for seed in (3, 4):
        world = _world(seed, 60.0, style)
        for body in world.bodies:
            if body.what in ("house", "hall") and body.base == 0.0:
                assert body.footprint.intersection(world.surface).area < 0.01


@pytest.mark.parametrize("style", TOWNS)
def test_towns_have_edges_enough(style: str):
    """Should show at least eight stretches of edge, 2 m or longer, in every town frame of 102.4 m."""
    for seed in range(4):
        world = _world(seed, 102.4, style)
        frame = box(0, 0, world.size, world.size)
        pieces = shapely.intersection([e.line for e in world.edges], frame)
        assert np.sum(shapely.length(pieces) > 2.0) >= 8


def test_no_edges_without_a_road():
    """Should offer lines that mislead and no edge in a place without roads."""
    worlds = [_world(seed, 60.0, "no_road") for seed in (3, 4)]
    assert all(not w.edges and w.surface.is_empty for w in worlds)
    assert sum(len(w.others) for w in worlds) > 0


@pytest.mark.parametrize("radius", PUBLISHED_RADII)
@pytest.mark.parametrize("angle", [60, 90, 130])
def test_curb_returns_are_arcs(radius: float, angle: int):
    """Should round a corner with an arc of the radius asked for, its chords within 5 mm of the arc."""
    turned = np.radians(angle)
    ends = [np.array([[0, 0], [60 * np.cos(a), 60 * np.sin(a)]]) for a in (0, turned)]
    both = shapely.union_all([Alignment(xy).strip(0, 60, -3, 3) for xy in ends])
    sliver = max(closing(both, radius), key=lambda p: p.bounds[2])
    arc = shapely.line_merge(sliver.exterior.difference(both.buffer(1e-3)))
    bisector = np.array([np.cos(turned / 2), np.sin(turned / 2)])
    centre = Point((3 + radius) / np.sin(turned / 2) * bisector)
    along = [arc.interpolate(t, normalized=True) for t in np.linspace(0, 1, 400)]
    assert max(abs(p.distance(centre) - radius) for p in along) < CHORD_ERROR
    assert arc.length == pytest.approx((np.pi - turned) * radius, rel=0.03)


def test_radii_of_junctions_within_the_published_spread():
    """Should draw corner radii of 0–15 m as handbooks have them, sharp ones among them, and few slip lanes beyond."""
    rng = np.random.default_rng(0)
    radii = [
        r
        for style in TOWNS
        for _ in range(6)
        for n in plan_town(rng, 150.0, style).junctions
        for r in n.radii
    ]
    radii = np.array(radii)
    assert max(high for _, high in CORNER_RADIUS_ODDS) == PUBLISHED_RADII[-1]
    assert 0.05 < np.mean(radii < 0.05) < 0.3
    assert np.mean((radii >= 1.5) & (radii <= 15.0)) > 0.5
    assert np.mean(radii > 15.0) < 0.08


def test_alignments_keep_their_radii():
    """Should hold arcs and offsets within 5 mm: a rounded corner, and a clothoid's closing arc."""
    bend = rounded([(0, 0), (100, 0), (100, 100)], [40])
    arc = bend.parallel(bend.length / 2 - 25, bend.length / 2 + 25, 4.0)
    assert np.abs(np.hypot(*(arc - [60, 40]).T) - 36.0).max() < CHORD_ERROR
    turn = from_curvature(0, 0, 0, [20, 30, 40], [0, 0, 0.02, 0.02])
    (ax, ay), (bx, by), (cx, cy) = turn.at(np.array([55.0, 70.0, 85.0]))
    a, b, c = np.hypot(bx - cx, by - cy), np.hypot(ax - cx, ay - cy), np.hypot(ax - bx, ay - by)
    area = 0.5 * abs((bx - ax) * (cy - ay) - (cx - ax) * (by - ay))
    assert a * b * c / (4 * area) == pytest.approx(50.0, rel=0.01)


def test_statistics_measure_what_was_drawn():
    """Should find width, corner radius and island of a crossing drawn with known sizes."""
    road = LineString([(-80, 0), (80, 0)]).buffer(5, cap_style="flat")
    cross = shapely.union(road, LineString([(0, -80), (0, 80)]).buffer(4, cap_style="flat"))
    whole = shapely.union_all([cross, *closing(cross, 6.0)]).difference(box(20, -1, 40, 1))
    found = outline_statistics(whole, box(-70, -70, 70, 70))
    assert np.median(found["corner_radius"]) == pytest.approx(6.0, abs=1.0)
    assert set(np.round(found["width"], 1)) & {8.0, 10.0} == {8.0, 10.0}
    assert found["island_area"] == pytest.approx([40.0])
    assert Polygon(whole.exterior).area > 0


@pytest.mark.parametrize("size", [10.0, 1000.0, float("nan")])
def test_refuses_sizes_it_cannot_make(size: float):
    """Should say which sizes can be made."""
    with pytest.raises(BadInput, match="choose a size"):
        make_world(1, size)


def test_refuses_unknown_style():
    """Should list the styles there are."""
    with pytest.raises(BadInput, match="old_town"):
        make_world(1, 50.0, "atlantis")
