"""From the ``[material.*]`` and ``[fill]`` tables of a site to soil cards, with every fault in one message."""

from __future__ import annotations

from dataclasses import dataclass, field

from earthwork.errors import SiteFileError, SoilError, Warning
from earthwork.site import Site
from earthwork.site.model import ByDepth, Fill, Material
from earthwork.soils import oversize, phase, states
from earthwork.soils.card import Band, SoilCard
from earthwork.units import UnitSystem

#: Crews overshoot the required compaction; this many points when the site says nothing (method: shrinkage
#: uses what will be reached). Common practice, no single source.
OVERSHOOT_POINTS = 2.0
#: Specific gravity of the grains when none is stated: quartz sands 2.65, clays 2.70 ([das], table 2.4, from
#: memory).
ASSUMED_GRAVITY = {"fill": 2.68, "waste": 2.68, "topsoil": 2.65, "rock": 2.70}
#: Swell of the bank volume when none is stated [%]: common earth and blasted rock ([fm-5-434], table 1-1,
#: from memory).
ASSUMED_SWELL = {"fill": (25.0, 11.0, 43.0), "waste": (25.0, 11.0, 43.0), "topsoil": (25.0, 11.0, 43.0),
                 "rock": (50.0, 30.0, 75.0)}  # fmt: skip
#: Saturation [%] up to which a measured state only warns: the grain density is off by a few hundredths.
SATURATION_LIMIT = 103.0


def build_cards(site: Site) -> dict[str, SoilCard]:
    """See :func:`earthwork.soils.card.soil_cards`."""
    materials, fill = site.model.material, site.model.fill
    missing = [table for table, there in (("[material.*]", materials), ("[fill]", fill)) if not there]
    if missing or fill is None:
        raise SiteFileError(
            f"{site.path or 'site'}: {' and '.join(missing)} missing; soil cards need a [material.NAME] "
            "table for each "
            "soil, and [fill] with the required relative_compaction"
        )
    cards: dict[str, SoilCard] = {}
    faults: list[str] = []
    for name, material in materials.items():
        draft = _Draft(name, material, fill, site.units)
        card = draft.card()
        faults += draft.faults
        if card is not None:
            cards[name] = card
    if faults:
        count = "1 fault" if len(faults) == 1 else f"{len(faults)} faults"
        raise SoilError(
            f"{site.path or 'site'}: {count} in the soils\n" + "\n".join(f"  {f}" for f in faults)
        )
    return cards


