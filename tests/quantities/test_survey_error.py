"""Errors of volumes against published values and closed forms."""

import math

import pytest

from earthwork.quantities.survey_error import correlated_error_m3, false_volume_m3, noise_error_m3, volume_error


def test_independent_noise_published():
    # Anderson 2019, Earth Surface Processes and Landforms 44, eqs. 11-12, as worked in a public notebook (read): 682,640
    # cells of 0.25 m, sd 0.11584754 m, 95 % factor 1.96: 11.72516 m³.
    area = 682_640 * 0.25**2
    assert 1.96 * noise_error_m3(0.11584754, area, 0.25**2) == pytest.approx(11.72516, rel=1e-5)


def test_correlated_noise_published():
    # Rolstad, Haug and Denby 2009, J. Glaciology 55(192) (from memory, re-derived): sd 0.1 m, range 50 m, 100,000 m².
    assert correlated_error_m3(0.1, 50, 1e5) == pytest.approx(1253.3, rel=1e-4)


def test_small_areas_are_integrated():
    # Mean of 1 − 1.5 h/a + 0.5 (h/a)³ over a circle of radius R = a/2, by quadrature.
    from scipy.integrate import quad

    a, radius = 40.0, 20.0
    mean, _ = quad(lambda h: (1 - 1.5 * h / a + 0.5 * (h / a) ** 3) * 2 * h / radius**2, 0, radius)
    area = math.pi * radius**2
    assert correlated_error_m3(0.1, a, area) == pytest.approx(0.1 * math.sqrt(mean) * area, rel=1e-9)


def test_never_over_the_whole_and_continuous_at_the_range():
    assert correlated_error_m3(0.1, 1e9, 100.0) == pytest.approx(10.0, rel=1e-6)
    at = math.pi * 50**2
    assert correlated_error_m3(0.1, 50, at * (1 - 1e-9)) == pytest.approx(correlated_error_m3(0.1, 50, at), rel=1e-6)
    assert correlated_error_m3(0.1, 50, 0.0) == 0.0


def test_bias_of_a_twentieth_of_a_foot_on_twenty_acres():
    # 20 acres × 0.05 ft = 1613.33 yd³.
    error = volume_error(20 * 4046.8564224, 1.0, noise_m=0, correlated_m=0, range_m=1, bias_m=0.05 * 0.3048)
    assert error.total_m3 / 0.764554857984 == pytest.approx(1613.33, rel=1e-5)


def test_parts_add_in_squares():
    error = volume_error(1e5, 1.0, noise_m=0.1, correlated_m=0.1, range_m=50, bias_m=0.01)
    assert error.total_m3 == pytest.approx(math.sqrt(31.6228**2 + 1253.314**2 + 1000**2), rel=1e-5)


def test_false_volume_by_simulation():
    import numpy as np

    noise = np.random.default_rng(3).normal(0, 0.05, 1_000_000)
    assert false_volume_m3(0.05, 0.0, 1e6) == pytest.approx(np.maximum(noise, 0).sum(), rel=5e-3)
