from __future__ import annotations

from collections.abc import Sequence
from concurrent.futures import ThreadPoolExecutor
from pathlib import Path
from typing import Any

import numpy as np
import psutil
import pytest
import rasterio
from affine import Affine
from numpy.typing import NDArray
from rasterio.enums import ColorInterp
from rasterio.shutil import copy as copy_raster
from rasterio.vrt import WarpedVRT
from skimage.data import astronaut

from roadhem.errors import BadInput
from roadhem.tiles.mosaic import Mosaic, Patch
from roadhem.tiles.tile import ArrayTile

CRS = "EPSG:25832"
EAST, NORTH = 500_000.0, 5_600_000.0
ROW, COL = -56_000_000, 5_000_000
PLACE = Affine(0.1, 0, EAST, 0, -0.1, NORTH)


def picture(rows: int = 64, cols: int = 96) -> NDArray[np.uint8]:
    """A photograph (3, rows, cols)."""
    return np.ascontiguousarray(np.moveaxis(astronaut()[100 : 100 + rows, 150 : 150 + cols], 2, 0))


def write(path: Path, array: NDArray[Any], transform: Affine | None = PLACE, **profile: Any) -> Path:
    bands, rows, cols = array.shape
    interpretation: Sequence[ColorInterp] | None = profile.pop("colorinterp", None)
    mask: NDArray[np.bool_] | None = profile.pop("mask", None)
    given = {"driver": "GTiff", "crs": CRS, "count": bands, "height": rows, "width": cols, "dtype": array.dtype.name}
    with (
        rasterio.Env(GDAL_TIFF_INTERNAL_MASK=True),
        rasterio.open(path, "w", **(given | {"transform": transform} | profile)) as sink,
    ):
        if interpretation:
            sink.colorinterp = interpretation
        sink.write(array)
        if mask is not None:
            sink.write_mask(mask)
    return path


def read(*paths: Path, height: Sequence[Path] = (), crs: str | None = None, rows: int = 64, cols: int = 96) -> Patch:
    return Mosaic.open(paths, height, crs).read(ROW, COL, rows, cols)


def shares(array: NDArray[np.uint8]) -> NDArray[np.float32]:
    return array.astype(np.float32) * np.float32(1 / 255)


# Formats


@pytest.mark.parametrize("profile", [
    {}, {"tiled": True, "blockxsize": 16, "blockysize": 16, "compress": "deflate"}, {"interleave": "band"},
    {"driver": "COG"}, {"compress": "lzw", "predictor": 2}, {"BIGTIFF": "YES"},
])  # fmt: skip
def test_reads_tiffs(tmp_path: Path, profile: dict[str, Any]) -> None:
    """Should read TIFFs of any layout to the same values."""
    image = picture()
    if profile.get("driver") == "COG":
        write(tmp_path / "plain.tif", image)
        copy_raster(tmp_path / "plain.tif", tmp_path / "a.tif", driver="COG")
    else:
        write(tmp_path / "a.tif", image, **profile)
    patch = read(tmp_path / "a.tif")
    np.testing.assert_array_equal(patch.colour, shares(image))
    assert (patch.cover == 2).all()
    assert patch.height is None


@pytest.mark.parametrize(("suffix", "driver", "world"), [("png", "PNG", "pgw"), ("jpg", "JPEG", "jgw")])
def test_reads_images_with_world_files(tmp_path: Path, suffix: str, driver: str, world: str) -> None:
    """Should place PNG and JPEG by their world file and take the CRS that is given."""
    image = picture()
    path = tmp_path / f"Straße und Rand.{suffix}"
    write(path, image, None, driver=driver, crs=None, **({"quality": 100} if driver == "JPEG" else {}))
    (tmp_path / f"Straße und Rand.{world}").write_text(f"0.1\n0\n0\n-0.1\n{EAST + 0.05}\n{NORTH - 0.05}\n")
    patch = read(path, crs=CRS)
    np.testing.assert_allclose(patch.colour, shares(image), atol=0 if driver == "PNG" else 0.06)


