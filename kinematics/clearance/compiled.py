"""Compilation to machine code, kept between runs where the machine lets it.

Importing this module imports numba. A machine without it has the sampled search (``sampled.py``), which does not come
here.
"""

from __future__ import annotations

from collections.abc import Callable
from pathlib import Path
from typing import Any

from numba import njit


def compiled(function: Callable[..., Any]) -> Any:
    """Compile a function when it is first called, free of Python's lock.

    The machine code is kept beside the source, or in the user's cache folder; where neither can be written (a
    read-only install without a home) it is made anew in each run.
    """
    try:
        return njit(cache=True, nogil=True)(function)
    except RuntimeError:
        return njit(nogil=True)(function)


def is_kept(function: Any) -> bool:
    """True when a compiled function's machine code lies ready from an earlier run."""
    place = getattr(function.stats, "cache_path", None)
    return place is not None and any(Path(place).glob(f"*{function.py_func.__name__}*.nbi"))
