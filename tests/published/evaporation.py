"""Published worked examples of reference evaporation.

[fao56] Allen et al. (1998), FAO Irrigation and Drainage Paper 56. [asce-ewri] ASCE-EWRI (2005), The ASCE
standardized reference evapotranspiration equation, appendix C. Figures of examples 2 to 18 and of appendix C
were read as reprinted in the tests of other open projects; those of example 19 likewise, with all of its
terms. Tolerance: half a unit of the last digit printed, unless a row says more.
"""

#: quantity, arguments, printed value, tolerance, where
FAO56_VALUES = [
    ("pressure_kpa", (1800.0,), 81.8, 0.05, "example 2"),
    ("pressure_kpa", (1200.0,), 87.9, 0.05, "example 4"),
    ("psychrometric_kpa_c", (81.8,), 0.054, 0.0005, "example 2"),
    ("saturation_kpa", (24.5,), 3.075, 0.0005, "example 3"),
    ("saturation_kpa", (15.0,), 1.705, 0.0005, "example 3"),
    ("saturation_kpa", (19.5,), 2.267, 0.0006, "example 4"),
    ("vapour_from_extremes", (25.0, 18.0, 82.0, 54.0), 1.70, 0.005, "example 5"),
    ("vapour_from_humidity", (25.0, 18.0, 68.0), 1.78, 0.005, "example 5"),
    ("sun_distance_inverse", (246,), 0.985, 0.0005, "example 8"),
    ("declination", (246,), 0.120, 0.0005, "example 8"),
    ("sunset_angle", (-0.35, 246), 1.527, 0.0006, "example 8"),
    ("extraterrestrial_day", (-0.35, 246), 32.2, 0.06, "example 8; the print rounds the latitude to -0.35"),
    ("net_longwave_day", (25.1, 19.1, 2.1, 14.5 / 18.8), 3.5, 0.05, "example 11, p. 87"),
    ("wind_at_2m", (3.2, 10.0), 2.4, 0.05, "example 14, p. 92"),
]

#: example 18: Uccle, 6 July
UCCLE = {"maximum_c": 21.5, "minimum_c": 12.3, "humidity": (84.0, 63.0), "wind_10m": 2.78,
         "solar_mj_m2": 22.07,
         "latitude_deg": 50.8, "elevation_m": 100.0, "day_of_year": 187, "printed_mm_day": 3.9,
         "wind_2m": 2.078,
         "extraterrestrial": 41.09, "net_radiation": 13.28, "recomputed_mm_day": 3.88}  # fmt: skip

#: example 19: N'Diaye, 16.22 °N 16.25 °W, 8 m, 1 October, clock of the zone at 15 °W; printed terms
NDIAYE = {"latitude_deg": 16.0 + 13.0 / 60.0, "longitude_deg": -16.25, "elevation_m": 8.0, "day_of_year": 274}
NDIAYE_NIGHT = {"temperature_c": 28.0, "humidity": 90.0, "wind": 1.9, "solar": 0.0, "utc": 3.5,
                "clearness": 0.8,
                "slope": 0.220, "gamma": 0.0673, "saturation": 3.780, "vapour": 3.402, "angle": -2.46,
                "extraterrestrial": 0.0, "longwave": 0.100, "net": -0.100, "mm": 0.00}  # fmt: skip
NDIAYE_DAY = {"temperature_c": 38.0, "humidity": 52.0, "wind": 3.3, "solar": 2.450, "utc": 15.5,
              "clearness": 0.922,
              "slope": 0.358, "gamma": 0.0673, "saturation": 6.625, "vapour": 3.445, "angle": 0.682,
              "extraterrestrial": 3.543, "clear_sky": 2.658, "longwave": 0.137, "net": 1.749,
              "mm": 0.63}  # fmt: skip

