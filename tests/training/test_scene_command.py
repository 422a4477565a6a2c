from __future__ import annotations

import hashlib
import sqlite3
from pathlib import Path

import numpy as np
import pyogrio
import pytest
import rasterio
import shapely
from click.testing import CliRunner, Result

from roadhem.errors import BadInput
from roadhem_training.commands import scene, style_with_roads
from roadhem_training.scenes.layout import STYLE_ODDS
from roadhem_training.scenes.write import FILES


def run(*arguments: str) -> Result:
    return CliRunner().invoke(scene, list(arguments))


@pytest.fixture(scope="module")
def folder(tmp_path_factory: pytest.TempPathFactory) -> Path:
    path = tmp_path_factory.mktemp("scene")
    result = run("--seed", "7", "--out", str(path))
    assert result.exit_code == 0, result.output
    return path


def hashes(folder: Path) -> dict[str, str]:
    return {name: hashlib.sha256((folder / name).read_bytes()).hexdigest() for name in FILES}


def read(path: Path, layer: str) -> tuple[dict, np.ndarray, dict[str, np.ndarray]]:
    meta, _, shapes, columns = pyogrio.raw.read(path, layer=layer)
    return meta, shapely.from_wkb(shapes), dict(zip(meta["fields"], columns, strict=True))


def test_writes_what_is_promised(folder):
    """Should write the four files and nothing else."""
    assert sorted(p.name for p in folder.iterdir()) == sorted(FILES)


def test_same_seed_same_bytes(folder, tmp_path):
    """Should write the same bytes for the same seed, over an older scene too, and others for another seed."""
    run("--seed", "8", "--size", "512", "--out", str(tmp_path))
    other = hashes(tmp_path)
    run("--seed", "7", "--out", str(tmp_path))
    assert hashes(tmp_path) == hashes(folder)
    assert all(other[name] != hashes(folder)[name] for name in FILES)


def test_rasters_lie_where_asked(folder):
    """Should write tiled, compressed rasters in EPSG:25832 whose lower left corner is the origin."""
    for name, count, kind in (("image.tif", 3, "uint8"), ("height.tif", 1, "float32")):
        with rasterio.open(folder / name) as raster:
            assert (raster.count, raster.dtypes[0]) == (count, kind)
            assert raster.crs.to_epsg() == 25832
            assert raster.shape == (1024, 1024)
            assert raster.bounds == pytest.approx((500000, 5600000, 500102.4, 5600102.4))
            assert raster.profile["tiled"]
            assert raster.compression.name == "deflate"


def test_origin_moves_everything(tmp_path):
    """Should put rasters and vectors at the origin asked for."""
    run("--seed", "7", "--size", "512", "--origin", "691000.5,5334000", "--out", str(tmp_path))
    with rasterio.open(tmp_path / "image.tif") as raster:
        assert (raster.bounds.left, raster.bounds.bottom) == pytest.approx((691000.5, 5334000))
        _, areas, _ = read(tmp_path / "edges.gpkg", "areas")
        assert areas[0].bounds == pytest.approx(tuple(raster.bounds))
        _, edges, _ = read(tmp_path / "edges.gpkg", "edges")
        assert areas[0].buffer(1e-6).contains(shapely.union_all(edges))


def test_edges_say_how_they_are_seen(folder):
    """Should split edges by kind and sight, without overlap, and keep nothing that continues alike apart."""
    meta, edges, columns = read(folder / "edges.gpkg", "edges")
    assert meta["crs"] == "EPSG:25832"
    assert list(columns) == ["kind", "visible", "seen"]
    assert set(columns["kind"]) <= {"raised", "lowered", "flush"}
    assert set(columns["visible"]) <= {"yes", "hidden", "unsure"}
    assert set(columns["seen"]) <= {"seen", "shadow", "hidden"}
    assert ((columns["visible"] == "hidden") == (columns["seen"] == "hidden")).all()
    assert shapely.union_all(edges).length == pytest.approx(shapely.length(edges).sum(), rel=1e-6)
    alike = list(zip(columns["kind"], columns["visible"], columns["seen"], strict=True))
    ends = {(*key, edge.coords[-1]) for key, edge in zip(alike, edges, strict=True) if not edge.is_closed}
    starts = {(*key, edge.coords[0]) for key, edge in zip(alike, edges, strict=True) if not edge.is_closed}
    assert not ends & starts


def test_seeds_lie_beside_visible_edges(folder):
    """Should place at least 8 seeds, each 0.2 to 0.8 m beside a visible edge and nearest to it."""
    _, edges, columns = read(folder / "edges.gpkg", "edges")
    meta, seeds, seed_columns = read(folder / "seeds.gpkg", "seeds")
    assert meta["crs"] == "EPSG:25832"
    assert len(seeds) >= 8
    assert seed_columns["seed_id"].tolist() == list(range(1, len(seeds) + 1))
    tree = shapely.STRtree(edges)
    for seed in seeds:
        (nearest, *_), (distance, *_) = tree.query_nearest(seed, return_distance=True)
        assert 0.18 <= distance <= 0.81
        assert columns["visible"][nearest] == "yes"


def test_geopackage_time_is_fixed(folder):
    """Should carry the fixed time of change by the GeoPackage standard's own table.  [built] sqlite3."""
    with sqlite3.connect(folder / "edges.gpkg") as base:
        rows = base.execute("select table_name, last_change from gpkg_contents order by 1").fetchall()
    assert rows == [("areas", "2000-01-01T00:00:00.000Z"), ("edges", "2000-01-01T00:00:00.000Z")]


@pytest.mark.parametrize(
    ("arguments", "words"),
    [
        (["--origin", "here"], "not two numbers"),
        (["--origin", "1,2,3"], "not two numbers"),
        (["--origin", "nan,2"], "outside EPSG:25832"),
        (["--size", "64"], "choose a size"),
        (["--style", "atlantis"], "atlantis"),
    ],
)
def test_bad_input_is_one_sentence(tmp_path, arguments, words):
    """Should refuse what cannot be made in one line, and write nothing."""
    result = run("--seed", "1", *arguments, "--out", str(tmp_path))
    assert isinstance(result.exception, BadInput)
    assert words in str(result.exception)
    assert "\n" not in str(result.exception)
    assert not list(tmp_path.iterdir())


def test_output_folder_must_exist(tmp_path):
    """Should not create folders, and say so."""
    result = run("--seed", "1", "--out", str(tmp_path / "none"))
    assert isinstance(result.exception, BadInput)
    assert "does not exist" in str(result.exception)
    assert not list(tmp_path.iterdir())


def test_output_must_be_a_folder(tmp_path):
    """Should refuse a file as the output folder."""
    target = tmp_path / "file"
    target.write_text("kept")
    result = run("--seed", "1", "--out", str(target))
    assert isinstance(result.exception, BadInput)
    assert target.read_text() == "kept"


def test_every_drawn_place_has_roads():
    """Should draw each style with roads at some seed, and never land without any."""
    drawn = {style_with_roads(seed) for seed in range(200)}
    assert drawn == set(STYLE_ODDS) - {"no_road"}
