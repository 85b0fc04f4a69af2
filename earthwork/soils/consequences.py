"""What a soil group means for the fill: which test governs, what plant suits, how fines behave, what to beware of.

A table of judgements, not of measurements: [FM-5-434] and [NAVFAC-DM7] on compactors, [USBR-EARTH] on use in
embankments, [ASTM-D4253] on free-draining soils; wording and grades are ours, common practice where no
source is named.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

from earthwork.soils import phase
from earthwork.soils.classify import Classification

#: Shrink–swell by plasticity index: below 18 low, 15 to 28 medium, 25 to 41 high, over 35 very high
#: ([USBR-EARTH], read in [FHWA-NHI-05-037], table 5-24; the classes overlap in the source). A warning starts where "high" does.
EXPANSIVE_PLASTICITY = 25.0


@dataclass(frozen=True, kw_only=True)
class Consequences:
    """What follows from a soil group."""

    governing_test: str
    plant: str
    water_holding: str
    binding: str
    cautions: tuple[str, ...]

    def to_dict(self) -> dict[str, Any]:
        return {
            "governing_test": self.governing_test, "plant": self.plant, "water_holding": self.water_holding,
            "binding": self.binding, "cautions": list(self.cautions),
        }  # fmt: skip


_PROCTOR = "compaction curve (ASTM D698 or D1557)"
_RELATIVE = "relative density (ASTM D4253, D4254), unless the compaction curve has a peak"
_EITHER = "compaction curve where it has a peak, else relative density (ASTM D4253, D4254)"
_SMOOTH = "smooth vibratory roller"
_SHEEP = "sheepsfoot or padfoot roller, pneumatic to seal"
_BOTH = "vibratory padfoot or pneumatic roller"

#: symbol or its parts → (test, plant, how fines hold water, how they bind)
_GROUPS: dict[str, tuple[str, str, str, str]] = {
    "W": (_RELATIVE, f"{_SMOOTH}, pneumatic or crawler", "little: drains while it is placed", "none: edges ravel"),
    "P": (_RELATIVE, f"{_SMOOTH} or crawler, flooded with water", "little: drains while it is placed",
          "none: surface stays loose until it is confined"),
    "W-M": (_EITHER, _SMOOTH, "some: a few hours", "slight"),
    "P-M": (_EITHER, _SMOOTH, "some: a few hours", "slight"),
    "W-C": (_EITHER, f"{_SMOOTH} or pneumatic", "some: a day", "fair"),
    "P-C": (_EITHER, f"{_SMOOTH} or pneumatic", "some: a day", "fair"),
    "M": (_PROCTOR, _BOTH, "fair, but gives way when it is wetted", "slight"),
    "C": (_PROCTOR, _BOTH, "good", "good: a natural binder"),
    "C-M": (_PROCTOR, _BOTH, "fair", "fair"),
    "ML": (_PROCTOR, "pneumatic or padfoot roller, light vibration", "poor: narrow range of water content",
           "little: dusts when dry, pumps when wet"),
    "CL-ML": (_PROCTOR, _SHEEP, "fair: narrow range of water content", "fair"),
    "CL": (_PROCTOR, _SHEEP, "good: slow to wet and to dry", "good"),
    "MH": (_PROCTOR, _SHEEP, "high, with a wide spread", "poor"),
    "CH": (_PROCTOR, _SHEEP, "very high: clods must be broken to wet through", "strong, and sticky"),
    "OL": (_PROCTOR, _SHEEP, "high", "poor"),
    "OH": (_PROCTOR, _SHEEP, "very high", "poor"),
}  # fmt: skip


def consequences(
    soil: Classification, *, bank_dry_density_kg_m3: float | None = None, specific_gravity: float = 2.68
) -> Consequences:
    """What a classified soil means for the fill.

    Args:
        soil: the classification.
        bank_dry_density_kg_m3: for the collapse screen of fine soils.
        specific_gravity: of the grains.
    """
    key = soil.symbol if soil.symbol in _GROUPS else _group_key(soil.symbol)
    test, plant, water, binding = _GROUPS[key]
    return Consequences(
        governing_test=test, plant=plant, water_holding=water, binding=binding,
        cautions=tuple(_cautions(soil, bank_dry_density_kg_m3, specific_gravity)),
    )  # fmt: skip


def _group_key(symbol: str) -> str:
    """``GW-GM`` → ``W-M``, ``SC-SM`` → ``C-M``, ``GP`` → ``P``: sands and gravels share their consequences."""
    return "-".join(part[1:] for part in symbol.split("-"))


def collapse_prone(dry_density_kg_m3: float, liquid_limit: float, specific_gravity: float) -> bool:
    """Whether a natural soil is loose enough to collapse on wetting: its voids hold more water than its liquid limit.

    True when e > LL Gs, that is ρd < Gs ρw / (1 + LL Gs) ([GIBBS-BARA], from memory). A screen: loess and
    alluvial fans near the line need a collapse test (ASTM D4546).

    >>> collapse_prone(1350.0, 28.0, 2.68), collapse_prone(1650.0, 28.0, 2.68)
    (True, False)
    """
    return dry_density_kg_m3 < float(phase.zero_air_voids_dry_density(liquid_limit, specific_gravity))


def _cautions(soil: Classification, bank: float | None, gravity: float) -> list[str]:
    found = []
    symbol, plasticity, limit = soil.symbol, soil.plasticity_index, soil.liquid_limit
    if symbol in ("OL", "OH"):
        found.append("organic: do not use in structural fill; it compresses and decays")
    if plasticity is not None and plasticity >= EXPANSIVE_PLASTICITY and (soil.fines_percent or 0) > 12:
        found.append(
            f"expansive: plasticity index {plasticity:.0f}; test swell (ASTM D4546), place wet of optimum "
            "and "
            "not denser than asked, keep it out from under slabs"
        )
    if bank is not None and limit is not None and collapse_prone(bank, limit, gravity):
        found.append(
            "collapsible in place: its voids hold more water than the liquid limit (loess, young alluvium); "
            "what stays in the ground may settle when it is wetted"
        )
    if symbol in ("ML", "CL-ML", "SM", "SC-SM", "GM"):
        found.append("silt: frost-susceptible, erodes, and pumps under rollers when it is near saturation")
    if symbol in ("CL", "CH", "CL-ML"):
        found.append(
            "dispersion cannot be told from grading and plasticity: where water will seep or run, test it "
            "(crumb ASTM D6572, pinhole ASTM D4647)"
        )
    if symbol == "MH":
        found.append("elastic silt: mica or volcanic ash may rebound under rollers and lose strength when remoulded")
    if symbol in ("SP", "SP-SM", "SW") and (soil.gravel_percent or 0) < 15:
        found.append("clean sand: loose and saturated it may liquefy; surface tests read low until it is confined")
    return found
