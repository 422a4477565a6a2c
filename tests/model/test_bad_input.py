"""Bad input: one sentence on stderr that says what to do, the right status, nothing half-written.

All through the real command line, with tiles whose edges a drawn net reads.
"""

from __future__ import annotations

import os
import resource
import shutil
import subprocess
import sys
from collections.abc import Callable
from pathlib import Path

import numpy as np
import pyogrio
import pytest
from drawn import EAST, NORTH, drawn_model, drawn_pixels, write_seeds, write_tile

from roadhem.cli.main import main

EDGE = [(EAST + 4, NORTH - 20), (EAST + 36, NORTH - 22)]
SEED = (EAST + 20, NORTH - 21.2)
ALL_LAYERS = ("edges", "stretches", "doubts", "unplaced", "seeds")


@pytest.fixture(scope="module")
def shop(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """A folder with one good tile, its seed and a model; copied for each test."""
    folder = tmp_path_factory.mktemp("shop")
    write_tile(folder / "tile.tif", drawn_pixels([EDGE], 400))
    write_seeds(folder / "seeds.gpkg", [SEED])
    drawn_model(folder / "model")
    return folder


@pytest.fixture
def place(shop: Path, tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> Path:
    """A working folder of its own, with a space and an accent in its name."""
    folder = tmp_path / "flug märz 24"
    shutil.copytree(shop, folder)
    monkeypatch.chdir(folder)
    return folder


Run = Callable[..., tuple[int, str, str]]


@pytest.fixture
def run(capfd: pytest.CaptureFixture[str]) -> Run:
    """Run the command line here; give status, stdout and stderr."""

    def call(*arguments: object) -> tuple[int, str, str]:
        with pytest.raises(SystemExit) as ended:
            main([str(argument) for argument in arguments])
        out, err = capfd.readouterr()
        return int(ended.value.code or 0), out, err

    return call


def trace(tile: object = "tile.tif", *more: object, seeds: object = "seeds.gpkg", out: object = "out.gpkg") -> list:
    """Arguments of a trace run."""
    return ["trace", tile, "--seeds", seeds, "--out", out, "--model", "model", *more]


def refused(run: Run, place: Path, arguments: list, *words: str) -> None:
    """Expect status 2, one sentence with the given words, no output and no file that was not there before."""
    before = sorted(path.relative_to(place) for path in place.rglob("*"))
    status, out, err = run(*arguments)
    assert status == 2, err
    assert out == ""
    assert err.count("\n") == 1, err
    assert err.endswith(".\n")
    assert "Traceback" not in err
    for word in words:
        assert word in err
    assert sorted(path.relative_to(place) for path in place.rglob("*")) == before


def reasons(path: Path) -> dict[str, str]:
    """Unplaced seeds and why."""
    _, _, _, (ids, why) = pyogrio.raw.read(str(path), layer="unplaced")
    return dict(zip(ids, why, strict=True))


def edges(path: Path) -> int:
    """Number of edges."""
    return int(pyogrio.read_info(str(path), layer="edges")["features"])


# Tiles


def test_good_input_works(place: Path, run: Run) -> None:
    """Should trace the seed, so that every refusal below is due to what that test spoils."""
    status, out, err = run(*trace())
    assert (status, err) == (0, "")
    assert "lines" in out
    assert edges(place / "out.gpkg") == 1
    assert sorted(os.listdir(place)) == ["model", "out.gpkg", "seeds.gpkg", "tile.tif"]


def test_no_crs(place: Path, run: Run) -> None:
    """Should ask for --crs, and take it."""
    write_tile(place / "bare.tif", drawn_pixels([EDGE], 400), crs=None)
    refused(run, place, trace("bare.tif"), "bare.tif", "--crs")
    assert run(*trace("bare.tif", "--crs", "EPSG:25832"))[0] == 0
    assert edges(place / "out.gpkg") == 1


def test_a_crs_that_is_none(place: Path, run: Run) -> None:
    """Should refuse a --crs that names nothing."""
    write_tile(place / "bare.tif", drawn_pixels([EDGE], 400), crs=None)
    refused(run, place, trace("bare.tif", "--crs", "EPSG:nonsense"), "nonsense")


def test_degrees(place: Path, run: Run) -> None:
    """Should refuse a CRS in degrees."""
    write_tile(place / "deg.tif", drawn_pixels([EDGE], 400), crs="EPSG:4326", east=9.0, north=50.0, pixel=1e-6)
    refused(run, place, trace("deg.tif"), "deg.tif", "degrees")


@pytest.mark.parametrize("content", [b"", b"this is no picture\n", None], ids=["empty", "text", "truncated"])
def test_broken_tiff(place: Path, run: Run, content: bytes | None) -> None:
    """Should refuse an empty, a text and a truncated file as a tile."""
    whole = (place / "tile.tif").read_bytes()
    (place / "broken.tif").write_bytes(whole[: len(whole) // 3] if content is None else content)
    refused(run, place, trace("broken.tif"), "broken.tif")


def test_missing_tile(place: Path, run: Run) -> None:
    """Should say which file is not there."""
    refused(run, place, trace("gone.tif"), "gone.tif")


def test_png_without_world_file(place: Path, run: Run) -> None:
    """Should refuse a picture that lies nowhere."""
    import cv2

    cv2.imwrite(str(place / "plain.png"), np.moveaxis(drawn_pixels([EDGE], 400)[::-1], 0, -1))
    refused(run, place, trace("plain.png", "--crs", "EPSG:25832"), "plain.png", "world file")


def test_two_bands(place: Path, run: Run) -> None:
    """Should refuse two bands rather than guess what they are."""
    write_tile(place / "two.tif", drawn_pixels([EDGE], 400)[:2])
    refused(run, place, trace("two.tif"), "two.tif", "bands")


def test_coarse_pixels(place: Path, run: Run) -> None:
    """Should refuse pixels above 0.40 m and warn above 0.25 m."""
    write_tile(place / "coarse.tif", drawn_pixels([EDGE], 100, pixel=0.45), pixel=0.45)
    refused(run, place, trace("coarse.tif"), "coarse.tif", "0.4")
    write_tile(place / "poor.tif", drawn_pixels([EDGE], 140, pixel=0.30), pixel=0.30)
    status, _, err = run(*trace("poor.tif"))
    assert status == 0
    assert "poor.tif" in err


def test_all_nodata(place: Path, run: Run) -> None:
    """Should refuse tiles that hold nothing."""
    write_tile(place / "void.tif", np.zeros((3, 400, 400), np.uint8), nodata=0)
    refused(run, place, trace("void.tif"), "void.tif")


def test_nan_pixels(place: Path, run: Run) -> None:
    """Should take NaN pixels as no data and trace the rest."""
    pixels = drawn_pixels([EDGE], 400).astype(np.float32)
    pixels[:, :, 300:] = np.nan
    write_tile(place / "nan.tif", pixels)
    status, _, err = run(*trace("nan.tif"))
    assert "Traceback" not in err
    assert status in (0, 2)
    if status == 2:
        assert err.count("\n") == 1
        assert not (place / "out.gpkg").exists()


def test_some_tiles_unusable(place: Path, run: Run) -> None:
    """Should do the rest, list what was left out and exit with 1."""
    (place / "broken.tif").write_text("no picture")
    arguments = trace()
    arguments.insert(1, "broken.tif")
    status, _, err = run(*arguments)
    assert status == 1
    assert err.count("\n") == 1
    assert "broken.tif" in err
    assert edges(place / "out.gpkg") == 1


# Heights


def test_height_that_does_not_overlap(place: Path, run: Run) -> None:
    """Should refuse heights of another place."""
    write_tile(place / "far.tif", np.ones((1, 50, 50), np.float32), east=EAST + 9000)
    refused(run, place, trace("tile.tif", "--height", "far.tif"), "far.tif")


def test_height_that_cannot_be_read(place: Path, run: Run) -> None:
    """Should refuse a named height raster that is none, or not there."""
    (place / "bad.tif").write_text("no raster")
    refused(run, place, trace("tile.tif", "--height", "bad.tif"), "bad.tif")
    refused(run, place, trace("tile.tif", "--height", "gone.tif"), "gone.tif")


def test_nan_heights(place: Path, run: Run) -> None:
    """Should trace on where heights have holes."""
    heights = np.full((1, 400, 400), 100, np.float32)
    heights[0, 100:300, 100:300] = np.nan
    write_tile(place / "holes.tif", heights)
    status, _, err = run(*trace("tile.tif", "--height", "holes.tif"))
    assert (status, err) == (0, "")
    assert edges(place / "out.gpkg") == 1


# Seeds


def test_seeds_in_another_crs(place: Path, run: Run) -> None:
    """Should transform them."""
    from pyproj import Transformer

    other = Transformer.from_crs(25832, 25833, always_xy=True).transform(*SEED)
    write_seeds(place / "zone33.gpkg", [other], crs="EPSG:25833")
    assert run(*trace(seeds="zone33.gpkg"))[0] == 0
    assert edges(place / "out.gpkg") == 1


def test_seeds_by_a_ballpark_operation(place: Path, run: Run) -> None:
    """Should refuse a transformation whose grid is missing, naming the way out."""
    from pyproj import Transformer

    other = Transformer.from_crs(25832, 31467, always_xy=True).transform(*SEED)
    write_seeds(place / "gauss.gpkg", [other], crs="EPSG:31467")
    refused(run, place, trace(seeds="gauss.gpkg"), "gauss.gpkg", "--allow-ballpark")


def test_unplaced_seeds(place: Path, run: Run) -> None:
    """Should keep seeds without geometry, outside all tiles and far from any edge, each with its reason."""
    write_seeds(place / "odd.gpkg", [SEED, None, (EAST + 900, NORTH), (EAST + 20, NORTH - 5)])
    status, _, err = run(*trace(seeds="odd.gpkg"))
    assert (status, err) == (0, "")
    why = reasons(place / "out.gpkg")
    assert set(why) == {"2", "3", "4"}
    assert "no geometry" in why["2"]
    assert "outside" in why["3"]
    assert why["4"]


def test_no_seeds(place: Path, run: Run) -> None:
    """Should refuse an empty seeds layer."""
    write_seeds(place / "none.gpkg", [])
    refused(run, place, trace(seeds="none.gpkg"), "none.gpkg", "no seeds")


@pytest.mark.parametrize("name", ["notes.txt", "notes.gpkg", "notes.geojson"])
def test_text_as_seeds(place: Path, run: Run, name: str) -> None:
    """Should refuse a text file as seeds, whatever it is called."""
    (place / name).write_text("remember the milk\n")
    refused(run, place, trace(seeds=name), name)


def test_missing_seeds(place: Path, run: Run) -> None:
    """Should say that the file is not there."""
    refused(run, place, trace(seeds="gone.gpkg"), "gone.gpkg")


def test_lines_as_seeds(place: Path, run: Run) -> None:
    """Should refuse lines where points are wanted."""
    import shapely

    pyogrio.raw.write(
        "lines.gpkg", shapely.to_wkb(shapely.linestrings([EDGE])), [], [], layer="seeds",
        geometry_type="LineString", crs="EPSG:25832",
    )  # fmt: skip
    refused(run, place, trace(seeds="lines.gpkg"), "points")


def test_a_raster_as_seeds(place: Path, run: Run) -> None:
    """Should refuse the tile itself as seeds."""
    refused(run, place, trace(seeds="tile.tif"), "tile.tif")


# Models


def test_model_with_another_hash(place: Path, run: Run) -> None:
    """Should refuse weights that are not those of the card."""
    weights = place / "model" / "weights.onnx"
    weights.write_bytes(weights.read_bytes() + b"\0")
    refused(run, place, trace(), "model")


def test_an_onnx_file_that_is_not_ours(place: Path, run: Run) -> None:
    """Should refuse a net without a card, and a graph of another shape with a card that fits it."""
    import hashlib
    import json

    import onnx
    from onnx import TensorProto, helper

    info = [helper.make_tensor_value_info(name, TensorProto.FLOAT, [1]) for name in "xy"]
    graph = helper.make_graph([helper.make_node("Identity", ["x"], ["y"])], "other", info[:1], info[1:])
    other = helper.make_model(graph, opset_imports=[helper.make_opsetid("", 17)], ir_version=8)
    onnx.save(other, "other.onnx")
    refused(run, place, [*trace()[:-1], "other.onnx"], "other.onnx")
    (place / "model" / "weights.onnx").write_bytes(other.SerializeToString())
    card = json.loads((place / "model" / "card.json").read_text())
    card["weights_sha256"] = hashlib.sha256(other.SerializeToString()).hexdigest()
    (place / "model" / "card.json").write_text(json.dumps(card))
    refused(run, place, trace(), "drawn")


def test_a_model_that_is_not_there(place: Path, run: Run) -> None:
    """Should list what there is on the shelf."""
    refused(run, place, [*trace()[:-1], "nothing"], "nothing")


# Outputs


def test_output_folder_that_does_not_exist(place: Path, run: Run) -> None:
    """Should not create folders."""
    refused(run, place, trace(out="no/where/out.gpkg"), "does not exist")
    refused(run, place, trace("tile.tif", "--picture", "no/p.png"), "does not exist")


def test_output_that_cannot_be_written(place: Path, run: Run) -> None:
    """Should say so when the folder takes no files (the kernel's own folder takes none from anyone)."""
    refused(run, place, trace(out="/proc/out.gpkg"), "/proc")


def test_output_that_is_an_input(place: Path, run: Run) -> None:
    """Should not overwrite what it reads."""
    refused(run, place, trace(out="seeds.gpkg"), "seeds.gpkg")


def test_output_of_no_known_kind(place: Path, run: Run) -> None:
    """Should name the kinds there are."""
    refused(run, place, trace(out="out.shp"), ".gpkg")


def test_disk_full(place: Path) -> None:
    """Should say it in one sentence and leave the old file when a file cannot grow (as on a full disk)."""
    assert cli(*trace()).returncode == 0
    old = (place / "out.gpkg").read_bytes()
    limit = len(old) // 2
    done = cli(*trace(), preexec_fn=lambda: resource.setrlimit(resource.RLIMIT_FSIZE, (limit, limit)))
    assert done.returncode == 2
    assert done.stderr.count("\n") == 1, done.stderr
    assert "out.gpkg" in done.stderr
    assert (place / "out.gpkg").read_bytes() == old
    assert [name for name in os.listdir(place) if "part" in name] == []


# Arguments


@pytest.mark.parametrize("workers", ["0", "-3", "many"])
def test_workers(place: Path, run: Run, workers: str) -> None:
    """Should refuse a number of workers that is none."""
    refused(run, place, trace("tile.tif", "--workers", workers), "--workers")


def test_unknown_verb(place: Path, run: Run) -> None:
    """Should name the nearest verb."""
    refused(run, place, ["trase"], "trase", "is trace")
    refused(run, place, ["messure", "x"], "is measure")


def test_usage_errors(place: Path, run: Run) -> None:
    """Should tell a missing argument, a missing option and an unknown one in a sentence each."""
    refused(run, place, ["trace"], "TILES")
    refused(run, place, ["trace", "tile.tif"], "--seeds")
    refused(run, place, [*trace(), "--color"], "--color")
    refused(run, place, ["--verbose"], "--verbose")


def test_measure_refusals(place: Path, run: Run) -> None:
    """Should refuse truth that is not there, is no line, or cannot be compared; and buffers of nothing."""
    assert run(*trace())[0] == 0
    refused(run, place, ["measure", "out.gpkg", "--truth", "gone.gpkg"], "gone.gpkg")
    refused(run, place, ["measure", "out.gpkg", "--truth", "seeds.gpkg"], "seeds.gpkg", "lines")
    refused(run, place, ["measure", "out.gpkg", "--truth", "out.gpkg", "--buffer", "0"], "--buffer")
    refused(run, place, ["measure", "out.gpkg", "--truth", "out.gpkg", "--areas", "out.gpkg"], "areas", "edges")
    refused(run, place, ["measure", "out.gpkg", "--truth", "out.gpkg:nothing"], "nothing", "stretches")


def test_mark_refusals(place: Path, run: Run) -> None:
    """Should refuse the same tiles and outputs as trace."""
    (place / "broken.tif").write_text("no picture")
    refused(run, place, ["mark", "broken.tif", "--out", "m.gpkg", "--model", "model"], "broken.tif")
    refused(run, place, ["mark", "tile.tif", "--out", "no/m.gpkg", "--model", "model"], "does not exist")


def test_spaces_and_accents(place: Path, run: Run) -> None:
    """Should take names with spaces and accents everywhere."""
    shutil.move("tile.tif", "Kachel Süd (1).tif")
    shutil.move("seeds.gpkg", "Märkte – été.gpkg")
    status, _, err = run(
        *trace("Kachel Süd (1).tif", "--picture", "Bild ü.png", seeds="Märkte – été.gpkg:seeds", out="Ränder é.gpkg")
    )
    assert (status, err) == (0, "")
    assert (place / "Bild ü.png").stat().st_size > 1000
    layers = [name for name, _ in pyogrio.list_layers("Ränder é.gpkg")]
    assert layers == list(ALL_LAYERS)


def cli(*arguments: object, **options: object) -> subprocess.CompletedProcess[str]:
    """Run the command line in a process of its own."""
    command = [sys.executable, "-m", "roadhem.cli", *map(str, arguments)]
    return subprocess.run(command, capture_output=True, text=True, encoding="utf-8", check=False, **options)
