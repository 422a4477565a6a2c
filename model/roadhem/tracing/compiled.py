"""Compiled loops: kept from run to run, compiled anew when any source they are built from changes."""

from __future__ import annotations

import hashlib
import os
from collections.abc import Callable
from pathlib import Path
from typing import Any

import platformdirs
from numba import config, njit

from roadhem.fields import layout
from roadhem.tiles import grid

_HERE = Path(__file__).parent


def _folder() -> str:
    """Where this version's compiled code is kept: beside the sources, or with the user's caches.


    A compiled loop holds copies of the loops and numbers it uses from other files; numba watches its own file alone.
    """
    sources = [*sorted(_HERE.glob("*.py")), Path(str(layout.__file__)), Path(str(grid.__file__))]
    digest = hashlib.sha256(b"".join(path.read_bytes() for path in sources)).hexdigest()[:16]
    beside = _HERE / "__pycache__"
    if config.CACHE_DIR:
        beside = Path(config.CACHE_DIR)
    elif not os.access(_HERE, os.W_OK):
        beside = Path(platformdirs.user_cache_dir("roadhem"))
    return str(beside / f"loops-{digest}")


_FOLDER = _folder()


def compiled(loop: Callable[..., Any]) -> Any:
    """Compile a loop at its first call, without the interpreter's lock, and keep it."""
    usual = config.CACHE_DIR
    config.CACHE_DIR = _FOLDER
    try:
        return njit(cache=True, nogil=True)(loop)
    finally:
        config.CACHE_DIR = usual
