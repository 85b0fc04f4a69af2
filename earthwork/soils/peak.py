"""The compaction maximum and optimum of a material: from a curve, from figures, vibrated, or typical."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

from earthwork.errors import SoilError
from earthwork.site.model import Material
from earthwork.soils import oversize, phase
from earthwork.soils.classify import Classification
from earthwork.soils.context import Context
from earthwork.soils.curve import CompactionCurve, fit_curve
from earthwork.soils.effort import NOMINAL_ENERGY_KJ_M3, Rammer, compaction_energy_kj_m3, effort_of, same_method
from earthwork.soils.relative_density import FINES_LIMIT_PERCENT
from earthwork.soils.typical import TYPICAL_METHOD
from earthwork.soils.uncertainty import Part


@dataclass(frozen=True)
class Peak:
    """Compaction maximum [kg/m³] and optimum [%]: of the whole soil, and as the laboratory reported them."""

    dry_density: float
    water_content: float | None
    laboratory_dry_density: float
    laboratory_water_content: float | None
    curve: CompactionCurve | None = None
    part: Part | None = None
    source: str = "compaction test"


def compaction_peak(context: Context, gravity: float, soil: Classification | None) -> Peak | None:
    """Maximum and optimum of the whole soil, None when the material has none (faults are noted)."""
    material = context.material
    if material.proctor is not None:
        _check_method(context)
        peak = _tested_peak(context, gravity) if context.tests.curve else _stated_peak(context, gravity)
        return None if peak is None else _whole_peak(context, peak)
    if material.relative_density is not None:
        return _vibrated_peak(context, gravity, soil)
    typical = context.typical
    stated = material.fill is not None or material.shrink_percent_of_bank is not None
    if typical is None or typical.max_dry_density_kg_m3 is None or stated or material.use != "fill":
        return None
    assert typical.optimum_water_content_percent is not None
    if context.fill.method is not None and not same_method(context.fill.method, TYPICAL_METHOD):
        context.fault(
            "typical",
            f'its typical maximum is for standard effort, and [fill] asks for "{context.fill.method}"; percentages of '
            "one effort mean nothing for the other. Give proctor by that method, or a shrink_percent_of_bank",
        )
        return None
    dry, wet = typical.max_dry_density_kg_m3, typical.optimum_water_content_percent
    shown = (
        f"{context.density(dry.middle)} ({context.density(dry.low)} to {context.density(dry.high)}, standard effort)"
    )
    top = context.guess("max_dry_density_kg_m3", "proctor", dry, shown)
    optimum = context.guess(
        "optimum_water_content_percent",
        "proctor",
        wet,
        f"an optimum of {wet.middle:g} % ({wet.low:g} to {wet.high:g} %)",
    )
    # The two middles of one table need not make a possible state: the optimum is held to 90 % saturation.
    optimum = min(optimum, 0.9 * float(phase.zero_air_voids_water_content_percent(top, gravity)))
    part = Part(name="maximum", relative_sd=dry.sd / top)
    return Peak(top, optimum, top, optimum, None, part, "typical values")


def warn_of_other_effort(context: Context, materials: Mapping[str, Material]) -> None:
    """Say so when the percentages of a site hold for materials of two efforts and nothing tells which is meant."""
    own = context.material.proctor
    if own is None or context.fill.method is not None:
        return
    tested = {name: m.proctor.method for name, m in materials.items() if m.proctor is not None}
    first = next(iter(tested))
    if not same_method(tested[first], own.method):
        context.warn(
            "methods-mixed", "proctor.method",
            f'"{own.method}", but that of {first} is "{tested[first]}": one percentage asks for different densities by '
            "them. Say in fill.method which the specification means",
        )  # fmt: skip


def _check_method(context: Context) -> None:
    proctor, required = context.material.proctor, context.fill.method
    assert proctor is not None
    if required is not None and not same_method(proctor.method, required):
        context.fault(
            "proctor.method",
            f'"{proctor.method}" is not the method that [fill] asks for, "{required}"; percentages of one effort mean '
            "nothing for the other. Test by the method of the specification",
        )
    if proctor.rammer is None:
        return
    r = proctor.rammer
    if not 0.5 <= r.mass <= 20:
        context.fault(
            "proctor.rammer.mass", f'{r.mass:g} kg; it must be 0.5 to 20 kg: write it with its unit, "2.5 kg"'
        )
        return
    energy = compaction_energy_kj_m3(Rammer(r.mass, r.drop, r.blows, r.layers, r.mould_volume))
    effort = effort_of(proctor.method)
    nominal = NOMINAL_ENERGY_KJ_M3[effort] if effort else None
    if nominal is not None and abs(energy / nominal - 1) > 0.1:
        context.warn(
            "compaction-energy", "proctor.rammer",
            f"it puts in {energy:.0f} kJ/m³, but {proctor.method} is {nominal:.0f} kJ/m³: maximum and "
            "optimum are not "
            "those of the method",
        )  # fmt: skip


def _tested_peak(context: Context, gravity: float) -> Peak | None:
    proctor = context.material.proctor
    assert proctor is not None
    try:
        curve = fit_curve(
            context.tests.curve, specific_gravity=gravity, method=proctor.method, form=proctor.fit,
            where=context.key("proctor.tests"), show=context.density,
        )  # fmt: skip
    except SoilError as error:
        context.faults += str(error).split("\n")
        return None
    for warning in curve.warnings:
        context.note(warning)
    sd = curve.max_dry_density_sd_kg_m3
    top, optimum = curve.max_dry_density_kg_m3, curve.optimum_water_content_percent
    part = None if sd is None else Part(name="maximum", relative_sd=sd / top, tests=len(curve.points))
    return Peak(top, optimum, top, optimum, curve, part)


def _stated_peak(context: Context, gravity: float) -> Peak | None:
    proctor = context.material.proctor
    assert proctor is not None
    density, optimum = proctor.max_dry_density, proctor.optimum_water_content
    if density is None or optimum is None:
        return None
    assumed = " (assumed)" if "specific_gravity" in context.assumed else ""
    if density >= gravity * phase.WATER_DENSITY_KG_M3:
        context.fault(
            "proctor.max_dry_density",
            f"{context.density(density)} is at or over the density of the grains (specific gravity "
            f"{gravity:.3g}{assumed}); "
            "check both",
        )
        return None
    if phase.saturation_percent(density, optimum, gravity) <= 100:
        return Peak(density, optimum, density, optimum)
    room = phase.zero_air_voids_water_content_percent(density, gravity)
    share = phase.WATER_DENSITY_KG_M3 / density - optimum / 100
    needed = f", which would have to be over {1 / share:.2f}," if share > 0 and 1 / share < 3 else ""
    context.fault(
        "proctor",
        f"{context.density(density)} at {optimum:g} % water is above zero air voids; that dry density has "
        "room for "
        f"{room:.2f} % at most. Suspect specific_gravity = {gravity:.3g}{assumed}{needed} or a moist "
        "density written as "
        "the maximum dry density",
    )
    return None


def _whole_peak(context: Context, peak: Peak) -> Peak | None:
    """The peak with oversize particles put back in ([ASTM-D4718])."""
    coarse = context.material.oversize
    if coarse is None or coarse.percent == 0:
        return peak
    limit = oversize.OVERSIZE_LIMIT_PERCENT[coarse.sieve] if coarse.sieve else 40.0
    if coarse.percent > limit:
        context.fault(
            "oversize.percent",
            f"{coarse.percent:g} %; it must be 0 to {limit:g} % (ASTM D4718, over the "
            f"{coarse.sieve or '4.75 mm'} sieve). "
            "Test the whole soil in a larger mould, or control the fill by a trial embankment",
        )
        return None
    if coarse.sieve is None and coarse.percent > oversize.OVERSIZE_LIMIT_PERCENT["19 mm"]:
        context.warn(
            "oversize-limit", "oversize",
            f"{coarse.percent:g} % is within ASTM D4718 over the 4.75 mm sieve only (30 % over 19 mm); "
            "give oversize.sieve",
        )  # fmt: skip
    dry = oversize.whole_dry_density(peak.dry_density, coarse.percent, coarse.specific_gravity)
    assert peak.water_content is not None
    water = oversize.whole_water_content_percent(peak.water_content, coarse.percent, coarse.water_content)
    # d ln ρ(whole) / d ln ρ(fine) is the share of the whole volume that the finer fraction takes.
    share = (1 - coarse.percent / 100) * dry / peak.dry_density
    part = peak.part and Part(name=peak.part.name, relative_sd=peak.part.relative_sd * share, tests=peak.part.tests)
    return Peak(dry, water, peak.dry_density, peak.water_content, peak.curve, part)


def _vibrated_peak(context: Context, gravity: float, soil: Classification | None) -> Peak | None:
    states_of = context.material.relative_density
    assert states_of is not None
    top = states_of.max_dry_density
    if top >= gravity * phase.WATER_DENSITY_KG_M3:
        context.fault(
            "relative_density.max_dry_density", f"{context.density(top)} is at or over the density of the grains"
        )
        return None
    fines = soil.fines_percent if soil else None
    if fines is not None and fines > FINES_LIMIT_PERCENT:
        context.warn(
            "fines-over-limit", "relative_density",
            f"{fines:.0f} % fines; minimum and maximum density hold to {FINES_LIMIT_PERCENT:g} % (ASTM "
            "D4253, D4254). "
            "Test a compaction curve",
        )  # fmt: skip
    return Peak(top, None, top, None, None, None, "relative density")
