"""Compiled loops: kept between runs where a folder for them can be written, compiled anew by each run where none can."""

from __future__ import annotations

from functools import partial
from typing import Any

from numba import njit


def _kept() -> bool:
    """Whether compiled code can be kept: beside the code itself, or in the user's cache."""

    def probe() -> None:
        """Never called, nor compiled."""

    try:
        njit(cache=True)(probe)
    except RuntimeError:  # numba finds no folder
        return False
    return True


#: Freedom to reorder sums, so that they run in vectors. Not nnan: no data is NaN, and the loops meet and test for it.
FAST = {"reassoc", "nsz", "contract", "arcp"}

#: ``numba.njit`` of loops that release the lock and divide as numpy does: ``@kernel``, or ``@kernel(fastmath=…)``.
kernel: Any = partial(njit, cache=_kept(), nogil=True, error_model="numpy")
