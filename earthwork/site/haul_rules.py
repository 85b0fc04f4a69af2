"""Rules of the tables that say how earth is moved."""

from __future__ import annotations

import difflib
from collections.abc import Iterator

from earthwork.site.model import SiteModel

#: Name of the block that takes what no disposal site does.
ON_SITE_STOCKPILE = "on-site stockpile"


def haul_faults(model: SiteModel) -> Iterator[str]:
    """One line for each rule broken; nothing when all hold."""
    yield from _places(model)
    yield from _fill_rules(model)
    yield from _needs(model)
    yield from _truck(model)
    yield from _baseline(model)


def _places(model: SiteModel) -> Iterator[str]:
    """Borrow, disposal and stockpile sites and allowances share the names of the haul plan."""
    places = [("borrow", p.name) for p in model.borrow] + [("disposal", p.name) for p in model.disposal]
    places += [("stockpile", p.name) for p in model.stockpile]
    places += [("allowance", a.name) for a in model.allowance] if places else []
    names = [name for _, name in places]
    for i, (table, name) in enumerate(places):
        if name == ON_SITE_STOCKPILE:
            yield f'{table}: the name "{name}" stands for the surplus without a disposal site; give another name'
        if name in names[:i]:
            first = places[names.index(name)][0]
            yield f'{table}: the name "{name}" is given to a {first} as well; names of places must be unique'


def _fill_rules(model: SiteModel) -> Iterator[str]:
    if model.haul is None:
        return
    names = [rule.name for rule in model.haul.rule]
    for i, rule in enumerate(model.haul.rule):
        where = f"haul.rule[{i + 1}]"
        if rule.name in names[:i]:
            yield f'{where}: the name "{rule.name}" is given twice; names must be unique'
        if rule.top is None and rule.area is None and i < len(names) - 1:
            yield f"{where} ({rule.name}): it holds for all fill, so no rule after it ever does; give top or area"
        for name in rule.materials:
            if model.material and name not in model.material:
                close = difflib.get_close_matches(name, model.material, n=1)
                hint = f"did you mean {close[0]!r}?" if close else f"known: {', '.join(model.material)}"
                yield f'{where}.materials = "{name}": there is no [material.{name}]; {hint}'
            elif model.material and model.material[name].use not in ("fill", "rock"):
                yield (
                    f'{where}.materials = "{name}": its use is {model.material[name].use}; '
                    "only fill and rock go into a fill"
                )


def _needs(model: SiteModel) -> Iterator[str]:
    """What one key of [haul] asks of others."""
    haul = model.haul
    if haul is None:
        return
    if haul.by == "zones" and model.zones is None:
        yield 'haul.by = "zones": there is no [zones]; give it, or write by = "blocks"'
    if haul.by == "pads" and model.pads is None and model.design is None:
        yield 'haul.by = "pads": there is no [pads] and no [design]; give one, or write by = "blocks"'
    if haul.built is not None and model.phases is None:
        yield "haul.built: it closes ground once a phase is built, and there is no [phases]; give it"
    if haul.straight_factor != 1.0 and haul.distance != "straight":
        yield (
            f'haul.straight_factor = {haul.straight_factor:g}: it needs distance = "straight"; '
            "driven distances take no factor"
        )
    roads = haul.roads
    if roads is not None and (roads.speed or roads.default_speed) and haul.ground_speed is None:
        yield "haul.ground_speed: missing; roads have speeds, so the open ground needs one to choose the way by"
    if roads is not None and haul.distance == "straight":
        yield 'haul.roads and distance = "straight" are both given: keep one'
    if haul.cost_by == "time":
        truck = haul.truck
        if truck is None or truck.hour_cost is None or truck.speed_loaded is None:
            yield 'haul.cost_by = "time": it needs haul.truck with hour_cost and speed_loaded'


def _truck(model: SiteModel) -> Iterator[str]:
    truck = model.haul.truck if model.haul else None
    if truck is None:
        return
    where = "haul.truck"
    charts = {"speeds_loaded": truck.speeds_loaded, "speeds_empty": truck.speeds_empty}
    for key, rows in charts.items():
        grades = [grade for grade, _ in rows]
        if len(rows) == 1:
            yield f"{where}.{key}: it has one row; a chart needs at least two"
        if len(set(grades)) < len(grades):
            yield f"{where}.{key}: a grade stands in it twice; each must be there once"
        if rows and truck.power is not None:
            yield f"{where}.{key} and {where}.power are both given: keep one"
    needs = [key for key, rows in charts.items() if rows] + (["power"] if truck.power is not None else [])
    for key in needs:
        if truck.rolling_resistance is None:
            yield f"{where}.rolling_resistance: missing; {key} needs it"
        if truck.speed_loaded is None:
            yield f"{where}.speed_loaded: missing; {key} needs a greatest speed"
    if truck.power is not None and truck.empty_mass is None:
        yield f"{where}.empty_mass: missing; power needs it"
    if truck.speed_empty is not None and truck.speed_loaded is None:
        yield f"{where}.speed_loaded: missing; speed_empty is given"
    if truck.road_payload is not None and truck.road_payload > truck.payload:
        yield (
            f"{where}.road_payload = {truck.road_payload:g} kg: it must be at most the payload of {truck.payload:g} kg"
        )


def _baseline(model: SiteModel) -> Iterator[str]:
    line = model.baseline
    if line is None:
        return
    for key in ("overhaul_price", "borrow_cost"):
        if getattr(line, key) is not None and line.freehaul is None:
            yield f"baseline.{key}: it needs baseline.freehaul; give it, 0 where all haul is paid"
    if line.borrow_cost is not None and line.overhaul_price is None:
        yield "baseline.borrow_cost: the economic limit needs baseline.overhaul_price as well"