#: [asce-ewri] appendix C, hourly example: Greeley, 40.41 °N (0.7053 rad), 104.78 °W (as the printed hour
#: angles have it), 1462.4 m, zone meridian 105 °W, from 1 July 16:00 (end of the hour) to 2 July 21:00.
#: Columns: temperature °C, vapour kPa, solar MJ/m²h, wind m/s, printed: extraterrestrial, clear-sky, net
#: long-wave, net radiation, short-reference evaporation mm/h
GREELEY = {"latitude_rad": 0.7053, "longitude_deg": -104.78, "elevation_m": 1462.4, "first_end_hour": 16}
GREELEY_HOURS = [
    (30.9, 1.09, 2.24, 3.74, 3.26, 2.54, 0.284, 1.440, 0.61),
    (31.2, 1.15, 1.65, 3.30, 2.52, 1.96, 0.262, 1.009, 0.48),
    (29.1, 1.21, 0.34, 1.06, 1.68, 1.31, 0.000, 0.262, 0.14),
    (28.3, 1.21, 0.32, 2.80, 0.81, 0.63, 0.104, 0.142, 0.20),
    (26.0, 1.13, 0.08, 2.03, 0.09, 0.07, 0.313, -0.251, 0.06),
    (22.9, 1.20, 0.00, 0.96, 0.00, 0.00, 0.230, -0.230, 0.01),
    (20.1, 1.35, 0.00, 0.53, 0.00, 0.00, 0.211, -0.211, -0.01),
    (19.9, 1.35, 0.00, 0.87, 0.00, 0.00, 0.210, -0.210, 0.00),
    (18.4, 1.32, 0.00, 0.28, 0.00, 0.00, 0.208, -0.208, -0.02),
    (16.5, 1.26, 0.00, 0.46, 0.00, 0.00, 0.207, -0.207, -0.01),
    (15.4, 1.34, 0.00, 0.92, 0.00, 0.00, 0.198, -0.198, -0.01),
    (15.5, 1.31, 0.00, 0.63, 0.00, 0.00, 0.201, -0.201, -0.01),
    (13.5, 1.26, 0.00, 0.63, 0.00, 0.00, 0.198, -0.198, -0.01),
    (13.2, 1.24, 0.03, 0.27, 0.05, 0.04, 0.161, -0.138, -0.01),
    (16.2, 1.31, 0.46, 1.15, 0.72, 0.56, 0.193, 0.161, 0.06),
    (20.0, 1.36, 1.09, 1.18, 1.59, 1.24, 0.224, 0.616, 0.19),
    (22.9, 1.39, 1.74, 0.81, 2.43, 1.90, 0.245, 1.095, 0.32),
    (26.4, 1.25, 2.34, 0.67, 3.19, 2.49, 0.278, 1.524, 0.46),
    (28.2, 1.17, 2.84, 1.40, 3.81, 2.97, 0.299, 1.888, 0.60),
    (29.8, 1.03, 3.25, 1.81, 4.26, 3.32, 0.331, 2.171, 0.72),
    (30.9, 1.02, 3.21, 1.90, 4.49, 3.50, 0.308, 2.164, 0.73),
    (31.8, 0.98, 3.34, 2.54, 4.51, 3.51, 0.333, 2.239, 0.79),
    (32.5, 0.87, 2.96, 2.67, 4.29, 3.34, 0.317, 1.962, 0.74),
    (32.9, 0.86, 2.25, 2.85, 3.87, 3.01, 0.248, 1.485, 0.62),
    (32.4, 0.93, 1.35, 2.55, 3.26, 2.54, 0.134, 0.905, 0.44),
    (30.2, 1.14, 0.88, 3.14, 2.52, 1.96, 0.084, 0.593, 0.35),
    (30.6, 1.27, 0.79, 2.56, 1.68, 1.31, 0.147, 0.461, 0.29),
    (28.3, 1.27, 0.27, 2.72, 0.81, 0.63, 0.070, 0.138, 0.19),
    (25.9, 1.17, 0.03, 3.01, 0.09, 0.07, 0.077, -0.054, 0.10),
    (23.9, 1.20, 0.00, 2.64, 0.00, 0.00, 0.076, -0.076, 0.08),
]

#: [fao56] table 19, total evaporable water from a layer of 0.10 m [mm], low and high; from memory
FAO56_TOTAL_EVAPORABLE = {
    "sand": (6, 12), "loamy sand": (9, 14), "sandy loam": (15, 20), "loam": (16, 22), "silt loam": (18, 25),
    "silt": (22, 26), "silty clay loam": (22, 27), "silty clay": (22, 28), "clay": (22, 29),
}  # fmt: skip

#: [fao56] example 34 (inputs from memory, days worked by hand): bare loam, 4.5 mm/day, 20 and 9 mm
DRYING_LOAM = {"reference": 4.5, "readily": 9.0, "total": 20.0,
               "by_hand": [5.40, 5.40, 5.4 * 9.2 / 11, 5.4 * (9.2 - 5.4 * 9.2 / 11) / 11]}  # fmt: skip

#: [fao56] example 21 is of pan evaporation and is not used: no pan is read.
