"""Seeds in, traces merged, simplified and recorded."""

from __future__ import annotations

import itertools
import json
import os
from pathlib import Path

import numpy as np
import pyogrio
import pyproj
import pytest
import shapely
from drawn import EAST, NORTH, write_seeds
from hypothesis import given, settings
from hypothesis import strategies as st
from numpy.typing import ArrayLike, NDArray

from roadhem.errors import BadInput, RoadhemError
from roadhem.lines.files import check_target, whole_file
from roadhem.lines.geojson import write_geojson
from roadhem.lines.geopackage import write_geopackage
from roadhem.lines.ground import Ground
from roadhem.lines.merge import REST_M, merge
from roadhem.lines.records import Lineage, Recorder, settled, stretch_runs
from roadhem.lines.seeds import LOST_VIA, NO_GEOMETRY, digest, read_seeds
from roadhem.lines.simplify import CHORD_M, breaks, keep, quantum, rounded
from roadhem.lines.vectors import best_transformer, read_layer, split_source, to_crs
from roadhem.tiles.grid import WorkingGrid
from roadhem.tracing.result import Doubt, Trace

UTM = pyproj.CRS.from_epsg(25832)


def trace(points: ArrayLike, sigma: float = 0.04, closed: bool = False, **fields: object) -> Trace:
    """A trace with the same spread, kind and visibility all along."""
    points = np.asarray(points, dtype=np.float64)
    marks = np.zeros(len(points), np.uint8)
    reasons = ("looped", "looped") if closed else ("end", "unsure")
    return Trace(points, np.full(len(points), sigma), marks, marks.copy(), closed, *reasons, **fields)


def wave(start: float, stop: float, off: float = 0.0, step: float = 0.4, phase: float = 0.0) -> NDArray[np.float64]:
    """Points along a gentle wave."""
    x = np.arange(start + phase, stop + 1e-9, step)
    return np.stack([x, 3 * np.sin(x / 12) + off], axis=1)


def placed(points: NDArray[np.float64]) -> NDArray[np.float64]:
    """The same points where EPSG:25832 is at home."""
    return points + np.array([EAST, NORTH])


def ring(turn: float = 0.0, radius: float = 10.0, count: int = 150) -> NDArray[np.float64]:
    """A closed circle that starts anywhere."""
    angle = turn + np.linspace(0, 2 * np.pi, count + 1)
    points = np.stack([radius * np.cos(angle), radius * np.sin(angle)], axis=1)
    points[-1] = points[0]
    return points


