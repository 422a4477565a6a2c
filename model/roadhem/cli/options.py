"""Options and habits that verbs share."""

from __future__ import annotations

import json
import os
import sys
from collections.abc import Callable, Iterator
from contextlib import contextmanager
from pathlib import Path
from typing import TYPE_CHECKING, Any, TypeVar

import click

if TYPE_CHECKING:
    from roadhem.jobs.session import Inputs

F = TypeVar("F", bound=Callable[..., Any])

THREADS = 2
"""More threads hardly speed up a net as small as ours."""

PATH = click.Path(path_type=Path)


def tiles_options(verb: F) -> F:
    """Add tiles, height, model and CRS."""
    decorators = [
        click.argument("tiles", nargs=-1, required=True, type=PATH, metavar="TILES..."),
        click.option("--height", multiple=True, type=PATH, metavar="H", help="Height raster; may be given often."),
        click.option("--model", metavar="NAME|PATH", help="A model of the shelf or a model folder."),
        click.option("--crs", metavar="CRS", help="For tiles that name none, for example EPSG:25832."),
        click.option(
            "--threads", type=int, metavar="N", help=f"Threads of the net a process; else the cores, up to {THREADS}."
        ),
    ]
    return _apply(verb, decorators)


json_option = click.option("--json", "as_json", is_flag=True, help="Print one JSON object and nothing else.")
ballpark_option = click.option(
    "--allow-ballpark", is_flag=True, help="Accept a coarse transformation, or one whose grid is missing."
)


def inputs_of(
    tiles: tuple[Path, ...],
    height: tuple[Path, ...],
    model: str | None,
    crs: str | None,
    threads: int | None,
    workers: int = 1,
) -> Inputs:
    """Bring a verb's options to the inputs of a job; `workers` processes share the cores."""
    from roadhem.errors import BadInput
    from roadhem.jobs.session import Inputs
    from roadhem.state import find_model

    if threads is None:
        threads = max(1, min(THREADS, (os.cpu_count() or 1) // max(workers, 1)))
    if threads < 1:
        raise BadInput("--threads must be at least 1")
    return Inputs(tiles, height, crs, find_model(model), threads)


@contextmanager
def progress_bar(what: str) -> Iterator[Callable[[int, int], None]]:
    """Give a function to call with (done, total); it draws a bar on stderr if that is a terminal."""
    if not sys.stderr.isatty():
        yield lambda done, total: None
        return
    from tqdm import tqdm

    with tqdm(desc=what, leave=False, file=sys.stderr, dynamic_ncols=True) as bar:

        def show(done: int, total: int) -> None:
            bar.total = total
            bar.n = done
            bar.refresh()

        yield show


def print_json(value: dict[str, Any]) -> None:
    """Print one JSON object."""
    click.echo(json.dumps(value, ensure_ascii=False, indent=2, allow_nan=False))


def print_figures(rows: list[tuple[str, str]]) -> None:
    """Print names and figures in two columns."""
    width = max(len(name) for name, _ in rows)
    for name, figure in rows:
        click.echo(f"{name:<{width}}  {figure:>12}")


def tell_faults(faults: list[str], notes: list[str]) -> int:
    """List on stderr what to mind and what was left out; return the exit status."""
    for note in notes:
        click.echo(f"note: {note.rstrip('.')}.", err=True)
    for fault in faults:
        click.echo(f"left out: {fault.rstrip('.')}.", err=True)
    return 1 if faults else 0


def _apply(verb: F, decorators: list[Any]) -> F:
    for decorator in reversed(decorators):
        verb = decorator(verb)
    return verb
