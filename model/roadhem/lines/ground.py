"""True lengths: ground metres of lines given in any projected CRS."""

from __future__ import annotations

import numpy as np
import pyproj
from numpy.typing import ArrayLike, NDArray
from pyproj.exceptions import CRSError, ProjError


class Ground:
    """Ground lengths and positions for one CRS.

    Parameters
    ----------
    crs : projected; one without a datum (a site grid) counts as true to scale.
    """

    def __init__(self, crs: pyproj.CRS) -> None:
        self.unit_m = crs.axis_info[0].unit_conversion_factor if crs.axis_info else 1.0
        self._geod: pyproj.Geod | None
        try:
            self._geod = crs.get_geod()
            geographic = crs.geodetic_crs
            self._to_lonlat = pyproj.Transformer.from_crs(crs, geographic, always_xy=True) if geographic else None
        except (CRSError, ProjError):
            self._geod = self._to_lonlat = None

    def step_m(self, xy: ArrayLike) -> NDArray[np.float64]:
        """Ground lengths of the steps between consecutive points.

        Parameters
        ----------
        xy : (n, 2) CRS coordinates.

        Returns
        -------
        (n - 1,) metres, along the ellipsoid.
        """
        points = np.asarray(xy, dtype=np.float64)
        if self._geod is None or self._to_lonlat is None:
            return np.asarray(np.hypot(*np.diff(points, axis=0).T) * self.unit_m)
        lon, lat = self._to_lonlat.transform(*points.T)
        _, _, length = self._geod.inv(lon[:-1], lat[:-1], lon[1:], lat[1:])
        return np.asarray(length)

    def metres_per_unit(self, bounds: ArrayLike) -> float:
        """Ground metres per CRS unit in the middle of bounds (minx, miny, maxx, maxy), mean of both axes."""
        minx, miny, maxx, maxy = np.asarray(bounds, dtype=np.float64)
        x, y = (minx + maxx) / 2, (miny + maxy) / 2
        half = 5.0 / self.unit_m
        across = self.step_m([(x - half, y), (x + half, y)])[0]
        up = self.step_m([(x, y - half), (x, y + half)])[0]
        return float((across + up) / (4 * half))
