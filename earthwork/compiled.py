"""Compiled loops: kept between runs where a folder for them can be written, compiled anew by each run where none can."""

from __future__ import annotations

import hashlib
from collections.abc import Callable
from functools import partial
from typing import Any

from numba import njit

#: Freedom to reorder sums, so that they run in vectors. Not nnan: no data is NaN, and the loops meet and test for it.
FAST = {"reassoc", "nsz", "contract", "arcp"}


def kernel(function: Callable | None = None, /, **options: Any) -> Any:
    """``numba.njit`` of a loop that releases the lock and divides as numpy does: ``@kernel``, ``@kernel(fastmath=…)``."""
    if function is None:
        return partial(kernel, **options)
    loop = njit(**{"cache": _KEPT, "nogil": True, "error_model": "numpy", **options})(function)
    kept = _kept_file(loop)
    if kept is not None:
        kept._source_stamp = _stamp(loop, options)
    return loop


def _stamp(loop: Any, options: dict[str, Any]) -> str:
    """What a loop's compiled code depends on: its file, the loops that the file imports, and numbers that it uses.

    numba looks at the file alone, so that after an update code would stay that other files had put into it.
    """
    names = loop.py_func.__globals__
    loops = {value for value in names.values() if isinstance(value, type(loop))}
    called = sorted(str(kept._source_stamp) for kept in map(_kept_file, loops) if kept is not None)
    used = loop.py_func.__code__.co_names
    numbers = [(name, names[name]) for name in used if isinstance(names.get(name), int | float)]
    freedoms = sorted((name, sorted(v) if isinstance(v, set) else v) for name, v in options.items())
    whole = (_kept_file(loop)._source_stamp, called, numbers, freedoms)
    return hashlib.sha256(repr(whole).encode()).hexdigest()


def _kept_file(loop: Any) -> Any:
    """Where numba keeps the code of a loop; None where it keeps none."""
    file = getattr(getattr(loop, "_cache", None), "_cache_file", None)
    return file if hasattr(file, "_source_stamp") else None


def _can_be_kept() -> bool:
    """Whether compiled code can be kept: beside the code itself, or in the user's cache."""

    def probe() -> None:
        """Never called, nor compiled."""

    try:
        njit(cache=True)(probe)
    except RuntimeError:  # numba finds no folder
        return False
    return True


_KEPT = _can_be_kept()
