"""Pictures in the page: embedded, with a caption and a text for those who do not see them."""

from __future__ import annotations

import base64
import struct
from dataclasses import dataclass
from pathlib import Path

#: By name of the file: caption, and what it shows in words. ``*`` stands for a material or a pad.
_KNOWN: dict[str, tuple[str, str]] = {
    "volumes_map": (
        "Cut and fill",
        "Map of cut and fill: cut is brown and hatched, fill is teal, with the zero line, zones and spot depths. "
        "The volumes by zone are in the table of quantities.",
    ),
    "balance_curve": (
        "What a shift of grade does",
        "Chart of the surplus of compacted fill against the shift of the grade that may move; it falls as the grade "
        "rises. The grade shift in the answer box is where it meets the surplus wanted.",
    ),
    "lifts_chart": ("Lifts by elevation", "Chart of area and volume of the lifts against elevation; see the lifts."),
    "water_days": ("Water by day", "Chart of the water of each day by its parts, with the supply; see water by day."),
    "water_tank": ("Tank level", "Chart of the water in the tank over the days."),
    "haul_map": (
        "Haul",
        "Map of the moves of earth, drawn along their ways, wider where more is moved; the moves are in the table.",
    ),
    "haul_mass_curve": ("Mass curve", "Chart of the mass curve along the baseline."),
    "pads_map": ("Pads", "Map of the pads by class with the thickness of fill under them; the pads are in the table."),
}


@dataclass(frozen=True)
class Picture:
    file: str
    caption: str
    alt: str
    data: str
    width: int
    height: int


def pictures_of(command: str, directory: Path) -> list[Picture]:
    """The pictures that a command has drawn into a folder, by name."""
    return [picture(path) for path in sorted(directory.glob(f"{command}_*.png"))]


def picture(path: Path) -> Picture:
    """A PNG as a data address."""
    raw = path.read_bytes()
    width, height = struct.unpack(">II", raw[16:24])
    words = path.stem.split("_", 1)[-1].replace("_", " ").replace("-", " ")
    command = path.stem.split("_", 1)[0]
    caption, alt = _KNOWN.get(
        path.stem,
        (words[:1].upper() + words[1:], f"Picture of {command}: {words}. Its figures are in the tables here."),
    )
    if command == "soil":
        caption = f"Compaction chart: {words.removeprefix('chart ').removeprefix('compaction ')}"
        alt = (
            f"{caption}. Dry density against water content with test points, fitted curve, zero air voids line and "
            "placing window; the figures are in the soil card."
        )
    data = "data:image/png;base64," + base64.b64encode(raw).decode("ascii")
    return Picture(path.name, caption, alt, data, width, height)
