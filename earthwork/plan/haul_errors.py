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
    sinks: Sequence[Sink], sources: Sequence[Source], lack_m3: float, cards: dict[str, SoilCard], units: UnitSystem
) -> PlanError:
    """Fills that nothing, or too little, may serve."""
    unit, label = units.factor("soil_volume"), units.label("soil_volume")
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
    card = next((cards[m] for m in materials if cards[m].use in ("fill", "rock", "topsoil")), cards[materials[0]])
    dug = (
        lack_m3 / sinks[0].m3_per_kg[card.material] / (1 - card.loss_fraction)
        if card.material in sinks[0].m3_per_kg
        else lack_m3
    )
    bank = dug / card.bank_dry_density_kg_m3
    pits = [s.name for s in sources if s.kind == "borrow"]
    mend = f"raise the capacity of {listed(pits)}" if pits else f"add a [[borrow]] of {what}"
    return PlanError(
        f"{text}. Too small by {bank / unit:,.0f} {label} (bank) of {card.material}: {mend} by that, "
        "or change what may go there"
    )


def surplus_error(
    sources: Sequence[Source], sinks: Sequence[Sink], left_kg: float, cards: dict[str, SoilCard], units: UnitSystem
) -> PlanError:
    """Earth that no place, or too little room, is left for."""
    unit, label = units.factor("soil_volume"), units.label("soil_volume")
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
    return PlanError(f"{text}: no [[disposal]] takes it. Add one, or widen accepts of one that is there")
