"""Grids of numbers packed for a page: whole steps, predicted from their neighbours, in bytes that deflate well.

A plane is coded as the difference of each cell from ``west + north − north-west``, folded into an unsigned number
(0, −1, 1, −2 … become 0, 1, 2, 3 …) and written as three runs of bytes, the lowest first; all of it is deflated and
written as base64. Smooth ground then takes well under two bytes a cell, and decoding is one loop.
"""

from __future__ import annotations

import base64
import zlib
from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np

#: A plane may span this many steps.
_MOST_STEPS = 1 << 22


@dataclass(frozen=True)
class Plane:
    """A packed grid: value = offset + step × whole number."""

    step: float
    offset: int
    data: str

    def to_dict(self) -> dict[str, float | int | str]:
        return {"step": self.step, "offset": self.offset, "data": self.data}


def pack(whole: np.ndarray, step: float) -> Plane:
    """Pack a grid of whole numbers.

    Args:
        whole: integers, shape (rows, columns); they may span four million.
        step: what one of them stands for.

    Raises:
        ValueError: the numbers span more.

    >>> plane = pack(np.array([[5, 6], [7, 9]]), 0.01)
    >>> unpack(plane, 2, 2).tolist()
    [[5, 6], [7, 9]]
    """
    offset = int(whole.min()) if whole.size else 0
    values = whole.astype(np.int64) - offset
    if values.size and int(values.max()) >= _MOST_STEPS:
        raise ValueError(f"a plane spans {int(values.max()):,} steps; it must be under {_MOST_STEPS:,}")
    padded = np.zeros((values.shape[0] + 1, values.shape[1] + 1), dtype=np.int64)
    padded[1:, 1:] = values
    residual = padded[1:, 1:] - padded[1:, :-1] - padded[:-1, 1:] + padded[:-1, :-1]
    folded = np.where(residual < 0, -2 * residual - 1, 2 * residual).ravel()
    planes = np.concatenate([(folded >> shift) & 255 for shift in (0, 8, 16, 24)]).astype(np.uint8)
    return Plane(step, offset, base64.b64encode(zlib.compress(planes.tobytes(), 7)).decode("ascii"))


def unpack(plane: Plane, rows: int, columns: int) -> np.ndarray:
    """The whole numbers of a plane, as the page decodes them."""
    raw = np.frombuffer(zlib.decompress(base64.b64decode(plane.data)), dtype=np.uint8).astype(np.int64)
    parts = raw.reshape(4, rows, columns)
    folded = parts[0] | parts[1] << 8 | parts[2] << 16 | parts[3] << 24
    residual = np.where(folded & 1, -(folded + 1) // 2, folded // 2)
    return residual.cumsum(axis=0).cumsum(axis=1) + plane.offset


def whole_steps(values: np.ndarray, step: float) -> np.ndarray:
    """Values in whole steps; a cell without data takes the last one before it, which costs nothing to code."""
    known = np.isfinite(values).ravel()
    flat = values.ravel()
    if not known.any():
        return np.zeros(values.shape, dtype=np.int64)
    last = np.maximum.accumulate(np.where(known, np.arange(known.size), -1))
    filled = flat[np.where(last < 0, int(np.flatnonzero(known)[0]), last)]
    return np.rint(filled / step).astype(np.int64).reshape(values.shape)


def packed_size(planes: Mapping[str, Plane]) -> int:
    """Characters that planes take in a page."""
    return sum(len(plane.data) for plane in planes.values())
