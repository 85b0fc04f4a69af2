"""The soil card: what one material weighs, dry, in the bank, loose and compacted, and what the fill asks of it.

``soil_cards(site)`` gives a card per material. Only dry mass is conserved,
so a card turns a dry mass into a volume of each state and back, and every other figure follows from its dry
densities.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from functools import cached_property
from typing import TYPE_CHECKING, Any, Literal

from earthwork.errors import SoilError, Warning
from earthwork.soils import phase, states
from earthwork.soils.relative_density import lee_singh_relative_density

if TYPE_CHECKING:
    from earthwork.site import Site
    from earthwork.site.model import Oversize
    from earthwork.soils.classify import Classification
    from earthwork.soils.consequences import Consequences
    from earthwork.soils.curve import CompactionCurve
    from earthwork.soils.in_place import TestSet
    from earthwork.soils.placing import FieldLog
    from earthwork.soils.records import DensityTest, MaterialTests
    from earthwork.soils.suction import SuctionEstimate
    from earthwork.soils.uncertainty import ShrinkUncertainty
    from earthwork.soils.window import PlacingWindow

State = Literal["bank", "loose", "compacted"]
STATES: tuple[State, ...] = ("bank", "loose", "compacted")


@dataclass(frozen=True, kw_only=True)
class Band:
    """A row of ``fill.by_depth``: what the fill asks below a depth, and the dry density that answers it."""

    below_m: float
    measured_from: str
    relative_compaction_percent: float
    expected_compaction_percent: float
    fill_dry_density_kg_m3: float | None
    shrinkage_factor: float | None

    def to_dict(self) -> dict[str, Any]:
        return {
            "below_m": self.below_m,
            "measured_from": self.measured_from,
            "relative_compaction_percent": self.relative_compaction_percent,
            "expected_compaction_percent": self.expected_compaction_percent,
            "fill_dry_density_kg_m3": self.fill_dry_density_kg_m3,
            "shrinkage_factor": self.shrinkage_factor,
        }


@dataclass(frozen=True, kw_only=True)
class SoilCard:
    """One material. Densities are dry [kg/m³], water contents percent of dry mass; None is not known or not asked.

    ``fill_dry_density_kg_m3`` is the density at the compaction that crews will reach, not the one required.
    Topsoil and waste have none: they are never placed as fill, and respread or stockpiled soil has no
    density to hold it to. ``max_dry_density_kg_m3`` and ``optimum_water_content_percent`` hold for the
    whole soil, oversize included; ``specific_gravity`` too.
    """

    material: str
    use: Literal["fill", "rock", "topsoil", "waste"]
    specific_gravity: float
    bank_dry_density_kg_m3: float
    loose_dry_density_kg_m3: float
    bank_water_content_percent: float | None = None
    fill_dry_density_kg_m3: float | None = None
    fill_dry_density_from: str | None = None
    required_dry_density_kg_m3: float | None = None
    method: str | None = None
    max_dry_density_kg_m3: float | None = None
    optimum_water_content_percent: float | None = None
    min_dry_density_kg_m3: float | None = None  #: index minimum of a free-draining soil
    laboratory_max_dry_density_kg_m3: float | None = None
    laboratory_optimum_water_content_percent: float | None = None
    relative_compaction_percent: float | None = None
    expected_compaction_percent: float | None = None
    expected_compaction_from: str | None = None
    fill_relative_density_percent: float | None = None
    bank_relative_density_percent: float | None = None
    target_water_content_percent: float | None = None
    window_water_content_percent: tuple[float, float] | None = None
    saturation_window_percent: tuple[float, float] | None = None
    air_voids_max_percent: float | None = None
    oversize: Oversize | None = None
    loss_fraction: float = 0.0
    bank_m3_per_compacted_m3_per_point: float | None = None
    uncertainty: ShrinkUncertainty | None = None
    bands: tuple[Band, ...] = ()
    curve: CompactionCurve | None = None
    bank_tests: TestSet | None = None
    field_log: FieldLog | None = None
    classification: Classification | None = None
    consequences: Consequences | None = None
    suction: SuctionEstimate | None = None
    assumed: tuple[str, ...] = ()
    warnings: tuple[Warning, ...] = ()

    # --- factors ----------------------------------------------------------------------------------

    @cached_property
    def shrinkage_factor(self) -> float | None:
        """Compacted volume made of one bank volume, before loss."""
        if self.fill_dry_density_kg_m3 is None:
            return None
        return states.shrinkage_factor(self.bank_dry_density_kg_m3, self.fill_dry_density_kg_m3)

    @property
    def effective_factor(self) -> float | None:
        """Compacted volume really gained of one bank volume, after loss."""
        return None if self.shrinkage_factor is None else self.shrinkage_factor * (1 - self.loss_fraction)

    @property
    def shrink_percent_of_bank(self) -> float | None:
        return None if self.shrinkage_factor is None else states.shrink_percent_of_bank(self.shrinkage_factor)

    @property
    def shrink_percent_of_fill(self) -> float | None:
        return None if self.shrinkage_factor is None else states.shrink_percent_of_fill(self.shrinkage_factor)

    @property
    def swell_percent(self) -> float:
        return states.swell_percent(self.bank_dry_density_kg_m3, self.loose_dry_density_kg_m3)

    @property
    def load_factor(self) -> float:
        return states.load_factor(self.bank_dry_density_kg_m3, self.loose_dry_density_kg_m3)

    @property
    def shrinkage_factor_sd(self) -> float | None:
        """Standard deviation of the shrinkage factor; None when no test and no range stands behind it."""
        return None if self.uncertainty is None else self.uncertainty.sd

    @property
    def lee_singh_relative_density_percent(self) -> float | None:
        """Relative density of the fill by correlation, for a clean sand or gravel with no minimum density tested."""
        soil, percent = self.classification, self.expected_compaction_percent
        if soil is None or soil.symbol[0] not in "GS" or soil.symbol[1] not in "WP" or percent is None:
            return None
        if self.fill_relative_density_percent is not None or not 80 <= percent <= 100:
            return None
        return lee_singh_relative_density(percent)

    # --- phases -----------------------------------------------------------------------------------

    @property
    def bank_void_ratio(self) -> float:
        return phase.void_ratio(self.bank_dry_density_kg_m3, self.specific_gravity)

    @property
    def fill_void_ratio(self) -> float | None:
        if self.fill_dry_density_kg_m3 is None:
            return None
        return phase.void_ratio(self.fill_dry_density_kg_m3, self.specific_gravity)

    @property
    def bank_saturation_percent(self) -> float | None:
        return self.saturation_percent_at(self.bank_dry_density_kg_m3, self.bank_water_content_percent)

    @property
    def fill_saturation_percent(self) -> float | None:
        """At the fill dry density and the target water content."""
        return self.saturation_percent_at(self.fill_dry_density_kg_m3, self.target_water_content_percent)

    def saturation_percent_at(self, dry_density: float | None, water_content: float | None) -> float | None:
        """Saturation [%] of a state; None when one of its figures is not known."""
        if dry_density is None or water_content is None:
            return None
        return float(phase.saturation_percent(dry_density, water_content, self.specific_gravity))

    @property
    def zero_air_voids_water_content_percent(self) -> float | None:
        """The greatest water content that the fill dry density has room for."""
        if self.fill_dry_density_kg_m3 is None:
            return None
        return phase.zero_air_voids_water_content_percent(self.fill_dry_density_kg_m3, self.specific_gravity)

    @property
    def bank_percent_of_maximum(self) -> float | None:
        """Bank dry density as percent of the compaction maximum."""
        if self.max_dry_density_kg_m3 is None:
            return None
        return 100 * self.bank_dry_density_kg_m3 / self.max_dry_density_kg_m3

    @property
    def loaded_moist_factor(self) -> float:
        """Moist mass per dry mass as loaded, at the bank water content (taken as dry when that is not known)."""
        return 1 + (self.bank_water_content_percent or 0.0) / 100

    def placing_window(self) -> PlacingWindow | None:
        """The states that the fill may have when it is placed; None for what has no target water content."""
        if self.required_dry_density_kg_m3 is None or self.target_water_content_percent is None:
            return None
        from earthwork.soils.window import PlacingWindow

        target = None
        if self.fill_dry_density_kg_m3 is not None:
            target = (self.target_water_content_percent, self.fill_dry_density_kg_m3)
        return PlacingWindow(
            min_dry_density_kg_m3=self.required_dry_density_kg_m3, specific_gravity=self.specific_gravity,
            water_content_percent=self.window_water_content_percent,
            saturation_percent=self.saturation_window_percent, air_voids_max_percent=self.air_voids_max_percent,
            target=target,
        )  # fmt: skip

    def window_faults(self) -> tuple[tuple[DensityTest, str], ...]:
        """Tests in the fill that lie outside the placing window, each with the names of the rules that it breaks.

        A test with oversize of its own is judged at the card's density of the same percent of maximum. Tests
        without a water content are judged by density alone.
        """
        window, log = self.placing_window(), self.field_log
        if window is None or log is None or self.max_dry_density_kg_m3 is None:
            return ()
        found = []
        for test, percent in zip(log.tests.tests, log.percents, strict=True):
            broken = window.broken_rules(test.water_content_percent, self.max_dry_density_kg_m3 * percent / 100)
            if broken:
                found.append((test, "; ".join(broken)))
        return tuple(found)

    # --- dry mass to volume and back --------------------------------------------------------------

    def dry_density_kg_m3(self, state: State, *, band: int | None = None) -> float:
        """Dry density in a state; ``band`` is a row of :attr:`bands` and holds for the compacted state.

        Raises:
            SoilError: compacted, for a material that is never compacted.
        """
        if state == "bank":
            return self.bank_dry_density_kg_m3
        if state == "loose":
            return self.loose_dry_density_kg_m3
        if state != "compacted":
            raise SoilError(f"material.{self.material}: state is {state!r}; it must be one of {', '.join(STATES)}")
        density = self.fill_dry_density_kg_m3 if band is None else self.bands[band].fill_dry_density_kg_m3
        if density is None:
            raise SoilError(
                f"material.{self.material}: it has no compacted dry density, because its use is {self.use}; "
                'only use = "fill" and use = "rock" are compacted'
            )
        return density

    def volume_m3(self, dry_mass_kg: phase.Value, state: State, *, band: int | None = None) -> phase.Value:
        """Volume of a dry mass in a state [m³]. Loss is not in it: take it off the dry mass first."""
        return dry_mass_kg / self.dry_density_kg_m3(state, band=band)

    def dry_mass_kg(self, volume_m3: phase.Value, state: State, *, band: int | None = None) -> phase.Value:
        """Dry mass of a volume in a state [kg]; the inverse of :meth:`volume_m3`."""
        return volume_m3 * self.dry_density_kg_m3(state, band=band)

    def bank_volume_m3(self, dry_mass_kg: phase.Value) -> phase.Value:
        return self.volume_m3(dry_mass_kg, "bank")

    def loose_volume_m3(self, dry_mass_kg: phase.Value) -> phase.Value:
        return self.volume_m3(dry_mass_kg, "loose")

    def compacted_volume_m3(self, dry_mass_kg: phase.Value, *, band: int | None = None) -> phase.Value:
        return self.volume_m3(dry_mass_kg, "compacted", band=band)

    def loaded_moist_mass_kg(self, dry_mass_kg: phase.Value) -> phase.Value:
        """Mass that a truck carries for a dry mass [kg]."""
        return dry_mass_kg * self.loaded_moist_factor

    def _field_dict(self) -> dict[str, Any] | None:
        if self.field_log is None:
            return None
        outside = None
        if self.placing_window() is not None:
            outside = [f"{test.label}: {why}" for test, why in self.window_faults()]
        return {**self.field_log.to_dict(), "outside_window": outside}

    def to_dict(self) -> dict[str, Any]:
        """The card as the contract's ``result.materials[]``."""
        return {
            "material": self.material,
            "use": self.use,
            "specific_gravity": self.specific_gravity,
            "bank_dry_density_kg_m3": self.bank_dry_density_kg_m3,
            "loose_dry_density_kg_m3": self.loose_dry_density_kg_m3,
            "fill_dry_density_kg_m3": self.fill_dry_density_kg_m3,
            "fill_dry_density_from": self.fill_dry_density_from,
            "required_dry_density_kg_m3": self.required_dry_density_kg_m3,
            "method": self.method,
            "max_dry_density_kg_m3": self.max_dry_density_kg_m3,
            "optimum_water_content_percent": self.optimum_water_content_percent,
            "min_dry_density_kg_m3": self.min_dry_density_kg_m3,
            "laboratory_max_dry_density_kg_m3": self.laboratory_max_dry_density_kg_m3,
            "laboratory_optimum_water_content_percent": self.laboratory_optimum_water_content_percent,
            "relative_compaction_percent": self.relative_compaction_percent,
            "expected_compaction_percent": self.expected_compaction_percent,
            "expected_compaction_from": self.expected_compaction_from,
            "fill_relative_density_percent": self.fill_relative_density_percent,
            "bank_relative_density_percent": self.bank_relative_density_percent,
            "lee_singh_relative_density_percent": self.lee_singh_relative_density_percent,
            "target_water_content_percent": self.target_water_content_percent,
            "window_water_content_percent": _listed(self.window_water_content_percent),
            "bank_water_content_percent": self.bank_water_content_percent,
            "shrinkage_factor": self.shrinkage_factor,
            "effective_factor": self.effective_factor,
            "oversize_percent": self.oversize.percent if self.oversize else 0.0,
            "loss_percent": 100 * self.loss_fraction,
            "shrink_percent_of_bank": self.shrink_percent_of_bank,
            "shrink_percent_of_fill": self.shrink_percent_of_fill,
            "swell_percent": self.swell_percent,
            "load_factor": self.load_factor,
            "bank_void_ratio": self.bank_void_ratio,
            "bank_saturation_percent": self.bank_saturation_percent,
            "bank_percent_of_maximum": self.bank_percent_of_maximum,
            "fill_void_ratio": self.fill_void_ratio,
            "fill_saturation_percent": self.fill_saturation_percent,
            "zero_air_voids_water_content_percent": self.zero_air_voids_water_content_percent,
            "shrinkage_factor_sd": self.shrinkage_factor_sd,
            "bank_m3_per_compacted_m3_per_point": self.bank_m3_per_compacted_m3_per_point,
            "uncertainty": _dict(self.uncertainty),
            "tests": {
                "proctor": _dict(self.curve),
                "bank": _dict(self.bank_tests),
                "field": self._field_dict(),
            },
            "bands": [band.to_dict() for band in self.bands],
            "window": _dict(self.placing_window()),
            "classification": _dict(self.classification),
            "consequences": _dict(self.consequences),
            "suction": _dict(self.suction),
            "assumed": list(self.assumed),
        }


