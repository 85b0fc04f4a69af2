"""The forms that a compaction curve is fitted with, each with its peak, standard errors and left-out error."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from typing import Any

import numpy as np

from earthwork.units import WATER_DENSITY_KG_M3

#: The forms that are candidates for the peak.
FORMS = ("parabola", "cubic", "bounded")
#: How sharply the two branches of the bounded form meet; 40 did best on left-out points of real curves, and
#: 20 to 80 change the peak by less than its standard error.
_SHARPNESS = 40.0

Predict = Callable[[np.ndarray, np.ndarray], np.ndarray]


@dataclass(frozen=True, kw_only=True)
class Fit:
    """One form fitted to the points.

    Standard errors are None when there are no more points than parameters.
    """

    form: str
    parameters: tuple[float, ...]
    max_dry_density_kg_m3: float
    optimum_water_content_percent: float
    max_dry_density_se_kg_m3: float | None
    optimum_water_content_se_percent: float | None
    residual_sd_kg_m3: float | None
    left_out_rms_kg_m3: float  #: root mean square error at each point, by the fit to the others
    centre_percent: float  #: water content that the parameters count from
    specific_gravity: float

    def predict(self, water_content_percent: np.ndarray) -> np.ndarray:
        """Dry density [kg/m³] of the form at water contents [%]."""
        predict = _predictor(self.form, self.centre_percent, self.specific_gravity)
        return predict(water_content_percent, np.array(self.parameters))

    def to_dict(self) -> dict[str, Any]:
        return {
            "form": self.form,
            "max_dry_density_kg_m3": self.max_dry_density_kg_m3,
            "max_dry_density_se_kg_m3": self.max_dry_density_se_kg_m3,
            "optimum_water_content_percent": self.optimum_water_content_percent,
            "optimum_water_content_se_percent": self.optimum_water_content_se_percent,
            "residual_sd_kg_m3": self.residual_sd_kg_m3,
            "left_out_rms_kg_m3": self.left_out_rms_kg_m3,
        }


def _predictor(form: str, centre: float, gravity: float) -> Predict:
    """Dry density of a form, as a function of water contents and parameters."""
    if form == "bounded":
        return lambda water, p: _bounded(water, p, gravity)
    return lambda water, p: np.polyval(p, water - centre)


def _bounded(water: np.ndarray, parameters: np.ndarray, gravity: float) -> np.ndarray:
    """Two branches joined smoothly: a straight dry one, and a wet one of constant saturation.

    ρd = (dry^−k + wet^−k)^(−1/k), dry = a + b w, wet = Gs ρw / (1 + w Gs / S). On the wet side real curves
    run close to a line of constant saturation ([HORPIBULSUK]).
    """
    start, slope, saturation = parameters
    dry = np.maximum(start + slope * water, 1.0)
    wet = gravity * WATER_DENSITY_KG_M3 / (1 + water * gravity / saturation)
    lower = np.minimum(dry, wet)
    return lower * ((dry / lower) ** -_SHARPNESS + (wet / lower) ** -_SHARPNESS) ** (-1 / _SHARPNESS)


def _estimate(
    form: str, water: np.ndarray, density: np.ndarray, centre: float, gravity: float, start: np.ndarray | None = None
) -> np.ndarray | None:
    """Least-squares parameters of a form; None when there are too few different water contents."""
    degree = {"line": 1, "parabola": 2, "cubic": 3, "bounded": 2}[form]
    if len(np.unique(water)) <= degree:
        return None
    if form != "bounded":
        return np.polyfit(water - centre, density, degree)
    return _estimate_bounded(water, density, gravity, start)


def _estimate_bounded(water: np.ndarray, density: np.ndarray, gravity: float, start: np.ndarray | None) -> np.ndarray:
    """Parameters of the bounded form, from a start or from three of our own (its sum of squares may have valleys)."""
    from scipy.optimize import least_squares

    grain = gravity * WATER_DENSITY_KG_M3
    saturation = water * gravity / (grain / density - 1)
    top = int(np.argmax(density))
    wet = float(np.clip(saturation.max(), 30.0, 99.0))
    starts = [start] if start is not None else [
        np.array([max(density[top] - slope * water[top], 1.0), slope, wet]) for slope in (10.0, 40.0, 90.0)
    ]  # fmt: skip
    best = None
    for first in starts:
        solution = least_squares(
            lambda p: _bounded(water, p, gravity) - density, first,
            bounds=([0.0, 0.0, 20.0], [grain, 1000.0, 100.0]), x_scale=[100.0, 10.0, 5.0],
        )  # fmt: skip
        if best is None or solution.cost < best.cost:
            best = solution
    assert best is not None
    return best.x


def fit_form(form: str, water: np.ndarray, density: np.ndarray, gravity: float) -> Fit | None:
    """Fit a form; None when it has no peak strictly inside the data (a line has none, and gives its end).

    Args:
        form: ``line``, ``parabola``, ``cubic`` or ``bounded``.
        water: water contents [%], shape (n,).
        density: dry densities [kg/m³], shape (n,).
        gravity: specific gravity of the grains.
    """
    centre = float(water.mean())
    parameters = _estimate(form, water, density, centre, gravity)
    if parameters is None or (form == "cubic" and len(np.unique(water)) < 5):
        return None
    predict = _predictor(form, centre, gravity)
    optimum = float(water.max()) if form == "line" else _peak(form, predict, parameters, centre, water)
    if optimum is None:
        return None
    sd, covariance = _covariance(predict, parameters, water, density)
    peak_se, optimum_se = _peak_errors(predict, parameters, optimum, covariance)
    return Fit(
        form=form, parameters=tuple(float(p) for p in parameters),
        max_dry_density_kg_m3=float(predict(np.array([optimum]), parameters)[0]),
        optimum_water_content_percent=optimum,
        max_dry_density_se_kg_m3=peak_se, optimum_water_content_se_percent=optimum_se, residual_sd_kg_m3=sd,
        left_out_rms_kg_m3=_left_out_rms(form, water, density, centre, gravity, parameters),
        centre_percent=centre, specific_gravity=gravity,
    )  # fmt: skip


def _peak(form: str, predict: Predict, parameters: np.ndarray, centre: float, water: np.ndarray) -> float | None:
    """Water content of the highest density inside the data; None when an end is as high."""
    low, high = float(water.min()), float(water.max())
    if form == "bounded":
        from scipy.optimize import minimize_scalar

        found = minimize_scalar(
            lambda w: -float(predict(np.array([w]), parameters)[0]), bounds=(low, high), method="bounded",
            options={"xatol": 1e-9 * max(high, 1.0)},
        )  # fmt: skip
        roots = np.array([found.x])
    else:
        turning = np.roots(np.polyder(parameters))
        roots = turning[np.isreal(turning)].real + centre
    inside = [float(w) for w in roots if low < w < high]
    if not inside:
        return None
    best = max(inside, key=lambda w: float(predict(np.array([w]), parameters)[0]))
    ends = predict(np.array([low, high]), parameters)
    margin = 1e-6 * (high - low)
    if predict(np.array([best]), parameters)[0] <= ends.max() or best - low < margin or high - best < margin:
        return None
    return best


def _covariance(
    predict: Predict, parameters: np.ndarray, water: np.ndarray, density: np.ndarray
) -> tuple[float | None, np.ndarray | None]:
    """Residual standard deviation and covariance of the parameters; None without spare points."""
    spare = len(water) - len(parameters)
    if spare < 1:
        return None, None
    residual = predict(water, parameters) - density
    variance = float(residual @ residual) / spare
    jacobian = np.column_stack([_slope(lambda p: predict(water, p), parameters, i) for i in range(len(parameters))])
    try:
        return variance**0.5, variance * np.linalg.inv(jacobian.T @ jacobian)
    except np.linalg.LinAlgError:
        return variance**0.5, None


def _slope(function: Callable[[np.ndarray], np.ndarray], at: np.ndarray, index: int) -> np.ndarray:
    """Central difference of a function by one of its parameters."""
    step = np.zeros_like(at)
    step[index] = 1e-5 * max(abs(at[index]), 1e-2)
    return (function(at + step) - function(at - step)) / (2 * step[index])


def _peak_errors(
    predict: Predict, parameters: np.ndarray, optimum: float, covariance: np.ndarray | None
) -> tuple[float | None, float | None]:
    """Standard errors of the maximum and the optimum, by the delta method.

    At the peak the density does not depend on where the peak is, so dρ/dp is that at a fixed water content;
    the optimum moves by −(∂²ρ/∂w∂p) / (∂²ρ/∂w²).
    """
    if covariance is None:
        return None, None
    step = 0.02
    around = np.array([optimum - step, optimum, optimum + step])
    by_parameter = np.array([_slope(lambda p: predict(around, p), parameters, i) for i in range(len(parameters))])
    level = by_parameter[:, 1]
    low, middle, high = predict(around, parameters)
    curvature = (low - 2 * middle + high) / step**2
    if not curvature < 0:
        return float(np.sqrt(level @ covariance @ level)), None
    shift = -(by_parameter[:, 2] - by_parameter[:, 0]) / (2 * step) / curvature
    return float(np.sqrt(level @ covariance @ level)), float(np.sqrt(shift @ covariance @ shift))


def _left_out_rms(
    form: str, water: np.ndarray, density: np.ndarray, centre: float, gravity: float, start: np.ndarray
) -> float:
    """Root mean square of what each point is missed by, when the form is fitted to the others."""
    errors = []
    predict = _predictor(form, centre, gravity)
    for i in range(len(water)):
        others = np.arange(len(water)) != i
        parameters = _estimate(form, water[others], density[others], centre, gravity, start)
        if parameters is None:
            return float("inf")
        errors.append(float(predict(water[i : i + 1], parameters)[0] - density[i]))
    return float(np.sqrt(np.mean(np.square(errors))))
