"""From the ``[material.*]`` and ``[fill]`` tables and the tests of a site to soil cards.

Every fault of every material comes in one message.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import replace

from earthwork.errors import SiteFileError, SoilError
from earthwork.site import Site
from earthwork.soils import inputs
from earthwork.soils.card import SoilCard
from earthwork.soils.classify import Classification, grading_of
from earthwork.soils.consequences import consequences
from earthwork.soils.context import Context
from earthwork.soils.inputs import Bank
from earthwork.soils.peak import Peak, compaction_peak, warn_of_other_effort
from earthwork.soils.placing import FillState, bands, check_placing, fill_state, target_water
from earthwork.soils.records import MaterialTests
from earthwork.soils.relative_density import relative_density_percent
from earthwork.soils.suction import (
    GRANULAR_RANGE_MM,
    PLASTIC_RANGE,
    SuctionEstimate,
    estimate_suction,
    granular_curve,
    plastic_curve,
)
from earthwork.soils.typical import typical_soil
from earthwork.soils.uncertainty import ShrinkUncertainty, bank_volume_per_point


def build_cards(site: Site, tests: Mapping[str, MaterialTests]) -> dict[str, SoilCard]:
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
        context = Context(name, material, fill, site.units, tests.get(name, MaterialTests()))
        warn_of_other_effort(context, materials)
        card = _card(context)
        faults += context.faults
        if card is not None:
            cards[name] = card
    if faults:
        count = "1 fault" if len(faults) == 1 else f"{len(faults)} faults"
        raise SoilError(f"{site.path or 'site'}: {count} in the soils\n" + "\n".join(f"  {f}" for f in faults))
    return cards


def _card(context: Context) -> SoilCard | None:
    """One card; None with the faults noted in the context."""
    inputs.note_reading(context)
    _take_typical(context)
    soil = inputs.classified(context)
    fine_gravity = inputs.specific_gravity(context, soil)
    gravity = inputs.whole_gravity(context, fine_gravity)
    bank = inputs.bank_state(context, gravity)
    peak = compaction_peak(context, fine_gravity, soil)
    if bank is None:
        return None
    loose = inputs.loose_dry_density(context, bank.dry_density)
    made = fill_state(context, bank, peak, gravity)
    target, window = target_water(context, peak)
    rows = bands(context, bank, made, peak)
    if peak is not None and made is not None and target is not None and not context.faults:
        check_placing(context, gravity, peak, made, target, window, rows)
    if context.faults or loose is None:
        return None
    card = SoilCard(
        material=context.name, use=context.material.use, specific_gravity=gravity,
        bank_dry_density_kg_m3=bank.dry_density, bank_water_content_percent=bank.water_content,
        loose_dry_density_kg_m3=loose,
        target_water_content_percent=target, window_water_content_percent=window,
        saturation_window_percent=context.fill.saturation_window if target is not None else None,
        air_voids_max_percent=context.fill.air_voids_max if target is not None else None,
        loss_fraction=context.material.loss_percent / 100, bands=rows, bank_tests=bank.tests, classification=soil,
        oversize=context.material.oversize,
    )  # fmt: skip
    card = _with_fill(context, card, bank, peak, made)
    if soil is not None:
        card = replace(
            card,
            consequences=consequences(soil, bank_dry_density_kg_m3=bank.dry_density, specific_gravity=gravity),
            suction=_suction(context, card, soil),
        )
    return replace(card, assumed=tuple(context.assumed), warnings=tuple(context.warnings))


def _take_typical(context: Context) -> None:
    name = context.material.typical
    bare = context.material.bank
    untold = bare.dry_density is None and bare.moist_density is None and bare.tests is None
    if name is None and not (context.material.use == "topsoil" and untold):
        return
    try:
        context.typical = typical_soil(name or "topsoil")
    except SoilError as error:
        context.fault("typical", str(error))


def _with_fill(context: Context, card: SoilCard, bank: Bank, peak: Peak | None, made: FillState | None) -> SoilCard:
    """The card with what it becomes as fill, and how sure that is."""
    material = context.material
    if peak is not None:
        card = replace(
            card,
            method=material.proctor.method if material.proctor else None,
            max_dry_density_kg_m3=peak.dry_density, optimum_water_content_percent=peak.water_content,
            laboratory_max_dry_density_kg_m3=peak.laboratory_dry_density,
            laboratory_optimum_water_content_percent=peak.laboratory_water_content, curve=peak.curve,
        )  # fmt: skip
    if made is None:
        return card
    card = replace(
        card,
        fill_dry_density_kg_m3=made.dry_density, fill_dry_density_from=made.source,
        relative_compaction_percent=made.required, expected_compaction_percent=made.expected,
        expected_compaction_from=made.expected_from, field_log=made.log,
        required_dry_density_kg_m3=made.required_dry_density,
        uncertainty=_uncertainty(bank, peak, made),
    )  # fmt: skip
    indices = material.relative_density
    if indices is not None:
        card = replace(
            card,
            min_dry_density_kg_m3=indices.min_dry_density,
            fill_relative_density_percent=relative_density_percent(
                made.dry_density, indices.min_dry_density, indices.max_dry_density
            ),
            bank_relative_density_percent=relative_density_percent(
                bank.dry_density, indices.min_dry_density, indices.max_dry_density
            ),
        )
    if peak is not None and made.expected is not None:
        cost = bank_volume_per_point(peak.dry_density, bank.dry_density, card.loss_fraction)
        card = replace(card, bank_m3_per_compacted_m3_per_point=cost)
    return card


def _uncertainty(bank: Bank, peak: Peak | None, made: FillState) -> ShrinkUncertainty | None:
    """The uncertainty of the shrinkage factor; None when nothing but assumptions of ours stands behind it."""
    factor = bank.dry_density / made.dry_density
    if made.part_holds_bank:
        return None if made.part is None else ShrinkUncertainty(shrinkage_factor=factor, parts=(made.part,))
    candidates = {"bank": bank.part, "fill": None}
    if made.expected is not None:
        candidates = {"bank": bank.part, "maximum": peak.part if peak else None, "compaction": made.part}
    known = tuple(part for part in candidates.values() if part is not None)
    # An overshoot that we assumed is no knowledge: alone it would pass for a test.
    if not any(part is not made.part or made.log is not None for part in known):
        return None
    unknown = tuple(name for name, part in candidates.items() if part is None)
    return ShrinkUncertainty(shrinkage_factor=factor, parts=known, unknown=unknown)


def _suction(context: Context, card: SoilCard, soil: Classification) -> SuctionEstimate | None:
    """Suction at the placing condition; None where the relation does not hold or nothing is asked."""
    target = card.fill_saturation_percent
    if target is None or card.fill_dry_density_kg_m3 is None:
        return None
    plasticity = soil.plasticity_index or 0.0
    weighted = (soil.fines_percent or 0.0) / 100 * plasticity
    d60 = grading_of(context.material.gradation).size_mm(60) if context.material.gradation else None
    if PLASTIC_RANGE[0] <= weighted <= PLASTIC_RANGE[1]:
        curve = plastic_curve(soil.fines_percent or 0.0, plasticity)
        relation = f"Fredlund and Xing with parameters after Zapata, fines share × PI = {weighted:.1f}"
    elif plasticity == 0 and d60 is not None and GRANULAR_RANGE_MM[0] <= d60 <= GRANULAR_RANGE_MM[1]:
        curve = granular_curve(d60)
        relation = f"Fredlund and Xing with parameters after Zapata, D60 = {d60:.2f} mm"
    else:
        return None
    ends = card.window_water_content_percent or (None, None)
    dry, wet = (card.saturation_percent_at(card.fill_dry_density_kg_m3, water) for water in ends)
    if dry is not None and dry <= 0:
        dry = None
    return estimate_suction(curve, relation, target=target, wet_end=wet, dry_end=dry)
