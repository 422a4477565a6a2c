"""The page: figures and picture of a run in one HTML file that needs nothing else."""

from __future__ import annotations

import base64
from collections.abc import Sequence
from dataclasses import dataclass
from importlib import resources
from pathlib import Path

import jinja2

from roadhem.lines.files import check_target, whole_file

CAUTIONS = (
    "This is not a survey. The lines are what a program saw in the image; their spread is relative to the image, and "
    "whatever the image itself is off comes on top.",
    "An edge is no property or right-of-way line, and no proof that a ramp, crossing or footway is accessible.",
    "The lines alone must not steer a vehicle.",
    "Local codes and the judgement of the licensed person in charge come before anything said here.",
)


@dataclass(frozen=True)
class Figures:
    """A table of the page.

    Attributes
    ----------
    title : above it. rows : (name, figure) each. note : under it, or "".
    """

    title: str
    rows: Sequence[tuple[str, str]]
    note: str = ""


def write_page(path: Path, title: str, lead: str, tables: Sequence[Figures], picture: Path, caption: str) -> None:
    """Write the page, whole or not at all.

    Parameters
    ----------
    lead : one sentence under the title. picture : a PNG, put into the page. caption : under the picture.

    Raises
    ------
    BadInput : the page could not be written there.
    """
    check_target(path, (".html", ".htm"))
    environment = jinja2.Environment(autoescape=True, undefined=jinja2.StrictUndefined, trim_blocks=True)
    template = environment.from_string(
        (resources.files("roadhem.delivery") / "page.html").read_text(encoding="utf-8")
    )
    html = template.render(
        title=title,
        lead=lead,
        tables=tables,
        picture=base64.b64encode(picture.read_bytes()).decode("ascii"),
        caption=caption,
        cautions=CAUTIONS,
    )
    with whole_file(path) as part:
        part.write_text(html, encoding="utf-8")