def test_reads_jpeg_2000(tmp_path: Path) -> None:
    """Should read lossless JPEG 2000 exactly."""
    image = picture()
    path = write(tmp_path / "a.jp2", image, driver="JP2OpenJPEG", QUALITY="100", REVERSIBLE="YES")
    np.testing.assert_array_equal(read(path).colour, shares(image))


def test_reads_virtual_rasters(tmp_path: Path) -> None:
    """Should read a VRT."""
    image = picture()
    write(tmp_path / "a.tif", image)
    with rasterio.open(tmp_path / "a.tif") as source, WarpedVRT(source) as vrt:
        copy_raster(vrt, tmp_path / "a.vrt", driver="VRT")
    np.testing.assert_array_equal(read(tmp_path / "a.vrt").colour, shares(image))


# Bands, bits and what is valid


def test_repeats_grey(tmp_path: Path) -> None:
    """Should repeat a single band, as LiDAR intensity has it."""
    grey = picture()[:1]
    np.testing.assert_array_equal(read(write(tmp_path / "a.tif", grey)).colour, shares(np.repeat(grey, 3, axis=0)))


def test_takes_colours_by_their_role(tmp_path: Path) -> None:
    """Should find red, green and blue where a file says they are, and leave infrared out."""
    red, green, blue = picture()
    infrared = np.full_like(red, 7)
    roles = (ColorInterp.undefined, ColorInterp.blue, ColorInterp.green, ColorInterp.red)
    path = write(tmp_path / "a.tif", np.stack([infrared, blue, green, red]), colorinterp=roles)
    np.testing.assert_array_equal(read(path).colour, shares(picture()))


def test_takes_the_first_three_of_four(tmp_path: Path) -> None:
    """Should take the first three of four bands that say nothing of themselves."""
    image = np.concatenate([picture(), np.full((1, 64, 96), 0, np.uint8)])
    path = write(tmp_path / "a.tif", image, photometric="MINISBLACK")
    patch = read(path)
    np.testing.assert_array_equal(patch.colour, shares(picture()))
    assert (patch.cover == 2).all()


@pytest.mark.parametrize("bands", [1, 3])
def test_alpha_says_what_is_valid(tmp_path: Path, bands: int) -> None:
    """Should take an alpha band as a mask, beside colour and beside grey."""
    alpha = np.full((1, 64, 96), 255, np.uint8)
    alpha[:, :, :40] = 0
    colours = (ColorInterp.gray,) if bands == 1 else (ColorInterp.red, ColorInterp.green, ColorInterp.blue)
    image = np.concatenate([picture()[:bands], alpha])
    patch = read(write(tmp_path / "a.tif", image, colorinterp=(*colours, ColorInterp.alpha)))
    np.testing.assert_array_equal(patch.cover, np.where(alpha[0] > 0, 2, 1))
    assert not patch.colour[:, :, :40].any()


def test_mask_says_what_is_valid(tmp_path: Path) -> None:
    """Should take a mask beside the bands."""
    mask = np.ones((64, 96), bool)
    mask[:20] = False
    patch = read(write(tmp_path / "a.tif", picture(), mask=mask))
    np.testing.assert_array_equal(patch.cover, np.where(mask, 2, 1))


def test_nodata_in_all_bands_is_missing(tmp_path: Path) -> None:
    """Should take a pixel as missing where every band is nodata, and as there where one is not."""
    image = np.maximum(picture(), 1)
    image[:, 10:20, 10:20] = 0
    image[1, 15:20, 10:20] = 9
    cover = read(write(tmp_path / "a.tif", image, nodata=0)).cover
    assert (cover[10:15, 10:20] == 1).all()
    assert (cover == 1).sum() == 50


