"""Soil cards of a site whose bank tests are told apart by where they were taken.

A row of bank tests may name its material, or give easting, northing and elevation (or depth): then it is of
the strip or stratum that lies there. The ground is opened only for rows that need it.
"""

from __future__ import annotations

import math
from collections.abc import Iterable, Mapping

from earthwork.errors import SoilError, Warning
from earthwork.files.soil_tests import read_site_tests
from earthwork.ground.grid import Window
from earthwork.ground.stack import StackReader
from earthwork.quantities.site_ground import SiteGround, open_site
from earthwork.site import Site
from earthwork.soils.card import SoilCard, soil_cards
from earthwork.soils.located import assign_tests, layer_materials, waiting_tests
from earthwork.soils.records import DensityTest, MaterialTests

#: A test that stands higher than this over the ground [m] has a wrong elevation, not a rough survey.
_OVER_GROUND_M = 1.0


def site_cards(site: Site) -> dict[str, SoilCard]:
    """A card per material of the site, bank tests without a material taken by their place.

    Raises:
        EarthworkError: as :func:`earthwork.soils.card.soil_cards`, and where the ground is needed and cannot be read.
    """
    if not site.model.material or site.model.fill is None:
        return soil_cards(site, {})
    return soil_cards(site, site_tests(site))


def site_tests(site: Site) -> dict[str, MaterialTests]:
    """All tests of a site, each bank test with the material that it is of."""
    tests = read_site_tests(site)
    waiting = [test for name in tests for test in waiting_tests(site.model, name, tests[name])]
    if not waiting:
        return tests
    placed = assign_tests(site.model, tests, materials_at(open_site(site), waiting))
    empty = [name for name in tests if tests[name].bank and not placed[name].bank]
    if empty:
        raise SoilError(
            "\n".join(
                f"material.{name}.bank.tests: no test lies in it by easting, northing and elevation. Check the "
                "coordinates, or name the material of each row in a column material"
                for name in empty
            )
        )
    return placed


def doubtful_places(site: Site, ground: SiteGround, tests: Mapping[str, MaterialTests]) -> tuple[Warning, ...]:
    """Tests that name a material and lie in another one by their coordinates."""
    layers = layer_materials(site.model)
    named = {name: [t for t in own.bank if t.material and t.placed] for name, own in tests.items() if name in layers}
    found = materials_at(ground, [test for own in named.values() for test in own])
    warnings = []
    for name, own in named.items():
        wrong = [f"{test.label} ({found[test]})" for test in own if found[test] not in (None, name)]
        if wrong:
            warnings.append(
                Warning(
                    "test-in-other-stratum",
                    f"material.{name}.bank.tests: in another stratum by their coordinates: {', '.join(wrong)}. "
                    "Check the row, or the bottoms of the strata",
                )
            )
    return tuple(warnings)


def materials_at(ground: SiteGround, tests: Iterable[DensityTest]) -> dict[DensityTest, str | None]:
    """The strip or stratum that each test lies in; None outside the surfaces, and over the ground."""
    reader = StackReader(ground.stack)
    try:
        return {test: _material_at(ground, reader, test) for test in tests}
    finally:
        reader.close()


def _material_at(ground: SiteGround, reader: StackReader, test: DensityTest) -> str | None:
    stack, grid = ground.stack, ground.stack.grid
    if test.easting is None or test.northing is None:
        return None
    row, column = (math.floor(v) for v in grid.cell(test.easting, test.northing))
    if not (0 <= row < grid.rows and 0 <= column < grid.columns):
        return None
    arrays = reader.read(Window(row, column, 1, 1))
    top = float(arrays["existing"][0, 0])
    elevation = test.elevation_m if test.elevation_m is not None else top - (test.depth_m or 0.0)
    if not elevation <= top + _OVER_GROUND_M:
        return None
    for i, strip in enumerate(stack.strips):
        top -= float(arrays[f"strip{i}"][0, 0])
        if elevation > top:
            return strip.material
    for i, stratum in enumerate(stack.strata):
        bottom = float(arrays[f"stratum{i}"][0, 0]) if i < len(stack.strata) - 1 else -math.inf
        if math.isnan(bottom):
            return None
        if elevation > bottom:
            return stratum.material
    return None
