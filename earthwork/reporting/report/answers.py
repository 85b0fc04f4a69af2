"""The answer box: what a site meeting asks first, in plain words and the site's units."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

from earthwork.plan.pad_rules import worries
from earthwork.reporting.balance_page import shift_text
from earthwork.reporting.display import plain, show
from earthwork.reporting.pads_page import flagged_ground
from earthwork.reporting.report.parts import Parts


@dataclass(frozen=True)
class Answer:
    """One question with its answer; ``mark`` says in a word how it stands: good, look or none."""

    question: str
    value: str
    note: str = ""
    mark: str = "none"


def summary(parts: Parts) -> dict[str, Any]:
    """The answer box as numbers, SI; None for what the site does not give."""
    documents = parts.documents
    balance, water, pads = (documents.get(name) or {} for name in ("balance", "water", "pads"))
    shift = balance.get("grade_shift")
    flagged = [pad["pad"] for pad in pads.get("pads", ()) if _worries(pad)]
    return {
        "surplus_compacted_m3": balance.get("surplus_compacted_m3"),
        "surplus_compacted_sd_m3": balance.get("surplus_compacted_sd_m3"),
        "loads_in": _loads(balance.get("imports")),
        "loads_out": _loads(balance.get("exports")),
        "grade_shift_m": shift["shift_m"] if shift else None,
        "peak_day_l": water.get("peak_day_l"),
        "first_short_day": water.get("first_short_day"),
        "pads_flagged": flagged if pads else None,
    }


def _loads(moves: list[dict[str, Any]] | None) -> int | None:
    if moves is None:
        return None
    loads = [m["loads"] for m in moves]
    return None if any(n is None for n in loads) else sum(loads)


def answers(parts: Parts) -> tuple[Answer, ...]:
    """The answer box, from what the site gives."""
    found = [_moved(parts)]
    if "balance" in parts.documents:
        found = [_balance(parts), _gate(parts), _shift(parts), *found]
    if "water" in parts.documents:
        found.append(_water(parts))
    if "pads" in parts.documents:
        found.append(_pads(parts))
    return tuple(found)


def verdict(parts: Parts) -> str:
    """The first sentence of the report."""
    balance = parts.documents.get("balance")
    if balance is None:
        total = parts.documents["volumes"]["total"]
        units = parts.site.units
        return (
            f"{show(total['cut_m3'], 'soil_volume', units)} of cut (bank) and "
            f"{show(total['fill_m3'], 'soil_volume', units)} of fill (compacted). Whether they balance is not known: "
            f"{parts.left_out.get('balance', 'no balance was made')}."
        )
    return _standing(parts)[0]


def _standing(parts: Parts) -> tuple[str, str]:
    """The balance in a sentence, and how it stands."""
    balance, units = parts.documents["balance"], parts.site.units
    surplus, need = balance["surplus_compacted_m3"], balance["required_compacted_m3"]
    left = surplus - balance["target_surplus_m3"]
    sd = balance["surplus_compacted_sd_m3"]
    share = f" ({plain(100 * abs(surplus) / need, 1)} % of what is needed)" if need else ""
    volume = show(abs(surplus), "soil_volume", units)
    if abs(left) <= 0.002 * max(need, 1.0):
        return f"The site balances: {show(surplus, 'soil_volume', units, sign=True)} compacted is left over.", "good"
    within = sd is not None and abs(left) <= 2 * sd
    doubt = ", which is within the error of the soil tests" if within else ""
    if surplus < 0:
        return f"The site is short of {volume} of compacted fill{share}{doubt}.", "look"
    return f"The site has {volume} of compacted fill too much{share}{doubt}.", "look"


def _balance(parts: Parts) -> Answer:
    balance, units = parts.documents["balance"], parts.site.units
    surplus, sd = balance["surplus_compacted_m3"], balance["surplus_compacted_sd_m3"]
    word = "short by" if surplus < 0 else "surplus of"
    _, mark = _standing(parts)
    if sd is None:
        note = "compacted; no error can be given, the soil figures carry no scatter"
    else:
        low, high = surplus - 2 * sd, surplus + 2 * sd
        note = (
            f"compacted; the soil tests leave it between {show(low, 'soil_volume', units, sign=True, unit=False)} "
            f"and {show(high, 'soil_volume', units, sign=True)} (two standard deviations)"
        )
    return Answer("Does the site balance?", f"{word} {show(abs(surplus), 'soil_volume', units)}", note, mark)


def _gate(parts: Parts) -> Answer:
    balance, units = parts.documents["balance"], parts.site.units
    texts, notes = [], []
    for way, moves in (("in", balance["imports"]), ("out", balance["exports"])):
        loads = _loads(moves)
        loose = sum(m["loose_m3"] for m in moves)
        volume = show(loose, "soil_volume", units)
        texts.append(f"{loads:,} {way}" if loads is not None else f"{volume} {way}")
        reasons = ", ".join(dict.fromkeys(f"{m['material']} ({m['reason']})" for m in moves))
        notes.append(f"{way}: {reasons}, {volume} loose" if moves else f"nothing {way}")
    counted = _loads(balance["imports"]) is not None
    question = "Truck loads over the gate" if counted else "Soil over the gate, loose"
    return Answer(question, " · ".join(texts), "; ".join(notes))


def _shift(parts: Parts) -> Answer:
    balance = parts.documents["balance"]
    shift = balance["grade_shift"]
    if shift is None:
        return Answer("Grade shift that would balance it", "none in range", balance["grade_shift_note"] or "", "look")
    left = show(shift["surplus_compacted_m3"], "soil_volume", parts.site.units, sign=True)
    area = show(shift["area_m2"], "area", parts.site.units)
    return Answer(
        "Grade shift that would balance it", shift_text(shift, parts.site), f"of {area} that may move, leaving {left}"
    )


def _moved(parts: Parts) -> Answer:
    total, units = parts.documents["volumes"]["total"], parts.site.units
    cut, fill = (show(total[key], "soil_volume", units) for key in ("cut_m3", "fill_m3"))
    return Answer(
        "Earth to move", f"{cut} cut · {fill} fill", "cut as it lies in the bank, fill as compacted; to subgrade"
    )


def _water(parts: Parts) -> Answer:
    water, units = parts.documents["water"], parts.site.units
    peak = show(water["peak_day_l"], "water_volume", units)
    day = water["first_short_day"]
    if day is None:
        return Answer("Water on the peak day", peak, "the supply keeps up on every day", "good")
    hour = water.get("first_short_hour")
    note = f"first short on day {day}" + (f", in hour {plain(hour, 0)} of the work" if hour is not None else "")
    return Answer("Water on the peak day", peak, note, "look")


def _pads(parts: Parts) -> Answer:
    pads = parts.documents["pads"]["pads"]
    flagged = [(pad["pad"], said) for pad in pads if (said := _worries(pad))]
    names = "; ".join(f"{name}: {', '.join(said)}" for name, said in flagged[:4])
    if len(flagged) > 4:
        names += f"; and {len(flagged) - 4} more"
    text = f"{len(flagged)} of {len(pads)}"
    return Answer("Pads flagged", text, names or "none of them", "look" if flagged else "good")


def _worries(pad: dict[str, Any]) -> list[str]:
    """What calls for a look at a pad: its flags but plain cut and fill, and what is flagged of the ground under it."""
    return [*worries(pad["flags"]), *flagged_ground(pad["natural_ground"])]
