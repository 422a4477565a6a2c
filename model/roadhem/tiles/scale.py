"""Ground metres: how long a CRS unit is on the ground at a place."""

from __future__ import annotations

import math
from functools import lru_cache

from pyproj import CRS, Transformer
from pyproj.exceptions import CRSError

from roadhem.errors import BadInput

PROBE_M = 100.0
"""Length of the probes whose true length gives the point scale."""


def read_crs(text: str) -> CRS:
    """Return the horizontal CRS that `text` names.

    Raises
    ------
    BadInput
        If it names none that tiles can be in.
    """
    try:
        crs = CRS.from_user_input(text)
    except CRSError as error:
        raise BadInput(f"{text!r} names no CRS that PROJ knows; give one like EPSG:25832.") from error
    return horizontal(crs)


def horizontal(crs: CRS) -> CRS:
    """Return the CRS without a vertical part and without a bound transformation."""
    while crs.is_compound or crs.is_bound:
        crs = crs.sub_crs_list[0] if crs.is_compound else crs.source_crs
    return crs.to_2d() if len(crs.axis_info) == 3 else crs


def metres_per_unit(crs: CRS) -> float:
    """Length of the unit of a CRS in metres; international and US survey feet differ by 2e-6."""
    return float(crs.axis_info[0].unit_conversion_factor)


@lru_cache(maxsize=16)
def _to_degrees(crs: CRS) -> Transformer:
    return Transformer.from_crs(crs, crs.geodetic_crs, always_xy=True)


def point_scale(crs: CRS, x: float, y: float) -> float:
    """Length on the map over length on the ground at (x, y), the mean of both directions.

    Probes east and north are measured as geodesics on the ellipsoid, which holds in Web Mercator too, whose maps
    are spherical and whose ground is not. A CRS without an ellipsoid gives 1.
    """
    if crs.geodetic_crs is None:
        return 1.0
    half = PROBE_M / metres_per_unit(crs) / 2
    lon, lat = _to_degrees(crs).transform([x - half, x + half, x, x], [y, y, y - half, y + half])
    geod = crs.get_geod()
    east = geod.inv(lon[0], lat[0], lon[1], lat[1])[2]
    north = geod.inv(lon[2], lat[2], lon[3], lat[3])[2]
    scale = PROBE_M / math.sqrt(east * north) if east > 0 and north > 0 else math.nan
    if not math.isfinite(scale):
        raise BadInput(f"{crs.name} does not reach to x {x:.0f}, y {y:.0f}; check the CRS of the tiles.")
    return scale
