"""The figures that a card starts from: grains, bank and loose state, compaction maximum; from tests, figures or tables."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass

from earthwork.errors import SoilError, Warning
from earthwork.soils import phase, states
from earthwork.soils.classify import Classification, classify, grading_of
from earthwork.soils.context import Context
from earthwork.soils.curve import SATURATION_LIMIT, beyond_zero_air_voids
from earthwork.soils.in_place import TestSet, summarise_tests
from earthwork.soils.records import DensityTest
from earthwork.soils.uncertainty import Part

#: Specific gravity of the grains when nothing tells it, by use ([DAS], typical specific gravities, from
#: memory).
ASSUMED_GRAVITY = {"fill": 2.68, "waste": 2.68, "topsoil": 2.65, "rock": 2.70}
#: The same by the first letter of the group symbol: sands and gravels are mostly quartz, clay minerals are
#: denser.
_GRAVITY_BY_GROUP = {"G": 2.65, "S": 2.65, "M": 2.68, "C": 2.70, "O": 2.65}
#: Swell of the bank volume when nothing tells it [%]: middle, low, high for common earth and blasted rock
#: ([FM-5-434], from memory).
ASSUMED_SWELL = {"fill": (25.0, 11.0, 43.0), "waste": (25.0, 11.0, 43.0), "topsoil": (25.0, 11.0, 43.0),
                 "rock": (50.0, 30.0, 75.0)}  # fmt: skip


@dataclass(frozen=True)
class Bank:
    """The bank state: dry density [kg/m³], water content [%], the tests behind it, its part of the uncertainty."""

    dry_density: float
    water_content: float | None
    tests: TestSet | None = None
    part: Part | None = None


# --- grains and group ------------------------------------------------------------------------------------


def classified(context: Context) -> Classification | None:
    """The group of the material, None when neither grading nor limits are given."""
    material = context.material
    if material.gradation is None and material.liquid_limit is None:
        return None
    try:
        soil = classify(
            grading_of(material.gradation) if material.gradation else None,
            liquid_limit=material.liquid_limit, plastic_limit=material.plastic_limit, organic=material.organic,
        )  # fmt: skip
    except SoilError as error:
        context.fault("gradation", str(error))
        return None
    for note in soil.notes:
        context.warn("classification", "gradation", note)
    return soil


def specific_gravity(context: Context, soil: Classification | None) -> float:
    """Specific gravity of the grains of the finer fraction; an assumed one is labelled, and warned about in fill."""
    if context.material.specific_gravity is not None:
        return context.material.specific_gravity
    if context.typical is not None:
        gravity, why = context.typical.specific_gravity.middle, f"as {context.typical.name} has"
    elif soil is not None:
        gravity, why = _GRAVITY_BY_GROUP[soil.symbol[0]], f"as {soil.symbol} has"
    else:
        gravity, why = ASSUMED_GRAVITY[context.material.use], "most soils have 2.65 to 2.75"
    context.assume("specific_gravity")
    if context.material.use == "fill":
        context.warn(
            "specific-gravity-assumed", "specific_gravity",
            f"not given; {gravity:.2f} is assumed ({why}). Zero air voids and saturation rest on it",
        )  # fmt: skip
    return gravity


def whole_gravity(context: Context, gravity: float) -> float:
    """Specific gravity of the whole soil, oversize included."""
    coarse = context.material.oversize
    if coarse is None:
        return gravity
    return phase.combined_specific_gravity(coarse.percent, gravity, coarse.specific_gravity)


# --- bank ------------------------------------------------------------------------------------------------


def bank_state(context: Context, gravity: float) -> Bank | None:
    """The bank state, checked against grains and zero air voids; None with the fault noted."""
    state = context.material.bank
    if context.tests.bank:
        return _tested_bank(context, gravity)
    if state.dry_density is not None:
        dry = state.dry_density
    elif state.moist_density is not None and state.water_content is not None:
        dry = phase.dry_density(state.moist_density, state.water_content)
    elif context.typical is not None:
        typical = context.typical.bank_dry_density_kg_m3
        shown = f"{context.density(typical.middle)} ({context.density(typical.low)} to {context.density(typical.high)})"
        dry = context.guess("bank_dry_density_kg_m3", "bank.dry_density", typical, shown)
        return _possible_bank(
            context, Bank(dry, state.water_content, None, Part(name="bank", relative_sd=typical.sd / dry)), gravity
        )
    else:
        context.fault(
            "bank",
            "its dry density is missing; give dry_density, moist_density with water_content, or tests; "
            "or typical = a soil type, as a last resort",
        )
        return None
    return _possible_bank(context, Bank(dry, state.water_content), gravity)


def _possible_bank(context: Context, bank: Bank, gravity: float) -> Bank | None:
    dry, water = bank.dry_density, bank.water_content
    if dry >= gravity * phase.WATER_DENSITY_KG_M3:
        assumed = ", assumed" if "specific_gravity" in context.assumed else ""
        context.fault(
            "bank.dry_density",
            f"{context.density(dry)} is at or over the density of its grains (specific gravity "
            f"{gravity:.3g}{assumed}); "
            "one of the two is wrong",
        )
        return None
    if water is None:
        return bank
    saturation = phase.saturation_percent(dry, water, gravity)
    if saturation <= 100:
        return bank
    room = phase.zero_air_voids_water_content_percent(dry, gravity)
    text = (
        f"{context.density(dry)} at {water:g} % water is saturated to {saturation:.1f} %; that dry density "
        "has room for "
        f"{room:.2f} % at most (specific gravity {gravity:.3g})"
    )
    if saturation <= SATURATION_LIMIT:
        context.warn("bank-oversaturated", "bank", text + ". The specific gravity is probably a little low")
        return bank
    if context.material.bank.dry_density is not None and phase.possible_if_moist(dry, water, gravity):
        text += f". If {context.density(dry)} is the moist density, write it as bank.moist_density"
    else:
        text += ". Check the density, the water content and the specific gravity"
    context.fault("bank", text)
    return None


def possible_tests(
    context: Context, tests: Sequence[DensityTest], gravity: float, key: str
) -> tuple[list[DensityTest], list[tuple[DensityTest, str]]]:
    """Tests that can be, and those beyond zero air voids with the reason; denser than the grains is a fault."""
    grain = gravity * phase.WATER_DENSITY_KG_M3
    used: list[DensityTest] = []
    left_out: list[tuple[DensityTest, str]] = []
    doubtful: list[str] = []
    for test in tests:
        if test.dry_density_kg_m3 >= grain:
            context.fault(
                key,
                f"{test.place}: dry density is {context.density(test.dry_density_kg_m3)}; it must be below "
                "that of the "
                f"grains, {context.density(grain)} (specific gravity {gravity:.3g}). Check the row for a "
                "typing error",
            )
            continue
        water = test.water_content_percent
        saturation = 0.0 if water is None else phase.saturation_percent(test.dry_density_kg_m3, water, gravity)
        if saturation > SATURATION_LIMIT:
            left_out.append((test, beyond_zero_air_voids(test, saturation, gravity)))
            continue
        if saturation > 100:
            doubtful.append(f"{test.label} ({saturation:.1f} %)")
        used.append(test)
    if left_out:
        listed = "; ".join(f"{test.label} ({reason})" for test, reason in left_out)
        context.warn("tests-left-out", key, f"left out: {listed}. Check water contents, and whether densities are dry")
    if doubtful:
        context.warn(
            "tests-oversaturated", key,
            f"a little beyond zero air voids: {'; '.join(doubtful)}. The specific gravity {gravity:.3g} is "
            "probably low",
        )  # fmt: skip
    return used, left_out


def _tested_bank(context: Context, gravity: float) -> Bank | None:
    used, left_out = possible_tests(context, context.tests.bank, gravity, "bank.tests")
    if not used:
        context.fault("bank.tests", "no test is left; check that densities are dry, and the specific gravity")
        return None
    tests = summarise_tests(used, left_out)
    summary = tests.dry_density
    if summary.outliers:
        context.warn(
            "outliers", "bank.tests",
            f"far from the others, and kept: {', '.join(summary.outliers)}. Look whether they are another "
            "soil",
        )  # fmt: skip
    water = context.material.bank.water_content
    if water is None and tests.water_content is not None:
        water = tests.water_content.mean
    error = summary.standard_error
    part = None if error is None else Part(name="bank", relative_sd=error / summary.mean, tests=summary.count)
    if error is None:
        context.warn("one-test", "bank.tests", "a single test tells nothing of the scatter; test more places")
    return Bank(summary.mean, water, tests, part)


# --- loose -----------------------------------------------------------------------------------------------


def loose_dry_density(context: Context, bank: float) -> float | None:
    """Loose dry density; None with the fault noted."""
    state = context.material.loose
    if state.dry_density is not None:
        if state.dry_density < bank:
            return state.dry_density
        context.fault(
            "loose.dry_density",
            f"{context.density(state.dry_density)} is not below the bank dry density "
            f"{context.density(bank)}; "
            "soil loosens when it is dug. Check that both are dry",
        )
        return None
    if state.swell_percent is not None:
        return states.loose_dry_density_of_swell(bank, state.swell_percent)
    if context.typical is not None:
        typical = context.typical.swell_percent
        shown = f"a swell of {typical.middle:g} % ({typical.low:g} to {typical.high:g} %)"
        context.assume("loose_dry_density_kg_m3")
        return states.loose_dry_density_of_swell(bank, context.guess("swell_percent", "loose", typical, shown))
    swell, low, high = ASSUMED_SWELL[context.material.use]
    context.assume("loose_dry_density_kg_m3", "swell_percent")
    context.warn(
        "swell-assumed", "loose",
        f"no swell given; {swell:g} % is assumed ({low:g} to {high:g} % is usual). Loose volumes and truck "
        "loads rest on "
        "it, the balance does not",
    )  # fmt: skip
    return states.loose_dry_density_of_swell(bank, swell)


def note_reading(context: Context) -> None:
    """Hand on what was said while the files were read."""
    for code, message in context.tests.notes:
        context.note(Warning(code, message))


def even_sd(width: float) -> float:
    """Standard deviation of a value that may lie anywhere in a range: width / sqrt(12)."""
    return width / math.sqrt(12)
