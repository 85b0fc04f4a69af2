"""The placing window: the states of water content and dry density that a fill may have when it is placed."""

from __future__ import annotations

from collections.abc import Callable, Iterator
from dataclasses import dataclass
from functools import cached_property
from typing import TYPE_CHECKING, Any

import numpy as np

from earthwork.errors import SoilError
from earthwork.soils import phase
from earthwork.soils.context import in_si

if TYPE_CHECKING:
    import shapely

#: Points along each curved side of the polygon; the curves are nearly straight, 64 keep it within 0.1 kg/m³.
_POINTS = 64
#: Distance in the plane of percent and kg/m³ that the outline for scripts may be off by; on the steep wet
#: side that is about 0.3 kg/m³. It saves the corners along straight sides.
_DRAWN = 0.01


@dataclass(frozen=True, kw_only=True)
class PlacingWindow:
    """States that a fill may have: dry enough, wet enough, dense enough, and possible.

    Attributes:
        min_dry_density_kg_m3: required dry density.
        specific_gravity: of the grains.
        water_content_percent: driest and wettest allowed; None leaves it to the other limits.
        saturation_percent: least and most saturation allowed, None without.
        air_voids_max_percent: most air voids allowed, None without (5 or 10 % in UK practice).
        target: (water content [%], dry density [kg/m³]) aimed at, None without.
    """

    min_dry_density_kg_m3: float
    specific_gravity: float
    water_content_percent: tuple[float, float] | None = None
    saturation_percent: tuple[float, float] | None = None
    air_voids_max_percent: float | None = None
    target: tuple[float, float] | None = None

    def faults(
        self, water_content_percent: float, dry_density_kg_m3: float, *, show: Callable[[float], str] = in_si
    ) -> list[str]:
        """The rules that a state breaks, in words; empty inside the window. Its edges belong to it.

        Args:
            water_content_percent, dry_density_kg_m3: the state.
            show: a dry density [kg/m³] as text.
        """
        return [text for _, text in self._faults(water_content_percent, dry_density_kg_m3, show)]

    def broken_rules(self, water_content_percent: float | None, dry_density_kg_m3: float) -> list[str]:
        """The rules that a state breaks, by name; without a water content only that of density can be told."""
        if water_content_percent is None:
            return ["too loose"] if self._is_loose(dry_density_kg_m3) else []
        return [name for name, _ in self._faults(water_content_percent, dry_density_kg_m3, in_si)]

    def contains(self, water_content_percent: float, dry_density_kg_m3: float) -> bool:
        """Whether a state lies in the window, edges included."""
        return not self.faults(water_content_percent, dry_density_kg_m3)

    def _is_loose(self, density: float) -> bool:
        return density < self.min_dry_density_kg_m3 * (1 - 1e-9)

    def _faults(self, water: float, density: float, show: Callable[[float], str]) -> Iterator[tuple[str, str]]:
        """Name and words of each broken rule."""
        if self._is_loose(density):
            yield "too loose", f"dry density {show(density)} is under the required {show(self.min_dry_density_kg_m3)}"
        if self.water_content_percent is not None:
            low, high = self.water_content_percent
            if water < low - 1e-9:
                yield "too dry", f"water content {water:.1f} % is drier than {low:.1f} %"
            if water > high + 1e-9:
                yield "too wet", f"water content {water:.1f} % is wetter than {high:.1f} %"
        if not 0 < density < self.specific_gravity * phase.WATER_DENSITY_KG_M3:
            yield "impossible", f"dry density {show(density)} is not below that of the grains"
            return
        saturation = float(phase.saturation_percent(density, max(water, 0.0), self.specific_gravity))
        if saturation > 100 + 1e-6:
            yield "impossible", f"saturation {saturation:.1f} % is beyond zero air voids: the state is impossible"
        if self.saturation_percent is not None:
            low, high = self.saturation_percent
            if saturation < low - 1e-6:
                yield "saturation too low", f"saturation {saturation:.1f} % is under {low:g} %"
            if saturation > high + 1e-6 and saturation <= 100 + 1e-6:
                yield "saturation too high", f"saturation {saturation:.1f} % is over {high:g} %"
        if self.air_voids_max_percent is not None:
            air = float(phase.air_voids_percent(density, max(water, 0.0), self.specific_gravity))
            if air > self.air_voids_max_percent + 1e-6:
                yield "too much air", f"air voids {air:.1f} % are over {self.air_voids_max_percent:g} %"

    def upper_dry_density(self, water: np.ndarray) -> np.ndarray:
        """The highest dry density allowed at water contents [%]: zero air voids, or the saturation limit under it."""
        top = 100.0 if self.saturation_percent is None else min(self.saturation_percent[1], 100.0)
        return phase.dry_density_at_saturation(water, self.specific_gravity, top)

    def lower_dry_density(self, water: np.ndarray) -> np.ndarray:
        """The lowest dry density allowed at water contents [%]."""
        lowest = np.full_like(water, self.min_dry_density_kg_m3)
        if self.saturation_percent is not None and self.saturation_percent[0] > 0:
            line = phase.dry_density_at_saturation(water, self.specific_gravity, self.saturation_percent[0])
            lowest = np.maximum(lowest, line)
        if self.air_voids_max_percent is not None:
            line = phase.dry_density_at_air_voids(water, self.specific_gravity, self.air_voids_max_percent)
            lowest = np.maximum(lowest, line)
        return lowest

    @cached_property
    def polygon(self) -> shapely.Polygon:
        """The window in the plane of water content [%] and dry density [kg/m³]; empty when no state fits.

        Without water-content limits it runs from the driest state that the other limits allow to zero air
        voids; a window that they leave open on the dry side starts at 0 %.
        """
        import shapely

        low, high = self._water_range()
        if not low < high:
            return shapely.Polygon()
        water = np.linspace(low, high, _POINTS)
        upper, lower = self.upper_dry_density(water), self.lower_dry_density(water)
        keep = upper > lower
        if not keep.any():
            return shapely.Polygon()
        edge = self._crossings(water, upper - lower)
        water = np.unique(np.concatenate([water[keep], edge]))
        upper = np.maximum(self.upper_dry_density(water), self.lower_dry_density(water))
        ring = [*zip(water, self.lower_dry_density(water), strict=True), *zip(water[::-1], upper[::-1], strict=True)]
        return shapely.make_valid(shapely.Polygon(ring))

    def _water_range(self) -> tuple[float, float]:
        top = 100.0 if self.saturation_percent is None else self.saturation_percent[1]
        room = float(
            phase.zero_air_voids_water_content_percent(self.min_dry_density_kg_m3, self.specific_gravity)
        ) * (top / 100)  # fmt: skip
        low, high = self.water_content_percent or (0.0, room)
        return max(low, 0.0), min(high, room)

    def _crossings(self, water: np.ndarray, gap: np.ndarray) -> np.ndarray:
        """Water contents where the lower and the upper side meet, by bisection of the grid step that holds them."""
        found = []
        for i in np.flatnonzero(np.diff(np.sign(gap))):
            low, high = water[i], water[i + 1]
            for _ in range(60):
                middle = np.array([(low + high) / 2])
                inside = (self.upper_dry_density(middle) - self.lower_dry_density(middle))[0] > 0
                if inside == (gap[i] > 0):
                    low = middle[0]
                else:
                    high = middle[0]
            found.append((low + high) / 2)
        return np.array(found)

    def check(self, where: str, *, show: Callable[[float], str] = in_si) -> None:
        """Refuse a window that no state fits, or whose target lies outside; densities in words by ``show``.

        Raises:
            SoilError: with the reason.
        """
        # A window of one water content has no area, and its target may still lie on it.
        if self.polygon.is_empty and (self.target is None or self.faults(*self.target)):
            raise SoilError(
                f"{where}: no state fits the placing window: at {show(self.min_dry_density_kg_m3)} and "
                "denser, its water "
                "content, saturation and air-voids limits leave no room under zero air voids. Widen one of "
                "them"
            )
        if self.target is not None and (broken := self.faults(*self.target, show=show)):
            raise SoilError(f"{where}: the target lies outside the placing window: {'; '.join(broken)}")

    def to_dict(self) -> dict[str, Any]:
        return {
            "min_dry_density_kg_m3": self.min_dry_density_kg_m3,
            "water_content_percent": list(self.water_content_percent) if self.water_content_percent else None,
            "saturation_percent": list(self.saturation_percent) if self.saturation_percent else None,
            "air_voids_max_percent": self.air_voids_max_percent,
            "target": list(self.target) if self.target else None,
            "outline": [list(corner) for corner in _outline(self.polygon.simplify(_DRAWN))],
        }


def _outline(polygon: Any) -> list[tuple[float, float]]:
    """The corners of the polygon, ring closed; of its largest part when it has several."""
    if polygon.is_empty:
        return []
    parts = [p for p in getattr(polygon, "geoms", [polygon]) if p.geom_type == "Polygon"]
    return list(max(parts, key=lambda p: p.area).exterior.coords) if parts else []
