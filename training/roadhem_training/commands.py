"""Verbs that the training side adds to the command line."""

from __future__ import annotations

import random
from pathlib import Path

import click

from roadhem.errors import BadInput

ROADLESS = "no_road"
DEFAULT_ORIGIN = "500000,5600000"


@click.command(epilog="Example: roadhem scene --seed 7 --out build/scene")
@click.option("--seed", type=click.IntRange(min=0), required=True, help="The same seed gives the same bytes.")
@click.option(
    "--size", type=click.IntRange(min=64, max=20000), default=1024, show_default=True, help="Pixels per side."
)
@click.option(
    "--pixel", type=click.FloatRange(0.02, 0.5), default=0.10, show_default=True, help="Metres per pixel."
)
@click.option(
    "--origin",
    default=DEFAULT_ORIGIN,
    show_default=True,
    metavar="E,N",
    help="Lower left corner, EPSG:25832.",
)
@click.option(
    "--style", default=None, help="A kind of place, such as suburb or old_town; drawn if not given."
)
@click.option("--out", "folder", type=click.Path(path_type=Path), required=True, help="An existing folder.")
def scene(seed: int, size: int, pixel: float, origin: str, style: str | None, folder: Path) -> None:
    """Invent a scene: image.tif, height.tif, edges.gpkg and seeds.gpkg with its exact truth."""
    from roadhem_training.scenes.render import make_scene
    from roadhem_training.scenes.write import FILES, check_folder, write_scene

    corner = read_origin(origin)
    check_folder(folder)
    made = make_scene(seed, size, pixel, style or style_with_roads(seed))
    write_scene(made, seed, folder, corner)
    click.echo(f"scene {seed}: {', '.join(FILES)} in {folder}")


def style_with_roads(seed: int) -> str:
    """Draw a kind of place that has edges to trace; land without roads is for training only."""
    from roadhem_training.scenes.layout import STYLE_ODDS

    odds = {style: share for style, share in STYLE_ODDS.items() if style != ROADLESS}
    return random.Random(seed).choices(list(odds), list(odds.values()))[0]


def read_origin(text: str) -> tuple[float, float]:
    """Read "E,N" in metres.

    Raises
    ------
    BadInput : it is not two numbers.
    """
    try:
        east, north = (float(part) for part in text.split(","))
    except ValueError:
        raise BadInput(
            f"--origin {text!r} is not two numbers: give it as E,N, for example {DEFAULT_ORIGIN}"
        ) from None
    if not (abs(east) < 1e7 and abs(north) < 1e8):
        raise BadInput(f"--origin {text!r} lies outside EPSG:25832: give easting and northing in metres")
    return east, north
