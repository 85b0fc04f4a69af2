"""Laboratory and field tests as they are handed over: one record per row of a file, in SI, with its place."""

from __future__ import annotations

from dataclasses import dataclass


@dataclass(frozen=True)
class CurvePoint:
    """A point of a compaction curve.

    ``place`` says where it was read (``proctor.csv row 4``), for messages; it may be empty.
    """

    water_content_percent: float
    dry_density_kg_m3: float
    place: str = ""
    specimen: str = ""
    method: str = ""


@dataclass(frozen=True)
class DensityTest:
    """An in-place density test; water content None where only the dry density was reported."""

    dry_density_kg_m3: float
    water_content_percent: float | None = None
    place: str = ""
    name: str = ""
    group: str = ""  #: stratum, lift or area that the crew notes
    method: str = ""
    material: str = ""  #: as its row names it; empty where the place has to tell
    oversize_percent: float | None = None  #: in this test's own soil; None takes the material's
    depth_m: float | None = None
    easting: float | None = None
    northing: float | None = None
    elevation_m: float | None = None

    @property
    def placed(self) -> bool:
        """Whether it says where it was taken: in plan, and how deep."""
        deep = self.elevation_m is not None or self.depth_m is not None
        return self.easting is not None and self.northing is not None and deep

    @property
    def label(self) -> str:
        """Its name, else its place."""
        return self.name or self.place or f"{self.dry_density_kg_m3:.0f} kg/m³"


@dataclass(frozen=True)
class MaterialTests:
    """All tests of one material; an empty tuple where the site names no file."""

    curve: tuple[CurvePoint, ...] = ()
    bank: tuple[DensityTest, ...] = ()
    field: tuple[DensityTest, ...] = ()
    notes: tuple[tuple[str, str], ...] = ()  #: (warning code, message) of the reading
