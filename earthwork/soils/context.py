"""What the parts of a card share while it is made: the tables of its material, and where faults gather."""

from __future__ import annotations

from dataclasses import dataclass, field

from earthwork.errors import Warning
from earthwork.site.model import Fill, Material
from earthwork.soils.records import MaterialTests
from earthwork.soils.typical import Range, TypicalSoil
from earthwork.units import UnitSystem


def in_si(density_kg_m3: float) -> str:
    """A density as text in kg/m³: what pure functions say where nobody asks for another unit."""
    return f"{density_kg_m3:.0f} kg/m³"


def density_text(density_kg_m3: float, units: UnitSystem) -> str:
    """A density as text, in the unit of a site."""
    digits = 1 if units.name == "us" else 0
    return f"{units.from_si(density_kg_m3, 'density'):.{digits}f} {units.label('density')}"


@dataclass
class Context:
    """One card in the making: faults, warnings and assumptions gather here, so that one message names them all."""

    name: str
    material: Material
    fill: Fill
    units: UnitSystem
    tests: MaterialTests
    typical: TypicalSoil | None = None
    faults: list[str] = field(default_factory=list)
    warnings: list[Warning] = field(default_factory=list)
    assumed: list[str] = field(default_factory=list)

    def key(self, key: str = "") -> str:
        """The full name of a key of the material."""
        return f"material.{self.name}{'.' if key else ''}{key}"

    def fault(self, key: str, text: str) -> None:
        self.faults.append(f"{self.key(key)}: {text}")

    def warn(self, code: str, key: str, text: str) -> None:
        self.note(Warning(code, f"{self.key(key)}: {text}"))

    def note(self, warning: Warning) -> None:
        if warning not in self.warnings:
            self.warnings.append(warning)

    def assume(self, *names: str) -> None:
        self.assumed += [name for name in names if name not in self.assumed]

    def density(self, value: float) -> str:
        """A density as text, in the site's unit."""
        return density_text(value, self.units)

    def length(self, value: float) -> str:
        return f"{self.units.from_si(value, 'length'):g} {self.units.label('length')}"

    def guess(self, figure: str, key: str, typical: Range, shown: str) -> float:
        """The middle of a typical range, labelled and warned about."""
        assert self.typical is not None
        self.assume(figure)
        self.warn(
            "typical-value", key,
            f"not given; {shown} is the middle of what {self.typical.name} has ([{typical.source}]). "
            "It is a guess until a test replaces it",
        )  # fmt: skip
        return typical.middle
