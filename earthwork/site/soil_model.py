"""Tables of the site file that describe soils and the fill made of them."""

from __future__ import annotations

from itertools import pairwise
from typing import Annotated, Any, Literal

from pydantic import BeforeValidator, Field, WithJsonSchema, model_validator

from earthwork.site.base import Section
from earthwork.site.sieves import sieve_mm
from earthwork.site.values import (
    AnyPercent,
    Density,
    FileName,
    Length,
    Mass,
    Number,
    Percent,
    PositiveSoilVolume,
    Text,
    WaterContent,
    Whole,
)

SpecificGravity = Annotated[float, Field(strict=True, ge=2.0, le=4.0)]
RelativeCompaction = Annotated[float, Field(strict=True, ge=50, le=120)]


def _gradation(value: Any) -> Any:
    """Sieves as people write them to (opening [mm], percent passing), coarsest first."""
    if isinstance(value, tuple):
        return value
    if not isinstance(value, dict) or not value:
        raise ValueError('it must be a table of sieve = percent passing, such as { "No. 4" = 92, "No. 200" = 61 }')
    pairs: list[tuple[float, float]] = []
    for sieve, percent in value.items():
        number = None if isinstance(percent, bool) or not isinstance(percent, int | float) else float(percent)
        if number is None or not 0 <= number <= 100:
            raise ValueError(f'"{sieve}" = {percent}: percent passing must be a number from 0 to 100')
        pairs.append((sieve_mm(sieve), number))
    pairs.sort(reverse=True)
    for (coarse, more), (fine, less) in pairwise(pairs):
        if coarse == fine:
            raise ValueError(f"the {coarse:g} mm sieve is given twice")
        if less > more:
            raise ValueError(
                f"{less:g} % passes {fine:g} mm but only {more:g} % passes the coarser {coarse:g} mm; give "
                "percent "
                "passing, which is 100 less percent retained"
            )
    return tuple(pairs)


Gradation = Annotated[
    tuple[tuple[float, float], ...],
    BeforeValidator(_gradation),
    WithJsonSchema({"type": "object", "additionalProperties": {"type": "number", "minimum": 0, "maximum": 100}}),
]
AtterbergLimit = Annotated[float, Field(strict=True, gt=0, le=500)]


class BankState(Section):
    """Soil as it lies in the ground: direct figures, or a file of density tests."""

    dry_density: Density | None = Field(default=None, description="dry density in the ground")
    moist_density: Density | None = Field(default=None, description="or moist density; needs water_content")
    water_content: WaterContent | None = Field(default=None, description="water content in the ground, % of dry mass")
    tests: FileName | None = Field(
        default=None, description="or a CSV of in-place density tests; rows name their material, or their place tells it"
    )

    @model_validator(mode="after")
    def _one_way(self) -> BankState:
        ways = ("dry_density", "moist_density", "tests")
        given = [name for name in ways if getattr(self, name) is not None]
        if len(given) > 1:
            raise ValueError(f"give one of dry_density, moist_density and tests, not {' and '.join(given)}")
        if self.moist_density is not None and self.water_content is None:
            raise ValueError("give water_content with moist_density: only a dry density converts volume")
        return self


class LooseState(Section):
    """Soil as it lies in a truck or a stockpile."""

    dry_density: Density | None = Field(default=None, description="dry density in a heap or truck")
    swell_percent: Percent | None = Field(default=None, description="or swell: 100 (bank / loose dry density − 1)")

    @model_validator(mode="after")
    def _not_both(self) -> LooseState:
        if self.dry_density is not None and self.swell_percent is not None:
            raise ValueError("give dry_density or swell_percent, not both")
        return self


class FieldState(Section):
    """What was tested in the fill as it was placed."""

    tests: FileName = Field(
        description="CSV of in-place density tests in the fill; they tell the compaction that crews reach"
    )


class RammerSection(Section):
    """How the laboratory compacted, to compute the energy of a test that is neither standard nor modified."""

    mass: Mass = Field(description='mass of the rammer, with its unit, such as "2.5 kg"')
    drop: Length = Field(description='drop of the rammer, such as "305 mm"')
    blows: Whole = Field(description="blows per layer")
    layers: Whole = Field(description="layers in the mould")
    mould_volume: PositiveSoilVolume = Field(description='volume of the mould, such as "944 cm3"')


class Proctor(Section):
    """The laboratory compaction test: its two results, or its points."""

    method: Text = Field(description="the standard, such as ASTM D698 or ASTM D1557")
    max_dry_density: Density | None = Field(default=None, description="maximum dry density")
    optimum_water_content: WaterContent | None = Field(default=None, description="optimum water content, % of dry mass")
    tests: FileName | None = Field(default=None, description="or a CSV of the points of the curve")
    fit: Literal["auto", "parabola", "cubic", "bounded"] = Field(
        default="auto", description="form of the curve through the points; auto takes the one that foretells best"
    )
    rammer: RammerSection | None = Field(default=None, description="to compute the compaction energy")

    @model_validator(mode="after")
    def _figures_or_tests(self) -> Proctor:
        figures = [self.max_dry_density is not None, self.optimum_water_content is not None]
        if self.tests is not None and any(figures):
            raise ValueError("give tests, or max_dry_density and optimum_water_content, not both")
        if self.tests is None and not all(figures):
            raise ValueError("give max_dry_density and optimum_water_content, or tests")
        return self