def test_outside_is_told_from_no_data(tmp_path: Path) -> None:
    """Should say outside beyond the tile and no data inside it."""
    image = np.maximum(picture(), 1)
    image[:, :, :10] = 0
    patch = Mosaic.open([write(tmp_path / "a.tif", image, nodata=0)]).read(ROW - 5, COL - 5, 74, 106)
    assert set(np.unique(patch.cover[:5])) == {0}
    assert (patch.cover[5:69, 5:15] == 1).all()
    assert (patch.cover[5:69, 15:101] == 2).all()
    assert (patch.cover[:, 101:] == 0).all()


def test_palette_becomes_colour(tmp_path: Path) -> None:
    """Should look paletted pixels up."""
    index = np.arange(64 * 96).reshape(1, 64, 96).astype(np.uint8)
    table = {value: (value, 255 - value, value // 2, 255) for value in range(256)}
    path = write(tmp_path / "a.tif", index, photometric="PALETTE")
    with rasterio.open(path, "r+") as source:
        source.write_colormap(1, table)
    expected = np.stack([index[0], 255 - index[0], index[0] // 2])
    np.testing.assert_array_equal(read(path).colour, shares(expected))


@pytest.mark.parametrize("kind", ["uint16", "int16", "float32", "float64"])
def test_deep_values_are_stretched(tmp_path: Path, kind: str) -> None:
    """Should bring the middle 96 % of deeper values to 0..1, as numpy's percentiles say."""
    image = (picture().astype(kind) * 11 + 300).astype(kind)
    low, high = np.percentile(image, [2, 98])
    colour = read(write(tmp_path / "a.tif", image)).colour
    np.testing.assert_allclose(colour, np.clip((image - low) / (high - low), 0, 1), atol=1e-5)


def test_stretch_leaves_missing_pixels_out(tmp_path: Path) -> None:
    """Should not count nodata in the stretch, and take a flat image without dividing by nothing."""
    image = picture().astype(np.uint16) + 1000
    low, high = np.percentile(image[:, 30:], [2, 98])
    image[:, :30] = 0
    colour = read(write(tmp_path / "a.tif", image, nodata=0)).colour
    np.testing.assert_allclose(colour[:, 30:], np.clip((image[:, 30:] - low) / (high - low), 0, 1), atol=1e-5)
    flat = read(write(tmp_path / "flat.tif", np.full((3, 64, 96), 700, np.uint16))).colour
    assert np.isfinite(flat).all()


# Several tiles


def test_neighbours_make_one_image(tmp_path: Path) -> None:
    """Should read across the border of two files as in one file, whichever is named first."""
    image = picture()
    one = read(write(tmp_path / "one.tif", image))
    left = write(tmp_path / "left.tif", image[:, :, :37])
    right = write(tmp_path / "right.tif", image[:, :, 37:], Affine(0.1, 0, EAST + 3.7, 0, -0.1, NORTH))
    for paths in ((left, right), (right, left)):
        patch = read(*paths)
        assert patch.colour.tobytes() == one.colour.tobytes()
        assert patch.cover.tobytes() == one.cover.tobytes()


def test_finer_tile_wins_in_any_order(tmp_path: Path) -> None:
    """Should show the finer of two overlapping tiles where it is valid, the coarser elsewhere."""
    fine = np.full((3, 128, 64), 50, np.uint8)
    fine[:, 20:40, 20:40] = 0
    coarse = np.full((3, 32, 48), 200, np.uint8)
    a = write(tmp_path / "z fine.tif", fine, Affine(0.05, 0, EAST, 0, -0.05, NORTH), nodata=0)
    b = write(tmp_path / "a coarse.tif", coarse, Affine(0.2, 0, EAST, 0, -0.2, NORTH))
    first, second = read(a, b), read(b, a)
    assert first.colour.tobytes() == second.colour.tobytes()
    np.testing.assert_allclose(first.colour[0, :, :10], 50 / 255, atol=1e-6)
    np.testing.assert_allclose(first.colour[0, 11:19, 11:19], 200 / 255, atol=1e-6)
    np.testing.assert_allclose(first.colour[0, :, 40:], 200 / 255, atol=1e-6)
    mosaic = Mosaic.open([a, b])
    assert mosaic.source_at(EAST + 0.5, NORTH - 0.5) == "z fine.tif"
    assert mosaic.source_at(EAST + 1.5, NORTH - 1.5) == "a coarse.tif"
    assert mosaic.source_at(EAST + 8.0, NORTH - 0.5) == "a coarse.tif"
    assert mosaic.source_at(EAST - 1.0, NORTH - 0.5) == ""


def test_tells_where_data_is(tmp_path: Path) -> None:
    """Should tell cheaply which windows a tile touches, and where all tiles lie."""
    mosaic = Mosaic.open([write(tmp_path / "a.tif", picture())])
    assert mosaic.bounds_m == pytest.approx((EAST, NORTH - 6.4, EAST + 9.6, NORTH), abs=1e-6)
    assert mosaic.has_data(ROW + 63, COL + 95, 1, 1)
    assert not mosaic.has_data(ROW + 64, COL, 10, 10)
    assert not mosaic.has_data(ROW - 10, COL, 10, 10)
    assert not mosaic.has_data(ROW, COL + 96, 10, 10)


def test_threads_read_the_same(tmp_path: Path) -> None:
    """Should give the same bits from several threads at once."""
    path = write(tmp_path / "a.tif", picture(300, 340), Affine(0.06, 0, EAST, 0, -0.06, NORTH), tiled=True,
                 blockxsize=64, blockysize=64, compress="deflate")  # fmt: skip
    mosaic = Mosaic.open([path])
    windows = [(ROW + r, COL + c, 60, 70) for r in range(0, 120, 30) for c in range(0, 150, 25)]
    alone = [mosaic.read(*window).colour.tobytes() for window in windows]
    with ThreadPoolExecutor(4) as pool:
        assert list(pool.map(lambda window: mosaic.read(*window).colour.tobytes(), windows)) == alone


def test_image_date_is_read(tmp_path: Path) -> None:
    """Should give the date that a file's tags carry, or none."""
    path = write(tmp_path / "a.tif", picture())
    assert Mosaic.open([path]).tiles[0].image_date == ""
    with rasterio.open(path, "r+") as source:
        source.update_tags(TIFFTAG_DATETIME="2024:05:17 10:21:33")
    assert Mosaic.open([path]).tiles[0].image_date == "2024-05-17"


def test_file_written_anew_is_read_anew(tmp_path: Path) -> None:
    """Should not show a file's old pixels after it was written anew."""
    path = write(tmp_path / "a.tif", np.full((3, 64, 96), 10, np.uint8))
    assert read(path).colour.max() == pytest.approx(10 / 255)
    path.unlink()
    write(path, np.full((3, 64, 97), 20, np.uint8))
    assert read(path).colour.max() == pytest.approx(20 / 255)


@pytest.mark.parametrize("kind", ["sparse", "vrt"])
def test_huge_mosaic_costs_no_more_memory(tmp_path: Path, kind: str) -> None:
    """Should read a 50,000 x 50,000 px mosaic in no more memory than a small tile needs."""
    path = tmp_path / "huge.tif"
    profile = {"driver": "GTiff", "count": 3, "dtype": "uint8", "crs": CRS, "transform": PLACE, "tiled": True,
               "blockxsize": 512, "blockysize": 512, "sparse_ok": True}  # fmt: skip
    with rasterio.open(path, "w", width=50_000, height=50_000, **profile) as sink:
        sink.write(np.full((3, 512, 512), 90, np.uint8), window=rasterio.windows.Window(25_088, 25_088, 512, 512))
    if kind == "vrt":
        copy_raster(path, tmp_path / "huge.vrt", driver="VRT")
        path = tmp_path / "huge.vrt"
    small = write(tmp_path / "small.tif", picture(512, 512 - 150))
    Mosaic.open([small]).read(ROW, COL, 704, 704)
    process = psutil.Process()
    before = process.memory_info().rss
    mosaic = Mosaic.open([path])
    for step in range(0, 50_000, 1_000):
        patch = mosaic.read(ROW + step, COL + step, 704, 704)
    grown = process.memory_info().rss - before
    assert patch.colour.shape == (3, 704, 704)
    assert mosaic.read(ROW + 25_100, COL + 25_100, 10, 10).colour.max() == pytest.approx(90 / 255)
    assert grown < 220 * 2**20, f"{grown / 2**20:.0f} MiB, of which GDAL's cache may take 128"


# Heights


def test_heights_lie_on_the_grid(tmp_path: Path) -> None:
    """Should interpolate heights onto the working grid, NaN outside and where there is nodata."""
    heights = np.full((1, 40, 40), 12.5, np.float32)
    heights[0, :5] = -9999
    place = Affine(0.25, 0, EAST, 0, -0.25, NORTH)
    path = write(tmp_path / "h.tif", heights, place, nodata=-9999)
    patch = read(write(tmp_path / "a.tif", picture()), height=[path])
    assert patch.height is not None
    assert np.isnan(patch.height[:12]).all()
    np.testing.assert_array_equal(patch.height[13:], 12.5)


@pytest.mark.parametrize(("unit", "metres"), [("m", 1.0), ("ft", 0.3048), ("US survey foot", 1200 / 3937), ("", 1.0)])
def test_heights_in_feet(tmp_path: Path, unit: str, metres: float) -> None:
    """Should bring heights to metres by the unit their band names (the feet by their definitions)."""
    path = write(tmp_path / "h.tif", np.full((1, 64, 96), 100, np.float32))
    with rasterio.open(path, "r+") as source:
        source.units = [unit]
    patch = read(write(tmp_path / "a.tif", picture()), height=[path])
    np.testing.assert_allclose(patch.height, 100 * metres, rtol=1e-7)


def test_heights_of_unknown_unit_are_told(tmp_path: Path) -> None:
    """Should say that heights are taken as metres where the CRS is in feet and their band names no unit."""
    place = Affine(0.3, 0, 1_000_000, 0, -0.3, 200_000)
    tile = write(tmp_path / "a.tif", picture(), place, crs="EPSG:2263")
    height = write(tmp_path / "h.tif", np.full((1, 64, 96), 100, np.float32), place, crs="EPSG:2263")
    assert any("taken as metres" in warning for warning in Mosaic.open([tile], [height]).warnings)
    with rasterio.open(height, "r+") as source:
        source.units = ["ft"]
    assert not Mosaic.open([tile], [height]).warnings


def test_heights_with_a_vertical_crs(tmp_path: Path) -> None:
    """Should take heights in the tiles' CRS with a vertical part added."""
    path = write(tmp_path / "h.tif", np.full((1, 64, 96), 3, np.float32), crs="EPSG:25832+7837")
    patch = read(write(tmp_path / "a.tif", picture()), height=[path])
    assert patch.height is not None
    assert (patch.height == 3).all()


@pytest.mark.parametrize(("case", "words"), [
    ("elsewhere", "overlaps no tile"), ("text", "no raster that can be read"), ("other crs", "reproject"),
    ("missing", "no file"),
])  # fmt: skip
def test_unusable_heights_are_refused(tmp_path: Path, case: str, words: str) -> None:
    """Should refuse a height raster that cannot be used, in a sentence."""
    path, flat = tmp_path / "heights.tif", np.zeros((1, 30, 30), np.float32)
    if case == "elsewhere":
        write(path, flat, Affine(0.1, 0, EAST + 5_000, 0, -0.1, NORTH))
    elif case == "text":
        path.write_text("not a raster")
    elif case == "other crs":
        write(path, flat, crs="EPSG:25833")
    tile = write(tmp_path / "a.tif", picture())
    with pytest.raises(BadInput, match=words):
        Mosaic.open([tile], [path])


# What cannot be used


def spoil(path: Path, case: str) -> dict[str, Any]:
    """Write an unusable file; return what `Mosaic.open` is asked for besides."""
    image = picture()
    if case == "no crs":
        write(path, image, crs=None)
    elif case == "degrees":
        write(path, image, Affine(1e-6, 0, 8, 0, -1e-6, 50), crs="EPSG:4326")
    elif case == "coarse":
        write(path, image, Affine(0.5, 0, EAST, 0, -0.5, NORTH))
    elif case == "two bands":
        write(path, image[:2])
    elif case == "text":
        path.write_text("id,x,y\n1,2,3\n")
    elif case == "empty":
        path.touch()
    elif case == "truncated":
        write(path, picture(200, 300))
        path.write_bytes(path.read_bytes()[:60_000])
    elif case == "truncated tiles":
        write(path, picture(200, 300), tiled=True, blockxsize=64, blockysize=64, compress="deflate")
        path.write_bytes(path.read_bytes()[:-2_000])
    elif case == "all nodata":
        write(path, np.zeros((3, 64, 96), np.uint8), nodata=0)
    elif case == "all NaN":
        write(path, np.full((3, 64, 96), np.nan, np.float32))
    elif case == "no place":
        write(path, image, None)
    elif case == "other crs given":
        write(path, image)
        return {"crs": "EPSG:25833"}
    return {}


CASES = {
    "missing": "no file", "no crs": "--crs", "degrees": "degrees", "coarse": "finer imagery", "two bands": "2 bands",
    "text": "no raster that can be read", "empty": "is empty", "truncated": "cut short",
    "truncated tiles": "cut short", "all nodata": "no data at all", "all NaN": "no data at all",
    "no place": "world file", "other crs given": "as --crs says",
}  # fmt: skip


@pytest.mark.parametrize("case", CASES)
@pytest.mark.filterwarnings("ignore::rasterio.errors.NotGeoreferencedWarning")
def test_unusable_tile_is_refused_in_a_sentence(tmp_path: Path, case: str) -> None:
    """Should refuse a lone unusable tile by one sentence with its name and what to do."""
    path = tmp_path / "Böse Kachel.tif"
    asked = spoil(path, case)
    with pytest.raises(BadInput) as refused:
        Mosaic.open([path], **asked)
    sentence = str(refused.value)
    assert CASES[case] in sentence
    assert path.name in sentence
    assert sentence.endswith(".")
    assert "\n" not in sentence


@pytest.mark.parametrize("case", [case for case in CASES if case != "other crs given"])
@pytest.mark.filterwarnings("ignore::rasterio.errors.NotGeoreferencedWarning")
def test_the_rest_goes_on(tmp_path: Path, case: str) -> None:
    """Should go on without an unusable tile and list it."""
    spoil(tmp_path / "bad.tif", case)
    good = write(tmp_path / "good.tif", picture())
    mosaic = Mosaic.open([tmp_path / "bad.tif", good])
    assert [tile.name for tile in mosaic.tiles] == ["good.tif"]
    assert len(mosaic.faults) == 1
    assert "bad.tif" in mosaic.faults[0]
    np.testing.assert_array_equal(mosaic.read(ROW, COL, 64, 96).colour, shares(picture()))


@pytest.mark.filterwarnings("ignore::rasterio.errors.NotGeoreferencedWarning")
def test_png_without_world_file_is_refused(tmp_path: Path) -> None:
    """Should refuse a PNG that does not say where it lies."""
    path = write(tmp_path / "a.png", picture(), None, driver="PNG", crs=None)
    with pytest.raises(BadInput, match="world file"):
        Mosaic.open([path], crs=CRS)


@pytest.mark.parametrize(("driver", "suffix"), [("PNG", "png"), ("JPEG", "jpg"), ("JP2OpenJPEG", "jp2")])
def test_truncated_images_are_refused(tmp_path: Path, driver: str, suffix: str) -> None:
    """Should refuse other formats that are cut short."""
    path = write(tmp_path / f"a.{suffix}", picture(300, 300), driver=driver)
    path.write_bytes(path.read_bytes()[: path.stat().st_size // 2])
    with pytest.raises(BadInput, match=r"cannot be read in places|no raster that can be read|cut short"):
        Mosaic.open([path], crs=CRS)


def test_tiles_of_another_crs_are_left_out(tmp_path: Path) -> None:
    """Should leave out tiles whose CRS differs from that of the first usable one."""
    a = write(tmp_path / "a.tif", picture())
    b = write(tmp_path / "b.tif", picture(), crs="EPSG:25833")
    mosaic = Mosaic.open([b, a])
    assert [tile.name for tile in mosaic.tiles] == ["a.tif"]
    assert "reproject" in mosaic.faults[0]


def test_damage_inside_a_file_is_told(tmp_path: Path) -> None:
    """Should go on without the blocks that cannot be decoded, and say so once."""
    path = write(tmp_path / "a.tif", picture(300, 340), tiled=True, blockxsize=64, blockysize=64, compress="deflate")
    content = bytearray(path.read_bytes())
    with rasterio.open(path) as source:
        start = int(source.get_tag_item("BLOCK_OFFSET_1_1", "TIFF", bidx=1))
    content[start : start + 400] = b"\xff" * 400
    path.write_bytes(content)
    mosaic = Mosaic.open([path])
    cover = mosaic.read(ROW, COL, 300, 340).cover
    np.testing.assert_array_equal(mosaic.read(ROW + 50, COL + 60, 90, 20).cover, cover[50:140, 60:80])
    assert (cover[64:128, 64:128] == 1).all()
    assert (cover == 1).sum() == 64 * 64
    assert len(mosaic.faults) == 1
    assert "a.tif" in mosaic.faults[0]


def test_nothing_named_is_refused() -> None:
    """Should ask for a tile when none is named."""
    with pytest.raises(BadInput, match="at least one"):
        Mosaic.open([])


@pytest.mark.parametrize(("pixel", "warned"), [(0.25, False), (0.26, True), (0.40, True)])
def test_coarse_pixels_are_warned_of(tmp_path: Path, pixel: float, warned: bool) -> None:
    """Should warn above 0.25 m and still read up to 0.40 m."""
    mosaic = Mosaic.open([write(tmp_path / "a.tif", picture(), Affine(pixel, 0, EAST, 0, -pixel, NORTH))])
    assert bool(mosaic.warnings) is warned


def test_crs_of_no_register_takes_the_given_one(real: Path) -> None:
    """Should let --crs stand for a CRS that a file spells in words no register knows."""
    folder = real / "lidar_ign"
    with pytest.raises(BadInput, match="reproject"):
        Mosaic.open([folder / "image.tif"], [folder / "height.tif"])
    mosaic = Mosaic.open([folder / "image.tif"], [folder / "height.tif"], "EPSG:2154")
    minx, _, _, maxy = mosaic.bounds_m
    height = mosaic.read(int(-maxy * 10) + 5, int(minx * 10) + 5, 400, 400).height
    assert height is not None
    assert np.isfinite(height).mean() > 0.7


def test_array_layouts() -> None:
    """Should take arrays with bands first or last, and refuse two bands."""
    image = picture()
    for array in (image, np.moveaxis(image, 0, 2), np.concatenate([image, image[:1]])):
        mosaic = Mosaic.of([ArrayTile.of(array, PLACE, CRS)])
        np.testing.assert_array_equal(mosaic.read(ROW, COL, 64, 96).colour, shares(image))
    with pytest.raises(BadInput, match="2 bands"):
        ArrayTile.of(image[:2], PLACE, CRS)
