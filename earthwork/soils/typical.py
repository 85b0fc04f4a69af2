"""Typical values by soil type: the last resort when nothing was tested. Ranges, each with its source.

A middle stands for a guess, and the whole range goes into the uncertainty. Sources disagree: clay swells 27
% in one handbook table and 43 % in another.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import Any

from earthwork.errors import SoilError
from earthwork.units import FOOT_M, POUND_KG

#: The test that the compaction figures of the table are of.
TYPICAL_METHOD = "ASTM D698"
_PCF = POUND_KG / FOOT_M**3
_KN_M3 = 1000 / 9.80665


@dataclass(frozen=True)
class Range:
    """Low and high of a typical value, with its source."""

    low: float
    high: float
    source: str

    @property
    def middle(self) -> float:
        return (self.low + self.high) / 2

    @property
    def sd(self) -> float:
        """Standard deviation of a value that may lie anywhere in the range: width / sqrt(12)."""
        return (self.high - self.low) / math.sqrt(12)


@dataclass(frozen=True, kw_only=True)
class TypicalSoil:
    """Typical values of a soil type. The compaction figures are for standard effort (ASTM D698)."""

    name: str
    symbols: tuple[str, ...]
    specific_gravity: Range
    bank_dry_density_kg_m3: Range
    swell_percent: Range
    max_dry_density_kg_m3: Range | None = None
    optimum_water_content_percent: Range | None = None
    shrink_percent_of_bank: Range | None = None

    def to_dict(self) -> dict[str, Any]:
        row: dict[str, Any] = {"soil": self.name, "symbols": " ".join(self.symbols)}
        for key in (
            "specific_gravity", "bank_dry_density_kg_m3", "swell_percent", "max_dry_density_kg_m3",
            "optimum_water_content_percent", "shrink_percent_of_bank",
        ):  # fmt: skip
            value: Range | None = getattr(self, key)
            row[f"{key}_low"] = value.low if value else None
            row[f"{key}_high"] = value.high if value else None
            row[f"{key}_source"] = value.source if value else None
        return row


def _gravity(low: float, high: float) -> Range:
    return Range(low, high, "DAS")


def _bank(low: float, high: float) -> Range:
    """Natural dry unit weight [kN/m³] to density."""
    return Range(round(low * _KN_M3, -1), round(high * _KN_M3, -1), "DAS")


def _maximum(low: float, high: float) -> Range:
    """Maximum dry unit weight [lb/ft³] to density."""
    return Range(round(low * _PCF, -1), round(high * _PCF, -1), "NAVFAC-DM7")


def _optimum(low: float, high: float) -> Range:
    return Range(low, high, "NAVFAC-DM7")


def _swell(low: float, high: float) -> Range:
    return Range(low, high, "FM-5-434")


#: From memory: [DAS] natural states and specific gravities, [NAVFAC-DM7] table of compacted soils (checked
#: against [FHWA-NHI-05-037], table 5-18), [FM-5-434] soil conversion factors with the range that other
#: handbooks give. Read: how far blasted rock bulks in the fill, [UFC-3-220-20], section 3-4.3.2; its middle
#: is the 1.30 of [FM-5-434]. Sources disagree on the optimum of sand, 5 to 12 (A-3) and 9 to 21 (SW and SP):
#: the range holds both.
TYPICAL: dict[str, TypicalSoil] = {
    soil.name: soil
    for soil in (
        TypicalSoil(name="gravel", symbols=("GW", "GP"), specific_gravity=_gravity(2.63, 2.70),
                    bank_dry_density_kg_m3=_bank(16.0, 19.5), swell_percent=_swell(10, 16),
                    max_dry_density_kg_m3=_maximum(115, 135), optimum_water_content_percent=_optimum(8, 14)),
        TypicalSoil(name="silty gravel", symbols=("GM", "GC"), specific_gravity=_gravity(2.63, 2.72),
                    bank_dry_density_kg_m3=_bank(16.0, 19.5), swell_percent=_swell(10, 25),
                    max_dry_density_kg_m3=_maximum(115, 135), optimum_water_content_percent=_optimum(8, 14)),
        TypicalSoil(name="sand", symbols=("SW", "SP"), specific_gravity=_gravity(2.63, 2.67),
                    bank_dry_density_kg_m3=_bank(14.5, 18.0), swell_percent=_swell(10, 15),
                    max_dry_density_kg_m3=_maximum(100, 130),
                    optimum_water_content_percent=Range(5, 21, "FHWA-NHI-05-037, NAVFAC-DM7")),
        TypicalSoil(name="silty sand", symbols=("SM", "SC-SM"), specific_gravity=_gravity(2.63, 2.70),
                    bank_dry_density_kg_m3=_bank(15.0, 19.0), swell_percent=_swell(11, 25),
                    max_dry_density_kg_m3=_maximum(110, 130), optimum_water_content_percent=_optimum(11, 16)),
        TypicalSoil(name="clayey sand", symbols=("SC",), specific_gravity=_gravity(2.65, 2.72),
                    bank_dry_density_kg_m3=_bank(15.0, 18.5), swell_percent=_swell(15, 30),
                    max_dry_density_kg_m3=_maximum(105, 125), optimum_water_content_percent=_optimum(11, 19)),
        TypicalSoil(name="silt", symbols=("ML", "CL-ML"), specific_gravity=_gravity(2.65, 2.70),
                    bank_dry_density_kg_m3=_bank(13.5, 16.5), swell_percent=_swell(20, 35),
                    max_dry_density_kg_m3=_maximum(95, 120), optimum_water_content_percent=_optimum(12, 24)),
        TypicalSoil(name="loess", symbols=("ML", "CL"), specific_gravity=_gravity(2.60, 2.72),
                    bank_dry_density_kg_m3=_bank(11.8, 15.2), swell_percent=_swell(20, 40),
                    max_dry_density_kg_m3=_maximum(100, 115), optimum_water_content_percent=_optimum(13, 20)),
        TypicalSoil(name="lean clay", symbols=("CL",), specific_gravity=_gravity(2.67, 2.75),
                    bank_dry_density_kg_m3=_bank(14.0, 17.5), swell_percent=_swell(25, 43),
                    max_dry_density_kg_m3=_maximum(95, 120), optimum_water_content_percent=_optimum(12, 24)),
        TypicalSoil(name="fat clay", symbols=("CH",), specific_gravity=_gravity(2.68, 2.80),
                    bank_dry_density_kg_m3=_bank(11.5, 16.0), swell_percent=_swell(27, 43),
                    max_dry_density_kg_m3=_maximum(75, 105), optimum_water_content_percent=_optimum(19, 36)),
        TypicalSoil(name="glacial till", symbols=("SC", "CL", "GC"), specific_gravity=_gravity(2.68, 2.75),
                    bank_dry_density_kg_m3=_bank(17.5, 21.0), swell_percent=_swell(20, 35),
                    max_dry_density_kg_m3=_maximum(115, 135), optimum_water_content_percent=_optimum(8, 14)),
        TypicalSoil(name="topsoil", symbols=("OL",), specific_gravity=_gravity(2.55, 2.68),
                    bank_dry_density_kg_m3=_bank(10.0, 14.0), swell_percent=_swell(20, 45)),
        TypicalSoil(name="weathered rock", symbols=(), specific_gravity=_gravity(2.60, 2.75),
                    bank_dry_density_kg_m3=_bank(18.5, 22.5), swell_percent=_swell(30, 50),
                    shrink_percent_of_bank=Range(-15, 5, "FM-5-434")),
        TypicalSoil(name="blasted rock", symbols=(), specific_gravity=_gravity(2.60, 2.80),
                    bank_dry_density_kg_m3=_bank(22.5, 26.0), swell_percent=_swell(50, 75),
                    shrink_percent_of_bank=Range(-50, -10, "UFC-3-220-20")),
    )
}  # fmt: skip


def typical_soil(name: str) -> TypicalSoil:
    """The typical values of a soil type.

    Raises:
        SoilError: an unknown type; the message lists the known ones.

    >>> typical_soil("lean clay").swell_percent.middle
    34.0
    """
    if name not in TYPICAL:
        raise SoilError(f"typical = {name!r}: not a type of the table; it must be one of {', '.join(TYPICAL)}")
    return TYPICAL[name]