@dataclass
class _Draft:
    """One card in the making: its faults, warnings and assumptions gather here."""

    name: str
    material: Material
    fill: Fill
    units: UnitSystem
    faults: list[str] = field(default_factory=list)
    warnings: list[Warning] = field(default_factory=list)
    assumed: list[str] = field(default_factory=list)

    def fault(self, key: str, text: str) -> None:
        self.faults.append(f"material.{self.name}{'.' if key else ''}{key}: {text}")

    def warn(self, code: str, key: str, text: str) -> None:
        self.warnings.append(Warning(code, f"material.{self.name}{'.' if key else ''}{key}: {text}"))

    def density(self, value: float) -> str:
        """A density as text, in the site's unit."""
        digits = 1 if self.units.name == "us" else 0
        return f"{self.units.from_si(value, 'density'):.{digits}f} {self.units.label('density')}"

    # --- the parts of a card ----------------------------------------------------------------------

    def card(self) -> SoilCard | None:
        material = self.material
        gravity = self._gravity()
        bank = self._bank(gravity)
        if bank is None:
            return None
        loose = self._loose(bank)
        peak = self._peak(gravity)
        gravity = self._whole_gravity(gravity)
        made = self._fill_density(bank, peak)
        target, window = self._target(peak)
        bands = tuple(self._band(row, bank, made, peak) for row in self.fill.by_depth)
        if peak is not None and made is not None and target is not None:
            self._check_wet(gravity, peak, made.dry_density, target, window, bands)
        if self.faults or loose is None:
            return None
        return SoilCard(
            material=self.name, use=material.use, specific_gravity=gravity,
            bank_dry_density_kg_m3=bank, bank_water_content_percent=material.bank.water_content,
            loose_dry_density_kg_m3=loose,
            fill_dry_density_kg_m3=made.dry_density if made else None,
            fill_dry_density_from=made.source if made else None,
            method=material.proctor.method if material.proctor else None,
            max_dry_density_kg_m3=peak[0] if peak else None,
            optimum_water_content_percent=peak[1] if peak else None,
            relative_compaction_percent=self.fill.relative_compaction if peak and made else None,
            expected_compaction_percent=self._expected(self.fill) if peak and made else None,
            target_water_content_percent=target, window_water_content_percent=window,
            loss_fraction=material.loss_percent / 100, shrinkage_factor_sd=made.factor_sd if made else None,
            bands=bands, assumed=tuple(dict.fromkeys(self.assumed)), warnings=tuple(self.warnings),
        )  # fmt: skip

    def _gravity(self) -> float:
        stated = self.material.specific_gravity
        if stated is not None:
            return stated
        gravity = ASSUMED_GRAVITY[self.material.use]
        self.assumed.append("specific_gravity")
        if self.material.use != "fill":
            return gravity
        self.warn(
            "specific-gravity-assumed", "specific_gravity",
            f"not given; {gravity:g} is assumed (most soils have 2.65 to 2.75). Zero air voids and "
            "saturation rest on it",
        )  # fmt: skip
        return gravity

    def _bank(self, gravity: float) -> float | None:
        """Bank dry density [kg/m³], checked against the grains and zero air voids."""
        state = self.material.bank
        if state.dry_density is not None:
            bank = state.dry_density
        elif state.moist_density is not None and state.water_content is not None:
            bank = phase.dry_density(state.moist_density, state.water_content)
        else:
            self.fault(
                "bank", "its dry density is missing; give dry_density, or moist_density with water_content"
            )
            return None
        gravity = self._whole_gravity(gravity)
        if bank >= gravity * phase.WATER_DENSITY_KG_M3:
            self.fault(
                "bank.dry_density",
                f"{self.density(bank)} is at or over the density of its grains (specific gravity {gravity:g}"
                f"{', assumed' if 'specific_gravity' in self.assumed else ''}); one of the two is wrong",
            )
            return None
        water = state.water_content
        if water is not None:
            self._check_bank_saturation(bank, water, gravity)
        return bank

    def _check_bank_saturation(self, bank: float, water: float, gravity: float) -> None:
        saturation = phase.saturation_percent(bank, water, gravity)
        if saturation <= 100:
            return
        most = phase.zero_air_voids_water_content_percent(bank, gravity)
        text = (
            f"{self.density(bank)} at {water:g} % water is saturated to {saturation:.1f} %; that dry "
            "density has room "
            f"for {most:.2f} % at most (specific gravity {gravity:g})"
        )
        if saturation <= SATURATION_LIMIT:
            self.warn("bank-oversaturated", "bank", text + ". The specific gravity is probably a little low")
            return
        dry = phase.dry_density(bank, water)
        if (
            self.material.bank.dry_density is not None
            and phase.saturation_percent(dry, water, gravity) <= 100
        ):
            text += f". If {self.density(bank)} is the moist density, write it as bank.moist_density"
        else:
            text += ". Check the density, the water content and the specific gravity"
        self.fault("bank", text)

    def _loose(self, bank: float) -> float | None:
        state = self.material.loose
        if state.dry_density is not None:
            if state.dry_density >= bank:
                self.fault(
                    "loose.dry_density",
                    f"{self.density(state.dry_density)} is not below the bank dry density "
                    f"{self.density(bank)}; "
                    "soil loosens when it is dug. Check that both are dry",
                )
                return None
            return state.dry_density
        swell = state.swell_percent
        if swell is None:
            swell, low, high = ASSUMED_SWELL[self.material.use]
            self.assumed += ["loose_dry_density_kg_m3", "swell_percent"]
            self.warn(
                "swell-assumed", "loose",
                f"no swell given; {swell:g} % is assumed ({low:g} to {high:g} % is usual). Loose volumes "
                "and truck "
                "loads rest on it, the balance does not",
            )  # fmt: skip
        return states.loose_dry_density_of_swell(bank, swell)

    def _peak(self, gravity: float) -> tuple[float, float] | None:
        """Maximum dry density [kg/m³] and optimum [%] of the whole soil."""
        proctor = self.material.proctor
        if proctor is None or proctor.max_dry_density is None or proctor.optimum_water_content is None:
            return None
        peak = (proctor.max_dry_density, proctor.optimum_water_content)
        if not self._possible_peak(peak, gravity):
            return None
        coarse = self.material.oversize
        if coarse is None or coarse.percent == 0:
            return peak
        try:
            return (
                oversize.whole_dry_density(peak[0], coarse.percent, coarse.specific_gravity),
                oversize.whole_water_content_percent(peak[1], coarse.percent, coarse.water_content),
            )
        except SoilError as error:
            self.fault("", str(error))
            return None

    def _possible_peak(self, peak: tuple[float, float], gravity: float) -> bool:
        density, optimum = peak
        most = gravity * phase.WATER_DENSITY_KG_M3
        if density < most and phase.saturation_percent(density, optimum, gravity) <= 100:
            return True
        if density >= most:
            self.fault(
                "proctor.max_dry_density",
                f"{self.density(density)} is at or over the density of the grains (specific gravity "
                f"{gravity:g})",
            )
            return False
        room = phase.zero_air_voids_water_content_percent(density, gravity)
        needed = 1 / (phase.WATER_DENSITY_KG_M3 / density - optimum / 100)
        text = (
            f"{self.density(density)} at {optimum:g} % water is above zero air voids; that dry density has "
            "room for "
            f"{room:.2f} % at most. Suspect specific_gravity = {gravity:g}"
        )
        if "specific_gravity" in self.assumed:
            text += " (assumed)"
        if 0 < needed < 3:
            text += f", which would have to be over {needed:.2f},"
        self.fault("proctor", text + " or a moist density written as the maximum dry density")
        return False

    def _whole_gravity(self, gravity: float) -> float:
        coarse = self.material.oversize
        if coarse is None:
            return gravity
        return phase.combined_specific_gravity(coarse.percent, gravity, coarse.specific_gravity)

    def _expected(self, row: Fill | ByDepth) -> float:
        """The compaction that crews will reach [%]."""
        if row.expected_compaction is not None:
            return row.expected_compaction
        expected = row.relative_compaction + OVERSHOOT_POINTS
        where = "fill" if isinstance(row, Fill) else f"fill.by_depth[{self.fill.by_depth.index(row) + 1}]"
        self.assumed.append("expected_compaction_percent")
        warning = Warning(
            "compaction-assumed",
            f"{where}.expected_compaction: not given; {expected:g} % is assumed, {OVERSHOOT_POINTS:g} "
            "points over the "
            "required one. Every point over costs soil: give the mean that the crew reaches",
        )
        if warning not in self.warnings:
            self.warnings.append(warning)
        return expected

    def _fill_density(self, bank: float, peak: tuple[float, float] | None) -> _Made | None:
        material = self.material
        if material.use in ("topsoil", "waste"):
            return None
        if material.fill is not None:
            self.assumed.append("fill_dry_density_kg_m3")
            return _Made(material.fill.dry_density, "stated, without a compaction test")
        if material.shrink_percent_of_bank is not None:
            low, high = material.shrink_percent_of_bank
            middle = (low + high) / 2
            self.assumed += ["fill_dry_density_kg_m3", "shrinkage_factor"]
            self.warn(
                "shrink-assumed", "shrink_percent_of_bank",
                f"{middle:g} % is used, the middle of {low:g} to {high:g} %; no test stands behind it",
            )  # fmt: skip
            density = states.fill_dry_density_of_shrink(bank, middle)
            # A range without a shape is taken as even: its standard deviation is the width / sqrt(12).
            return _Made(density, "shrink range", (high - low) / 100 / 12**0.5)
        if peak is not None:
            if bank > peak[0] and material.use != "rock":
                self.warn(
                    "bank-denser-than-maximum", "bank.dry_density",
                    f"{self.density(bank)} is over the compaction maximum {self.density(peak[0])}. Stiff "
                    "clay and "
                    "till can be; otherwise check that both are dry and of the same soil",
                )  # fmt: skip
            return _Made(peak[0] * self._expected(self.fill) / 100, "compaction test")
        if not self.faults:
            means = "fill.dry_density or shrink_percent_of_bank"
            self.fault(
                "",
                "what it becomes as fill is missing; give "
                f"{'' if material.use == 'rock' else 'proctor, '}{means}",
            )
        return None

    def _target(self, peak: tuple[float, float] | None) -> tuple[float | None, tuple[float, float] | None]:
        if peak is None or self.material.use in ("topsoil", "waste", "rock"):
            return None, None
        target = peak[1] + self.fill.water_content_offset
        if target < 0:
            self.fault(
                "",
                f"the target water content is {target:g} %; it must be 0 or more. Check "
                "fill.water_content_offset",
            )
            return None, None
        window = self.fill.water_content_window
        return target, None if window is None else (max(peak[1] + window[0], 0.0), peak[1] + window[1])

    def _band(self, row: ByDepth, bank: float, made: _Made | None, peak: tuple[float, float] | None) -> Band:
        density = made.dry_density if made else None
        tested = made is not None and made.source == "compaction test" and peak is not None
        expected = (
            self._expected(row)
            if tested
            else row.expected_compaction or row.relative_compaction + OVERSHOOT_POINTS
        )
        if tested and peak is not None:
            density = peak[0] * expected / 100
        return Band(
            below_m=row.below, measured_from=row.measured_from,
            relative_compaction_percent=row.relative_compaction, expected_compaction_percent=expected,
            fill_dry_density_kg_m3=density,
            shrinkage_factor=None if density is None else states.shrinkage_factor(bank, density),
        )  # fmt: skip

    def _check_wet(
        self, gravity: float, peak: tuple[float, float], density: float, target: float,
        window: tuple[float, float] | None, bands: tuple[Band, ...],
    ) -> None:  # fmt: skip
        """Refuse a target or an end of the window that lies above zero air voids, here and in each band."""
        waters = [("the target", target, "fill.water_content_offset")]
        if window is not None:
            waters += [(f"the {end} end of the window", water, "fill.water_content_window")
                       for end, water in (("dry", window[0]), ("wet", window[1]))]  # fmt: skip
        places = [("", density, self._expected(self.fill))]
        places += [
            (f" below {self.units.from_si(b.below_m, 'length'):g} {self.units.label('length')}",
             b.fill_dry_density_kg_m3, b.expected_compaction_percent)
            for b in bands if b.fill_dry_density_kg_m3 is not None
        ]  # fmt: skip
        for place, dry, expected in places:
            for what, water, key in waters:
                self._check_state(gravity, peak, f"{what}{place}", dry, expected, water, key)

    def _check_state(
        self,
        gravity: float,
        peak: tuple[float, float],
        what: str,
        dry: float,
        expected: float,
        water: float,
        key: str,
    ) -> None:
        if dry >= gravity * phase.WATER_DENSITY_KG_M3:
            self.fault(
                "",
                f"{what}: {self.density(dry)} is at or over the density of the grains; check "
                "fill.expected_compaction",
            )
            return
        room = phase.zero_air_voids_water_content_percent(dry, gravity)
        if water <= room:
            return
        # The optimum itself has no room there: then it is not the distance from the optimum that is wrong.
        suspects = ["the expected compaction"] if peak[1] > room else [key]
        if "specific_gravity" in self.assumed:
            suspects.append(f"specific_gravity ({gravity:g} is assumed)")
        self.fault(
            "",
            f"{what}, {water:.2f} % water at {self.density(dry)} ({expected:g} % of the maximum), is above "
            "zero air voids "
            f"(saturation {phase.saturation_percent(dry, water, gravity):.1f} %); the greatest water "
            "content possible "
            f"there is {room:.2f} %. Suspect {', '.join(suspects)}",
        )


@dataclass(frozen=True)
class _Made:
    """The dry density that a material gets as fill, and where the figure comes from."""

    dry_density: float
    source: str
    factor_sd: float | None = None
