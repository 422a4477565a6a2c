"""Measuring lines: what counts, where, and in whose metres."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pyogrio
import pytest
import shapely
from hypothesis import given, settings
from hypothesis import strategies as st
from shapely import LineString, box

from roadhem.accuracy.intervals import Segments, intersect, subtract, union, within
from roadhem.accuracy.matching import SEARCH_M, LineMeasures, measure_lines
from roadhem.errors import BadInput
from roadhem.jobs.measure import MeasureJob, measure_truth, unused_areas


def measured(reference: list[LineString], lines: list[LineString], **options: object) -> LineMeasures:
    """Compare plain lists."""
    return measure_lines(np.array(lines, dtype=object), np.array(reference, dtype=object), **options)


def write(path: Path, layer: str, shapes: list, crs: str = "EPSG:25832", **columns: list) -> Path:
    """Append a layer to a GeoPackage."""
    kinds = {shape.geom_type for shape in shapes}
    values = [np.array(column, dtype=object) for column in columns.values()]
    pyogrio.raw.write(
        str(path), shapely.to_wkb(np.array(shapes, dtype=object)), values, list(columns), layer=layer, driver="GPKG",
        crs=crs, append=path.exists(), geometry_type=kinds.pop() if len(kinds) == 1 else "Unknown",
    )  # fmt: skip
    return path


def test_lines_on_hidden_truth_do_not_count() -> None:
    """Should neither miss hidden truth nor call a line on it wrong."""
    seen, hidden = LineString([(0, 0), (50, 0)]), LineString([(50, 0), (100, 0)])
    found = measured([seen], [LineString([(0, 0.1), (100, 0.1)])], unscored=np.array([hidden], dtype=object))
    assert found.completeness == pytest.approx(1.0)
    assert found.correctness == pytest.approx(1.0)
    assert found.unscored_lines_m == pytest.approx(50.0, abs=0.3)


def test_areas_restrict_lines_and_truth() -> None:
    """Should count only what lies in the areas, matched with what lies outside too."""
    truth, line = LineString([(0, 0), (100, 0)]), LineString([(0, 0.1), (40, 0.1)])
    found = measured([truth], [line], areas=box(10, -5, 60, 5))
    assert (found.reference_m, found.lines_m) == pytest.approx((50.0, 30.0))
    assert found.completeness == pytest.approx((30 + np.sqrt(0.3**2 - 0.1**2)) / 50)
    assert found.correctness == pytest.approx(1.0)


def test_gaps_are_counted_once_across_pieces_of_the_truth() -> None:
    """Should count a gap that runs over the end of one stretch into the next as one."""
    truth = [LineString([(0, 0), (50, 0)]), LineString([(50, 0), (100, 0)])]
    lines = [LineString([(0, 0), (40, 0)]), LineString([(60, 0), (100, 0)])]
    found = measured(truth, lines)
    assert found.gaps == 1
    assert found.gaps_per_km == pytest.approx(10.0)
    assert found.mean_gap_m == pytest.approx(20 - 2 * 0.3)


def test_lateral_error_looks_two_metres_far() -> None:
    """Should take points up to 2 m off as misplaced, and points farther off as other lines."""
    truth = [LineString([(0, 0), (200, 0)])]
    near, far = LineString([(10, SEARCH_M - 0.1), (60, SEARCH_M - 0.1)]), LineString([(100, 2.1), (150, 2.1)])
    found = measured(truth, [near, far])
    assert found.lateral_median_m == pytest.approx(1.9)
    assert found.lateral_p95_m == pytest.approx(1.9)


def test_no_lines_at_all() -> None:
    """Should call everything missed, and correctness undefined."""
    found = measured([LineString([(0, 0), (9, 0)])], [])
    assert (found.completeness, found.correctness, found.rms_m) == (0.0, None, None)
    assert (found.lateral_median_m, found.gaps) == (None, 1)


spans = st.lists(
    st.tuples(st.integers(0, 3), st.floats(0, 9, width=16), st.floats(0, 9, width=16)).map(
        lambda s: (s[0], min(s[1:]), max(s[1:]))
    ),
    max_size=8,
)


@given(spans, spans)
@settings(max_examples=200, deadline=None)
def test_interval_arithmetic(a: list, b: list) -> None:
    """Should add up: what is left and what is common make the whole, on a fine ruler."""
    one, two = (union(*map(np.array, zip(*s, strict=True))) if s else union(*(np.empty(0, int),) * 3) for s in (a, b))
    left, common = subtract(one, two), intersect(one, two)
    assert left.length + common.length == pytest.approx(one.length, abs=1e-9)
    ruler = np.arange(0.0039, 9, 0.0117)
    rest = list(zip(left.segment, left.low, left.high, strict=True))
    for segment in range(4):
        inside = {
            name: np.any([(s == segment) & (lo < ruler) & (ruler < hi) for s, lo, hi in spans_], axis=0)
            if spans_ else np.zeros(len(ruler), bool)
            for name, spans_ in (("a", a), ("b", b), ("left", rest))
        }  # fmt: skip
        np.testing.assert_array_equal(inside["left"], inside["a"] & ~inside["b"])


def test_within_is_symmetric_in_no_way_but_bounded() -> None:
    """Should match all of a line that another runs along, and of the other only the shared part."""
    short, long = (Segments.of(np.array([LineString(c)])) for c in ([(10, 0), (20, 0)], [(0, 0), (100, 0)]))
    assert within(short, long, 0.5).length == pytest.approx(10)
    assert within(long, short, 0.5).length == pytest.approx(11)


def test_web_mercator_is_measured_in_ground_metres(tmp_path: Path) -> None:
    """Should apply the buffer and count lengths on the ground, at 60 degrees north half of what the map says."""
    x, y, twice = 1_000_000.0, 8_399_737.89, 2.0
    truth = write(tmp_path / "t.gpkg", "edges", [LineString([(x, y), (x + 100 * twice, y)])], "EPSG:3857")
    near = LineString([(x, y + 0.25 * twice), (x + 100 * twice, y + 0.25 * twice)])
    lines = write(tmp_path / "l.gpkg", "edges", [near], "EPSG:3857")
    found = measure_truth(MeasureJob(str(lines), str(truth)))
    assert found.reference_m == pytest.approx(100, rel=0.004)
    assert found.completeness == pytest.approx(1.0)
    assert found.lateral_median_m == pytest.approx(0.25, rel=0.004)


def test_feet_are_measured_in_metres(tmp_path: Path) -> None:
    """Should turn feet into metres."""
    truth = write(tmp_path / "t.gpkg", "edges", [LineString([(1e6, 5e5), (1e6 + 1000, 5e5)])], "EPSG:2992")
    found = measure_truth(MeasureJob(str(truth), str(truth)))
    assert found.reference_m == pytest.approx(304.8, rel=0.001)


def test_lines_in_degrees_are_brought_to_the_truth(tmp_path: Path) -> None:
    """Should measure GeoJSON lines in longitude and latitude against truth in metres."""
    line = LineString([(500_000, 5_600_000), (500_080, 5_600_000)])
    truth = write(tmp_path / "t.gpkg", "edges", [line])
    import pyproj

    to_lonlat = pyproj.Transformer.from_crs(25832, 4326, always_xy=True)
    lonlat = shapely.transform(line, to_lonlat.transform, interleaved=False)
    (tmp_path / "l.geojson").write_text(
        f'{{"type":"FeatureCollection","features":[{{"type":"Feature","properties":{{}},'
        f'"geometry":{shapely.to_geojson(lonlat)}}}]}}'
    )
    found = measure_truth(MeasureJob(str(tmp_path / "l.geojson"), str(truth)))
    assert found.completeness == pytest.approx(1.0)
    assert found.rms_m == pytest.approx(0.0, abs=0.001)


def test_visible_column_decides_what_is_scored(tmp_path: Path) -> None:
    """Should leave hidden and unsure truth out, and refuse truth with nothing else."""
    drawn = [LineString([(0, y), (100, y)]) for y in (0, 10, 20)]
    truth = write(tmp_path / "t.gpkg", "edges", drawn, visible=["yes", "hidden", "unsure"])
    found = measure_truth(MeasureJob(str(truth), str(truth)))
    assert found.reference_m == pytest.approx(100, rel=0.01)
    assert found.unscored_lines_m == pytest.approx(200, rel=0.01)
    nothing = write(tmp_path / "n.gpkg", "edges", drawn[:1], visible=["hidden"])
    with pytest.raises(BadInput, match="no line that can be scored"):
        measure_truth(MeasureJob(str(truth), str(nothing)))


def test_areas_layer_is_found_by_its_role(tmp_path: Path) -> None:
    """Should take the layer `areas` of a file that has edges too."""
    file = write(tmp_path / "t.gpkg", "edges", [LineString([(500_000, 0), (500_100, 0)])])
    write(file, "areas", [box(500_000, -5, 500_050, 5)])
    assert unused_areas(MeasureJob(str(file), str(file)))
    assert not unused_areas(MeasureJob(str(file), str(file), areas=str(file)))
    found = measure_truth(MeasureJob(str(file), str(file), areas=str(file)))
    assert found.reference_m == pytest.approx(50, rel=0.001)


def test_real_truth_against_itself(real: Path) -> None:
    """Should find every drawn set complete, correct and without error against itself."""
    for folder in ("culdesac", "avenue", "hill_village", "delft"):
        edges = str(real / folder / "edges.gpkg")
        found = measure_truth(MeasureJob(edges, edges, areas=edges))
        assert found.completeness == pytest.approx(1.0), folder
        assert found.correctness == pytest.approx(1.0), folder
        assert found.lateral_p95_m == pytest.approx(0.0, abs=1e-6), folder
