"""The benchmark's figures on made-up lines whose answers are known."""

from __future__ import annotations

import json
import math
from pathlib import Path
from types import SimpleNamespace

import numpy as np
import pyproj
import pytest
import shapely
from click.testing import CliRunner
from drawn import EAST, NORTH, drawn_model, drawn_pixels, write_seeds, write_tile

from roadhem.lines.geopackage import write_geopackage
from roadhem.lines.tables import Table
from roadhem_training.bench.__main__ import main, plain
from roadhem_training.bench.baselines import (
    Nearness,
    PathSettings,
    SkeletonSettings,
    click_count,
    joined_cells,
    minimal_path,
    minimal_paths,
    skeleton_lines,
)
from roadhem_training.bench.cases import Case, best_cases, worst_cases
from roadhem_training.bench.compare import class_figures, compare, line_figures
from roadhem_training.bench.corrections import MOST, click_edge, click_figures, largest_gap
from roadhem_training.bench.doubts import Doubted, doubt_figures
from roadhem_training.bench.goals import Goal
from roadhem_training.bench.page import Part, Picture, Sheet, cells, figure_text, write_bench_page
from roadhem_training.bench.pictures import window
from roadhem_training.bench.probes import CLEAR_M, MARKING_CLEAR_M, clear_places, marking_places, probe
from roadhem_training.bench.samples import along_lines, nearest, runs_of
from roadhem_training.bench.sets import FIRST_SEED, LIDAR, REAL, real_sets
from roadhem_training.bench.truth import Truth


def lines(*coordinates: object) -> np.ndarray:
    return np.array([*map(shapely.LineString, coordinates), None], dtype=object)[:-1]


def truth(
    drawn: np.ndarray, sight: object = "seen", kind: object = "raised", areas: object = None, markings: object = ()
) -> Truth:
    sights = np.broadcast_to(np.array(sight, dtype=object), len(drawn))
    kinds = np.broadcast_to(np.array(kind, dtype=object), len(drawn))
    return Truth(drawn, kinds, sights, sights != "hidden", areas, np.array(markings, dtype=object))


def test_samples_lie_in_the_middle_of_equal_pieces():
    """Should give places, headings and lengths of pieces as shapely does."""
    bent = lines([(0, 0), (3, 0), (3, 4), (-1, 4)], [(5, 5), (5, 5.05)])
    found = along_lines(bent, 0.1)
    expected = shapely.get_coordinates(shapely.line_interpolate_point(bent[found.line], found.along))
    assert np.allclose(found.xy, expected, atol=1e-9)
    assert np.allclose(np.bincount(found.line, weights=found.weight), [11, 0.05])
    assert np.allclose(found.heading[found.line == 1], np.pi / 2)
    assert len(along_lines(np.empty(0, dtype=object)).xy) == 0


def test_nearest_tells_distance_and_turn():
    """Should measure to the nearest line and compare axes, whatever the direction."""
    samples = along_lines(lines([(0, 0), (10, 0)]), 1.0)
    near = nearest(samples, lines([(10, 0.5), (0, 0.5)], [(0, 3), (10, 3)]))
    assert np.allclose(near.distance, 0.5)
    assert (near.line == 0).all()
    assert np.allclose(near.turn, 0, atol=1e-9)
    assert np.isinf(nearest(samples, lines()).distance).all()


def test_short_runs_are_dropped():
    """Should keep marked runs of the least length, and none across two lines."""
    mark = np.array([True, True, False, True, True, True])
    line = np.array([0, 0, 0, 0, 1, 1])
    assert runs_of(mark, line, np.ones(6), 2.0).tolist() == [True, True, False, False, True, True]


def test_wrong_parallel_share():
    """Should count the part 0.6 m beside the truth, not the right one nor the one across."""
    drawn = truth(lines([(0, 0), (100, 0)]))
    found = lines([(0, 0.05), (50, 0.05)], [(50, 0.6), (80, 0.6)], [(90, 0.4), (90, 1.4)])
    figures = line_figures([compare(found, drawn)])
    assert figures["on a wrong parallel line"] == pytest.approx(30 / 81, abs=0.002)
    assert figures["completeness at 0.15 m"] == pytest.approx(0.5, abs=0.002)
    assert figures["correctness at 0.30 m"] == pytest.approx(50 / 81, abs=0.002)
    assert figures["lateral median, m"] == pytest.approx(0.05)


def test_far_lines_count_as_outside():
    """Should give a 95 % error beyond the search radius when a tenth of the lines lies far off."""
    drawn = truth(lines([(0, 0), (90, 0)]))
    figures = line_figures([compare(lines([(0, 0.1), (90, 0.1)], [(0, 50), (10, 50)]), drawn)])
    assert figures["lateral median, m"] == pytest.approx(0.1)
    assert math.isinf(figures["lateral 95 %, m"])


