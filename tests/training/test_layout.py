from __future__ import annotations

import numpy as np
import pytest
import shapely
from shapely.geometry import box

from roadhem.errors import BadInput
from roadhem_training.scenes.layout import STYLE_ODDS, make_world
from roadhem_training.scenes.world import MARGIN, World

STYLES = list(STYLE_ODDS)
SIDE_STEP = 0.05  # metres to either side of an edge at which the surface is asked


def _outline(world: World) -> shapely.Geometry:
    """The surface's own boundary, without the cut at the frame plus margin."""
    frame = box(-MARGIN + 1e-3, -MARGIN + 1e-3, world.size + MARGIN - 1e-3, world.size + MARGIN - 1e-3)
    return world.surface.boundary.intersection(frame)


@pytest.mark.parametrize("style", STYLES)
def test_same_seed_same_world(style: str):
    """Should give the same world for the same seed, and another for another."""
    first, second, other = (make_world(s, 60.0, style) for s in (3, 3, 4))
    assert repr(first) == repr(second)
    assert repr(first) != repr(other)


@pytest.mark.parametrize("style", STYLES)
@pytest.mark.parametrize("seed", [1, 2, 3])
def test_surface_lies_left_of_every_edge(style: str, seed: int):
    """Should have drive-over surface 5 cm left of each edge and none 5 cm right of it."""
    world = make_world(seed, 80.0, style)
    wrong = total = 0
    frame = box(0, 0, world.size, world.size)
    for edge in world.edges:
        mids = np.arange(0.25, edge.line.length - 0.2, 0.5)
        mids = mids[shapely.contains(frame, shapely.line_interpolate_point(edge.line, mids))]
        here = shapely.get_coordinates(shapely.line_interpolate_point(edge.line, mids))
        ahead = shapely.get_coordinates(shapely.line_interpolate_point(edge.line, mids + 0.05))
        along = ahead - here
        normal = np.stack([-along[:, 1], along[:, 0]], axis=1) / np.hypot(*along.T)[:, None] * SIDE_STEP
        wrong += int(np.sum(~shapely.contains_xy(world.surface, *(here + normal).T)))
        wrong += int(np.sum(shapely.contains_xy(world.surface, *(here - normal).T)))
        total += 2 * len(mids)
    assert wrong <= 0.001 * total


@pytest.mark.parametrize("style", STYLES)
def test_edges_cover_the_outline_exactly(style: str):
    """Should name every piece of the surface's outline once, and nothing else."""
    world = make_world(5, 80.0, style)
    outline = _outline(world)
    lengths = sum(e.line.length for e in world.edges)
    assert lengths == pytest.approx(outline.length, abs=0.05)
    if world.edges:
        drawn = shapely.union_all([e.line for e in world.edges])
        assert drawn.difference(outline.buffer(1e-6)).length < 0.05
        assert outline.difference(drawn.buffer(1e-6)).length < 0.05


@pytest.mark.parametrize("style", STYLES)
def test_kinds_and_heights_agree(style: str):
    """Should use the three kinds only, with no height where the pavement ends flush."""
    for seed in range(4):
        for edge in make_world(seed, 60.0, style).edges:
            assert edge.kind in ("raised", "lowered", "flush")
            assert edge.height == 0.0 if edge.kind == "flush" else 0.0 <= edge.height <= 0.30


@pytest.mark.parametrize("style", STYLES)
def test_no_house_on_the_road(style: str):
    """Should keep houses and halls off the drive-over surface."""
    for seed in range(4):
        world = make_world(seed, 80.0, style)
        for body in world.bodies:
            if body.what in ("house", "hall") and body.base == 0.0:
                assert body.footprint.intersection(world.surface).area < 0.01


@pytest.mark.parametrize("size", [10.0, 1000.0])
def test_refuses_sizes_it_cannot_make(size: float):
    """Should say which sizes can be made."""
    with pytest.raises(BadInput, match="choose a size"):
        make_world(1, size)


def test_refuses_unknown_style():
    """Should list the styles there are."""
    with pytest.raises(BadInput, match="old_town"):
        make_world(1, 50.0, "atlantis")
