from __future__ import annotations

import math
from pathlib import Path

import numpy as np
import pytest
from affine import Affine
from pyproj import CRS, Geod, Proj, Transformer
from pyproj.enums import TransformDirection

from roadhem.errors import BadInput
from roadhem.tiles.grid import PIXEL_M, SCALE_STEP
from roadhem.tiles.mosaic import Mosaic
from roadhem.tiles.scale import horizontal, metres_per_unit, point_scale, read_crs
from roadhem.tiles.tile import ArrayTile

PLACES = [
    ("EPSG:25832", 500_000, 5_600_000), ("EPSG:25832", 200_000, 5_600_000), ("EPSG:2154", 770_500, 6_277_600),
    ("EPSG:28992", 84_808, 447_642), ("EPSG:31256", -1_750, 338_800), ("EPSG:2992", 636_515, 851_862),
    ("EPSG:2263", 1_000_000, 200_000), ("EPSG:2193", 1_700_000, 5_500_000), ("EPSG:3395", 1_000_000, 6_000_000),
]  # fmt: skip
"""Transverse Mercator, conformal conic, stereographic, in metres and both feet; ellipsoidal Mercator."""


@pytest.mark.parametrize(("name", "x", "y"), PLACES)
def test_scale_agrees_with_proj(name: str, x: float, y: float) -> None:
    """Should equal PROJ's own scale factors (pyproj.Proj.get_factors) where the projection is of the ellipsoid."""
    crs = CRS(name)
    degrees = Transformer.from_crs(crs, crs.geodetic_crs, always_xy=True).transform(x, y)
    factors = Proj(crs).get_factors(*degrees)
    expected = math.sqrt(factors.meridional_scale * factors.parallel_scale)
    assert point_scale(crs, x, y) == pytest.approx(expected, rel=1e-8)


@pytest.mark.parametrize("latitude", [0.0, 27.6, 48.0, 60.0, -41.0])
def test_web_mercator_is_measured_on_the_ellipsoid(latitude: float) -> None:
    """Should give Web Mercator the scale of the ellipsoid, not of the sphere that PROJ's factors are of.

    [built] The map's sphere has the ellipsoid's equatorial radius a; on the ellipsoid a degree of longitude measures
    N cos(lat) and one of latitude M, with N = a / sqrt(1 - e2 sin2), M = a (1 - e2) / (1 - e2 sin2)^1.5, so the map
    is a / (N cos) too large eastward and a / (M cos) northward.
    """
    crs = CRS("EPSG:3857")
    x, y = Transformer.from_crs("EPSG:4326", crs, always_xy=True).transform(85.0, latitude)
    lat = math.radians(latitude)
    e2 = Geod(ellps="WGS84").es
    bend = 1 - e2 * math.sin(lat) ** 2
    east, north = math.sqrt(bend) / math.cos(lat), bend**1.5 / (1 - e2) / math.cos(lat)
    found = point_scale(crs, x, y)
    assert found == pytest.approx(math.sqrt(east * north), rel=1e-8)
    factors = Proj(crs).get_factors(85.0, latitude)
    assert factors.parallel_scale == pytest.approx(1 / math.cos(lat), rel=1e-9)
    assert abs(found * math.cos(lat) - 1) < 0.0035


@pytest.mark.parametrize("latitude", [27.6, 48.0, 60.0])
def test_grid_metres_are_ground_metres(latitude: float) -> None:
    """Should make 100 grid metres 100 m on the ground to the grid's step, measured as a geodesic (pyproj.Geod)."""
    to_map = Transformer.from_crs("EPSG:4326", "EPSG:3857", always_xy=True)
    x, y = to_map.transform(85.0, latitude)
    tile = ArrayTile.of(np.zeros((3, 100, 100), np.uint8), Affine(0.15, 0, x, 0, -0.15, y), "EPSG:3857")
    grid = Mosaic.of([tile]).grid
    for dx, dy in ((100.0, 0.0), (0.0, 100.0)):
        a, b = np.array([x, y]), grid.to_crs(grid.to_metres([x, y]) + np.array([dx, dy]))
        (lon_a, lon_b), (lat_a, lat_b) = to_map.transform(
            [a[0], b[0]], [a[1], b[1]], direction=TransformDirection.INVERSE
        )
        length = Geod(ellps="WGS84").inv(lon_a, lat_a, lon_b, lat_b)[2]
        assert length == pytest.approx(100, rel=SCALE_STEP**0.5 - 1 + 0.0035)


