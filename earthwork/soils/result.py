"""What ``soil`` returns: a card per material, as JSON and as tables."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

from earthwork.results import Result
from earthwork.soils.card import SoilCard

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
        """``soil``: a row per material; ``bands``: a row per material and row of ``fill.by_depth``."""
        import pandas

        rows = [card.to_dict() for card in self.cards]
        bands = [{"material": row["material"], **band} for row in rows for band in row["bands"]]
        for row in rows:
            del row["bands"], row["tests"]
            row["assumed"] = "; ".join(row["assumed"])
            low, high = row.pop("window_water_content_percent") or (None, None)
            row["window_low_water_content_percent"], row["window_high_water_content_percent"] = low, high
        tables = {"soil": pandas.DataFrame(rows)}
        if bands:
            tables["bands"] = pandas.DataFrame(bands)
        return tables
