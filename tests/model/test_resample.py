from __future__ import annotations

import math

import numpy as np
import pytest
from affine import Affine
from hypothesis import given, settings
from hypothesis import strategies as st
from numpy.typing import NDArray
from rasterio.enums import Resampling
from rasterio.warp import reproject
from skimage.transform import downscale_local_mean

from roadhem.tiles.grid import PIXEL_M
from roadhem.tiles.mosaic import Mosaic
from roadhem.tiles.tile import ArrayTile

CRS = "EPSG:25832"
EAST, NORTH = 500_000.0, 5_600_000.0
ROW, COL = -56_000_000, 5_000_000
PIXELS = (0.04, 0.05, 0.06, 0.087, 0.1, 0.12, 0.15, 0.2, 0.25, 0.33)


def placed(pixel: float, degrees: float = 0.0, dx: float = 0.0, dy: float = 0.0) -> Affine:
    cos, sin = math.cos(math.radians(degrees)), math.sin(math.radians(degrees))
    return Affine(pixel * cos, pixel * sin, EAST + dx, pixel * sin, -pixel * cos, NORTH + dy)


def moved(transform: Affine, row: float, col: float) -> Affine:
    """Transform of the part of an image that begins at pixel (row, col)."""
    a, b, c, d, e, f = transform[:6]
    return Affine(a, b, c + a * col + b * row, d, e, f + d * col + e * row)


def noise(rows: int, cols: int, seed: int = 0) -> NDArray[np.uint8]:
    return np.random.default_rng(seed).integers(0, 256, (3, rows, cols), dtype=np.uint8)