def test_hidden_stretches_bridged():
    """Should count the hidden stretch that is crossed, not the one left open, and none longer than 8 m."""
    drawn = lines([(0, 0), (10, 0)], [(10, 0), (15, 0)], [(15, 0), (30, 0)], [(30, 0), (36, 0)], [(36, 0), (50, 0)],
                  [(50, 0), (60, 0)], [(60, 0), (70, 0)])  # fmt: skip
    sight = ["seen", "hidden", "seen", "hidden", "shadow", "hidden", "seen"]
    figures = line_figures([compare(lines([(0, 0.2), (30, 0.2)]), truth(drawn, sight))])
    assert figures["hidden stretches"] == 2
    assert figures["hidden stretches bridged"] == 0.5
    assert figures["truth, m"] == pytest.approx(49)


def test_figures_by_class():
    """Should tell kinds and sights of the truth apart, hidden ones too."""
    drawn = truth(lines([(0, 0), (40, 0)], [(0, 20), (60, 20)]), ["seen", "hidden"], ["raised", "flush"])
    found = [compare(lines([(0, 0.2), (20, 0.2)], [(0, 20.1), (60, 20.1)]), drawn)]
    kinds, sights = class_figures(found, "kind"), class_figures(found, "sight")
    assert kinds["raised"]["completeness at 0.30 m"] == pytest.approx(0.5, abs=0.01)
    assert kinds["raised"]["completeness at 0.15 m"] == 0
    assert sights["hidden"]["completeness at 0.15 m"] == 1
    assert sights["hidden"]["lateral median, m"] == pytest.approx(0.1)


def test_edges_join_across_hidden_stretches():
    """Should give two visible edges, or one across the hidden stretch between them; none that never shows."""
    drawn = truth(lines([(0, 0), (5, 0)], [(5, 0), (8, 0)], [(8, 0), (20, 0)], [(0, 50), (9, 50)]),
                  ["seen", "hidden", "shadow", "hidden"])  # fmt: skip
    assert sorted(shapely.length(drawn.whole_edges())) == [5, 12]
    assert shapely.length(drawn.whole_edges(across_hidden=True)).tolist() == [20]


def test_largest_gap_ends_at_clicks():
    """Should return the middle of the longest wrong run, cut where a click was made."""
    along = np.arange(10) + 0.5
    right = np.array([True, False, False, True, False, False, False, False, False, True])
    assert largest_gap(right, along, []) == 6.5
    assert largest_gap(right, along, [6.5]) == pytest.approx(5.0, abs=1)
    assert 4 <= largest_gap(right, along, [6.5, 7.9]) <= 6.5


def test_corrections_of_a_tracer_with_short_reach():
    """Should need four clicks where each trace reaches 10 m past its points: two gaps of 40 m, then two of 10 m."""
    edge = shapely.LineString([(0, 0), (100, 0)])

    def trace(points: np.ndarray) -> shapely.LineString:
        return shapely.LineString([(points[:, 0].min() - 10, 0.0), (points[:, 0].max() + 10, 0.0)])

    clicked = click_edge(edge, np.array([50.0, 0.3]), trace)
    assert clicked.done
    assert clicked.clicks == 4
    assert click_figures([clicked])["corrections per 100 m"] == 4


@pytest.mark.parametrize(("length", "most"), [(100.0, MOST), (8.0, 4)])
def test_a_person_gives_up(length, most):
    """Should stop after MOST clicks, or one for every 2 m, when nothing is ever placed."""
    clicked = click_edge(shapely.LineString([(0, 0), (length, 0)]), np.array([4.0, 0.0]), lambda points: None)
    assert (clicked.clicks, clicked.done) == (most, False)
    assert click_figures([clicked])["edges given up"] == 1


def test_probes_keep_clear_of_edges():
    """Should try places far from every edge and on lane lines, inside the areas, and count what gave nothing."""
    areas = shapely.box(0, -20, 100, 20)
    drawn = truth(lines([(0, 0), (100, 0)], [(0, 8), (100, 8)]), ["seen", "hidden"], areas=areas,
                  markings=lines([(-50, -4), (100, -4)], [(0, 1), (100, 1)]))  # fmt: skip
    clear, on = clear_places(drawn, (0, 0, 1, 1), 1), marking_places(drawn, 1)
    distance = shapely.distance(shapely.points(clear), shapely.multilinestrings(drawn.lines))
    assert distance.min() > CLEAR_M
    assert areas.contains(shapely.multipoints(clear))
    assert np.allclose(on[:, 1], -4)
    assert on[:, 0].min() > 0
    assert MARKING_CLEAR_M > 1
    asked = probe(clear, lambda points: None if points[0, 1] > 0 else shapely.LineString([(0, 0), (1, 1)]))
    assert (asked.tried, asked.unplaced) == (len(clear), int((clear[:, 1] > 0).sum()))


