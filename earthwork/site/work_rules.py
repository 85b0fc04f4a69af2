"""Rules between the tables that say when and with what the fill is placed and watered."""

from __future__ import annotations

import difflib
from collections.abc import Iterator

from earthwork.site.model import SiteModel
from earthwork.units import UnitSystem


def work_faults(model: SiteModel) -> Iterator[str]:
    """One line for each rule broken; nothing when all hold."""
    yield from _calendar(model)
    yield from _weather(model)
    yield from _drying(model)
    yield from _plant(model)
    yield from _water(model)


def _calendar(model: SiteModel) -> Iterator[str]:
    calendar = model.calendar
    dated = calendar.start is not None or model.weather is not None
    if not dated:
        for key in ("idle", "rain_days"):
            for i, day in enumerate(getattr(calendar, key)):
                if not isinstance(day, int):
                    yield (
                        f"calendar.{key}[{i + 1}] = {day}: a date needs calendar.start; give it, or give the "
                        "number of the day, from 1"
                    )
        if len(set(calendar.working_days)) < 7:
            yield "calendar.start: missing; working_days needs the date of the first day"
    if calendar.time_zone is not None and not _is_zone(calendar.time_zone):
        yield (
            f'calendar.time_zone = "{calendar.time_zone}": not a known zone; it must be a name of the IANA '
            'list, such as "America/Denver"'
        )


def _is_zone(name: str) -> bool:
    import zoneinfo

    try:
        zoneinfo.ZoneInfo(name)
    except (zoneinfo.ZoneInfoNotFoundError, ValueError, OSError):
        return False
    return True


def _weather(model: SiteModel) -> Iterator[str]:
    if model.weather is None:
        return
    if model.water is not None and model.water.evaporation is not None:
        yield "water.evaporation and [weather] are both given: keep one"
    surface = model.weather.surface
    if surface is not None and surface.texture is None:
        readily, total = surface.readily_evaporable, surface.total_evaporable
        if readily is not None and total is not None and not 0 < readily <= total:
            yield (
                f"weather.surface.readily_evaporable = {readily:g} mm: it must be more than 0 and at most "
                f"total_evaporable, {total:g} mm"
            )


def _drying(model: SiteModel) -> Iterator[str]:
    name = model.moisture.drying.mix_with
    if name is not None and name not in model.material:
        close = difflib.get_close_matches(name, model.material, n=1)
        hint = f"did you mean {close[0]!r}?" if close else f"known: {', '.join(model.material)}"
        yield f'moisture.drying.mix_with = "{name}": there is no [material.{name}]; {hint}'
    spread = model.moisture.drying.spread
    if spread is not None and spread <= 0:
        yield f"moisture.drying.spread = {_shown(model, spread, 'length')}: it must be more than 0"


def _shown(model: SiteModel, value: float, dimension: str) -> str:
    """An SI value in the unit that the site file is written in."""
    units = UnitSystem(model.site.units)
    return f"{units.from_si(value, dimension):g} {units.label(dimension)}"


def _plant(model: SiteModel) -> Iterator[str]:
    lift = model.fill.lift_thickness if model.fill else None
    names = [roller.name for roller in model.roller]
    for i, roller in enumerate(model.roller):
        if names.count(roller.name) > 1 and names.index(roller.name) == i:
            yield f'roller: the name "{roller.name}" is given {names.count(roller.name)} times'
        if lift is not None and roller.lift_limit is not None and lift > roller.lift_limit:
            yield (
                f"fill.lift_thickness = {_shown(model, lift, 'length')}: the {roller.name} works lifts of at most "
                f"{_shown(model, roller.lift_limit, 'length')}, compacted; thin the lift or take another roller"
            )


def _water(model: SiteModel) -> Iterator[str]:
    water = model.water
    if water is None:
        return
    if water.tank is not None and (water.tank.at_start or 0) > water.tank.volume:
        yield (
            f"water.tank.at_start = {_shown(model, water.tank.at_start or 0.0, 'water_volume')}: it must be at most the "
            f"tank's volume, {_shown(model, water.tank.volume, 'water_volume')}"
        )
    if water.supply.flow <= 0 and water.tank is None:
        yield "water.supply.flow = 0: it must be more than 0 where there is no tank"
