"""The analysis grid: where cells lie, how large they are on the ground, and windows of it."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any


@dataclass(frozen=True)
class Window:
    """A rectangle of cells: rows ``[row, row + height)``, columns ``[column, column + width)``."""

    row: int
    column: int
    height: int
    width: int


@dataclass(frozen=True)
class Grid:
    """A north-up grid of rectangular cells; row 0 is north, (0, 0) is the corner of the first cell.

    Args:
        rows, columns: shape.
        west, north: coordinates of the outer corner of the first cell [CRS unit].
        cell_east, cell_north: sides of a cell [CRS unit], both > 0.
        unit_m: metres in one CRS unit (0.3048006… for US survey feet).
        ground_scale: ground length / map length.
        crs: a ``pyproj.CRS``, or None for a local grid.
    """

    rows: int
    columns: int
    west: float
    north: float
    cell_east: float
    cell_north: float
    unit_m: float = 1.0
    ground_scale: float = 1.0
    crs: Any = None

    @property
    def cell_east_m(self) -> float:
        """Side of a cell along east, on the ground [m]."""
        return self.cell_east * self.unit_m * self.ground_scale

    @property
    def cell_north_m(self) -> float:
        """Side of a cell along north, on the ground [m]."""
        return self.cell_north * self.unit_m * self.ground_scale

    @property
    def cell_area_m2(self) -> float:
        """Ground area of a cell [m²].

        >>> Grid(10, 10, 0, 0, 2.0, 3.0, ground_scale=0.5).cell_area_m2
        1.5
        """
        return self.cell_east_m * self.cell_north_m

    @property
    def bounds(self) -> tuple[float, float, float, float]:
        """(west, south, east, north) [CRS unit]."""
        return (
            self.west,
            self.north - self.rows * self.cell_north,
            self.west + self.columns * self.cell_east,
            self.north,
        )

    @property
    def window(self) -> Window:
        """The whole grid as a window."""
        return Window(0, 0, self.rows, self.columns)

    def point(self, row: float, column: float) -> tuple[float, float]:
        """(easting, northing) [CRS unit] of a place in cells; (0.5, 0.5) is the centre of the first cell."""
        return self.west + column * self.cell_east, self.north - row * self.cell_north

    def cell(self, easting: float, northing: float) -> tuple[float, float]:
        """(row, column) in cells, with fractions, of a place [CRS unit]."""
        return (self.north - northing) / self.cell_north, (easting - self.west) / self.cell_east
