"""Output files that appear whole or not at all."""

from __future__ import annotations

import os
from collections.abc import Iterator
from contextlib import contextmanager
from pathlib import Path

from roadhem.errors import BadInput


def check_target(path: Path, suffixes: tuple[str, ...] = ()) -> None:
    """Refuse an output that could not be written, before any work is done.

    Raises
    ------
    BadInput : the folder does not exist or takes no files, `path` is a folder, or its suffix is not in `suffixes`.
    """
    folder = path.parent
    if suffixes and path.suffix.lower() not in suffixes:
        raise BadInput(f"{path} has a name that says no format; name a file that ends in {' or '.join(suffixes)}")
    if not folder.is_dir():
        raise BadInput(f"The output folder {folder} does not exist; make it first or name another")
    if path.is_dir():
        raise BadInput(f"{path} is a folder; name a file in it")
    if not os.access(folder, os.W_OK):
        raise BadInput(f"The output folder {folder} is not writable; name another or change its permissions")


@contextmanager
def whole_file(target: Path) -> Iterator[Path]:
    """Give a path beside `target` to write to; on success it takes the target's place, on failure it goes.

    The temporary name keeps the target's suffix, so that drivers which go by it are content.
    """
    part = target.with_name(f"{target.name}.part-{os.getpid()}{target.suffix}")
    try:
        yield part
        _flush(part)
        os.replace(part, target)
    finally:
        for left in part.parent.glob(_literal(part.name) + "*"):
            left.unlink(missing_ok=True)


def _flush(path: Path) -> None:
    with open(path, "rb+") as stream:
        os.fsync(stream.fileno())


def _literal(name: str) -> str:
    return "".join(f"[{char}]" if char in "*?[" else char for char in name)