def test_doubts_near_errors():
    """Should find all wrong length by the one heavy doubt, and a tenth of all length there."""
    xy = np.stack([np.arange(100.0), np.zeros(100)], axis=1)
    wrong = np.arange(100) >= 95
    doubts = np.array([[97.0, 0], *[[10.0 * n, 0] for n in range(9)]])
    heaviness = np.array([0.9, *[0.2] * 9])
    figures = doubt_figures([Doubted(xy, wrong, np.ones(100), doubts, heaviness)])
    assert figures["of wrong length"] == 1
    assert figures["of all length"] == pytest.approx(0.08)
    assert figures["wrong, m"] == 5


def near_a_line() -> Nearness:
    """Nearness to the line y = -10.1 over 20 m, with a gap of 1 m in it."""
    row = np.mgrid[0:100, 0:100][0]
    values = np.clip(1 - np.abs((row + 0.5) * 0.2 - 10.1) / 2, 0, 1).astype(np.float32)
    values[:, 48:53] = 0
    return Nearness(values, 0, 0)


def test_minimal_path_follows_the_ridge():
    """Should run along the line from click to click, across the gap, though the clicks lie beside it."""
    path = minimal_path(near_a_line(), np.array([[1.1, -10.9], [18.9, -9.3]]), PathSettings(0.02, 2, 1))
    inner = shapely.intersection(path, shapely.box(3, -20, 17, 0))
    assert np.abs(shapely.get_coordinates(inner)[:, 1] + 10.1).max() < 0.15
    assert path.coords[0] == (1.1, -10.9)
    assert path.coords[-1] == (18.9, -9.3)


def test_clicks_of_the_minimal_path():
    """Should cut an edge of 100 m to three pieces, which take four clicks."""
    edges = lines([(0, -10.1), (100, -10.1)])
    assert click_count(edges) == 4
    assert len(minimal_paths(near_a_line(), edges, PathSettings(0.1, 1, 1))) == 3


def test_skeleton_lines():
    """Should give the two parts of the line beside its gap, and drop what is short."""
    found = skeleton_lines(near_a_line(), SkeletonSettings(0.9, 2.0))
    assert len(found) == 2
    assert np.abs(shapely.get_coordinates(found)[:, 1] + 10.1).max() < 0.15
    assert not len(skeleton_lines(near_a_line(), SkeletonSettings(0.9, 50.0)))


def test_cells_join_at_corners_once():
    """Should join an L of cells without a diagonal short cut, and a diagonal where it is the only way."""
    bent = np.zeros((4, 4), dtype=bool)
    bent[0, 0] = bent[1, 0] = bent[1, 1] = bent[2, 2] = True
    found = joined_cells(Nearness(bent.astype(np.float32), 0, 0), bent)
    assert shapely.length(found).tolist() == pytest.approx([0.4 + 0.2 * np.sqrt(2)])
    assert not len(joined_cells(Nearness(bent.astype(np.float32), 0, 0), np.zeros((4, 4), dtype=bool)))


def test_goals():
    """Should say by how much a figure misses, in either direction."""
    assert Goal(0.95).short_by(0.9) == pytest.approx(0.05)
    assert Goal(0.95).short_by(0.96) == 0
    assert Goal(0.02, at_most=True).short_by(0.05) == pytest.approx(0.03)
    assert math.isnan(Goal(0.5).short_by(math.nan))
    assert Goal(0.5).short_by(-math.inf) == math.inf


def test_cases_are_the_worst_and_best_places():
    """Should show the longest missed and wrong stretches, longest first, and the edges that are right throughout."""
    drawn = truth(lines([(0, 0), (100, 0)], [(0, 200), (50, 200)], [(0, 400), (30, 400)]))
    found = lines([(0, 0.1), (70, 0.1)], [(0, 200.2), (50, 200.2)], [(0, 400.1), (30, 400.1)], [(300, 0), (312, 0)])
    one = SimpleNamespace(truth=drawn, lines=found, comparison=compare(found, drawn))
    worst, best = worst_cases([one]), best_cases([one])
    assert [case.words for case in worst] == ["30 m missed", "12 m wrong"]
    assert worst[0].centre == pytest.approx((85, 0), abs=0.3)
    assert [case.words.split(",")[0] for case in best] == ["30 m right", "50 m right"]
    assert all(24 <= case.side <= 60 for case in worst + best)


