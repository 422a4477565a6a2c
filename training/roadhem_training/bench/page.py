"""The page's form: parts with tables and pictures in one HTML file that needs nothing else."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass
from importlib import resources
from pathlib import Path

import jinja2

from roadhem.delivery.page import CAUTIONS
from roadhem.lines.files import whole_file


@dataclass(frozen=True)
class Cell:
    """A cell of a table. missed : whether it misses its goal."""

    text: str
    missed: bool = False


@dataclass(frozen=True)
class Sheet:
    """A table. head : names of the columns. rows : of cells."""

    title: str
    head: Sequence[str]
    rows: Sequence[Sequence[Cell]]


@dataclass(frozen=True)
class Picture:
    """A picture. address : a data address."""

    address: str
    caption: str


@dataclass(frozen=True)
class Part:
    """A part of the page. keys : (colour, name) of what the pictures show."""

    title: str
    notes: Sequence[str] = ()
    tables: Sequence[Sheet] = ()
    pictures: Sequence[Picture] = ()
    keys: Sequence[tuple[str, str]] = ()


def write_bench_page(path: Path, title: str, lead: str, made: str, command: str, parts: Sequence[Part]) -> None:
    """Write the page, whole or not at all. made : when and of what; command : that made it."""
    environment = jinja2.Environment(autoescape=True, undefined=jinja2.StrictUndefined, trim_blocks=True)
    source = (resources.files("roadhem_training.bench") / "page.html").read_text(encoding="utf-8")
    html = environment.from_string(source).render(
        title=title, lead=lead, made=made, command=command, parts=parts, cautions=CAUTIONS
    )
    with whole_file(path) as part:
        part.write_text(html, encoding="utf-8")


def figure_text(value: object) -> str:
    """Write a figure as people read it: three decimals below 10, none above 100, "–" where there is none."""
    if not isinstance(value, float):
        return str(value)
    if math.isnan(value):
        return "–"
    if math.isinf(value):
        return "over 2 m"
    return f"{value:.0f}" if abs(value) >= 100 else f"{value:.1f}" if abs(value) >= 10 else f"{value:.3f}"


def cells(*values: object) -> list[Cell]:
    """Make a row of plain cells."""
    return [Cell(figure_text(value)) for value in values]
