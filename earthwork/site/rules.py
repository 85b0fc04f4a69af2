"""Rules of a site file that hold between its tables: names that must exist, orders, and windows."""

from __future__ import annotations

import difflib
from collections.abc import Iterator

from earthwork.site.haul_rules import haul_faults
from earthwork.site.model import SiteModel
from earthwork.site.work_rules import work_faults


def cross_faults(model: SiteModel) -> Iterator[str]:
    """One line for each rule broken between tables; nothing when all hold."""
    yield from _surfaces(model)
    yield from _materials(model)
    yield from _strata(model)
    yield from _soils(model)
    yield from _fill(model)
    yield from _names(model)
    yield from work_faults(model)
    if model.balance.pad_moves is not None and model.design is None:
        yield "balance.pad_moves: pads move only where a [design] builds them; give [design] instead of ground.finished"
    yield from haul_faults(model)
    low, high = model.balance.shift_range
    if low > high:
        yield f"balance.shift_range = [{low:g}, {high:g}] m: the first must be the lower one"


def _surfaces(model: SiteModel) -> Iterator[str]:
    if model.ground.finished is None and model.design is None:
        yield "ground.finished: missing; give a finished surface, or a [design] section"
    if model.ground.finished is not None and model.design is not None:
        yield "ground.finished and [design] are both given: keep one"


def _materials(model: SiteModel) -> Iterator[str]:
    """Each material named anywhere must have its [material.*] table, once materials are described at all."""
    if not model.material:
        return
    used = [(f"strip[{i + 1}].material", s.material) for i, s in enumerate(model.strip)]
    used += [(f"stratum[{i + 1}].material", s.material) for i, s in enumerate(model.stratum)]
    used += [(f"allowance[{i + 1}].material", a.material) for i, a in enumerate(model.allowance)]
    used += [(f"borrow[{i + 1}].material", b.material) for i, b in enumerate(model.borrow)]
    used += [(f"section[{i + 1}].source", s.source) for i, s in enumerate(model.section) if s.source != "imported"]
    for i, site in enumerate(model.disposal):
        used += [(f"disposal[{i + 1}].accepts", name) for name in site.accepts or ()]
    for key, name in used:
        if name not in model.material:
            close = difflib.get_close_matches(name, model.material, n=1)
            hint = f"did you mean {close[0]!r}?" if close else f"known: {', '.join(model.material)}"
            yield f'{key} = "{name}": there is no [material.{name}]; {hint}'


def _soils(model: SiteModel) -> Iterator[str]:
    """What a material becomes as fill is said in one way only."""
    for name, material in model.material.items():
        ways = {
            "proctor": material.proctor is not None,
            "relative_density": material.relative_density is not None,
            "fill.dry_density": material.fill is not None,
            "shrink_percent_of_bank": material.shrink_percent_of_bank is not None,
        }
        given = [key for key, there in ways.items() if there]
        if len(given) > 1:
            yield (f"material.{name}: {' and '.join(given)} are given; keep one, each says what it becomes as fill")
        if material.loss_percent >= 100:
            yield (
                f"material.{name}.loss_percent = {material.loss_percent:g}: it must be below 100; nothing would be left"
            )
        if (material.liquid_limit is None) != (material.plastic_limit is None):
            yield f"material.{name}: give both liquid_limit and plastic_limit, or neither (non-plastic)"
        elif (material.plastic_limit or 0) > (material.liquid_limit or 0):
            yield (
                f"material.{name}.plastic_limit = {material.plastic_limit:g}: it must be at most "
                "liquid_limit = "
                f"{material.liquid_limit:g}"
            )
        if material.use == "rock" and material.proctor is not None:
            yield (
                f"material.{name}.proctor: rock has no compaction test; give fill.dry_density or "
                'shrink_percent_of_bank, or write use = "fill"'
            )
        if material.shrink_percent_of_bank is not None:
            low, high = material.shrink_percent_of_bank
            if not low <= high < 100:
                yield (
                    f"material.{name}.shrink_percent_of_bank = [{low:g}, {high:g}]: the first must be the "
                    "lower "
                    "one, and both below 100"
                )


def _strata(model: SiteModel) -> Iterator[str]:
    for i, stratum in enumerate(model.stratum):
        last = i == len(model.stratum) - 1
        open_bottom = stratum.bottom is None and stratum.thickness is None
        if last and not open_bottom:
            yield (
                f"stratum[{i + 1}] ({stratum.material}): the last stratum has no bottom; take bottom or thickness out"
            )
        if not last and open_bottom:
            yield (f"stratum[{i + 1}] ({stratum.material}): bottom or thickness is missing; only the last has none")


def _fill(model: SiteModel) -> Iterator[str]:
    fill = model.fill
    if fill is None:
        return
    rows = [("fill", fill.relative_compaction, fill.expected_compaction)]
    rows += [
        (f"fill.by_depth[{i + 1}]", row.relative_compaction, row.expected_compaction)
        for i, row in enumerate(fill.by_depth)
    ]
    for where, required, expected in rows:
        if expected is not None and expected < required:
            yield (
                f"{where}.expected_compaction = {expected:g}: it must be at least the required "
                f"{required:g} %; "
                "it is the mean that crews reach, and they overshoot"
            )
    if (
        fill.relative_density is not None
        and fill.expected_relative_density is not None
        and fill.expected_relative_density < fill.relative_density
    ):
        yield (
            f"fill.expected_relative_density = {fill.expected_relative_density:g}: it must be at least the "
            "required "
            f"{fill.relative_density:g} %"
        )
    if fill.saturation_window is not None and fill.saturation_window[0] >= fill.saturation_window[1]:
        low, high = fill.saturation_window
        yield f"fill.saturation_window = [{low:g}, {high:g}]: the first must be the lower one"
    if fill.lift_thickness is not None and fill.loose_lift_thickness is not None:
        yield "fill.lift_thickness and fill.loose_lift_thickness are both given: keep one"
    if fill.water_content_window is not None:
        low, high = fill.water_content_window
        if low > high:
            yield f"fill.water_content_window = [{low:g}, {high:g}]: the first must be the lower one"
        elif not low <= fill.water_content_offset <= high:
            yield (
                f"fill.water_content_offset = {fill.water_content_offset:g}: the target must lie in the "
                "window "
                f"[{low:g}, {high:g}]"
            )


def _names(model: SiteModel) -> Iterator[str]:
    """Names that results are keyed by must be unique."""
    for table, names in (
        ("section", [s.name for s in model.section]),
        ("over_excavation", [o.name for o in model.over_excavation]),
        ("allowance", [a.name for a in model.allowance]),
        ("borrow", [b.name for b in model.borrow]),
        ("disposal", [d.name for d in model.disposal]),
    ):
        for name in sorted({n for n in names if names.count(n) > 1}):
            yield f'{table}: the name "{name}" is given {names.count(name)} times; names must be unique'
