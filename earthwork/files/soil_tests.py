"""Reads laboratory and field tests of soils: compaction points, bench data, in-place densities.

Column names are those of docs/soil-tests.md; a unit in the name or in a unit row under the header decides,
and figures that look like another unit, a fraction for a percentage or a moist density are refused with row
and column.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass
from functools import partial
from pathlib import Path

from earthwork.errors import EarthworkError, FileError
from earthwork.files.soil_rows import (
    DENSITY,
    GROUP_COLUMNS,
    MASS,
    MATERIAL_COLUMNS,
    METHOD_COLUMNS,
    NAME_COLUMNS,
    VOLUME,
    SoilRows,
)
from earthwork.files.table_reader import Row, read_source_table
from earthwork.site import Site
from earthwork.soils import in_place, phase
from earthwork.soils.effort import same_method
from earthwork.soils.located import waiting_tests
from earthwork.soils.records import CurvePoint, DensityTest, MaterialTests

#: Share by which a dry density may differ from what the moist one in its row says, as rounding does.
_SAME_DENSITY = 0.01


@dataclass(frozen=True)
class Reading:
    """Records of a file, and what was said while they were read: (warning code, message)."""

    points: tuple[CurvePoint, ...] = ()
    tests: tuple[DensityTest, ...] = ()
    notes: tuple[tuple[str, str], ...] = ()


def read_compaction_points(
    path: Path, *, material: str | None = None, method: str | None = None, known: Sequence[str] = ()
) -> Reading:
    """Points of a compaction curve, or raw bench data reduced to points.

    Args:
        path: a CSV with ``water_content_percent`` and ``dry_density_kg_m3``; or ``moist_density_*``; or the
            bench data ``mould_volume_cm3``, ``mould_mass_g``, ``mould_and_soil_mass_g`` with
            ``tin_mass_g``, ``tin_and_moist_mass_g`` and ``tin_and_dry_mass_g`` (other units by other
            endings).
        material: the rows to take where a column ``material`` says.
        method: the rows to take where a column ``method`` says; efforts are never mixed.
        known: names of all materials of the site; rows of other names are noted.

    Raises:
        FileError: the message lists every fault with row and column.
    """
    reader = SoilRows(read_source_table(path))
    rows = _of_method(reader, list(reader.rows(material, known)), method)
    density = _density_reader(reader, _CURVE_WAYS)
    points: list[CurvePoint] = []
    empty: list[Row] = []
    for row in rows:
        before = len(reader.faults)
        water = reader.water_content(row)
        dry = density(row, water)
        if water is None or dry is None:
            if len(reader.faults) == before:
                empty.append(row)
            continue
        points.append(
            CurvePoint(
                water_content_percent=water,
                dry_density_kg_m3=dry,
                place=reader.place(row),
                specimen=reader.first_text(row, NAME_COLUMNS),
                method=reader.first_text(row, METHOD_COLUMNS),
            )
        )
    reader.skipped(empty, "water content or density")
    reader.finish()
    return Reading(points=tuple(points), notes=tuple(reader.notes))


def read_density_tests(
    path: Path, *, material: str | None = None, length_m: float = 1.0, known: Sequence[str] = ()
) -> Reading:
    """In-place density tests, raw readings reduced.

    Args:
        path: a CSV with ``dry_density_*``; or ``moist_density_*`` with a water content; or the readings of
            a sand cone (``hole_soil_mass_*``, ``sand_used_mass_*``, ``cone_sand_mass_*``,
            ``sand_density_*``), a drive cylinder (``cylinder_volume_*``, ``cylinder_mass_*``,
            ``cylinder_and_soil_mass_*``) or a nuclear gauge (``moist_density_*``, ``gauge_water_*``,
            ``gauge_water_offset_*``).
        material: the rows to take where a column ``material`` says.
        length_m: the unit of depths and elevations whose column names none [m].
        known: names of all materials of the site; rows of other names are noted.

    Raises:
        FileError: the message lists every fault with row and column.
    """
    reader = SoilRows(read_source_table(path))
    density = _density_reader(reader, _FIELD_WAYS)
    tests: list[DensityTest] = []
    empty: list[Row] = []
    for row in reader.rows(material, known):
        before = len(reader.faults)
        water = reader.water_content(row)
        gauge = _gauge(reader, row) if water is None else None
        doubted = len(reader.faults) > before
        dry = gauge.dry_density_kg_m3 if gauge else None if doubted else density(row, water)
        if dry is None:
            if len(reader.faults) == before:
                empty.append(row)
            continue
        tests.append(
            DensityTest(
                dry_density_kg_m3=dry,
                water_content_percent=gauge.water_content_percent if gauge else water,
                place=reader.place(row),
                name=reader.first_text(row, NAME_COLUMNS),
                group=reader.first_text(row, GROUP_COLUMNS),
                method=reader.first_text(row, METHOD_COLUMNS),
                material=reader.first_text(row, MATERIAL_COLUMNS),
                oversize_percent=reader.percent(row, "oversize_percent"),
                depth_m=_depth(reader, row, length_m),
                easting=reader.optional(row, "easting"),
                northing=reader.optional(row, "northing"),
                elevation_m=reader.length(row, "elevation", length_m),
            )
        )
    reader.skipped(empty, "density")
    reader.finish()
    return Reading(tests=tuple(tests), notes=tuple(reader.notes))


def _depth(reader: SoilRows, row: Row, length_m: float) -> float | None:
    depth = reader.length(row, "depth", length_m)
    if depth is not None and depth < 0:
        reader.fault(row, "depth", "it is less than 0; depths count down from the ground. Heights go into elevation")
        return None
    return depth


def material_and_method(
    path: Path, *, material: str | None = None, any_method: bool = False
) -> tuple[str | None, str | None]:
    """The one material and the one method that a file of compaction points names; None where it names none.

    Args:
        path: the CSV.
        material: the rows to look at, where the file has several materials.
        any_method: a method is chosen already, and the file may have several.

    Raises:
        FileError: several materials and none chosen, or several efforts.
    """
    reader = SoilRows(read_source_table(path))
    if material is None:
        named = reader.texts(list(reader.table.rows), MATERIAL_COLUMNS)
        if len(named) > 1:
            raise FileError(f"{path}: points of {', '.join(named)}; say which material to take")
        material = named[0] if named else None
    methods = _efforts(reader.texts(list(reader.rows(material)), METHOD_COLUMNS))
    if len(methods) > 1 and not any_method:
        raise FileError(f"{path}: points of {' and '.join(methods)}; efforts are never mixed: say which method to take")
    return material, methods[0] if methods else None


def _efforts(names: list[str]) -> list[str]:
    """The first name of each effort."""
    kinds: list[str] = []
    for name in names:
        if not any(same_method(name, kind) for kind in kinds):
            kinds.append(name)
    return kinds


def _of_method(reader: SoilRows, rows: list[Row], method: str | None) -> list[Row]:
    """The rows of a method; refuses a file with several when none is named."""
    named = {row.number: reader.first_text(row, METHOD_COLUMNS) for row in rows}
    kinds = _efforts([name for name in named.values() if name])
    if not kinds or (method is None and len(kinds) == 1):
        return rows
    if method is None:
        raise FileError(
            f"{reader.table.path}: points of {' and '.join(kinds)}; efforts are never mixed: say which method to take"
        )
    kept = [row for row in rows if not named[row.number] or same_method(named[row.number], method)]
    if not [row for row in kept if named[row.number]]:
        raise FileError(
            f"{reader.table.path}: no point is of {method}; the file has {', '.join(kinds)}. Maximum and "
            "optimum hold "
            "for their own method only"
        )
    unnamed = [str(row.number) for row in kept if not named[row.number]]
    if len(kinds) > 1 and unnamed:
        raise FileError(
            f"{reader.table.path}: row {', '.join(unnamed)} names no method in a file with several; name it"
        )
    return kept


_Way = tuple[tuple[tuple[str, dict[str, float]], ...], Callable[..., float]]
_FROM_MOULD: _Way = (
    (("mould_and_soil_mass", MASS), ("mould_mass", MASS), ("mould_volume", VOLUME)),
    in_place.drive_cylinder_moist_density,
)
_FROM_CYLINDER: _Way = (
    (("cylinder_and_soil_mass", MASS), ("cylinder_mass", MASS), ("cylinder_volume", VOLUME)),
    in_place.drive_cylinder_moist_density,
)
_FROM_CONE: _Way = (
    (("hole_soil_mass", MASS), ("sand_used_mass", MASS), ("cone_sand_mass", MASS), ("sand_density", DENSITY)),
    in_place.sand_cone_moist_density,
)
_CURVE_WAYS: tuple[_Way, ...] = (_FROM_MOULD, _FROM_CYLINDER)
_FIELD_WAYS: tuple[_Way, ...] = (_FROM_CONE, _FROM_CYLINDER)


def _density_reader(reader: SoilRows, ways: tuple[_Way, ...]) -> Callable[[Row, float | None], float | None]:
    """How the dry density of a row is had, by the columns that are there."""
    has_dry = reader.column("dry_density", DENSITY) is not None
    has_moist = reader.column("moist_density", DENSITY) is not None
    raw = [way for way in ways if all(reader.column(name, units) for name, units in way[0])]
    if not (has_dry or has_moist or raw):
        have = ", ".join(reader.table.columns)
        raise FileError(
            f"{reader.table.path}: no density: it needs a column dry_density_kg_m3 (or _lb_ft3), or "
            "moist_density_kg_m3 "
            f"with water_content_percent, or raw readings. Its columns are {have}. "
            "A bulk density may be moist or dry: name it so"
        )

    def read(row: Row, water: float | None) -> float | None:
        dry = reader.density(row, "dry_density") if has_dry else None
        moist = reader.density(row, "moist_density") if has_moist else None
        if dry is not None:
            _same_density(reader, row, dry, moist, water)
            return dry
        for inputs, reduce in raw if moist is None else ():
            values = [reader.quantity(row, name, units) for name, units in inputs]
            if all(value is not None for value in values):
                try:
                    moist = reduce(*values)
                except EarthworkError as error:
                    reader.fault(row, inputs[0][0], str(error))
                    return None
        if moist is None:
            return None
        if water is None:
            reader.fault(row, "water_content_percent", "missing; a moist density needs it to become dry")
            return None
        return float(phase.dry_density(moist, water))

    return read


def _same_density(reader: SoilRows, row: Row, dry: float, moist: float | None, water: float | None) -> None:
    """A row that gives dry and moist density must mean one soil; the rounding of either may differ."""
    if moist is None or water is None:
        return
    dried = float(phase.dry_density(moist, water))
    if abs(dried - dry) > _SAME_DENSITY * dry:
        reader.fault(
            row, "dry_density",
            f"{dry:.0f} kg/m³ is given, but the moist density {moist:.0f} kg/m³ at {water:g} % is {dried:.0f} kg/m³ "
            "dry; keep the right one",
        )  # fmt: skip


def _gauge(reader: SoilRows, row: Row) -> in_place.GaugeReduction | None:
    """A nuclear gauge reading with the gauge's own water; None where the row has none."""
    if reader.column("gauge_water", DENSITY) is None:
        return None
    moist, water = reader.density(row, "moist_density"), reader.quantity(row, "gauge_water", DENSITY)
    if moist is None or water is None:
        return None
    offset = reader.quantity(row, "gauge_water_offset", DENSITY) or 0.0
    try:
        return in_place.reduce_gauge(moist, water, water_offset=offset)
    except EarthworkError as error:
        reader.fault(row, "gauge_water", str(error))
        return None