class Oversize(Section):
    """Particles too coarse for the laboratory mould; they correct its maximum (ASTM D4718)."""

    percent: Percent = Field(default=0.0, description="oversize share of the dry mass")
    specific_gravity: SpecificGravity = Field(default=2.65, description="bulk specific gravity of the oversize")
    water_content: Percent = Field(default=1.0, description="water content of the oversize, % of its dry mass")
    sieve: Literal["4.75 mm", "19 mm"] | None = Field(
        default=None, description="sieve that splits it off: the correction holds to 40 % over 4.75 mm, 30 % over 19 mm"
    )


class IndexDensities(Section):
    """Loosest and densest state of a free-draining soil (ASTM D4254 and D4253)."""

    min_dry_density: Density = Field(description="minimum index dry density")
    max_dry_density: Density = Field(description="maximum index dry density")

    @model_validator(mode="after")
    def _in_order(self) -> IndexDensities:
        if self.min_dry_density >= self.max_dry_density:
            raise ValueError("give min_dry_density below max_dry_density")
        return self


class FillState(Section):
    """What rock and other soils without a compaction test become."""

    dry_density: Density = Field(description="dry density in the fill; labelled as assumed")


class Material(Section):
    """A soil or rock of the site, under a name of your own."""

    use: Literal["fill", "rock", "topsoil", "waste"] = Field(
        description="what it is good for; topsoil and waste never count as fill"
    )
    specific_gravity: SpecificGravity | None = Field(default=None, description="specific gravity of the grains")
    bank: BankState = Field(default=BankState(), description="state in the ground")
    loose: LooseState = Field(default=LooseState(), description="state in a truck")
    field: FieldState | None = Field(default=None, description="tests in the fill as placed")
    proctor: Proctor | None = Field(default=None, description="laboratory compaction test")
    relative_density: IndexDensities | None = Field(
        default=None, description="or minimum and maximum density, for free-draining soils"
    )
    oversize: Oversize | None = Field(default=None, description="correction for oversize particles")
    fill: FillState | None = Field(default=None, description="state in the fill, without a compaction test")
    shrink_percent_of_bank: tuple[AnyPercent, AnyPercent] | None = Field(
        default=None,
        description="or low and high shrink, % of bank volume; negative: bulking; labelled as assumed",
    )
    gradation: Gradation | None = Field(
        default=None, description='percent passing by sieve, such as { "No. 4" = 92, "0.075 mm" = 61 }'
    )
    liquid_limit: AtterbergLimit | None = Field(default=None, description="liquid limit, %; neither limit: non-plastic")
    plastic_limit: AtterbergLimit | None = Field(default=None, description="plastic limit, %")
    organic: bool = Field(default=False, description="organic fines (liquid limit falls by a quarter on oven drying)")
    typical: Text | None = Field(
        default=None,
        description='soil type whose typical values fill the gaps, such as "lean clay"; a guess, labelled everywhere',
    )
    loss_percent: Percent = Field(default=0.0, description="lost in digging and hauling, % of dry mass")


class ByDepth(Section):
    """Another compaction requirement for deep fill."""

    below: Length = Field(description="depth at and below which it holds")
    measured_from: Literal["finished", "subgrade"] = Field(default="finished", description="where depth starts")
    relative_compaction: RelativeCompaction = Field(description="required there, % of maximum")
    expected_compaction: RelativeCompaction | None = Field(
        default=None, description="mean that the crew will reach there; default required + 2, with a warning"
    )


class Fill(Section):
    """How the fill is compacted."""

    relative_compaction: RelativeCompaction = Field(description="required, % of the material's own maximum")
    expected_compaction: RelativeCompaction | None = Field(
        default=None, description="mean that the crew will reach; default required + 2, with a warning"
    )
    water_content_offset: Number = Field(default=0.0, description="target water content, points from optimum")
    water_content_window: tuple[Number, Number] | None = Field(
        default=None, description="driest and wettest allowed, points from optimum"
    )
    method: Text | None = Field(
        default=None, description="the standard that the percentages refer to; a Proctor of another effort is refused"
    )
    relative_density: Percent | None = Field(
        default=None, description="required relative density, %, for materials with relative_density"
    )
    expected_relative_density: Percent | None = Field(
        default=None, description="mean relative density that the crew will reach; default required + 5, with a warning"
    )
    saturation_window: tuple[Percent, Percent] | None = Field(
        default=None, description="lowest and highest saturation allowed when placed, %"
    )
    air_voids_max: Percent | None = Field(default=None, description="most air voids allowed when placed, % of volume")
    lift_thickness: Length | None = Field(default=None, description="thickness of a lift, compacted")
    loose_lift_thickness: Length | None = Field(default=None, description="or as spread, before rolling")
    by_depth: tuple[ByDepth, ...] = Field(default=(), description="other requirements for deep fill")