def starts(traces: list[Trace]) -> NDArray[np.float64]:
    """A seed for each trace: its middle."""
    return np.array([t.points[len(t.points) // 2] for t in traces])


class OneTile:
    """A single tile."""

    def source_at(self, x_m: float, y_m: float) -> tuple[str, str]:
        """Name and date."""
        return "tile.tif", "2024-05-01"


def recorder(crs: pyproj.CRS = UTM, scale: float = 1.0) -> Recorder:
    """A recorder for one tile."""
    return Recorder(crs, WorkingGrid(scale), OneTile(), Lineage("drawn", "roadhem 0", "2025-06-01T08:00:00Z"))


# Merging


def test_two_seeds_on_one_edge_give_one_line() -> None:
    """Should keep of equal traces the one with the lower spread (yardsticks' W4: redundancy is what to avoid)."""
    traces = [trace(wave(0, 60), 0.05), trace(wave(0, 60, 0.08), 0.03), trace(wave(0.2, 60, -0.05), 0.04)]
    merged = merge(traces, starts(traces))
    assert len(merged.traces) == 1
    assert merged.edge_of == [0, 0, 0]
    np.testing.assert_array_equal(merged.traces[0].points, traces[1].points)


def test_equal_spread_goes_by_coordinates() -> None:
    """Should decide between traces of equal spread by their coordinates, whatever their order."""
    traces = [trace(wave(0, 40, off)) for off in (0.05, -0.05)]
    outcomes = [merge(list(order), starts(list(order))).traces[0].points for order in itertools.permutations(traces)]
    np.testing.assert_array_equal(outcomes[0], outcomes[1])


def test_overlapping_traces_become_one_line_without_averaging() -> None:
    """Should keep the longer whole and weld on what the other alone has; no point is a mean of two."""
    traces = [trace(wave(0, 60)), trace(wave(35, 90, 0.05, phase=0.13), 0.02)]
    merged = merge(traces, starts(traces))
    assert len(merged.traces) == 1
    line = merged.traces[0]
    given = {point.tobytes() for t in traces for point in t.points}
    assert {point.tobytes() for point in line.points} <= given
    np.testing.assert_array_equal(line.points[: len(traces[0].points)], traces[0].points)
    assert line.points[-1].tolist() == traces[1].points[-1].tolist()
    assert (line.start_reason, line.end_reason) == ("end", "unsure")
    assert np.hypot(*np.diff(line.points, axis=0).T).max() < 1.7


def test_a_branch_is_kept_as_a_line_of_its_own() -> None:
    """Should cut a branch where it leaves the longer line, and say that it met an edge there."""
    main = trace(np.stack([np.arange(0, 100, 0.4), np.zeros(250)], axis=1))
    x = np.arange(0, 60, 0.4)
    branch = trace(np.stack([x, np.where(x > 30, (x - 30) * 0.8, 0.02)], axis=1), 0.01)
    merged = merge([branch, main], starts([branch, main]))
    assert len(merged.traces) == 2
    short = min(merged.traces, key=lambda t: len(t.points))
    assert short.start_reason == "met_edge"
    assert shapely.distance(shapely.LineString(short.points), shapely.LineString(main.points)) > 0.1
    assert len(max(merged.traces, key=lambda t: len(t.points)).points) == len(main.points)


def test_short_rests_are_dropped() -> None:
    """Should drop what an overlapping trace has beyond another if that is shorter than the limit."""
    traces = [trace(wave(0, 60)), trace(wave(20, 60 + REST_M - 0.6, 0.03))]
    merged = merge(traces, starts(traces))
    assert [len(t.points) for t in merged.traces] == [len(traces[0].points)]
    assert merged.edge_of == [0, 0]


def test_parallel_lines_stay_apart() -> None:
    """Should not merge lines 0.3 m apart, nor lines that cross."""
    traces = [trace(wave(0, 40)), trace(wave(0, 40, 0.3)), trace([(20 + 0.02 * y, y) for y in np.arange(-9, 9, 0.4)])]
    assert len(merge(traces, starts(traces)).traces) == 3


def test_loops_merge_wherever_they_start() -> None:
    """Should see one island in three loops that start elsewhere, and in an arc along it."""
    arc = trace(ring(0.3)[:60])
    traces = [trace(ring(turn), closed=True) for turn in (0.0, 1.0, 2.5)] + [arc]
    merged = merge(traces, starts(traces))
    assert len(merged.traces) == 1
    assert merged.traces[0].closed
    assert merged.edge_of == [0, 0, 0, 0]


def test_arcs_that_close_become_a_loop() -> None:
    """Should close an island whose two traces together go round."""
    whole = ring(0.0, count=160)
    traces = [trace(whole[:110]), trace(np.concatenate([whole[90:-1], whole[:20]]))]
    merged = merge(traces, starts(traces))
    assert len(merged.traces) == 1
    assert merged.traces[0].closed
    np.testing.assert_array_equal(merged.traces[0].points[0], merged.traces[0].points[-1])


@given(st.randoms(use_true_random=False), st.integers(2, 6))
@settings(max_examples=60, deadline=None)
def test_merging_does_not_depend_on_order(random: object, count: int) -> None:
    """Should give the same lines for any order of traces, and lead every seed to one of them."""
    traces = []
    for _ in range(count):
        start = random.uniform(0, 60)
        off, sigma = random.choice([0.0, 0.05, -0.06, 0.4]), random.choice([0.03, 0.04, 0.05])
        traces.append(trace(wave(start, start + random.uniform(5, 50), off, phase=random.uniform(0, 0.4)), sigma))
    first = merge(traces, starts(traces))
    order = list(range(count))
    random.shuffle(order)
    again = merge([traces[i] for i in order], starts(traces)[order])
    assert [t.points.tobytes() for t in first.traces] == [t.points.tobytes() for t in again.traces]
    assert [first.edge_of[i] for i in order] == again.edge_of
    for edge, seed in zip(first.edge_of, starts(traces), strict=True):
        assert shapely.LineString(first.traces[edge].points).distance(shapely.Point(seed)) < 0.5


# Simplifying


@given(st.integers(0, 2**32 - 1), st.booleans())
@settings(max_examples=60, deadline=None)
def test_chord_error_and_spacing_hold(seed: int, sharp: bool) -> None:
    """Should keep every point within the chord error and a vertex at least every 10 m."""
    rng = np.random.default_rng(seed)
    turn = rng.normal(0, 0.05, 400).cumsum() * rng.uniform(0, 1)
    if sharp:
        turn[200:] += 2.0
    points = np.cumsum(0.4 * np.stack([np.cos(turn), np.sin(turn)], axis=1), axis=0)
    along = 0.4 * np.arange(len(points))
    kept = keep(points, breaks(along))
    line = shapely.LineString(points[kept])
    assert shapely.distance(shapely.points(points), line).max() <= CHORD_M
    assert np.diff(along[kept]).max() <= 10.0


def test_straights_are_sampled_and_corners_kept() -> None:
    """Should cut a straight into even pieces and keep a sharp corner to the point."""
    steps = np.arange(0, 40, 0.4)
    points = np.concatenate([np.stack([steps, 0 * steps], 1), [(40.0, y) for y in steps[:50]]])
    along = np.concatenate([[0], np.cumsum(np.hypot(*np.diff(points, axis=0).T))])
    kept = points[keep(points, breaks(along))]
    assert [40.0, 0.0] in kept.tolist()
    assert np.hypot(*np.diff(kept, axis=0).T).max() <= 10.0
    assert len(kept) <= 9


@pytest.mark.parametrize(
    ("scale", "step"), [(1.0, 0.001), (0.3048, 0.001), (1200 / 3937, 0.001), (0.6139, 0.001), (0.498, 0.001)]
)
def test_coordinates_are_rounded_to_a_ground_millimetre(scale: float, step: float) -> None:
    """Should round to the power of ten that is about a millimetre on the ground."""
    assert quantum(scale) == pytest.approx(step)
    assert rounded(np.array([[EAST + 0.00049, NORTH + 0.0016]]), scale).tolist() == [[EAST, NORTH + 0.002]]


def test_short_changes_of_kind_are_no_stretch_but_bridged_ones_are() -> None:
    """Should let flickering kinds settle, and keep even a short bridged stretch."""
    along = np.arange(100) * 0.4
    kind = np.zeros(100, np.uint8)
    kind[[20, 21, 50]] = 1
    kind[70:90] = 2
    assert np.flatnonzero(np.diff(settled(kind, along))).tolist() == [69, 89]
    seen = np.zeros(100, np.uint8)
    seen[30:32] = 2
    assert np.flatnonzero(np.diff(settled(seen, along, lasting=(2,)))).tolist() == [29, 31]


# Records


def test_edges_and_stretches_agree() -> None:
    """Should lay stretches end to end along their edge, none longer than 10 m, lengths on the ground."""
    rows = recorder()
    points = placed(wave(0, 100))
    line = trace(points)
    line.sigma[60:120] = 0.1
    line.kind[100:180] = 1
    line.seen[150:170] = 2
    edge_id = rows.add_edge(line, [("7", points[30])])
    edge = rows.layers.edges.rows[0]
    stretches = rows.layers.stretches.rows
    assert edge["edge_id"] == edge_id
    assert edge["seed_id"] == "7"
    assert (edge["source"], edge["image_date"], edge["state"], edge["version"]) == (
        "tile.tif",
        "2024-05-01",
        "traced",
        1,
    )
    assert stretches[0]["from_m"] == 0
    assert stretches[-1]["to_m"] == edge["length_m"]
    assert all(a["to_m"] == b["from_m"] for a, b in itertools.pairwise(stretches))
    assert max(s["to_m"] - s["from_m"] for s in stretches) <= 10.0
    assert edge["hidden_m"] == pytest.approx(
        sum(s["to_m"] - s["from_m"] for s in stretches if s["seen"] == "bridged")
    )
    assert {s["kind"] for s in stretches} == {"raised", "lowered"}
    joined = shapely.line_merge(shapely.multilinestrings(rows.layers.stretches.geometry))
    assert joined.equals(rows.layers.edges.geometry[0])
    assert edge["spread_m"] == pytest.approx(np.median(line.sigma), abs=5e-4)
    geod = pyproj.Geod(ellps="GRS80")
    lonlat = pyproj.Transformer.from_crs(25832, 4258, always_xy=True).transform(*rows.layers.edges.geometry[0].xy)
    assert edge["length_m"] == pytest.approx(geod.line_length(*lonlat), abs=0.001)


def test_an_edge_far_from_its_seed_bears_no_id() -> None:
    """Should name an edge after a seed only if it passes within a metre of it."""
    rows = recorder()
    points = placed(wave(0, 20))
    rows.add_edge(trace(points), [("far", points[10] + (0, 3)), ("near", points[20] + (0, 0.5))])
    rows.add_edge(trace(points + np.array([0, 50])), [("far", points[10])])
    assert [row["seed_id"] for row in rows.layers.edges.rows] == ["near", None]


def test_spread_of_a_stretch_is_its_root_mean_square() -> None:
    """Should pool variances, so that errors drawn along a stretch have the spread it states."""
    line = trace(np.stack([np.arange(0, 8, 0.4), np.zeros(20)], 1))
    line.sigma[:10], line.sigma[10:] = 0.03, 0.09
    assert stretch_runs(line)[0].spread == pytest.approx(np.sqrt((0.03**2 + 0.09**2) / 2))


def test_edge_ids_tell_geometries_apart() -> None:
    """Should give equal geometries the same id, and a millimetre's difference another."""
    points = placed(wave(0, 20))
    moved = points.copy()
    moved[0, 0] += 0.001
    ids = [recorder().add_edge(trace(p), []) for p in (points, points.copy(), moved)]
    assert ids[0] == ids[1] != ids[2]


def test_ground_lengths_in_web_mercator() -> None:
    """Should count ground metres where the map's scale is twice the ground's."""
    mercator = pyproj.CRS.from_epsg(3857)
    ground = Ground(mercator)
    x, y = pyproj.Transformer.from_crs(4326, 3857, always_xy=True).transform(10.0, 60.0)
    squared_eccentricity = 0.00669437999
    on_parallel = 100 * 0.5 / np.sqrt(1 - squared_eccentricity * 0.75)  # N cos(lat) / a, [built]
    assert ground.step_m([(x, y), (x + 100, y)])[0] == pytest.approx(on_parallel, abs=1e-3)
    assert Ground(pyproj.CRS.from_epsg(2992)).metres_per_unit((0, 0, 1000, 1000)) == pytest.approx(0.3048, rel=0.002)


# Seeds


def test_seeds_are_transformed_and_numbered(tmp_path: Path) -> None:
    """Should bring seeds to the tiles' CRS and number those without an id."""
    lonlat = pyproj.Transformer.from_crs(25832, 4258, always_xy=True).transform(EAST, NORTH)
    path = write_seeds(tmp_path / "s.gpkg", [lonlat, None], crs="EPSG:4258")
    seeds = read_seeds(str(path), UTM)
    assert seeds[0].points[0].tolist() == pytest.approx([EAST, NORTH], abs=1e-6)
    assert seeds[1].fault == NO_GEOMETRY
    assert len(digest(seeds)) == 64


def test_via_points_are_sorted_behind_their_seed(tmp_path: Path) -> None:
    """Should group via points by seed in their order, and say which lead nowhere."""
    points = [(0, 0), (3, 0), (1, 0), (2, 0), (9, 9)]
    columns = {"seed_id": ["a", "b", "c", "d", "e"], "via_of": ["", "a", "a", "a", "zz"], "order": [0, 3, 1, 2, 1]}
    values = [np.array(column, dtype=None if name == "order" else object) for name, column in columns.items()]
    pyogrio.raw.write(
        str(tmp_path / "v.gpkg"), shapely.to_wkb(shapely.points(points)), values, list(columns), layer="seeds",
        geometry_type="Point", crs="EPSG:25832",
    )  # fmt: skip
    seeds = read_seeds(str(tmp_path / "v.gpkg"), UTM)
    assert seeds[0].points[:, 0].tolist() == [0, 1, 2, 3]
    assert [(s.seed_id, s.fault) for s in seeds] == [("a", ""), ("e", LOST_VIA)]


def test_multi_points_and_repeated_ids_lose_nothing(tmp_path: Path) -> None:
    """Should make a seed of each point of a multi-point, and keep two seeds of one id apart."""
    shapes = [shapely.MultiPoint([(0, 0), (5, 5)]), shapely.MultiPoint([(7, 7)]), shapely.MultiPoint([(8, 8)])]
    pyogrio.raw.write(
        str(tmp_path / "m.gpkg"), shapely.to_wkb(np.array(shapes)), [np.array(["a", "b", "b"], dtype=object)],
        ["seed_id"], layer="marks", geometry_type="MultiPoint", crs="EPSG:25832",
    )  # fmt: skip
    assert [s.seed_id for s in read_seeds(str(tmp_path / "m.gpkg"), UTM)] == ["a.1", "a.2", "b", "b~2"]


def test_layers_are_chosen_by_name_then_role_then_alone(tmp_path: Path) -> None:
    """Should follow the rule for layers and list them where none fits."""
    path = write_seeds(tmp_path / "two.gpkg", [(1, 1)], layer="seeds")
    write_seeds(path, [(2, 2)], layer="edges of old")
    assert read_layer(str(path), "seeds").name == "seeds"
    assert read_layer(f"{path}:edges of old", "seeds").name == "edges of old"
    with pytest.raises(BadInput, match=r"none is called 'areas'; name one as FILE:LAYER from seeds, edges of old"):
        read_layer(str(path), "areas")
    with pytest.raises(BadInput, match=r"no layer 'x'; it has seeds, edges of old"):
        read_layer(f"{path}:x", "seeds")
    alone = write_seeds(tmp_path / "one.gpkg", [(1, 1)], layer="whatever")
    assert read_layer(str(alone), "seeds").name == "whatever"


def test_file_names_with_colons_are_taken_whole(tmp_path: Path) -> None:
    """Should not cut an existing file's own name, nor a drive letter."""
    path = write_seeds(tmp_path / "a:b.gpkg", [(1, 1)])
    assert split_source(str(path)) == (str(path), None)
    assert split_source(f"{path}:seeds") == (str(path), "seeds")
    assert split_source("C:\\flight\\seeds.gpkg") == ("C:\\flight\\seeds.gpkg", None)


def test_coarse_transformations_are_refused_by_name() -> None:
    """Should name a missing grid and a ballpark operation, and let them pass only on request."""
    gauss, amersfoort = pyproj.CRS.from_epsg(31467), pyproj.CRS.from_epsg(25832)
    bounds = np.array([3_500_000.0, 5_600_000.0, 3_500_100.0, 5_600_100.0])
    with pytest.raises(BadInput, match=r"grid .*\.tif .*--allow-ballpark"):
        best_transformer(gauss, amersfoort, bounds, "s.gpkg")
    assert best_transformer(gauss, amersfoort, bounds, "s.gpkg", allow_ballpark=True).accuracy > 0
    # EPSG knows no operation between these two: PROJ can only offer a ballpark one.
    local = pyproj.CRS.from_epsg(27200)
    with pytest.raises(BadInput, match="--allow-ballpark"):
        best_transformer(local, pyproj.CRS.from_epsg(5514), np.array([2.5e6, 6e6, 2.5e6 + 1, 6e6 + 1]), "s.gpkg")


@pytest.mark.filterwarnings("ignore:'crs' was not provided")
def test_layers_without_crs_are_refused(tmp_path: Path) -> None:
    """Should ask for the CRS rather than guess it."""
    pyogrio.raw.write(
        str(tmp_path / "n.gpkg"), shapely.to_wkb(shapely.points([(1, 1)])), [], [], layer="seeds",
        geometry_type="Point", crs=None,
    )  # fmt: skip
    with pytest.raises(BadInput, match="has no CRS"):
        to_crs(read_layer(str(tmp_path / "n.gpkg"), "seeds"), UTM)


# Files


def test_a_failed_write_leaves_the_old_file(tmp_path: Path) -> None:
    """Should leave the old file as it was and nothing beside it."""
    target = tmp_path / "lines [1].gpkg"
    target.write_text("old")
    rows = recorder()
    rows.layers.doubts.add(shapely.Point(0, 0), edge_id="e", reason="fork", weight="heavy")
    with pytest.raises(ValueError, match="heavy"):
        write_geopackage(target, rows.layers, UTM)
    assert target.read_text() == "old"
    assert os.listdir(tmp_path) == [target.name]


def test_unwritable_targets_are_refused_first(tmp_path: Path) -> None:
    """Should refuse a folder that is not there, a folder as file and a suffix that says nothing."""
    with pytest.raises(BadInput, match="does not exist"):
        check_target(tmp_path / "no" / "o.gpkg")
    with pytest.raises(BadInput, match="is a folder"):
        check_target(tmp_path)
    with pytest.raises(BadInput, match=r"ends in \.gpkg"):
        check_target(tmp_path / "o.txt", (".gpkg",))


def test_whole_file_goes_by_rename(tmp_path: Path) -> None:
    """Should show the target only once it is whole."""
    target = tmp_path / "o.txt"
    with whole_file(target) as part:
        part.write_text("new")
        assert not target.exists()
    assert target.read_text() == "new"
    assert os.listdir(tmp_path) == ["o.txt"]


def test_geojson_is_longitude_latitude_to_the_millimetre(tmp_path: Path) -> None:
    """Should follow RFC 7946 (from memory): one collection a file, longitude first, no member that names a CRS."""
    rows = recorder()
    points = placed(wave(0, 50))
    rows.add_edge(trace(points, doubts=(Doubt(*points[5], "fork", 0.5),)), [("1", points[3])])
    rows.add_unplaced("2", None, "the seed has no geometry")
    to_lonlat = pyproj.Transformer.from_crs(25832, 4326, always_xy=True)
    write_geojson(tmp_path / "ö.geojson", rows.layers, to_lonlat)
    names = sorted(os.listdir(tmp_path))
    assert names == [f"ö{part}.geojson" for part in (".doubts", "", ".seeds", ".stretches", ".unplaced")]
    edges = json.loads((tmp_path / "ö.geojson").read_text(encoding="utf-8"))
    assert set(edges) == {"type", "features"}
    back = to_lonlat.transform(*np.array(edges["features"][0]["geometry"]["coordinates"]).T, direction="INVERSE")
    written = shapely.get_coordinates(rows.layers.edges.geometry[0])
    assert np.abs(np.stack(back, axis=1) - written).max() < 0.0005
    unplaced = json.loads((tmp_path / "ö.unplaced.geojson").read_text(encoding="utf-8"))
    assert unplaced["features"][0]["geometry"] is None


def test_errors_while_writing_are_told(tmp_path: Path) -> None:
    """Should turn GDAL's complaint into a sentence."""
    with pytest.raises(RoadhemError, match="could not be written"):
        write_geopackage(tmp_path / "gone" / "o.gpkg", recorder().layers, UTM)
