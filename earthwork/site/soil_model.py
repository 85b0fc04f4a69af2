"""Tables of the site file that describe soils and the fill made of them."""

from __future__ import annotations

from typing import Annotated, Literal

from pydantic import Field, model_validator

from earthwork.site.base import Section
from earthwork.site.values import AnyPercent, Density, FileName, Length, Number, Percent, Text, WaterContent

SpecificGravity = Annotated[float, Field(strict=True, ge=2.0, le=4.0)]
RelativeCompaction = Annotated[float, Field(strict=True, ge=50, le=120)]


class BankState(Section):
    """Soil as it lies in the ground: direct figures, or a file of density tests."""

    dry_density: Density | None = Field(default=None, description="dry density in the ground")
    moist_density: Density | None = Field(default=None, description="or moist density; needs water_content")
    water_content: WaterContent | None = Field(
        default=None, description="water content in the ground, % of dry mass"
    )
    tests: FileName | None = Field(default=None, description="or a CSV of in-place density tests")

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
    swell_percent: Percent | None = Field(
        default=None, description="or swell: 100 (bank / loose dry density − 1)"
    )

    @model_validator(mode="after")
    def _not_both(self) -> LooseState:
        if self.dry_density is not None and self.swell_percent is not None:
            raise ValueError("give dry_density or swell_percent, not both")
        return self


class Proctor(Section):
    """The laboratory compaction test: its two results, or its points."""

    method: Text = Field(description="the standard, such as ASTM D698 or ASTM D1557")
    max_dry_density: Density | None = Field(default=None, description="maximum dry density")
    optimum_water_content: WaterContent | None = Field(
        default=None, description="optimum water content, % of dry mass"
    )
    tests: FileName | None = Field(default=None, description="or a CSV of the points of the curve")

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
    specific_gravity: SpecificGravity = Field(
        default=2.65, description="bulk specific gravity of the oversize"
    )
    water_content: Percent = Field(
        default=1.0, description="water content of the oversize, % of its dry mass"
    )


class FillState(Section):
    """What rock and other soils without a compaction test become."""

    dry_density: Density = Field(description="dry density in the fill; labelled as assumed")


class Material(Section):
    """A soil or rock of the site, under a name of your own."""

    use: Literal["fill", "rock", "topsoil", "waste"] = Field(
        description="what it is good for; topsoil and waste never count as fill"
    )
    specific_gravity: SpecificGravity | None = Field(
        default=None, description="specific gravity of the grains"
    )
    bank: BankState = Field(default=BankState(), description="state in the ground")
    loose: LooseState = Field(default=LooseState(), description="state in a truck")
    proctor: Proctor | None = Field(default=None, description="laboratory compaction test")
    oversize: Oversize | None = Field(default=None, description="correction for oversize particles")
    fill: FillState | None = Field(default=None, description="state in the fill, without a compaction test")
    shrink_percent_of_bank: tuple[AnyPercent, AnyPercent] | None = Field(
        default=None,
        description="or low and high shrink, % of bank volume; negative: bulking; labelled as assumed",
    )
    loss_percent: Percent = Field(default=0.0, description="lost in digging and hauling, % of dry mass")


class ByDepth(Section):
    """Another compaction requirement for deep fill."""

    below: Length = Field(description="depth at and below which it holds")
    measured_from: Literal["finished", "subgrade"] = Field(
        default="finished", description="where depth starts"
    )
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
    lift_thickness: Length | None = Field(default=None, description="thickness of a lift, compacted")
    loose_lift_thickness: Length | None = Field(default=None, description="or as spread, before rolling")
    by_depth: tuple[ByDepth, ...] = Field(default=(), description="other requirements for deep fill")
