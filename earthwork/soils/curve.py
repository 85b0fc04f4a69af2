"""The compaction curve: maximum dry density and optimum water content from test points, by least squares.

Three forms are fitted. The parabola is what most laboratories draw; the cubic follows curves that are
steeper on one side; the bounded form joins a straight dry branch to a wet branch of constant saturation and
so can never cross zero air voids. ``auto`` takes the parabola or the cubic, whichever foretells left-out
points better, because a fit is asked for its peak and not for its residuals; the bounded form steps in when
both polynomials put the peak above zero air voids. The spread of the three is reported: it is what the
choice is worth.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass
from typing import Any, Literal

import numpy as np

from earthwork.errors import SoilError, Warning
from earthwork.soils import phase
from earthwork.soils.context import in_si
from earthwork.soils.curve_forms import FORMS, Fit, fit_form
from earthwork.soils.records import CurvePoint, DensityTest

Form = Literal["auto", "parabola", "cubic", "bounded"]
#: Least number of different water contents on a curve (method: at least four points).
LEAST_POINTS = 4
#: Saturation [%] beyond which a point is left out; from 100 up to it the grain density is in doubt.
SATURATION_LIMIT = 103.0
#: Saturation [%] at the optimum that most soils have; outside it something is odd.
USUAL_SATURATION = (70.0, 95.0)


@dataclass(frozen=True, kw_only=True)
class CompactionCurve:
    """A fitted compaction curve.

    ``chosen`` gives the figures; ``fits`` are all forms that have a peak in the data.
    """

    method: str
    specific_gravity: float
    points: tuple[CurvePoint, ...]
    left_out: tuple[tuple[CurvePoint, str], ...]
    chosen: Fit
    fits: tuple[Fit, ...]
    warnings: tuple[Warning, ...] = ()

    @property
    def max_dry_density_kg_m3(self) -> float:
        return self.chosen.max_dry_density_kg_m3

    @property
    def optimum_water_content_percent(self) -> float:
        return self.chosen.optimum_water_content_percent

    @property
    def spread_kg_m3(self) -> float:
        """Difference between the highest and lowest maximum among the forms."""
        peaks = [fit.max_dry_density_kg_m3 for fit in self.fits]
        return max(peaks) - min(peaks)

    @property
    def max_dry_density_sd_kg_m3(self) -> float | None:
        """Standard deviation of the maximum: scatter of the points, and the choice of form (even over the spread)."""
        if self.chosen.max_dry_density_se_kg_m3 is None:
            return None
        return float(np.hypot(self.chosen.max_dry_density_se_kg_m3, self.spread_kg_m3 / np.sqrt(12)))

    @property
    def saturation_at_optimum_percent(self) -> float:
        return float(
            phase.saturation_percent(
                self.max_dry_density_kg_m3, self.optimum_water_content_percent, self.specific_gravity
            )
        )

    def dry_density_kg_m3(self, water_content_percent: Any) -> np.ndarray:
        """The chosen curve at water contents [%]."""
        return self.chosen.predict(np.asarray(water_content_percent, float))

    def point_rows(self) -> list[dict[str, Any]]:
        """A row per point, those left out last with the reason."""
        rows = []
        for point, reason in [*((p, None) for p in self.points), *self.left_out]:
            water, density = point.water_content_percent, point.dry_density_kg_m3
            rows.append(
                {
                    "place": point.place,
                    "specimen": point.specimen or None,
                    "water_content_percent": water,
                    "dry_density_kg_m3": density,
                    "saturation_percent": float(phase.saturation_percent(density, water, self.specific_gravity)),
                    "void_ratio": float(phase.void_ratio(density, self.specific_gravity)),
                    "fitted_dry_density_kg_m3": float(self.dry_density_kg_m3([water])[0]),
                    "left_out": reason,
                }
            )
        return rows

    def to_dict(self) -> dict[str, Any]:
        return {
            "count": len(self.points),
            "method": self.method,
            "form": self.chosen.form,
            "max_dry_density_kg_m3": self.max_dry_density_kg_m3,
            "max_dry_density_se_kg_m3": self.chosen.max_dry_density_se_kg_m3,
            "optimum_water_content_percent": self.optimum_water_content_percent,
            "optimum_water_content_se_percent": self.chosen.optimum_water_content_se_percent,
            "saturation_at_optimum_percent": self.saturation_at_optimum_percent,
            "residual_sd_kg_m3": self.chosen.residual_sd_kg_m3,
            "spread_kg_m3": self.spread_kg_m3,
            "fits": [fit.to_dict() for fit in self.fits],
            "left_out": [f"{_label(point)}: {reason}" for point, reason in self.left_out],
        }


def fit_curve(
    points: Sequence[CurvePoint],
    *,
    specific_gravity: float,
    method: str = "",
    form: Form = "auto",
    where: str = "compaction curve",
    show: Callable[[float], str] = in_si,
) -> CompactionCurve:
    """Fit a compaction curve through test points.

    Args:
        points: the tests; repeats at one water content are fine.
        specific_gravity: of the grains; points beyond zero air voids are left out by it.
        method: the standard of the test, kept with the result.
        form: ``auto``, or the form to use.
        where: opens each message.
        show: a dry density [kg/m³] as text, for messages.

    Raises:
        SoilError: a density at or above that of the grains; fewer than four different water contents; no
            peak inside the data, which is either a free-draining soil or too few points; no point on one
            side of the peak.
    """
    used, left_out, warnings = _possible(points, specific_gravity, where, show)
    water = np.array([point.water_content_percent for point in used])
    density = np.array([point.dry_density_kg_m3 for point in used])
    different = len(np.unique(water))
    if different < LEAST_POINTS:
        dropped = f" ({len(left_out)} left out: {_names(left_out)})" if left_out else ""
        raise SoilError(
            f"{where}: {different} different water contents{dropped}; a compaction curve needs at least "
            f"{LEAST_POINTS}, "
            "with one on each side of the peak. Test more points"
        )
    fits = {name: fit_form(name, water, density, specific_gravity) for name in FORMS}
    parabola = fits["parabola"]
    if parabola is None:
        raise SoilError(_no_peak(where, used, left_out, water, density))
    admissible = [fit for fit in fits.values() if fit is not None and _admissible(fit, water, specific_gravity)]
    chosen = _choose(form, admissible, where)
    warnings += _doubts(chosen, admissible, used, water, density, specific_gravity, where)
    return CompactionCurve(
        method=method, specific_gravity=specific_gravity, points=tuple(used), left_out=tuple(left_out),
        chosen=chosen, fits=tuple(admissible), warnings=tuple(warnings),
    )  # fmt: skip


def _label(point: CurvePoint) -> str:
    return point.place or f"{point.water_content_percent:g} %, {point.dry_density_kg_m3:.0f} kg/m³"


def _names(left_out: Sequence[tuple[CurvePoint, str]]) -> str:
    return "; ".join(f"{_label(point)} ({reason})" for point, reason in left_out)


def _possible(
    points: Sequence[CurvePoint], gravity: float, where: str, show: Callable[[float], str]
) -> tuple[list[CurvePoint], list[tuple[CurvePoint, str]], list[Warning]]:
    """The points that can be, those that cannot with the reason, and what to say about it."""
    grain = gravity * phase.WATER_DENSITY_KG_M3
    faults = [
        f"{_label(p)}: dry density is {show(p.dry_density_kg_m3)}; it must be below the grain density "
        f"{show(grain)} (specific gravity {gravity:g})"
        for p in points
        if not 0 < p.dry_density_kg_m3 < grain
    ]
    if faults:
        raise SoilError("\n".join(f"{where}: {fault}. Check the row for a typing error" for fault in faults))
    used: list[CurvePoint] = []
    left_out: list[tuple[CurvePoint, str]] = []
    doubtful: list[str] = []
    for point in points:
        saturation = phase.saturation_percent(point.dry_density_kg_m3, point.water_content_percent, gravity)
        if saturation > SATURATION_LIMIT:
            left_out.append((point, beyond_zero_air_voids(point, saturation, gravity)))
            continue
        if saturation > 100:
            doubtful.append(f"{_label(point)} ({saturation:.1f} %)")
        used.append(point)
    warnings = []
    if left_out:
        listed = _names(left_out)
        warnings.append(
            Warning(
                "points-left-out",
                f"{where}: left out of the fit: {listed}. Check water contents and specific gravity {gravity:g}",
            )
        )
    if doubtful:
        warnings.append(
            Warning(
                "points-oversaturated",
                f"{where}: a little beyond zero air voids: {'; '.join(doubtful)}. "
                f"The specific gravity {gravity:g} is probably low",
            )
        )
    return used, left_out, warnings


def beyond_zero_air_voids(test: CurvePoint | DensityTest, saturation: float, gravity: float) -> str:
    """Why a test is left out, with the likely slip."""
    reason = f"saturation {saturation:.1f} %, beyond zero air voids"
    if phase.possible_if_moist(test.dry_density_kg_m3, test.water_content_percent or 0.0, gravity):
        reason += "; possible if this is the moist density"
    return reason


def _no_peak(
    where: str, used: Sequence[CurvePoint], left_out: Sequence[tuple[CurvePoint, str]],
    water: np.ndarray, density: np.ndarray,
) -> str:  # fmt: skip
    curvature, slope = np.polyfit(water - water.mean(), density, 2)[:2]
    if curvature >= 0:
        course, side = "do not bend down", ""
    else:
        course, side = (
            ("rise to the end", " on the wet side") if slope > 0 else ("fall from the start", " on the dry side")
        )
    dropped = f"; left out beyond zero air voids: {_names(left_out)}" if left_out else ""
    return (
        f"{where}: no peak inside the {len(used)} points ({water.min():.1f} to {water.max():.1f} % "
        f"water{dropped}): "
        f"they {course}. Either points{side} are missing, or the soil drains freely and has no peak: "
        "then test minimum and maximum density (ASTM D4253, D4254) and give relative_density"
    )


def _admissible(fit: Fit, water: np.ndarray, gravity: float) -> bool:
    """A peak below zero air voids, with at least one point on each side."""
    optimum = fit.optimum_water_content_percent
    if not fit.max_dry_density_kg_m3 < gravity * phase.WATER_DENSITY_KG_M3:
        return False
    saturation = phase.saturation_percent(fit.max_dry_density_kg_m3, optimum, gravity)
    return bool(saturation <= 100 and np.any(water < optimum) and np.any(water > optimum))


def _choose(form: Form, admissible: Sequence[Fit], where: str) -> Fit:
    by_form = {fit.form: fit for fit in admissible}
    if form != "auto":
        if form not in by_form:
            raise SoilError(
                f"{where}: the form {form!r} has no peak below zero air voids with points on both sides; "
                f"{'use ' + ' or '.join(by_form) if by_form else 'test more points'}"
            )
        return by_form[form]
    polynomials = [by_form[name] for name in ("parabola", "cubic") if name in by_form]
    if polynomials:
        return min(polynomials, key=lambda fit: fit.left_out_rms_kg_m3)
    if "bounded" in by_form:
        return by_form["bounded"]
    raise SoilError(
        f"{where}: every curve puts its peak above zero air voids or has no points on one side of it; "
        "check the specific "
        "gravity and the water contents, and test more points"
    )


def _doubts(
    chosen: Fit, fits: Sequence[Fit], used: Sequence[CurvePoint], water: np.ndarray, density: np.ndarray,
    gravity: float, where: str,
) -> list[Warning]:  # fmt: skip
    found = []
    optimum = chosen.optimum_water_content_percent
    for side, count in (("dry", int(np.sum(water < optimum))), ("wet", int(np.sum(water > optimum)))):
        if count < 2:
            found.append(
                Warning(
                    "few-points",
                    f"{where}: {count} point on the {side} side of the optimum; two at least are good",
                )
            )
    if int(np.argmax(density)) in (int(np.argmin(water)), int(np.argmax(water))):
        found.append(
            Warning(
                "peak-not-bracketed",
                f"{where}: the densest point, {_label(used[int(np.argmax(density))])}, is the "
                f"{'driest' if water[np.argmax(density)] == water.min() else 'wettest'} one; test further "
                "out",
            )
        )
    line = fit_form("line", water, density, gravity)
    if line is not None and line.left_out_rms_kg_m3 <= chosen.left_out_rms_kg_m3:
        found.append(
            Warning(
                "weak-peak",
                f"{where}: a straight line foretells the points as well as a curve does; scatter hides the "
                "peak, "
                "or the soil has none (free-draining soils are judged by relative density)",
            )
        )
    saturation = phase.saturation_percent(chosen.max_dry_density_kg_m3, optimum, gravity)
    if not USUAL_SATURATION[0] <= saturation <= USUAL_SATURATION[1]:
        found.append(
            Warning(
                "optimum-saturation",
                f"{where}: saturation at the optimum is {saturation:.0f} %; most soils have "
                f"{USUAL_SATURATION[0]:.0f} to "
                f"{USUAL_SATURATION[1]:.0f} %. Check the specific gravity {gravity:g} and the water contents",
            )
        )
    return found
