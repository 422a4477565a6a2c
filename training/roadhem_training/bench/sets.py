"""The sets a model is measured on: invented scenes kept on disk, and real sets where they are there."""

from __future__ import annotations

import os
import shutil
from dataclasses import dataclass
from pathlib import Path

import pyproj
import shapely
from shapely import affinity

from roadhem.jobs.session import Inputs
from roadhem.lines.geopackage import write_geopackage
from roadhem.lines.tables import Table
from roadhem_training.commands import style_with_roads
from roadhem_training.scenes.render import make_scene
from roadhem_training.scenes.world import World
from roadhem_training.scenes.write import EPSG, write_scene

FIRST_SEED = 910_000
"""Scenes from 900000 on are never trained on; the first of them calibrate the spread, these measure it."""
SIZE, PIXEL_M = 1024, 0.10
ORIGIN = (500_019.2, 5_600_000.0)
"""A corner shared by pages of fields, so that a scene is 2 x 2 of them."""

INVENTED, REAL, LIDAR = "invented", "real photographs", "real LiDAR"
PHOTOGRAPH = "image.tif"
IMAGES, HEIGHTS = (PHOTOGRAPH, "intensity.tif"), ("height.tif",)
TRUTH, SEEDS, OTHERS = "edges.gpkg", "seeds.gpkg", "others.gpkg"


@dataclass(frozen=True)
class BenchSet:
    """Tiles with seeds and truth. group : INVENTED, REAL or LIDAR; about : a few words for the page."""

    name: str
    group: str
    folder: Path
    about: str = ""

    @property
    def title(self) -> str:
        """Name with what it is about."""
        return f"{self.name} ({self.about})" if self.about else self.name

    def inputs(self, model: Path) -> Inputs:
        """Return the set's tiles with a model, for one thread."""
        images, heights = (
            tuple(self.folder / name for name in names if (self.folder / name).exists())
            for names in (IMAGES, HEIGHTS)
        )
        return Inputs(images, heights, None, model, threads=1)


def invented_sets(folder: Path, count: int) -> list[BenchSet]:
    """Return `count` scenes with roads, making those that are not in `folder` yet."""
    folder.mkdir(parents=True, exist_ok=True)
    return [_invented(folder, seed) for seed in range(FIRST_SEED, FIRST_SEED + count)]


def real_sets(folder: Path) -> list[BenchSet]:
    """Return the folders that hold seeds and a truth; none where the folder is missing."""
    if not folder.is_dir():
        return []
    whole = [path for path in sorted(folder.iterdir()) if (path / TRUTH).exists() and (path / SEEDS).exists()]
    return [BenchSet(path.name, REAL if (path / PHOTOGRAPH).exists() else LIDAR, path) for path in whole]


def _invented(folder: Path, seed: int) -> BenchSet:
    style = style_with_roads(seed)
    target = folder / str(seed)
    if not target.exists():
        part = folder / f"{seed}.part-{os.getpid()}"
        part.mkdir()
        try:
            scene = make_scene(seed, SIZE, PIXEL_M, style)
            write_scene(scene, seed, part, ORIGIN)
            _write_others(part / OTHERS, scene.world)
            part.rename(target)
        finally:
            shutil.rmtree(part, ignore_errors=True)
    return BenchSet(str(seed), INVENTED, target, style)


def _write_others(path: Path, world: World) -> None:
    table = Table("others", "LineString", {"what": "text"})
    frame = shapely.box(0, 0, world.size, world.size)
    for other in world.others:
        for part in shapely.get_parts(shapely.intersection(other.line, frame)):
            if part.geom_type == "LineString" and part.length > 0:
                table.add(affinity.translate(part, *ORIGIN), what=other.what)
    write_geopackage(path, [table], pyproj.CRS.from_epsg(EPSG))
