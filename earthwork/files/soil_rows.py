"""Rows of a table of soil tests as quantities in SI, with every fault and note by row and column."""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass, field

from earthwork.errors import EarthworkError, FileError
from earthwork.files.table_reader import MOST_FAULTS, Row, SourceTable
from earthwork.soils import in_place
from earthwork.units import FOOT_M, POUND_KG, parse_quantity

DENSITY_UNITS = {
    "kg_m3": "kg/m3", "t_m3": "t/m3", "mg_m3": "t/m3", "g_cm3": "g/cm3", "lb_ft3": "lb/ft3", "pcf": "lb/ft3",
    "kn_m3": "kN/m3",
}  # fmt: skip
DENSITY = {suffix: parse_quantity(f"1 {unit}", "density") for suffix, unit in DENSITY_UNITS.items()}
VOLUME = {"cm3": 1e-6, "ml": 1e-6, "l": 1e-3, "m3": 1.0, "ft3": FOOT_M**3, "in3": (FOOT_M / 12) ** 3}
MASS = {"g": 1e-3, "kg": 1.0, "lb": POUND_KG}
LENGTH = {"m": 1.0, "cm": 0.01, "mm": 0.001, "in": FOOT_M / 12, "ft": FOOT_M}

#: Other spellings of the names of quantities, before the unit.
_SPELLINGS = {
    "dry_density": ("dry_density", "dry_unit_weight"),
    "moist_density": ("moist_density", "wet_density", "moist_unit_weight", "wet_unit_weight"),
    "water_content": ("water_content", "moisture_content", "water", "moisture", "w"),
    "mould_volume": ("mould_volume", "mold_volume"),
    "mould_mass": ("mould_mass", "mold_mass"),
    "mould_and_soil_mass": ("mould_and_soil_mass", "mold_and_soil_mass"),
}
GROUP_COLUMNS = ("stratum", "lift", "area", "zone", "layer", "group")
NAME_COLUMNS = ("test", "point", "location", "specimen", "sample", "id", "no", "number")
MATERIAL_COLUMNS = ("material", "soil")
METHOD_COLUMNS = ("method", "effort", "compaction_effort")
#: A density outside this range [kg/m³] is a slip of unit.
_BELIEVED_KG_M3 = (500.0, 3500.0)


