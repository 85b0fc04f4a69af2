"""Group symbol and name of a soil by grading and plasticity ([ASTM-D2487])."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass
from itertools import pairwise
from typing import Any

import numpy as np

from earthwork.errors import SoilError

GRAVEL_MM = 75.0
SAND_MM = 4.75
FINES_MM = 0.075
#: Points of percent passing by which a grading is carried on below its finest sieve: D10 of a soil with up to 12 %
#: fines, which dual symbols need.
CARRIED_ON_PERCENT = 2.0


@dataclass(frozen=True, kw_only=True)
class Grading:
    """Percent passing by sieve opening [mm], coarsest first, and what follows from it."""

    passing: tuple[tuple[float, float], ...]

    def percent_passing(self, opening_mm: float) -> float | None:
        """Percent passing a sieve, between tested ones by the logarithm of the opening; None outside them.

        The coarsest sieve tested at 100 % holds for all coarser ones.
        """
        sizes = np.array([size for size, _ in self.passing])[::-1]
        percents = np.array([percent for _, percent in self.passing])[::-1]
        if opening_mm > sizes[-1]:
            return 100.0 if percents[-1] >= 100 else None
        if opening_mm < sizes[0]:
            return None
        return float(np.interp(np.log(opening_mm), np.log(sizes), percents))

    def size_mm(self, percent: float) -> float | None:
        """Diameter [mm] that a percentage is finer than (D10, D30, D60); None when it was not reached.

        A little below the finest sieve the line through the two finest is carried on, as [ASTM-D2487] allows
        for D10 (from memory).
        """
        sizes = np.array([size for size, _ in self.passing])
        percents = np.array([value for _, value in self.passing])
        if self.carried_on(percent):
            (coarse, more), (fine, less) = self.passing[-2:]
            slope = math.log(coarse / fine) / (more - less)
            return math.exp(math.log(fine) - slope * (less - percent))
        if not percents.min() <= percent <= percents.max():
            return None
        order = np.argsort(percents, kind="stable")
        return float(np.exp(np.interp(percent, percents[order], np.log(sizes[order]))))

    def carried_on(self, percent: float) -> bool:
        """Whether the size at a percentage lies below the finest sieve, near enough to carry the line on."""
        if len(self.passing) < 2:
            return False
        (_, more), (_, less) = self.passing[-2:]
        return less - CARRIED_ON_PERCENT <= percent < less < more

    @property
    def uniformity(self) -> float | None:
        """Cu = D60 / D10."""
        d60, d10 = self.size_mm(60), self.size_mm(10)
        return d60 / d10 if d60 and d10 else None

    @property
    def curvature(self) -> float | None:
        """Cc = D30² / (D10 D60)."""
        d60, d30, d10 = self.size_mm(60), self.size_mm(30), self.size_mm(10)
        return d30**2 / (d10 * d60) if d60 and d30 and d10 else None


@dataclass(frozen=True, kw_only=True)
class Classification:
    """A classified soil: group symbol and name, and the figures that decided."""

    symbol: str
    name: str
    gravel_percent: float | None
    sand_percent: float | None
    fines_percent: float | None
    liquid_limit: float | None
    plasticity_index: float | None
    uniformity: float | None = None
    curvature: float | None = None
    notes: tuple[str, ...] = ()

    def to_dict(self) -> dict[str, Any]:
        return {
            "symbol": self.symbol, "name": self.name, "gravel_percent": self.gravel_percent,
            "sand_percent": self.sand_percent, "fines_percent": self.fines_percent,
            "liquid_limit": self.liquid_limit, "plasticity_index": self.plasticity_index,
            "uniformity": self.uniformity, "curvature": self.curvature, "notes": list(self.notes),
        }  # fmt: skip


def a_line(liquid_limit: float) -> float:
    """Plasticity index of the A line: 0.73 (LL − 20). Fines above it are clay ([ASTM-D2487], figure 3).

    >>> round(a_line(50.0), 6)
    21.9
    """
    return 0.73 * (liquid_limit - 20)


def u_line(liquid_limit: float) -> float:
    """Plasticity index of the U line: 0.9 (LL − 8), over which no soil was found ([ASTM-D2487], figure 3)."""
    return 0.9 * (liquid_limit - 8)


def classify(
    grading: Grading | None,
    *,
    liquid_limit: float | None = None,
    plastic_limit: float | None = None,
    organic: bool = False,
) -> Classification:
    """Classify a soil.

    Args:
        grading: percent passing; the 4.75 mm and 0.075 mm sieves decide, and D10, D30, D60 of clean sands
            and gravels. None is taken for a soil that is all fines.
        liquid_limit: percent, on what passes 0.425 mm; None with ``plastic_limit`` None is non-plastic.
        plastic_limit: percent.
        organic: the liquid limit after oven drying is under three quarters of that before, or it is plainly
            organic.

    Raises:
        SoilError: figures that contradict each other, or too few to tell.
    """
    plasticity = _plasticity(liquid_limit, plastic_limit)
    gravel, sand, fines = _fractions(grading)
    notes = []
    if liquid_limit is not None and plasticity is not None and plasticity > max(u_line(liquid_limit), 7.0):
        notes.append(
            f"the plasticity index {plasticity:g} is above the U line at liquid limit {liquid_limit:g}; "
            "check the limits"
        )
    if fines >= 50:
        if grading is not None and liquid_limit is None and plastic_limit is None:
            notes.append("no limits are given: taken as non-plastic")
        symbol = _fine_symbol(liquid_limit, plasticity, organic)
        clayey = liquid_limit is not None and plasticity is not None and plasticity >= max(a_line(liquid_limit), 4)
        kind = _FINE_NAMES.get(symbol, "organic clay" if clayey else "organic silt")
        name = _fine_name(kind, gravel, sand, fines)
        uniformity = curvature = None
    else:
        assert grading is not None
        if fines <= 12 and grading.carried_on(10):
            notes.append("D10 lies below the finest sieve; it is carried on from the two finest")
        symbol, name, uniformity, curvature = _coarse(grading, gravel, sand, fines, liquid_limit, plasticity, organic)
    return Classification(
        symbol=symbol, name=name, gravel_percent=gravel, sand_percent=sand, fines_percent=fines,
        liquid_limit=liquid_limit, plasticity_index=plasticity, uniformity=uniformity, curvature=curvature,
        notes=tuple(notes),
    )  # fmt: skip


def _plasticity(liquid_limit: float | None, plastic_limit: float | None) -> float | None:
    if (liquid_limit is None) != (plastic_limit is None):
        raise SoilError("classification: give both liquid_limit and plastic_limit, or neither (non-plastic)")
    if liquid_limit is None or plastic_limit is None:
        return None
    if not 0 < plastic_limit <= liquid_limit:
        raise SoilError(
            f"classification: plastic_limit {plastic_limit:g} must be more than 0 and at most liquid_limit "
            f"{liquid_limit:g}"
        )
    return liquid_limit - plastic_limit


def _fractions(grading: Grading | None) -> tuple[float, float, float]:
    """Gravel, sand and fines [%] of what passes 75 mm."""
    if grading is None:
        return 0.0, 0.0, 100.0
    below = grading.percent_passing(GRAVEL_MM)
    sand_and_fines, fines = grading.percent_passing(SAND_MM), grading.percent_passing(FINES_MM)
    if sand_and_fines is None or fines is None:
        lacking = "4.75 mm" if sand_and_fines is None else "0.075 mm (No. 200)"
        raise SoilError(f"classification: the grading does not reach the {lacking} sieve; add it")
    # The standard classifies the fraction that passes 75 mm.
    base = below if below else 100.0
    return 100 * (base - sand_and_fines) / base, 100 * (sand_and_fines - fines) / base, 100 * fines / base


def _fine_symbol(liquid_limit: float | None, plasticity: float | None, organic: bool) -> str:
    if liquid_limit is None or plasticity is None:
        return "OL" if organic else "ML"
    if organic:
        return "OL" if liquid_limit < 50 else "OH"
    above = plasticity >= a_line(liquid_limit)
    if liquid_limit >= 50:
        return "CH" if above else "MH"
    if above and plasticity > 7:
        return "CL"
    if above and plasticity >= 4:
        return "CL-ML"
    return "ML"


_FINE_NAMES = {
    "CL": "lean clay", "ML": "silt", "CL-ML": "silty clay", "CH": "fat clay", "MH": "elastic silt",
}  # fmt: skip


def _fine_name(name: str, gravel: float, sand: float, fines: float) -> str:
    coarse = 100 - fines
    if coarse < 15:
        return name
    leading, other = ("sandy", "gravel") if sand >= gravel else ("gravelly", "sand")
    if coarse < 30:
        return f"{name} with {'sand' if sand >= gravel else 'gravel'}"
    return f"{leading} {name}" + (f" with {other}" if min(sand, gravel) >= 15 else "")


def _coarse(
    grading: Grading, gravel: float, sand: float, fines: float,
    liquid_limit: float | None, plasticity: float | None, organic: bool,
) -> tuple[str, str, float | None, float | None]:  # fmt: skip
    is_gravel = gravel > sand
    letter, noun = ("G", "gravel") if is_gravel else ("S", "sand")
    other = f"{'sand' if is_gravel else 'gravel'}" if (sand if is_gravel else gravel) >= 15 else ""
    uniformity, curvature = grading.uniformity, grading.curvature
    fine = _fine_symbol(liquid_limit, plasticity, False)
    suffix, word = {"CL": ("C", "clay"), "CH": ("C", "clay"), "CL-ML": ("C", "silty clay")}.get(fine, ("M", "silt"))
    if fines > 12:
        if fine == "CL-ML":
            symbol, name = f"{letter}C-{letter}M", f"silty, clayey {noun}"
        else:
            symbol, name = f"{letter}{suffix}", f"{'clayey' if suffix == 'C' else 'silty'} {noun}"
        withs = [other]
    else:
        if uniformity is None or curvature is None:
            raise SoilError(
                f"classification: a {noun} with {fines:.0f} % fines needs D10, D30 and D60; "
                "add sieves so that the grading spans 10 to 60 % passing"
            )
        well = uniformity >= (4 if is_gravel else 6) and 1 <= curvature <= 3
        symbol, name = f"{letter}{'W' if well else 'P'}", f"{'well-' if well else 'poorly '}graded {noun}"
        withs = [other]
        if fines >= 5:
            symbol += f"-{letter}{suffix}"
            withs = [word, other]
    withs += ["organic fines"] if organic and fines > 12 else []
    listed = " and ".join(w for w in withs if w)
    return symbol, name + (f" with {listed}" if listed else ""), uniformity, curvature


def grading_of(passing: Sequence[tuple[float, float]]) -> Grading:
    """A grading from (opening [mm], percent passing) in any order.

    Raises:
        SoilError: a sieve twice, or a finer sieve that lets more pass than a coarser one.

    >>> round(grading_of([(4.75, 100), (0.075, 20)]).percent_passing(0.6), 1)
    60.1
    """
    ordered = sorted(((float(size), float(percent)) for size, percent in passing), reverse=True)
    for (coarse, more), (fine, less) in pairwise(ordered):
        if coarse == fine:
            raise SoilError(f"grading: the {coarse:g} mm sieve is given twice; keep one")
        if less > more:
            raise SoilError(
                f"grading: {less:g} % passes {fine:g} mm but only {more:g} % passes the coarser {coarse:g} "
                "mm; "
                "percent passing must fall with the opening. Percent retained is 100 less percent passing"
            )
    if not ordered:
        raise SoilError("grading: no sieves; give percent passing by sieve")
    return Grading(passing=tuple(ordered))