def holes(rows: int, cols: int, seed: int = 0) -> NDArray[np.bool_]:
    valid = np.random.default_rng(seed).random((rows, cols)) > 0.05
    valid[rows // 3 : rows // 2, cols // 3 : cols // 2] = False
    return valid


def mosaic_of(array: NDArray[np.generic], transform: Affine, valid: NDArray[np.bool_] | None = None) -> Mosaic:
    tile = ArrayTile.of(array, transform, CRS)
    tile.valid = valid
    return Mosaic.of([tile])


def ramp(transform: Affine, rows: int, cols: int) -> NDArray[np.float32]:
    """Heights of a plane at pixel centres."""
    col, row = np.meshgrid(np.arange(cols) + 0.5, np.arange(rows) + 0.5)
    a, b, c, d, e, f = transform[:6]
    x, y = a * col + b * row + c, d * col + e * row + f
    return (0.3 * (x - EAST) - 0.2 * (y - NORTH) + 5).astype(np.float32)


@settings(deadline=None, max_examples=60)
@given(
    pixel=st.sampled_from(PIXELS),
    degrees=st.sampled_from((0.0, 0.0, 13.0, 90.0)),
    shift=st.floats(0, 0.1),
    row=st.integers(-20, 60),
    col=st.integers(-20, 60),
    rows=st.integers(1, 70),
    cols=st.integers(1, 70),
)
def test_window_never_matters(
    pixel: float, degrees: float, shift: float, row: int, col: int, rows: int, cols: int
) -> None:
    """Should give the same bits for a pixel whatever window it is read in, holes and borders included."""
    side = int(6 / pixel)
    mosaic = mosaic_of(noise(side, side), placed(pixel, degrees, shift, -shift / 3), holes(side, side))
    whole = mosaic.read(ROW - 20, COL - 20, 150, 150)
    part = mosaic.read(ROW + row, COL + col, rows, cols)
    window = np.s_[row + 20 : row + 20 + rows, col + 20 : col + 20 + cols]
    assert part.colour.tobytes() == whole.colour[(slice(None), *window)].tobytes()
    assert part.cover.tobytes() == whole.cover[window].tobytes()


@pytest.mark.parametrize("dx", [0.0, 0.3, 12.7, 1e-8])
def test_aligned_pixels_are_untouched(dx: float) -> None:
    """Should hand on the stored values where a tile's pixels are the working pixels."""
    image = noise(40, 50)
    colour = mosaic_of(image, placed(0.1, dx=dx)).read(ROW, COL + round(dx / PIXEL_M), 40, 50).colour
    np.testing.assert_array_equal(colour, image.astype(np.float32) * np.float32(1 / 255))


@pytest.mark.parametrize("degrees", [0.0, 30.0, 90.0, 180.0])
@pytest.mark.parametrize("pixel", PIXELS)
def test_plane_keeps_its_place(pixel: float, degrees: float) -> None:
    """Should reproduce a sloping plane at the working pixels' centres: no shift, whatever the pixel [built].

    An area average of whole pixels is exact only where a whole number of them fills a working pixel; else its centre
    of gravity moves by at most 0.086 source pixels (the greatest f (1 - f) / (2 (1 + f)) over shares f), both ways.
    """
    side = int(24 / pixel)
    transform = moved(placed(pixel, degrees), -side / 2, -side / 2)
    image = ArrayTile.of(noise(side, side), transform, CRS)
    heights = ArrayTile.of_heights(ramp(transform, side, side), transform, CRS)
    found = Mosaic.of([image], [heights]).read(ROW - 60, COL - 60, 120, 120).height
    whole = pixel >= PIXEL_M or math.isclose(PIXEL_M / pixel, round(PIXEL_M / pixel)) or degrees % 90
    exact = ramp(placed(PIXEL_M, 0, -6, 6), 120, 120)
    np.testing.assert_allclose(found, exact, atol=2e-5 if whole else 0.086 * pixel * (0.3 + 0.2))
    assert abs(float(np.mean(found - exact))) < 2e-4


@pytest.mark.parametrize("pixel", [0.12, 0.2, 0.3])
def test_colour_plane_keeps_its_place(pixel: float) -> None:
    """Should keep a plane's place by cubic interpolation too, away from the border [built]."""
    side = int(12 / pixel)
    transform = placed(pixel)
    plane = np.repeat(ramp(transform, side, side)[None] / 20, 3, axis=0)
    tile = ArrayTile.of(plane, transform, CRS)
    mosaic = Mosaic.of([tile])
    tile.stretch = (0.0, 1.0)
    expected = ramp(placed(PIXEL_M, 0, 2, -2), 60, 60) / 20
    np.testing.assert_allclose(mosaic.read(ROW + 20, COL + 20, 60, 60).colour[1], expected, atol=1e-6)


def test_rows_may_run_north() -> None:
    """Should read a raster whose rows run from south to north like its mirror image."""
    image = noise(50, 60)
    upside = Affine(0.12, 0, EAST, 0, 0.12, NORTH - 50 * 0.12)
    mirrored = mosaic_of(np.ascontiguousarray(image[:, ::-1]), upside).read(ROW - 3, COL - 3, 70, 80)
    plain = mosaic_of(image, placed(0.12)).read(ROW - 3, COL - 3, 70, 80)
    np.testing.assert_allclose(mirrored.colour, plain.colour, atol=1e-5)
    np.testing.assert_array_equal(mirrored.cover, plain.cover)


def test_half_pixels_are_averaged() -> None:
    """Should average 2 x 2 pixels of 5 cm imagery, as scikit-image's local mean does."""
    image = noise(80, 100)
    colour = mosaic_of(image, placed(0.05)).read(ROW, COL, 40, 50).colour
    expected = np.stack([downscale_local_mean(band / 255.0, (2, 2)) for band in image])
    np.testing.assert_allclose(colour, expected, atol=1e-6)


@pytest.mark.parametrize(("pixel", "method"), [(0.04, Resampling.average), (0.06, Resampling.average),
                                               (0.2, Resampling.cubic), (0.15, Resampling.cubic)])  # fmt: skip
def test_agrees_with_gdal_warper(pixel: float, method: Resampling) -> None:
    """Should agree with GDAL's warper: area average down, cubic convolution up (a general library's answer)."""
    side = int(12 / pixel)
    image = noise(side, side).astype(np.float32)
    expected = np.zeros((3, 100, 100), np.float32)
    reproject(image, expected, src_transform=placed(pixel), dst_transform=placed(PIXEL_M, 0, 1, -1), src_crs=CRS,
              dst_crs=CRS, resampling=method)  # fmt: skip
    colour = mosaic_of(image.astype(np.uint8), placed(pixel)).read(ROW + 10, COL + 10, 100, 100).colour
    np.testing.assert_allclose(colour, np.clip(expected / 255, 0, 1), atol=2e-3)


@pytest.mark.parametrize("degrees", [0.0, 20.0])
@pytest.mark.parametrize("pixel", PIXELS)
def test_holes_do_not_bleed(pixel: float, degrees: float) -> None:
    """Should keep a constant image constant beside holes, and never let a hole's value through."""
    side = int(8 / pixel)
    valid = holes(side, side)
    image = np.where(valid, 100, 255).astype(np.uint8)
    patch = mosaic_of(image, placed(pixel, degrees), valid).read(ROW - 50, COL - 50, 180, 180)
    shown = patch.colour[0][patch.cover == 2]
    np.testing.assert_allclose(shown, 100 / 255, atol=1e-6)
    assert set(np.unique(patch.cover)) == {0, 1, 2}
    assert not patch.colour[:, patch.cover != 2].any()


def test_valid_from_half_the_weight() -> None:
    """Should call a pixel valid when half of the imagery under it is, and not with less [built]."""
    valid = np.ones((20, 20), bool)
    valid[0, :] = False  # the upper half of the first working row
    valid[2:4, :] = False
    valid[4, ::2] = False  # a quarter
    valid[6:8, ::2] = False
    valid[7, 1::2] = False  # three quarters
    cover = mosaic_of(noise(20, 20), placed(0.05), valid).read(ROW, COL, 4, 10).cover
    assert cover[:, 3].tolist() == [2, 1, 2, 1]


def test_nan_pixels_are_no_data() -> None:
    """Should take NaN colours and heights as missing and keep them out of their neighbours."""
    image = np.random.default_rng(0).random((3, 60, 60)).astype(np.float32)
    image[1, 20:30, 20:30] = np.nan
    heights = np.full((60, 60), 7.5, np.float32)
    heights[40:50, 10:20] = np.nan
    tile = ArrayTile.of(image, placed(0.2), CRS)
    patch = Mosaic.of([tile], [ArrayTile.of_heights(heights, placed(0.2), CRS)]).read(ROW, COL, 120, 120)
    assert np.isfinite(patch.colour).all()
    assert (patch.cover[41:59, 41:59] == 1).all()
    assert patch.height is not None
    assert np.isnan(patch.height[81:99, 21:39]).all()
    np.testing.assert_allclose(patch.height[np.isfinite(patch.height)], 7.5, atol=1e-6)


@pytest.mark.parametrize("degrees", [0.0, 25.0])
@pytest.mark.parametrize("pixel", [0.04, 0.06, 0.1, 0.12, 0.2])
def test_cut_tiles_are_one_image(pixel: float, degrees: float) -> None:
    """Should give the same bits for one file and for the same pixels cut into tiles, in any order."""
    side = int(16 / pixel)
    image, valid = noise(side, side), holes(side, side)
    transform = placed(pixel, degrees)
    whole = mosaic_of(image, transform, valid)
    cut, parts = side // 3 + 1, []
    for rows in (slice(0, cut), slice(cut, side)):
        for cols in (slice(0, cut), slice(cut, side)):
            corner = moved(transform, rows.start, cols.start)
            tile = ArrayTile.of(image[:, rows, cols], corner, CRS, name=f"{rows.start}-{cols.start}")
            tile.valid = valid[rows, cols]
            parts.append(tile)
    expected = whole.read(ROW - 20, COL - 20, 200, 200)
    for order in (parts, parts[::-1], [parts[2], parts[0], parts[3], parts[1]]):
        found = Mosaic.of(order).read(ROW - 20, COL - 20, 200, 200)
        assert found.colour.tobytes() == expected.colour.tobytes()
        assert found.cover.tobytes() == expected.cover.tobytes()


def test_large_windows_are_read_in_parts(monkeypatch: pytest.MonkeyPatch) -> None:
    """Should give the same bits when a window is sampled in halves to bound memory."""
    mosaic = mosaic_of(noise(500, 500), placed(0.04), holes(500, 500))
    expected = mosaic.read(ROW - 5, COL - 5, 210, 210)
    monkeypatch.setattr("roadhem.tiles.sheet.READ_PIXELS", 10_000)
    found = mosaic.read(ROW - 5, COL - 5, 210, 210)
    assert found.colour.tobytes() == expected.colour.tobytes()
    assert found.cover.tobytes() == expected.cover.tobytes()