@dataclass
class SoilRows:
    """Turns rows to quantities in SI; faults and notes gather here, so that one message names them all."""

    table: SourceTable
    faults: list[str] = field(default_factory=list)
    notes: list[tuple[str, str]] = field(default_factory=list)

    def fault(self, row: Row, column: str, text: str) -> None:
        self.faults.append(f"row {row.number}, column {column}: {text}")

    def column(self, quantity: str, units: dict[str, float]) -> tuple[str, float] | None:
        """(column, factor to SI) of a quantity, None when there is none.

        Raises:
            FileError: two columns of it, or one without a unit.
        """
        found: list[tuple[str, float]] = []
        for base in _SPELLINGS.get(quantity, (quantity,)):
            found += [(f"{base}_{u}", f) for u, f in units.items() if f"{base}_{u}" in self.table.columns]
            if base in self.table.columns:
                known = ", ".join(f"{base}_{u}" for u in units)
                raise FileError(f"{self.table.path}: column {base} has no unit; name it one of {known}")
        if len(found) > 1:
            names = " and ".join(column for column, _ in found)
            raise FileError(f"{self.table.path}: columns {names} give the same quantity; keep one")
        return found[0] if found else None

    def value(self, row: Row, column: str) -> float | None:
        """The number in a cell; a cell that is none becomes a fault."""
        try:
            return self.table.number(row, column)
        except FileError as error:
            self.faults.append(str(error).removeprefix(f"{self.table.path}: "))
            return None

    def quantity(self, row: Row, quantity: str, units: dict[str, float]) -> float | None:
        found = self.column(quantity, units)
        if found is None:
            return None
        value = self.value(row, found[0])
        return None if value is None else value * found[1]

    def optional(self, row: Row, column: str) -> float | None:
        """The number in a column that need not be there."""
        return self.value(row, column) if column in self.table.columns else None

    def percent(self, row: Row, column: str) -> float | None:
        """A share of 0 to 100 % in a column that need not be there."""
        value = self.optional(row, column)
        if value is not None and not 0 <= value <= 100:
            self.fault(row, column, f"{value:g}; it must be 0 to 100 %")
            return None
        return value

    def length(self, row: Row, quantity: str, default_m: float) -> float | None:
        """A length [m]; a column that names no unit is in the unit given."""
        if quantity in self.table.columns:
            value = self.value(row, quantity)
            return None if value is None else value * default_m
        return self.quantity(row, quantity, LENGTH)

    def density(self, row: Row, quantity: str) -> float | None:
        """A density [kg/m³] that can be one of soil."""
        found = self.column(quantity, DENSITY)
        value = self.quantity(row, quantity, DENSITY)
        if found is None or value is None:
            return None
        low, high = _BELIEVED_KG_M3
        if low <= value <= high:
            return value
        number = value / found[1]
        likely = next((n for s, n in DENSITY_UNITS.items() if low <= number * DENSITY[s] <= high), None)
        hint = f"; it looks like {likely}: name the column so" if likely else ""
        self.fault(row, found[0], f"{number:g} is {value:.0f} kg/m³, which no soil has{hint}")
        return None

    def water_content(self, row: Row) -> float | None:
        """Water content [%], from tins where there are some, else from its column."""
        given = self._given_water_content(row)
        tins = [self.quantity(row, name, MASS) for name in ("tin_and_moist_mass", "tin_and_dry_mass", "tin_mass")]
        moist, dry, tin = tins
        if moist is None or dry is None or tin is None:
            return given
        try:
            oven = in_place.oven_water_content_percent(moist, dry, tin)
        except EarthworkError as error:
            self.fault(row, "tin_mass", str(error))
            return None
        if given is not None and abs(given - oven) > 0.2:
            self.fault(row, "water_content", f"{given:g} % is given, but the tins say {oven:.2f} %; keep one")
        return oven

    def _given_water_content(self, row: Row) -> float | None:
        columns = [
            (f"{base}{suffix}", scale)
            for base in _SPELLINGS["water_content"]
            for suffix, scale in (("_percent", 1.0), ("_fraction", 100.0), ("", 1.0))
            if f"{base}{suffix}" in self.table.columns
        ]
        if len(columns) > 1:
            names = " and ".join(name for name, _ in columns)
            raise FileError(f"{self.table.path}: columns {names} give the same quantity; keep one")
        if not columns:
            return None
        column, scale = columns[0]
        value = self.value(row, column)
        if value is None:
            return None
        percent = value * scale
        written = (row.text(column) or "").endswith("%")
        if scale == 100.0 and value > 5:
            self.fault(
                row, column, f"{value:g} looks like percent; name the column {column.removesuffix('_fraction')}_percent"
            )
            return None
        if not 0 <= percent <= 500:
            self.fault(row, column, f"{value:g} is {percent:g} %; a water content must be 0 to 500 % of dry mass")
            return None
        if 0 < percent < 0.5 and scale == 1.0 and not written:
            base = column.removesuffix("_percent")
            self.fault(
                row, column,
                f"{value:g} looks like a fraction, not percent of dry mass; name the column "
                f"{base}_fraction, or "
                f'write "{value:g} %" if it really is that dry',
            )  # fmt: skip
            return None
        return percent

    def place(self, row: Row) -> str:
        return f"{self.table.path.name} row {row.number}"

    def first_text(self, row: Row, columns: tuple[str, ...]) -> str:
        return next((text for column in columns if (text := row.text(column))), "")

    def texts(self, rows: list[Row], columns: tuple[str, ...]) -> list[str]:
        """The different texts that rows have in the first of the columns that is filled."""
        return list(dict.fromkeys(text for row in rows if (text := self.first_text(row, columns))))

    def rows(self, material: str | None, known: Sequence[str] = ()) -> Iterator[Row]:
        """The rows of a material, all when the table names none; exact repeats once.

        Args:
            material: the name; None takes all rows.
            known: names of all materials of the site; rows of another name are noted, since they count for none.
        """
        column = next((c for c in MATERIAL_COLUMNS if c in self.table.columns), None)
        wanted = [
            row for row in self.table.rows
            if column is None or material is None or (row.text(column) or "").lower() == material.lower()
        ]  # fmt: skip
        if not wanted and column is not None:
            there = ", ".join(dict.fromkeys(t for row in self.table.rows if (t := row.text(column))))
            raise FileError(f"{self.table.path}: no row has {column} = {material}; it has {there or 'no names'}")
        if column is not None and material is not None:
            self._note_lost(column, known)
        seen: dict[tuple[tuple[str, str], ...], int] = {}
        doubled = []
        for row in wanted:
            key = tuple(sorted((name, cell.strip()) for name, cell in row.cells.items()))
            if key in seen:
                doubled.append(f"row {row.number} (as row {seen[key]})")
                continue
            seen[key] = row.number
            yield row
        if doubled:
            self.notes.append(
                ("duplicate-rows", f"{self.table.path}: the same in every cell, counted once: {', '.join(doubled)}")
            )

    def _note_lost(self, column: str, known: Sequence[str]) -> None:
        """Say which rows are of no material of the site."""
        names = {name.lower() for name in known}
        lost = []
        for row in self.table.rows:
            text = row.text(column)
            if text is None:
                lost.append(f"{row.number} (no name)")
            elif names and text.lower() not in names:
                lost.append(f"{row.number} ({text})")
        if lost:
            more = f" and {len(lost) - MOST_FAULTS} more" if len(lost) > MOST_FAULTS else ""
            listed = ", ".join(lost[:MOST_FAULTS]) + more
            self.notes.append(
                ("rows-of-no-material", f"{self.table.path}: of no material of the site, and left out: row {listed}")
            )

    def skipped(self, rows: list[Row], what: str) -> None:
        if rows:
            numbers = ", ".join(str(row.number) for row in rows)
            self.notes.append(("rows-without-values", f"{self.table.path}: no {what} in row {numbers}; left out"))

    def finish(self) -> None:
        self.table.refuse(self.faults)
