"""Points for stake-out: number, northing, easting, elevation, description, one a line."""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass
from pathlib import Path


@dataclass(frozen=True)
class StakePoint:
    """A point to be set out; coordinates and elevation in the unit of the CRS."""

    northing: float
    easting: float
    elevation: float
    description: str


def write_pnezd(path: Path, points: Iterable[StakePoint], *, first: int = 1) -> None:
    """Write points as comma-separated text without a header, numbered from ``first``, with four decimals."""
    with open(path, "w", encoding="ascii", newline="\r\n") as file:
        for number, p in enumerate(points, start=first):
            file.write(f"{number},{p.northing:.4f},{p.easting:.4f},{p.elevation:.4f},{plain_code(p.description)}\n")


def plain_code(text: str) -> str:
    """A description that controllers and spreadsheets take: ASCII, without commas, at most 60 characters.

    >>> plain_code("=Haus, Süd")
    'Haus Sd'
    """
    kept = "".join(c if c.isascii() and (c.isalnum() or c in " .-_/()") else "" for c in text)
    return " ".join(kept.split()).lstrip("-= ")[:60]
