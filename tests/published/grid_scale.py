"""Published figures of map scale and of the two feet.

Each row: what, arguments, value, tolerance (half a unit of the last digit printed), source, provenance.
"""

from __future__ import annotations

from typing import NamedTuple


class Row(NamedTuple):
    arguments: tuple[float, ...]
    value: float
    tolerance: float
    source: str
    provenance: str


#: height [m], R = 6,371,000 m → R / (R + h)
ELEVATION_FACTOR = [
    Row((200.0,), 0.999969, 5e-7, "surveying reference table of elevation factors", "read"),
    Row((500.0,), 0.999921, 1e-6, "the same; 0.9999215 lies on the edge of two roundings", "read"),
    Row((1000.0,), 0.999843, 5e-7, "the same", "read"),
    Row((2000.0,), 0.999686, 5e-7, "the same", "read"),
]

#: grid scale factor, height [ft], radius [ft] → combined factor
COMBINED_FACTOR = [
    Row((0.999981, 500.0, 20_906_000.0), 0.999957, 5e-7, "worked surveying example in feet", "read"),
]

#: latitude [°] → ground length / map length of a sphere's Mercator, cos φ
SPHERE_MERCATOR = [
    Row((41.402634,), 0.75008067, 5e-9, "public worked number on the scale of web maps", "read"),
    Row((60.0,), 0.5, 1e-12, "the same, cos 60°", "read"),
]

#: scale factor on the central meridian of each projection, its defining parameter
CENTRAL_SCALE = [
    ("EPSG:32611", 500_000.0, 4_100_000.0, 0.9996, "EPSG registry, UTM zone 11N"),
    ("EPSG:27700", 400_000.0, 300_000.0, 0.9996012717, "EPSG registry, British National Grid"),
    ("EPSG:2193", 1_600_000.0, 5_500_000.0, 0.9996, "EPSG registry, New Zealand Transverse Mercator 2000"),
    ("EPSG:3035", 4_321_000.0, 3_210_000.0, 1.0, "EPSG registry, ETRS89 LAEA: equal area everywhere"),
    ("EPSG:3035", 5_321_000.0, 4_210_000.0, 1.0, "the same, 1,400 km from its centre"),
]
