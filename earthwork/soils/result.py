"""What ``soil`` returns: a card per material, as JSON and as tables."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

from earthwork.results import Result
from earthwork.soils.card import SoilCard
from earthwork.soils.records import DensityTest
from earthwork.units import WATER_DENSITY_KG_M3

if TYPE_CHECKING:
    import pandas


@dataclass(frozen=True, kw_only=True)
class SoilResult(Result):
    """The soil cards of a site, in the order of its file."""

    cards: tuple[SoilCard, ...]

    def __getitem__(self, material: str) -> SoilCard:
        """The card of a material by its name."""
        return next(card for card in self.cards if card.material == material)

    def to_dict(self) -> dict[str, Any]:
        return {"materials": [card.to_dict() for card in self.cards]}

    def tables(self) -> dict[str, pandas.DataFrame]:
        """``soil``: a row per material; and where there are any, ``bands``, ``points`` of compaction curves, ``tests``.

        ``tests`` are the in-place tests in the bank and in the fill, with what each says of compaction and
        saturation.
        """
        import pandas

        tables = {"soil": pandas.DataFrame([_main_row(card) for card in self.cards])}
        parts = {
            "bands": [{"material": c.material, **band.to_dict()} for c in self.cards for band in c.bands],
            "points": [row for card in self.cards for row in _point_rows(card)],
            "tests": [row for card in self.cards for row in _test_rows(card)],
        }
        tables |= {name: pandas.DataFrame(rows) for name, rows in parts.items() if rows}
        return tables


def _main_row(card: SoilCard) -> dict[str, Any]:
    """The single figures of a card, and the ends of its window and its group as columns of their own."""
    content = card.to_dict()
    row = {key: value for key, value in content.items() if not isinstance(value, dict | list)}
    low, high = card.window_water_content_percent or (None, None)
    row |= {"window_low_water_content_percent": low, "window_high_water_content_percent": high}
    row["group"] = card.classification.symbol if card.classification else None
    row["assumed"] = "; ".join(card.assumed)
    for key in ("tests", "uncertainty", "window", "window_water_content_percent", "classification", "consequences"):
        row.pop(key, None)
    row["suction_target_kpa"] = card.suction.target_kpa if card.suction else None
    row.pop("suction", None)
    return row


def _point_rows(card: SoilCard) -> Iterator[dict[str, Any]]:
    if card.curve is None:
        return
    for row in card.curve.point_rows():
        yield {"material": card.material, **row}


def _test_rows(card: SoilCard) -> Iterator[dict[str, Any]]:
    top, log = card.max_dry_density_kg_m3, card.field_log
    outside = dict(card.window_faults())
    if card.bank_tests is not None:
        used = [(t, None if top is None else 100 * t.dry_density_kg_m3 / top, None) for t in card.bank_tests.tests]
        out = [(t, None, reason) for t, reason in card.bank_tests.left_out]
        yield from (_test_row(card, "bank", *entry) for entry in [*used, *out])
    if log is not None:
        placed = [(t, percent, None) for t, percent in zip(log.tests.tests, log.percents, strict=True)]
        out = [(t, None, reason) for t, reason in log.tests.left_out]
        for entry in [*placed, *out]:
            yield {**_test_row(card, "fill", *entry), "outside_window": outside.get(entry[0])}


def _test_row(
    card: SoilCard, state: str, test: DensityTest, percent: float | None, left_out: str | None
) -> dict[str, Any]:
    density, water = test.dry_density_kg_m3, test.water_content_percent
    possible = density < card.specific_gravity * WATER_DENSITY_KG_M3
    return {
        "material": card.material,
        "state": state,
        "test": test.label,
        "group": test.group or None,
        "method": test.method or None,
        "depth_m": test.depth_m,
        "water_content_percent": water,
        "dry_density_kg_m3": density,
        "relative_compaction_percent": percent,
        "saturation_percent": card.saturation_percent_at(density, water) if possible else None,
        "left_out": left_out,
    }
