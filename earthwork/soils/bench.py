"""The lab bench: compaction curves alone, of a site's materials or straight from a file of points."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import TYPE_CHECKING, Any, Literal

from earthwork.errors import SiteFileError, SoilError, Warning
from earthwork.results import Result
from earthwork.site import Site, check_site
from earthwork.soils import phase
from earthwork.soils.context import density_text
from earthwork.soils.curve import CompactionCurve, Form, fit_curve
from earthwork.soils.inputs import ASSUMED_GRAVITY
from earthwork.soils.records import MaterialTests

if TYPE_CHECKING:
    import pandas

#: Relative compactions [%] that the card lists, with the dry density and the room for water of each.
LISTED_COMPACTIONS = (90.0, 92.0, 95.0, 98.0, 100.0)


@dataclass(frozen=True, kw_only=True)
class ProctorResult(Result):
    """Compaction curves by material."""

    curves: tuple[tuple[str, CompactionCurve], ...]

    def __getitem__(self, material: str) -> CompactionCurve:
        """The curve of a material by its name."""
        return dict(self.curves)[material]

    def to_dict(self) -> dict[str, Any]:
        return {
            "curves": [
                {
                    "material": name,
                    "specific_gravity": curve.specific_gravity,
                    **curve.to_dict(),
                    "points": curve.point_rows(),
                    "compactions": _compactions(curve),
                }
                for name, curve in self.curves
            ]
        }

    def tables(self) -> dict[str, pandas.DataFrame]:
        """``proctor``: a row per material; ``points``, ``fits`` and ``compactions`` of each."""
        import pandas

        curves = self.to_dict()["curves"]
        lists = ("points", "fits", "compactions")
        main = [{k: v for k, v in curve.items() if k not in lists} for curve in curves]
        for row in main:
            row["left_out"] = "; ".join(row["left_out"])
        parts = {
            name: pandas.DataFrame([{"material": c["material"], **row} for c in curves for row in c[name]])
            for name in lists
        }
        return {"proctor": pandas.DataFrame(main), **parts}


def _compactions(curve: CompactionCurve) -> list[dict[str, Any]]:
    """Dry density at usual relative compactions, the most water it has room for, and where the curve crosses it."""
    rows = []
    for percent in LISTED_COMPACTIONS:
        density = curve.max_dry_density_kg_m3 * percent / 100
        room = phase.zero_air_voids_water_content_percent(density, curve.specific_gravity)
        rows.append(
            {
                "relative_compaction_percent": percent,
                "dry_density_kg_m3": density,
                "zero_air_voids_water_content_percent": float(room),
            }
        )
    return rows


def proctor(site: Site, tests: Mapping[str, MaterialTests] | None = None) -> ProctorResult:
    """Compaction curves of the materials of a site that have points; nothing else of their cards is needed.

    Raises:
        SiteFileError: no material has ``proctor.tests``.
        FileError: a file of points that cannot be read.
        SoilError: points that make no curve; the message lists every fault.
    """
    from earthwork.files.soil_tests import read_site_tests

    names = [n for n, m in site.model.material.items() if m.proctor is not None and m.proctor.tests is not None]
    if not names:
        raise SiteFileError(f"{site.path or 'site'}: no material has proctor.tests; name a CSV of the points there")
    found = read_site_tests(site) if tests is None else tests
    curves: list[tuple[str, CompactionCurve]] = []
    warnings: list[Warning] = []
    faults: list[str] = []
    for name in names:
        material = site.model.material[name]
        assert material.proctor is not None
        where = f"material.{name}.proctor.tests"
        gravity = material.specific_gravity
        if gravity is None:
            gravity = ASSUMED_GRAVITY["fill"]
            warnings.append(
                Warning(
                    "specific-gravity-assumed",
                    f"{where}: no specific gravity given; {gravity:.2f} is assumed. Zero air voids and "
                    "saturation rest on it",
                )
            )
        warnings += [Warning(code, message) for code, message in found[name].notes]
        try:
            curve = fit_curve(
                found[name].curve, specific_gravity=gravity, method=material.proctor.method,
                form=material.proctor.fit, where=where,
                show=lambda value: density_text(value, site.units),
            )  # fmt: skip
        except SoilError as error:
            faults.append(str(error))
            continue
        curves.append((name, curve))
        warnings += curve.warnings
    if faults:
        raise SoilError("\n".join(faults))
    return ProctorResult(units=site.units, warnings=tuple(warnings), curves=tuple(curves))


def site_of_points(
    points: str | Path,
    *,
    specific_gravity: float | None = None,
    method: str | None = None,
    material: str | None = None,
    form: Form = "auto",
    units: Literal["metric", "us"] = "metric",
) -> Site:
    """A site of one material and nothing but its compaction points, for the lab bench.

    Args:
        points: the CSV; see :func:`earthwork.files.soil_tests.read_compaction_points`.
        specific_gravity: of the grains; 2.68 is assumed, with a warning, when not given.
        method: the standard; the file's own when it has a column ``method`` of one effort.
        material: the rows to take where the file has several materials; names the result.
        form: form of the curve.
        units: to show it in.
    """
    path = Path(points).absolute()
    if material is None or method is None:
        own_material, own_method = _own(path, material, method)
        material, method = material or own_material, method or own_method
    tested: dict[str, Any] = {"use": "fill"}
    tested["proctor"] = {"method": method or "not stated", "tests": path.name, "fit": form}
    if specific_gravity is not None:
        tested["specific_gravity"] = float(specific_gravity)
    name = material or path.stem
    document = {
        "site": {"name": path.stem, "units": units},
        "ground": {"existing": {"level": 0.0}, "finished": {"level": 0.0}},
        "material": {name: tested},
    }
    return check_site(document, path.parent, foot_of=lambda *_: 0.3048)


def _own(path: Path, material: str | None, method: str | None) -> tuple[str | None, str | None]:
    from earthwork.files.soil_tests import material_and_method

    return material_and_method(path, material=material, any_method=method is not None)


def fit_proctor_file(points: str | Path, **options: Any) -> ProctorResult:
    """Compaction curve of a CSV of points: maximum, optimum, errors, table and chart; options as ``site_of_points``.

    >>> fit_proctor_file("points.csv", specific_gravity=2.70, method="ASTM D698")   # doctest: +SKIP
    """
    return proctor(site_of_points(points, **options))


__all__: Sequence[str] = ("ProctorResult", "fit_proctor_file", "proctor", "site_of_points")