def test_windows_stay_inside_the_tiles():
    """Should move a picture inside, and centre it where the tiles are smaller than it."""
    assert window(Case(0, "", 0, (1.0, 50.0), 20.0), (0, 0, 100, 100)) == (0, 40, 20, 60)
    assert window(Case(0, "", 0, (1.0, 5.0), 20.0), (0, 0, 100, 10)) == (0, -5, 20, 15)


def test_figures_as_people_and_json_read_them(tmp_path: Path):
    """Should write missing and unbounded figures in words, and escape the page."""
    assert [figure_text(x) for x in (0.12345, 12.34, 123.4, math.nan, math.inf, 7)] == [
        "0.123", "12.3", "123", "–", "over 2 m", "7"]  # fmt: skip
    record = {"a": math.nan, "b": [math.inf, np.float64(0.5), 3]}
    assert json.loads(json.dumps(plain(record), allow_nan=False)) == {"a": None, "b": ["over 2 m", 0.5, 3]}
    parts = [Part("T", ["a < b"], [Sheet("s", ("x",), [cells(1.0)])], [Picture("data:image/png;base64,", "c")])]
    write_bench_page(tmp_path / "p.html", "title", "lead", "made", "command", parts)
    page = (tmp_path / "p.html").read_text(encoding="utf-8")
    assert "a &lt; b" in page
    assert "not a survey" in page
    assert "http" not in page


def test_real_sets_are_optional(tmp_path: Path):
    """Should give no sets where the folder is missing, and only those with seeds and truth."""
    assert real_sets(tmp_path / "none") == []
    for name in ("whole", "no_seeds"):
        (tmp_path / name).mkdir()
        (tmp_path / name / "edges.gpkg").touch()
    (tmp_path / "whole" / "seeds.gpkg").touch()
    assert [(one.name, one.group) for one in real_sets(tmp_path)] == [("whole", LIDAR)]
    (tmp_path / "whole" / "image.tif").touch()
    assert [(one.name, one.group) for one in real_sets(tmp_path)] == [("whole", REAL)]


def drawn_set(folder: Path) -> None:
    """Write a tile of 60 m with an edge along its middle, of which the truth knows a part shadowed, and its seed."""
    folder.mkdir(parents=True)
    north = NORTH - 30.03
    write_tile(folder / "image.tif", drawn_pixels([[(EAST - 9, north), (EAST + 70, north)]], 600))
    write_seeds(folder / "seeds.gpkg", [(EAST + 20, north + 0.5), (EAST + 20, north - 20)])
    edges = Table("edges", "LineString", {"kind": "text", "visible": "text", "seen": "text"})
    for start, end, seen in ((0, 40, "seen"), (40, 60, "shadow")):
        line = shapely.LineString([(EAST + start, north), (EAST + end, north)])
        edges.add(line, kind="raised", visible="yes", seen=seen)
    write_geopackage(folder / "edges.gpkg", [edges], pyproj.CRS.from_epsg(25832))


def test_page_of_drawn_sets(tmp_path: Path):
    """Should measure a perfect net as perfect, from files to page, and say that the real sets are missing."""
    out = tmp_path / "bench"
    drawn_set(out / "scenes" / str(FIRST_SEED))
    model = drawn_model(tmp_path / "model")
    asked = ["--model", str(model), "--out", str(out), "--scenes", "1", "--real", "../shared/none"]
    result = CliRunner().invoke(main, asked)
    assert result.exit_code == 0, result.output
    assert "../shared is missing" in result.output
    record = json.loads((out / "figures.json").read_text(encoding="utf-8"))
    figures = record["figures"]["invented"]
    assert figures["lines"]["completeness at 0.15 m"] > 0.98
    assert figures["lines"]["correctness at 0.15 m"] == pytest.approx(1)
    assert figures["lines"]["lateral median, m"] < 0.02
    assert figures["by sight"]["shadow"]["truth, m"] == pytest.approx(20)
    assert figures["clicks"]["corrections per 100 m"] == 0
    assert figures["seeds"]["far from any edge"]["unplaced"] == 1
    assert figures["seeds"]["beside an edge"]["unplaced"] == 0.5
    assert [one["name"] for one in record["baselines"]["invented"]] == [
        "minimal path between clicks", "threshold and skeleton"]  # fmt: skip
    assert all(one["figures"]["completeness at 0.30 m"] > 0.95 for one in record["baselines"]["invented"])
    page = (out / "index.html").read_text(encoding="utf-8")
    assert "../shared is missing" in page
    assert page.count("data:image/jpeg") == 1