def read_site_tests(site: Site) -> dict[str, MaterialTests]:
    """All tests that the materials of a site name, read.

    Raises:
        FileError: the message lists the faults of every file.
    """
    found: dict[str, MaterialTests] = {}
    faults: list[str] = []
    for name in site.model.material:
        sources = _sources(site, name)
        readings: dict[str, Reading] = {}
        for kind, reading in sources.items():
            try:
                readings[kind] = reading()
            except FileError as error:
                faults.append(str(error))
        notes = tuple(note for reading in readings.values() for note in reading.notes)
        none = Reading()
        found[name] = MaterialTests(
            readings.get("curve", none).points,
            readings.get("bank", none).tests,
            readings.get("field", none).tests,
            notes,
        )
    faults = faults or _shared_faults(site, found)
    if faults:
        raise FileError("\n".join(dict.fromkeys(faults)))
    return found


def _shared_faults(site: Site, found: dict[str, MaterialTests]) -> list[str]:
    """Files of in-place tests that several materials name, with rows that tell no material and no place."""
    owners: dict[tuple[str, Path], list[str]] = {}
    for name, material in site.model.material.items():
        if material.bank.tests is not None:
            owners.setdefault(("bank", site.resolve(material.bank.tests)), []).append(name)
        if material.field is not None:
            owners.setdefault(("field", site.resolve(material.field.tests)), []).append(name)
    faults = []
    for (kind, path), names in owners.items():
        lost = [place for name in names for place in _untold(site, name, found[name], kind)]
        if len(names) > 1 and lost:
            way = "" if kind == "field" else ", or easting, northing and elevation of each test (and the strata)"
            faults.append(
                f"{path}: the tests of {' and of '.join(names)}, but {lost[0]} does not say which it is "
                f"of; add a column material{way}"
            )
    return faults


def _untold(site: Site, name: str, tests: MaterialTests, kind: str) -> list[str]:
    """Places of the tests that neither their row nor the ground gives to a material."""
    told = set(waiting_tests(site.model, name, tests)) if kind == "bank" else set()
    return [test.place for test in getattr(tests, kind) if not test.material and test not in told]


def _sources(site: Site, name: str) -> dict[str, Callable[[], Reading]]:
    """What to read for a material, by kind."""
    material = site.model.material[name]
    known = tuple(site.model.material)
    sources: dict[str, Callable[[], Reading]] = {}
    density_tests = partial(read_density_tests, material=name, length_m=site.units.factor("length"), known=known)
    if material.proctor is not None and material.proctor.tests is not None:
        path, method = site.resolve(material.proctor.tests), material.proctor.method
        sources["curve"] = partial(read_compaction_points, path, material=name, method=method, known=known)
    if material.bank.tests is not None:
        sources["bank"] = partial(density_tests, site.resolve(material.bank.tests))
    if material.field is not None:
        sources["field"] = partial(density_tests, site.resolve(material.field.tests))
    return sources
