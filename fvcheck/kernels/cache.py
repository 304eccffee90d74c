"""Where compiled loops are kept from run to run.

numba keeps them beside the sources, or where it may not write there in the
user's cache folder, or in NUMBA_CACHE_DIR. With none of these it refuses to
import a loop that asks for a cache; then they are kept for this process alone.
"""

from __future__ import annotations

import atexit
import importlib
import os
import shutil
import sys
import tempfile
from typing import Any

import numba
from numba import njit
from numba.np import linalg


def _config() -> Any:
    """numba's settings, whose names its types do not list."""
    return numba.config


def settle() -> None:
    """Give numba a folder it can use, before the first loop is imported."""
    _spare_blas()
    if _usable():
        return
    # One's own, since what lies in it is run: a shared place could hold anything.
    folder = tempfile.mkdtemp(prefix="fvcheck-")
    atexit.register(shutil.rmtree, folder, ignore_errors=True)
    os.environ["NUMBA_CACHE_DIR"] = folder
    _config().CACHE_DIR = folder


def _spare_blas() -> None:
    """Keep numba from loading scipy's linear algebra just to see whether it is there.

    It takes longer than numba itself, and no loop here calls it. Where one does, numba asks
    again when it compiles it; this answers only the question at its own start, with the yes
    that a dependency of ours is.
    """
    if "numba.np.arraymath" in sys.modules:
        return
    asked = getattr(linalg, "ensure_blas", None)
    if asked is None:
        return
    linalg.ensure_blas = lambda: None
    try:
        importlib.import_module("numba.np.arraymath")
    finally:
        linalg.ensure_blas = asked


def kept() -> bool:
    """Whether the loops of this process will be there for the next."""
    return not os.path.basename(_config().CACHE_DIR or "").startswith("fvcheck-")


def cold() -> bool:
    """Whether the loops that every ledger needs are yet to be compiled."""
    from fvcheck.kernels import fits

    folder = fits.fit_points.stats.cache_path
    stem = f"{fits.__name__.rpartition('.')[2]}.fit_points-"
    return not any(name.startswith(stem) for name in _names(folder))


def _names(folder: str | None) -> list[str]:
    try:
        return os.listdir(folder or "")
    except OSError:
        return []


def _usable() -> bool:
    try:
        njit(cache=True)(_usable)
    except (RuntimeError, OSError):
        return False
    return True
