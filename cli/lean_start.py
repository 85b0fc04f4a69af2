"""A faster start of the one command that is judged by its start."""

from __future__ import annotations

import sys


def load_numba_without_blas() -> None:
    """Load numba without its question for BLAS, which imports all of scipy's linear algebra.

    No kernel that counts volumes calls linear algebra, and the question costs 0.13 s of a pass that takes a second.
    """
    if "scipy.linalg" in sys.modules:
        return
    sys.modules["scipy.linalg"] = None  # type: ignore[assignment]
    try:
        import numba.np.arraymath  # noqa: F401
    finally:
        del sys.modules["scipy.linalg"]
