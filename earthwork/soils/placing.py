"""What a material becomes as fill: its dry density, target water, bands by depth, and whether those states can be."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

from earthwork.errors import SoilError, Warning
from earthwork.site.model import ByDepth, Fill, Oversize
from earthwork.soils import oversize, phase, states
from earthwork.soils.card import Band
from earthwork.soils.context import Context
from earthwork.soils.in_place import TestSet, TestSummary, summarise, summarise_tests
from earthwork.soils.inputs import Bank, even_sd, possible_tests
from earthwork.soils.peak import Peak
from earthwork.soils.records import DensityTest
from earthwork.soils.relative_density import dry_density_of_relative
from earthwork.soils.uncertainty import Part
from earthwork.soils.window import PlacingWindow

#: Crews overshoot the required compaction by this many points when the site says nothing
#: ([UFC-3-220-20], section 3-4.3.2); the overshoot may be anything from none to twice that.
OVERSHOOT_POINTS = 2.0
#: The same for relative density, whose points are smaller: 5 of them are about one of relative compaction.
OVERSHOOT_DENSITY_POINTS = 5.0
#: A stated mean that lies further than this from the field tests, in standard errors, is doubted.
_DOUBT = 2.0


@dataclass(frozen=True, kw_only=True)
class FieldLog:
    """Tests in the fill as placed: percent of maximum that was reached, and the tests that fell short."""

    tests: TestSet
    compaction: TestSummary
    percents: tuple[float, ...]  #: of each test in ``tests.tests``, by the maximum of its own soil
    required_percent: float
    short: tuple[str, ...]  #: labels of tests under the required compaction

    def to_dict(self) -> dict[str, Any]:
        return {
            **self.tests.to_dict(),
            "relative_compaction_percent": self.compaction.mean,
            "relative_compaction_sd_percent": self.compaction.sd,
            "relative_compaction_low_percent": self.compaction.low,
            "relative_compaction_high_percent": self.compaction.high,
            "short_count": len(self.short),
            "short": list(self.short),
        }


@dataclass(frozen=True, kw_only=True)
class FillState:
    """The dry density that a material gets as fill, and where the figure comes from."""

    dry_density: float
    source: str
    required: float | None = None  #: relative compaction [%]
    expected: float | None = None
    expected_from: str | None = None
    required_dry_density: float | None = None
    part: Part | None = None
    part_holds_bank: bool = False  #: the part is of the factor as a whole, bank density included
    log: FieldLog | None = None


def fill_state(context: Context, bank: Bank, peak: Peak | None, gravity: float) -> FillState | None:
    """The state in the fill; None for topsoil and waste, and with the fault noted when nothing tells it."""
    material = context.material
    if material.use in ("topsoil", "waste"):
        return None
    if material.fill is not None:
        return _stated(context, gravity)
    if material.shrink_percent_of_bank is not None:
        low, high = material.shrink_percent_of_bank
        context.warn(
            "shrink-assumed", "shrink_percent_of_bank",
            f"{(low + high) / 2:g} % is used, the middle of {low:g} to {high:g} %; no test stands behind it",
        )  # fmt: skip
        return _of_shrink(context, bank, low, high, gravity)
    if peak is not None:
        return _compacted(context, bank, peak, gravity)
    typical = context.typical
    if typical is not None and typical.shrink_percent_of_bank is not None:
        shrink = typical.shrink_percent_of_bank
        shown = f"a shrink of {shrink.middle:g} % of bank ({shrink.low:g} to {shrink.high:g} %)"
        context.guess("shrinkage_factor", "shrink_percent_of_bank", shrink, shown)
        return _of_shrink(context, bank, shrink.low, shrink.high, gravity)
    if not context.faults:
        ways = "fill.dry_density or shrink_percent_of_bank"
        if material.use == "fill":
            ways = f"proctor, relative_density, {ways}"
        context.fault("", f"what it becomes as fill is missing; give {ways}")
    return None


def _stated(context: Context, gravity: float) -> FillState | None:
    assert context.material.fill is not None
    density = context.material.fill.dry_density
    if density >= gravity * phase.WATER_DENSITY_KG_M3:
        context.fault(
            "fill.dry_density",
            f"{context.density(density)} is at or over the density of the grains (specific gravity {gravity:.3g})",
        )
        return None
    context.assume("fill_dry_density_kg_m3")
    return FillState(dry_density=density, source="stated, without a compaction test")


def _of_shrink(context: Context, bank: Bank, low: float, high: float, gravity: float) -> FillState | None:
    context.assume("fill_dry_density_kg_m3", "shrinkage_factor")
    density = states.fill_dry_density_of_shrink(bank.dry_density, (low + high) / 2)
    if density >= gravity * phase.WATER_DENSITY_KG_M3:
        context.fault(
            "shrink_percent_of_bank",
            f"the middle makes a fill of {context.density(density)}, at or over the density of the grains "
            "(specific "
            f"gravity {gravity:.3g}); rock bulks: a bulking range is negative",
        )
        return None
    factor = bank.dry_density / density
    part = Part(name="shrink range", relative_sd=even_sd((high - low) / 100) / factor)
    return FillState(dry_density=density, source="shrink range", part=part, part_holds_bank=True)


def _compacted(context: Context, bank: Bank, peak: Peak, gravity: float) -> FillState | None:
    if bank.dry_density > peak.dry_density:
        context.warn(
            "bank-denser-than-maximum", "bank.dry_density",
            f"{context.density(bank.dry_density)} is over the compaction maximum "
            f"{context.density(peak.dry_density)}. Stiff "
            "clay and till can be; otherwise check that both are dry and of the same soil",
        )  # fmt: skip
    if context.material.relative_density is not None and context.fill.relative_density is not None:
        return _of_relative_density(context, peak, gravity)
    required = context.fill.relative_compaction
    log = _field_log(context, peak, required, gravity)
    if context.fill.expected_compaction is not None:
        expected, source = context.fill.expected_compaction, "stated"
        if log is not None:
            _compare_with_log(context, expected, log)
    elif log is not None:
        expected, source = log.compaction.mean, f"{log.compaction.count} field tests"
        _doubt_short(context, log)
    else:
        expected, source = assumed_expectation(context, context.fill), "assumed"
    return FillState(
        dry_density=peak.dry_density * expected / 100, source=peak.source, required=required, expected=expected,
        expected_from=source, required_dry_density=peak.dry_density * required / 100,
        part=_compaction_part(expected, source, log), log=log,
    )  # fmt: skip


def _of_relative_density(context: Context, peak: Peak, gravity: float) -> FillState:
    indices, fill = context.material.relative_density, context.fill
    assert indices is not None
    assert fill.relative_density is not None
    low, high = indices.min_dry_density, indices.max_dry_density
    required = dry_density_of_relative(fill.relative_density, low, high)
    log = _field_log(context, peak, 100 * required / high, gravity)
    expected = fill.expected_relative_density
    if expected is not None:
        density, source = dry_density_of_relative(expected, low, high), "stated"
        if log is not None:
            _compare_with_log(context, 100 * density / high, log, "expected_relative_density")
    elif log is not None:
        density, source = high * log.compaction.mean / 100, f"{log.compaction.count} field tests"
        _doubt_short(context, log)
    else:
        expected, source = min(fill.relative_density + OVERSHOOT_DENSITY_POINTS, 100.0), "assumed"
        density = dry_density_of_relative(expected, low, high)
        context.assume("expected_compaction_percent")
        context.note(
            Warning(
                "compaction-assumed",
                f"fill.expected_relative_density: not given; {expected:g} % is assumed. Give the mean that "
                "the crew reaches",
            )
        )
    part = _compaction_part(100 * density / high, source, log)
    if source == "assumed":
        part = Part(name="compaction", relative_sd=even_sd(2 * (density - required)) / density)
    return FillState(
        dry_density=density, source=peak.source, required=100 * required / high, expected=100 * density / high,
        expected_from=source, required_dry_density=required, part=part, log=log,
    )  # fmt: skip


def _compaction_part(expected: float, source: str, log: FieldLog | None) -> Part | None:
    if source == "assumed":
        return Part(name="compaction", relative_sd=even_sd(2 * OVERSHOOT_POINTS) / expected)
    if log is None or log.compaction.standard_error is None:
        return None
    relative = log.compaction.standard_error / log.compaction.mean
    return Part(name="compaction", relative_sd=relative, tests=log.compaction.count)


def _field_log(context: Context, peak: Peak, required: float, gravity: float) -> FieldLog | None:
    """The compaction that tests in the fill show, None without tests."""
    if not context.tests.field:
        return None
    used, left_out = possible_tests(context, context.tests.field, gravity, "field.tests")
    if not used:
        context.fault("field.tests", "no test is left; check that densities are dry, and the specific gravity")
        return None
    tests = summarise_tests(used, left_out)
    percents = [100 * test.dry_density_kg_m3 / maximum_of(context, peak, test) for test in used]
    compaction = summarise(percents, [test.label for test in used])
    short = tuple(test.label for test, percent in zip(used, percents, strict=True) if percent < required)
    if compaction.outliers:
        context.warn("outliers", "field.tests", f"far from the others, and kept: {', '.join(compaction.outliers)}")
    if short:
        listed = ", ".join(short[:8]) + (f" and {len(short) - 8} more" if len(short) > 8 else "")
        context.warn(
            "tests-short", "field.tests",
            f"{len(short)} of {len(used)} tests are under the required {required:.4g} %: {listed}",
        )  # fmt: skip
    return FieldLog(
        tests=tests, compaction=compaction, percents=tuple(percents), required_percent=required, short=short
    )


def maximum_of(context: Context, peak: Peak, test: DensityTest) -> float:
    """The maximum dry density that a field test is held to: corrected for its own oversize where it tells it."""
    if test.oversize_percent is None:
        return peak.dry_density
    coarse = context.material.oversize or Oversize()
    try:
        return oversize.whole_dry_density(peak.laboratory_dry_density, test.oversize_percent, coarse.specific_gravity)
    except SoilError as error:
        context.fault("field.tests", f"{test.label}: {error}")
        return peak.dry_density


def _doubt_short(context: Context, log: FieldLog) -> None:
    reached, required = log.compaction.mean, log.required_percent
    if reached < required:
        context.warn(
            "compaction-short", "field.tests",
            f"the mean reached, {reached:.1f} %, is under the required {required:.4g} %; the fill does not comply",
        )  # fmt: skip


def _compare_with_log(context: Context, stated: float, log: FieldLog, key: str = "expected_compaction") -> None:
    error = log.compaction.standard_error
    if error is not None and abs(stated - log.compaction.mean) > _DOUBT * error:
        context.warn(
            "compaction-differs", "field.tests",
            f"the field tests reach {log.compaction.mean:.1f} % in the mean (standard error {error:.2f}), "
            f"not the {stated:.4g} % of fill.{key}; take that out to use the tests",
        )  # fmt: skip


def assumed_expectation(context: Context, row: Fill | ByDepth) -> float:
    """The compaction [%] that crews will reach when the site does not say; labelled and warned about."""
    expected = row.relative_compaction + OVERSHOOT_POINTS
    where = "fill" if isinstance(row, Fill) else f"fill.by_depth[{context.fill.by_depth.index(row) + 1}]"
    context.assume("expected_compaction_percent")
    context.note(
        Warning(
            "compaction-assumed",
            f"{where}.expected_compaction: not given; {expected:g} % is assumed, {OVERSHOOT_POINTS:g} "
            "points over the "
            "required one. Every point over costs soil: give the mean that the crew reaches",
        )
    )
    return expected


def target_water(context: Context, peak: Peak | None) -> tuple[float | None, tuple[float, float] | None]:
    """Target water content and placing window [%]; None for what has no optimum."""
    if peak is None or peak.water_content is None or context.material.use != "fill":
        return None, None
    target = peak.water_content + context.fill.water_content_offset
    if target < 0:
        context.fault(
            "", f"the target water content is {target:g} %; it must be 0 or more. Check fill.water_content_offset"
        )
        return None, None
    window = context.fill.water_content_window
    if window is None:
        return target, None
    return target, (max(peak.water_content + window[0], 0.0), peak.water_content + window[1])


def bands(context: Context, bank: Bank, made: FillState | None, peak: Peak | None) -> tuple[Band, ...]:
    """A band per row of ``fill.by_depth``, also for materials that a percentage does not apply to."""
    rows = []
    for row in context.fill.by_depth:
        density = made.dry_density if made else None
        expected = row.expected_compaction
        if made is not None and made.expected is not None and peak is not None:
            expected = expected if expected is not None else assumed_expectation(context, row)
            density = peak.dry_density * expected / 100
        rows.append(
            Band(
                below_m=row.below,
                measured_from=row.measured_from,
                relative_compaction_percent=row.relative_compaction,
                expected_compaction_percent=row.relative_compaction + OVERSHOOT_POINTS
                if expected is None
                else expected,
                fill_dry_density_kg_m3=density,
                shrinkage_factor=None if density is None else states.shrinkage_factor(bank.dry_density, density),
            )
        )
    return tuple(rows)


def check_placing(
    context: Context, gravity: float, peak: Peak, made: FillState, target: float,
    window: tuple[float, float] | None, rows: Sequence[Band],
) -> None:  # fmt: skip
    """Refuse a target or an end of the window above zero air voids, here and in each band, and an empty window."""
    waters = [("the target", target, "fill.water_content_offset")]
    if window is not None:
        waters += [("the dry end of the window", window[0], "fill.water_content_window"),
                   ("the wet end of the window", window[1], "fill.water_content_window")]  # fmt: skip
    places = [("", made.dry_density, made.expected or 0.0)]
    places += [
        (f" below {context.length(b.below_m)}", b.fill_dry_density_kg_m3, b.expected_compaction_percent)
        for b in rows if b.fill_dry_density_kg_m3 is not None
    ]  # fmt: skip
    for place, dry, expected in places:
        for what, water, key in waters:
            _check_state(context, gravity, peak, f"{what}{place}", (water, dry, expected), key)
    if context.faults or made.required_dry_density is None:
        return
    limits = PlacingWindow(
        min_dry_density_kg_m3=min(made.required_dry_density, made.dry_density), specific_gravity=gravity,
        water_content_percent=window, saturation_percent=context.fill.saturation_window,
        air_voids_max_percent=context.fill.air_voids_max, target=(target, made.dry_density),
    )  # fmt: skip
    try:
        limits.check(context.key(), show=context.density)
    except SoilError as error:
        context.faults.append(str(error))


def _check_state(
    context: Context, gravity: float, peak: Peak, what: str, state: tuple[float, float, float], key: str
) -> None:
    water, dry, expected = state
    if dry >= gravity * phase.WATER_DENSITY_KG_M3:
        context.fault(
            "",
            f"{what}: {context.density(dry)} is at or over the density of the grains; check fill.expected_compaction",
        )
        return
    room = phase.zero_air_voids_water_content_percent(dry, gravity)
    if water <= room:
        return
    # The optimum itself has no room there: then it is not the distance from the optimum that is wrong.
    suspects = ["the expected compaction"] if (peak.water_content or 0.0) > room else [key]
    if "specific_gravity" in context.assumed:
        suspects.append(f"specific_gravity ({gravity:.3g} is assumed)")
    context.fault(
        "",
        f"{what}, {water:.2f} % water at {context.density(dry)} ({expected:.4g} % of the maximum), is "
        "above zero air voids "
        f"(saturation {phase.saturation_percent(dry, water, gravity):.1f} %); the greatest water content "
        "possible there is "
        f"{room:.2f} %. Suspect {', '.join(suspects)}",
    )