def test_feet_are_kept_apart() -> None:
    """Should keep the international foot (0.3048 m) and the US survey foot (1200/3937 m) apart.

    Both by definition, 1.2 m at 2,000,000 ft; the difference of 2e-6 is common knowledge of surveying (from memory).
    """
    international, survey = metres_per_unit(CRS("EPSG:2992")), metres_per_unit(CRS("EPSG:2263"))
    assert international == pytest.approx(0.3048, rel=1e-15)
    assert survey == pytest.approx(1200 / 3937, rel=1e-15)
    assert (survey - international) * 2_000_000 == pytest.approx(1.2192, abs=1e-3)


@pytest.mark.parametrize(("name", "unit"), [("EPSG:2992", 0.3048), ("EPSG:2263", 1200 / 3937)])
def test_grid_in_feet(name: str, unit: float) -> None:
    """Should lay working pixels of 0.10 m over a CRS in feet, and measure pixels in ground metres."""
    tile = ArrayTile.of(np.zeros((3, 64, 64), np.uint8), Affine(0.5, 0, 1_000_000, 0, -0.5, 200_000), name)
    mosaic = Mosaic.of([tile])
    assert mosaic.grid.scale == pytest.approx(unit, rel=1e-12)
    assert mosaic.grid.cell * unit == pytest.approx(PIXEL_M)
    assert mosaic.tiles[0].pixel_m == pytest.approx(0.5 * unit, rel=1e-3)
    minx, _, maxx, _ = mosaic.bounds_m
    assert maxx - minx == pytest.approx(32 * unit, abs=1e-6)


def test_neighbouring_tile_does_not_shift_the_grid() -> None:
    """Should keep the grid when a neighbour is added: the scale moves in steps of 1 %."""
    def tile(x: float) -> ArrayTile:
        return ArrayTile.of(np.zeros((3, 500, 500), np.uint8), Affine(0.1, 0, x, 0, -0.1, 6_100_000), "EPSG:3857")

    alone, both = Mosaic.of([tile(900_000.0)]).grid, Mosaic.of([tile(900_000.0), tile(900_050.0)]).grid
    assert alone == both
    assert alone.scale != 1.0


def test_vertical_and_bound_parts_are_left_out() -> None:
    """Should see the horizontal CRS in a compound and in a bound one."""
    assert read_crs("EPSG:25832+7837").equals(CRS(25832))
    bound = CRS("+proj=utm +zone=32 +ellps=GRS80 +towgs84=1,2,3 +units=m +type=crs")
    assert bound.is_bound
    assert horizontal(bound).is_projected


def test_unknown_crs_is_refused() -> None:
    """Should refuse a CRS that PROJ does not know, in a sentence."""
    with pytest.raises(BadInput, match="EPSG:25832"):
        read_crs("EPSG:999999")


def test_place_outside_the_projection_is_refused() -> None:
    """Should refuse tiles that lie where their CRS does not reach."""
    far = ArrayTile.of(np.zeros((3, 64, 64), np.uint8), Affine(0.1, 0, 1e9, 0, -0.1, 1e9), "EPSG:25832")
    with pytest.raises(BadInput, match="does not reach"):
        Mosaic.of([far])


EXPECTED = {
    "culdesac": 0.150, "junction_day": 0.060, "carpark": 0.087, "avenue": 0.120, "hill_village": 0.066,
    "hill_highway": 0.066, "vienna_30cm": 0.300, "feet_1ft": 0.305,
}  # fmt: skip
"""Ground pixel in metres, as the sets' own description gives it."""


@pytest.mark.parametrize("name", EXPECTED)
def test_real_sets_have_their_pixel(real: Path, name: str) -> None:
    """Should find the ground pixel that a real set's description gives."""
    mosaic = Mosaic.open([real / name / "image.tif"])
    assert mosaic.tiles[0].pixel_m == pytest.approx(EXPECTED[name], abs=6e-4)
    assert not mosaic.faults
