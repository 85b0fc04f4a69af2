"""Rules that a pad is judged by: its class and flags, the ground it stands on, and its settlement screen."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

import numpy as np

from earthwork.plan.settlement import (
    compression_during_placing,
    creep_rate_m_per_year,
    creep_settlement,
    settlement_of_strain,
    unit_weight_kn_m3,
    wait_before_building,
    wetting_settlement,
)
from earthwork.soils.card import SoilCard
from earthwork.soils.consequences import EXPANSIVE_PLASTICITY, collapse_prone

if TYPE_CHECKING:
    from earthwork.site.model import Pads

#: Classes, the worst first.
CLASSES = ("deep fill", "transition", "fill", "cut")

#: Flags that are no reason to look: every class that holds is named, and what an undercut has mended.
_NO_WORRY = ("fill", "cut", "transition mended")

#: Natural ground under this share of its compaction maximum is called loose [%]. Common practice: fill is asked to reach
#: 90 to 95 %.
LOOSE_PERCENT = 90.0

#: Dry, silty ground under this dry density [kg/m³] and saturation [%] may collapse when it is wetted: 90 lb/ft³
#: [clevenger-1958], and drier than about two thirds saturated (common practice). Used where no liquid limit is known.
COLLAPSE_DENSITY_KG_M3 = 1442.0
COLLAPSE_SATURATION_PERCENT = 65.0

_NEARLY = 1e-9
DAYS_PER_YEAR = 365.25


@dataclass(frozen=True)
class Shares:
    """Shares of a footprint in cut and in fill [%], by the sign of subgrade − stripped."""

    cut_percent: float
    fill_percent: float


def classes_that_hold(
    shares: Shares, p95_thickness_m: float, table: Pads, *, mended: bool = False
) -> tuple[str, ...]:
    """All classes that hold for a pad, the worst first; there is always one.

    Deep fill: the 95th percentile of thickness reaches the limit. Transition: both shares over the stated one, unless
    it is mended by an undercut. Fill and cut: that share over the stated one.

    Args:
        shares: of the footprint.
        p95_thickness_m: 95th percentile of the fill thickness [m].
        table: the rules of the site.
        mended: the least thickness reaches the blanket that is asked for.
    """
    over = table.transition_share
    filled, cut = shares.fill_percent > over, shares.cut_percent > over
    holds = {
        "deep fill": p95_thickness_m >= table.deep_fill - _NEARLY,
        "transition": filled and cut and not mended,
        "fill": filled,
        "cut": cut or not filled,
    }
    return tuple(name for name in CLASSES if holds[name])


def worries(flags: Sequence[str]) -> tuple[str, ...]:
    """The flags of a pad that call for a look; that it stands in cut or in fill is none by itself.

    >>> worries(["deep fill", "fill", "differential fill"])
    ('deep fill', 'differential fill')
    """
    return tuple(flag for flag in flags if flag not in _NO_WORRY)


@dataclass(frozen=True)
class NaturalGround:
    """The ground at the removal bottom: the material with the greatest share of the footprint, and what to beware of."""

    material: str | None
    percent_of_maximum: float | None
    flags: tuple[str, ...]
    shares: tuple[tuple[str, float], ...]  #: (material, percent of the footprint)
    flags_by_material: tuple[tuple[str, tuple[str, ...]], ...] = ()

    def to_dict(self) -> dict[str, Any]:
        flags = dict(self.flags_by_material)
        return {
            "material": self.material,
            "percent_of_maximum": self.percent_of_maximum,
            "flags": list(self.flags),
            "materials": [
                {"material": name, "share_percent": share, "flags": list(flags.get(name, ()))}
                for name, share in self.shares
            ],
        }


def natural_ground(shares: Sequence[tuple[str, float]], cards: dict[str, SoilCard]) -> NaturalGround:
    """Judge the ground under a pad.

    Args:
        shares: (material, percent of the footprint) at the removal bottom.
        cards: by material.
    """
    if not shares:
        return NaturalGround(None, None, (), ())
    ordered = tuple(sorted(shares, key=lambda s: -s[1]))
    card = cards.get(ordered[0][0])
    flagged = tuple((name, ground_flags(cards[name])) for name, _ in ordered if name in cards)
    flags = tuple(dict.fromkeys(flag for _, its in flagged for flag in its))
    return NaturalGround(ordered[0][0], card.bank_percent_of_maximum if card else None, flags, ordered, flagged)


def ground_flags(card: SoilCard) -> tuple[str, ...]:
    """What to beware of in ground that stays in place: loose, collapse, swell, organic, waste.

    Collapse goes by the liquid limit where one is known [gibbs-bara], else by density and saturation.
    """
    if card.use == "rock":
        return ()
    flags = []
    share = card.bank_percent_of_maximum
    if share is not None and share < LOOSE_PERCENT:
        flags.append("loose")
    soil = card.classification
    if soil is not None and soil.liquid_limit is not None:
        collapses = collapse_prone(card.bank_dry_density_kg_m3, soil.liquid_limit, card.specific_gravity)
    else:
        wet = card.bank_saturation_percent
        collapses = card.bank_dry_density_kg_m3 < COLLAPSE_DENSITY_KG_M3 and (
            wet is not None and wet < COLLAPSE_SATURATION_PERCENT
        )
    if collapses:
        flags.append("collapse")
    if soil is not None:
        plastic = soil.plasticity_index is not None and soil.plasticity_index >= EXPANSIVE_PLASTICITY
        if plastic and (soil.fines_percent or 0) > 12:
            flags.append("swell")
        if soil.symbol in ("OL", "OH", "PT"):
            flags.append("organic")
    if card.use in ("waste", "topsoil"):
        flags.append(card.use)
    return tuple(flags)


@dataclass(frozen=True)
class Screen:
    """Settlement after construction as a function of thickness, low and high; without figures it knows nothing."""

    percent: tuple[float, float] | None
    creep_percent: tuple[float, float] | None = None
    creep_from_days: float = 30.0
    life_days: float = 50 * DAYS_PER_YEAR
    allowed_m: float | None = None
    wetting: tuple[tuple[float, float], ...] | None = None
    modulus_kpa: float | None = None
    unit_weight: float | None = None  #: of the moist fill [kN/m³]

    @classmethod
    def of(cls, table: Pads, cards: dict[str, SoilCard]) -> Screen:
        """The screen of a site; the heaviest fill of the site gives the stress."""
        weights = [
            unit_weight_kn_m3(card.fill_dry_density_kg_m3, card.target_water_content_percent or 0.0)
            for card in cards.values()
            if card.fill_dry_density_kg_m3 is not None
        ]
        tests = table.settlement
        if tests is None:
            return cls(table.settlement_percent)
        return cls(
            percent=table.settlement_percent,
            creep_percent=tests.creep_percent,
            creep_from_days=tests.creep_from,
            life_days=tests.life * DAYS_PER_YEAR,
            allowed_m=tests.allowed,
            wetting=tests.wetting,
            modulus_kpa=tests.modulus,
            unit_weight=max(weights, default=None),
        )

    @property
    def known(self) -> bool:
        """Whether it gives metres."""
        return self.percent is not None or self.creep_percent is not None or self._wets

    @property
    def _wets(self) -> bool:
        return self.wetting is not None and self.unit_weight is not None

    def range_m(self, thickness_m: Any) -> tuple[Any, Any]:
        """Settlement after construction, low and high [m]; zeros where nothing is known.

        Low is creep (or the percentage) alone, high has the wetting of the whole fill on top; swell counts the other way.
        """
        thickness = np.asarray(thickness_m, float)
        low, high = np.zeros_like(thickness), np.zeros_like(thickness)
        if self.percent is not None:
            low = low + settlement_of_strain(thickness, self.percent[0])
            high = high + settlement_of_strain(thickness, self.percent[1])
        if self.creep_percent is not None:
            end = self.creep_from_days + self.life_days
            low = low + creep_settlement(thickness, self.creep_percent[0], self.creep_from_days, end)
            high = high + creep_settlement(thickness, self.creep_percent[1], self.creep_from_days, end)
        if self._wets:
            assert self.wetting is not None
            assert self.unit_weight is not None
            wet = wetting_settlement(thickness, self.unit_weight, self.wetting)
            low, high = low + np.minimum(wet, 0.0), high + np.maximum(wet, 0.0)
        return low, high

    def placing_m(self, thickness_m: float) -> float | None:
        """Greatest compression of the fill while it is placed, half way up [m]; None without a modulus."""
        if self.modulus_kpa is None or self.unit_weight is None:
            return None
        return float(compression_during_placing(thickness_m / 2, thickness_m, self.unit_weight, self.modulus_kpa))

    def wait_days(self, thickness_m: float) -> float | None:
        """Days from half-placed fill to building that keep creep in its life to what is allowed; None without figures."""
        if self.creep_percent is None or self.allowed_m is None:
            return None
        return wait_before_building(
            thickness_m, self.creep_percent[1], self.allowed_m, self.life_days, least_days=self.creep_from_days
        )

    def rate_m_per_year(self, thickness_m: float) -> float | None:
        """Creep rate when the building is begun, high [m/year]; None without figures."""
        if self.creep_percent is None:
            return None
        return creep_rate_m_per_year(thickness_m, self.creep_percent[1], self.creep_from_days)
