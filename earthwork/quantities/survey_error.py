"""How well a volume is known from how well the ground was surveyed.

Three parts that add in squares: noise of its own in each cell, noise that neighbours share over a range, and a bias of the
whole survey. Independent noise alone understates by one to two orders of magnitude, so it is never given alone. Depths are
not thresholded: dropping thin change biases the volume.
"""

from __future__ import annotations

import math
from dataclasses import dataclass


@dataclass(frozen=True)
class VolumeError:
    """Standard deviation of a volume [m³] and its three parts."""

    noise_m3: float
    correlated_m3: float
    bias_m3: float

    @property
    def total_m3(self) -> float:
        """Root of the sum of squares."""
        return math.hypot(self.noise_m3, self.correlated_m3, self.bias_m3)


def noise_error_m3(sd_m: float, area_m2: float, cell_area_m2: float) -> float:
    """Error of a volume from noise that is independent in each cell [anderson-2019, eqs. 11 and 12].

    ``sd · sqrt(n) · cell area``: 0.1 m in each of 100,000 cells of 1 m².

    >>> round(noise_error_m3(0.1, 100_000, 1.0), 2)
    31.62
    """
    return sd_m * math.sqrt(area_m2 * cell_area_m2)


def correlated_error_m3(sd_m: float, range_m: float, area_m2: float) -> float:
    """Error of a volume from noise with a spherical variogram [rolstad-2009].

    The mean over the area, taken as a circle, has the standard deviation ``sd · sqrt(π a² / 5A)`` where the area A is
    larger than a circle of the range a; below that the correlation is integrated over the circle, up to ``sd`` itself.

    Args:
        sd_m: standard deviation of the correlated part [m].
        range_m: range of the variogram [m], more than 0.
        area_m2: area [m²].

    >>> round(correlated_error_m3(0.1, 50.0, 100_000), 1)
    1253.3
    """
    if area_m2 <= 0:
        return 0.0
    ratio = math.sqrt(area_m2 / math.pi) / range_m
    mean_correlation = 1 / (5 * ratio**2) if ratio >= 1 else 1 - ratio + ratio**3 / 5
    return sd_m * math.sqrt(mean_correlation) * area_m2


def volume_error(
    area_m2: float, cell_area_m2: float, *, noise_m: float, correlated_m: float, range_m: float, bias_m: float
) -> VolumeError:
    """Error of a volume over an area from the three errors of a survey, each a standard deviation [m]."""
    return VolumeError(
        noise_error_m3(noise_m, area_m2, cell_area_m2),
        correlated_error_m3(correlated_m, range_m, area_m2),
        bias_m * area_m2,
    )


def false_volume_m3(noise_m: float, correlated_m: float, untouched_m2: float) -> float:
    """False cut, and as much false fill, that noise makes on untouched ground [m³].

    The mean of the positive part of a normal deviate of standard deviation s is ``s / sqrt(2π)``, 0.4 s.

    >>> round(false_volume_m3(0.05, 0.0, 10_000), 1)
    199.5
    """
    return math.hypot(noise_m, correlated_m) / math.sqrt(2 * math.pi) * untouched_m2
