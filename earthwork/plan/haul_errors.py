"""Says what a haul plan lacks: which fill has no source, which earth no place, by how much and what would mend it."""

from __future__ import annotations

from collections.abc import Sequence

from earthwork.errors import PlanError
from earthwork.plan.haul_places import Sink, Source
from earthwork.soils.card import SoilCard
from earthwork.units import UnitSystem


def listed(names: Sequence[str], most: int = 4) -> str:
    """Names in quotes, the first few of many.

    >>> listed(["a", "b", "c"], most=2)
    '"a", "b" and 1 more'
    """
    shown = ", ".join(f'"{name}"' for name in names[:most])
    return shown + (f" and {len(names) - most} more" if len(names) > most else "")


def no_way_error(names: Sequence[str], *, out: bool) -> PlanError:
    """Places that barriers close in on all sides."""
    verb = "is" if len(names) == 1 else "are"
    return PlanError(
        f"haul: there is no way {'out of' if out else 'to'} {listed(names)}, which {verb} closed in by barriers. "
        "Leave a gap in haul.barriers, or lead a road of haul.roads through them"
    )


def shortage_error(
    sinks: Sequence[Sink],
    sources: Sequence[Source],
    lack_m3: float,
    cards: dict[str, SoilCard],
    units: UnitSystem,
    *,
    closed_off: Sequence[str] = (),
) -> PlanError:
    """Fills that nothing, or too little, may serve; ``closed_off``: pits that could, were it not for barriers."""
    unit, label = units.factor("soil_volume"), units.label("soil_volume")
    for material in _alone(sources, sinks):
        mine = [s for s in sinks if material in s.m3_per_kg]
        giving = [s for s in sources if s.material == material]
        lack = sum(s.volume_m3 for s in mine) - sum(s.mass_kg for s in giving) * mine[0].m3_per_kg[material]
        if lack > 0:
            sinks, sources, lack_m3 = mine, giving, lack
            break
    materials = list(dict.fromkeys(m for sink in sinks for m in sink.m3_per_kg))
    need = sum(sink.volume_m3 for sink in sinks)
    names = listed([sink.name for sink in sinks])
    if not materials:
        return PlanError(
            f"haul: {names}: no material may go there. Let a material with use fill or rock in, by haul.rule or [material.*]"
        )
    what = " or ".join(materials[:4]) + (f" or {len(materials) - 4} others" if len(materials) > 4 else "")
    text = (
        f"haul: {names} {'needs' if len(sinks) == 1 else 'need'} {need / unit:,.0f} {label} (compacted) of {what}, and "
        f"{lack_m3 / unit:,.0f} {label} of it {'have' if lack_m3 != 1 else 'has'} no source"
    )
    if sources:
        text += f"; what may go there, from {listed([s.name for s in sources])}, is used up"
    pits = [s for s in sources if s.kind == "borrow"]
    # What would do is said of what the pits give, each by its own density.
    given = list(dict.fromkeys(s.material for s in pits)) or materials[:1]
    weights = {m: w for sink in reversed(sinks) for m, w in sink.m3_per_kg.items()}
    lacks = " or ".join(f"{_bank_m3(lack_m3 / weights[m], cards[m]) / unit:,.0f} {label} (bank) of {m}" for m in given)
    if closed_off:
        mend = f"barriers close off {listed(closed_off)}; leave a gap in haul.barriers, or lead a road through them"
    elif pits:
        mend = f"raise the capacity of {listed([s.name for s in pits])} by that"
    else:
        mend = "add a [[borrow]] that gives that"
    return PlanError(f"{text}. Too small by {lacks}: {mend}, or change what may go there")


def surplus_error(
    sources: Sequence[Source],
    sinks: Sequence[Sink],
    left_kg: float,
    cards: dict[str, SoilCard],
    units: UnitSystem,
    *,
    closed_off: Sequence[str] = (),
) -> PlanError:
    """Earth that no place, or too little room, is left for; ``closed_off``: tips behind barriers."""
    unit, label = units.factor("soil_volume"), units.label("soil_volume")
    for material in _alone(sources, sinks):
        mine = [s for s in sources if s.material == material]
        taking = [s for s in sinks if material in s.m3_per_kg]
        left = sum(s.mass_kg for s in mine) - sum(s.volume_m3 / s.m3_per_kg[material] for s in taking)
        if left > 0:
            sources, sinks, left_kg = mine, taking, left
            break
    materials = list(dict.fromkeys(s.material for s in sources))
    loose = left_kg / cards[materials[0]].loose_dry_density_kg_m3
    names = listed([s.name for s in sources])
    tips = [s.name for s in sinks if s.kind != "fill"]
    text = (
        f"haul: {loose / unit:,.0f} {label} (loose) of {' and '.join(materials[:4])} from {names} have no place to go"
    )
    if tips:
        return PlanError(
            f"{text}: the capacity of {listed(tips)} is too small by that. Raise it, or add a [[disposal]]"
        )
    if closed_off:
        return PlanError(
            f"{text}: barriers close off {listed(closed_off)}. "
            "Leave a gap in haul.barriers, or lead a road of haul.roads through them"
        )
    return PlanError(f"{text}: no [[disposal]] takes it. Add one, or widen accepts of one that is there")


def _bank_m3(dry_kg: float, card: SoilCard) -> float:
    """Bank volume to dig for a dry mass that arrives."""
    return dry_kg / (1 - card.loss_fraction) / card.bank_dry_density_kg_m3


def _alone(sources: Sequence[Source], sinks: Sequence[Sink]) -> list[str]:
    """Materials whose places take no other, where there are places of others as well: each is a lack of its own."""
    given = list(dict.fromkeys(s.material for s in sources))
    materials = list(dict.fromkeys([*given, *(m for sink in sinks for m in sink.m3_per_kg)]))
    alone = []
    for material in materials:
        joined = {material}.union(*(sink.m3_per_kg for sink in sinks if material in sink.m3_per_kg))
        if not joined & set(given) - {material} and set(materials) - joined:
            alone.append(material)
    return alone