def _dict(part: Any) -> dict[str, Any] | None:
    return None if part is None else part.to_dict()


def _listed(pair: tuple[float, float] | None) -> list[float] | None:
    return None if pair is None else list(pair)


def soil_cards(site: Site, tests: Mapping[str, MaterialTests] | None = None) -> dict[str, SoilCard]:
    """A card per material of the site, in the order of the site file.

    Args:
        site: the site.
        tests: tests by material; by default those of the files that the site names are read.

    Raises:
        FileError: a file of tests that cannot be read; the message lists every fault.
        SiteFileError: no ``[material.*]`` or no ``[fill]``.
        SoilError: a soil that cannot be; the message lists every fault of every material.
    """
    from earthwork.files.soil_tests import read_site_tests
    from earthwork.soils.build import build_cards
    from earthwork.soils.located import waiting_tests

    if tests is None:
        tests = read_site_tests(site)
        lost = [name for name, own in tests.items() if waiting_tests(site.model, name, own)]
        if lost:
            raise SoilError(
                f"material.{lost[0]}.bank.tests: rows name no material, and only the ground tells it; "
                "use earthwork.soil(site), or name the material of each row in a column material"
            )
    return build_cards(site, tests)


def soil_warnings(cards: dict[str, SoilCard]) -> tuple[Warning, ...]:
    """The warnings of all cards, each once, in order."""
    return tuple(dict.fromkeys(warning for card in cards.values() for warning in card.warnings))
