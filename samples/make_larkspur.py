"""Makes the ground and the plan of the sample site Larkspur Campus (metric, UTM).

    python samples/make_larkspur.py

Place, names and figures are invented. The story of the site is told in samples/larkspur-campus/README.md.
"""

from __future__ import annotations

import sys
from dataclasses import dataclass
from datetime import date, timedelta
from pathlib import Path

import numpy as np
import shapely
from shapely import LineString, Polygon
from shapely.ops import split
from terrain import (
    Lattice,
    Platform,
    changed_area,
    draw,
    grade_into,
    hill,
    level,
    profile,
    rectangle,
    roughness,
    rounded,
    smooth_line,
    tilted,
    write_layers,
    write_raster,
    write_table,
)

CRS = "EPSG:26914"  # NAD83 / UTM zone 14N
WEST, SOUTH = 512_000.0, 4_461_000.0
LATTICE = Lattice(WEST, SOUTH + 500, 1.0, 500, 620)
SHALE_LATTICE = Lattice(WEST - 20, SOUTH + 520, 5.0, 108, 132)
LIMITS_MARGIN = 6.0

#: The draw runs from the north fence past the middle of the campus to the creek in the south-east.
DRAW = [(285, 520), (300, 430), (345, 350), (352, 290), (400, 220), (440, 165), (510, 105), (640, 30)]
SIDE_DRAW = [(560, 330), (520, 260), (470, 200), (440, 165)]

#: name, centre, length, width, turn, grade
PADS = [
    ("Aster House", (120, 345), 82, 52, 18, 626.10),
    ("Bergamot House", (218, 243), 74, 46, -28, 619.80),
    ("Clover House", (345, 318), 78, 50, 62, 619.80),
    ("Dogwood House", (480, 372), 76, 48, -12, 624.50),
    ("Elder House", (392, 118), 64, 44, 30, 615.40),
]
COURT = ("Truck court", (148, 118), 112, 66, 8, 620.70)
BASIN = ("Stormwater basin", (521, 74), 74, 40, -33, 604.60)

COURT_SLOPE = (0.004, -0.010)
DRIVE_WIDTH = 6.0

#: name, centre line, stations (shares of the length), elevations there; None at a gate: the ground there
DRIVES = [
    (
        "West Drive",
        [(3, 186), (95, 180), (180, 172), (268, 200), (292, 255), (330, 300)],
        [0, 0.25, 0.38, 0.60, 0.93, 1],
        [None, 617.6, 618.9, 618.9, 619.8, 619.8],
    ),
    (
        "Hill Spur",
        [(95, 181), (88, 240), (100, 290), (116, 330)],
        [0, 0.1, 0.82, 1],
        [617.6, 617.8, 626.1, 626.1],
    ),
    ("Court Spur", [(158, 175.2), (156, 160), (155, 140)], [0, 0.12, 0.60, 1], [618.9, 618.9, 620.4, 620.4]),
    ("East Drive", [(616, 448), (560, 420), (490, 375)], [0, 0.62, 1], [None, 624.5, 624.5]),
    ("Elder Lane", [(322, 3), (345, 50), (392, 112)], [0, 0.72, 1], [None, 615.4, 615.4]),
]

PHASES = ["1 west", "2 middle", "3 east"]
PHASE_OF = {"Aster House": 1, "Bergamot House": 1, "Clover House": 2, "Dogwood House": 3, "Elder House": 2}
PHASE_LINES = [[(282, 520), (276, 230), (250, -10)], [(425, 520), (420, 330), (452, 190), (455, -10)]]

#: name, line, speed [km/h], steepest grade [%]
HAUL_ROADS = [
    ("hill road", [(122, 312), (104, 285), (96, 235), (104, 186)], 18.0, 15.0),
    ("west road", [(104, 186), (170, 180), (262, 200), (292, 252), (322, 288)], 30.0, 10.0),
    ("south road", [(262, 200), (300, 160), (352, 140), (380, 122)], 25.0, 10.0),
    ("ridge road", [(372, 352), (402, 372), (452, 376)], 20.0, 15.0),
]
BASELINE = [(95, 360), (120, 345), (345, 318), (480, 372), (540, 396)]

#: x, y [m from the south-west corner], depth [m], water content [%], dry density [kg/m³], method
BANK_TESTS = [
    (98, 352, 1.2, 6.4, 1402, "drive cylinder"),
    (128, 338, 2.5, 7.1, 1418, "drive cylinder"),
    (142, 358, 4.0, 7.9, 1441, "drive cylinder"),
    (112, 330, 5.5, 8.3, 1467, "drive cylinder"),
    (104, 300, 1.5, 6.9, 1389, "sand cone"),
    (130, 105, 0.9, 6.2, 1408, "drive cylinder"),
    (165, 122, 1.8, 7.3, 1425, "drive cylinder"),
    (118, 132, 2.2, 7.7, 1446, "sand cone"),
    (372, 108, 1.0, 6.8, 1411, "drive cylinder"),
    (384, 116, 2.4, 8.1, 1452, "drive cylinder"),
    (205, 262, 0.8, 6.5, 1396, "drive cylinder"),
    (462, 396, 0.7, 7.2, 1437, "sand cone"),
    (376, 130, 1.4, 8.8, 1449, "drive cylinder"),
    (340, 60, 1.1, 7.6, 1424, "drive cylinder"),
    (352, 70, 1.9, 8.6, 1485, "drive cylinder"),
    (505, 78, 6.2, 2.8, 2262, "core"),
    (518, 66, 5.8, 3.3, 2231, "core"),
    (532, 60, 6.0, 2.9, 2257, "core"),
    (100, 340, 0.1, 11.4, 1238, "drive cylinder"),
    (480, 370, 0.1, 12.3, 1262, "drive cylinder"),
    (150, 115, 0.1, 12.2, 1251, "drive cylinder"),
]
DRIEST = date(2026, 7, 15)
#: days from the first of June with rain, and how much [mm]
SHOWERS = {2: 14.0, 9: 6.5, 16: 22.0, 17: 3.0, 25: 9.0, 58: 4.0, 66: 18.5, 71: 7.0}


def here(x: float, y: float) -> tuple[float, float]:
    """Coordinates of a place given in metres from the south-west corner."""
    return WEST + x, SOUTH + y


def there(line: list[tuple[float, float]]) -> list[tuple[float, float]]:
    return [here(x, y) for x, y in line]


def uplands(east: np.ndarray, north: np.ndarray) -> np.ndarray:
    """The rolling ground before water cut into it."""
    ground = 616.5 - 0.013 * (east - WEST - 300) + 0.011 * (north - SOUTH - 250)
    ground += hill(east, north, at=here(105, 360), height=13.5, radii=(150, 95), turn=35)
    ground += hill(east, north, at=here(505, 400), height=9.0, radii=(120, 100), turn=-40)
    ground += hill(east, north, at=here(140, 90), height=6.5, radii=(120, 80), turn=10)
    ground += hill(east, north, at=here(330, 110), height=5.0, radii=(90, 60), turn=50)
    ground += hill(east, north, at=here(20, 200), height=-5.0, radii=(90, 55), turn=-15)
    return ground


def existing_ground(lattice: Lattice) -> np.ndarray:
    east, north = lattice.centres()
    ground = uplands(east, north)
    ground -= draw(east, north, line=there(DRAW), depths=(3.5, 9.0), widths=(24, 44))
    ground -= draw(east, north, line=there(SIDE_DRAW), depths=(0.8, 4.0), widths=(14, 26))
    return ground


def shale_top(lattice: Lattice) -> np.ndarray:
    """Top of the shale: smoother than the ground, near it on the east ridge, above it in the bed of the draw.

    Loess was blown over it, thickest on the west hill; where water has taken the loess the shale comes out.
    """
    east, north = lattice.centres()
    shale = uplands(east, north) * 0.72 + 616.5 * 0.28 - 5.6
    shale += hill(east, north, at=here(500, 390), height=3.2, radii=(120, 90), turn=-40)
    shale -= hill(east, north, at=here(110, 350), height=3.5, radii=(130, 100), turn=30)
    shale -= draw(east, north, line=there(DRAW), depths=(1.0, 2.5), widths=(30, 60))
    return shale + roughness(lattice, seed=41, wavelength=160, amplitude=0.5, steepness=3.0)


def main(folder: Path) -> None:
    bare = existing_ground(LATTICE)
    bare += roughness(LATTICE, seed=7, wavelength=90, amplitude=0.28, steepness=2.6)
    existing = rounded(bare + roughness(LATTICE, seed=11, wavelength=6, amplitude=0.02))

    plan = areas_of_plan(existing)
    finished = grade_into(existing, LATTICE, platforms_of(plan))
    finished = np.where(np.abs(finished - existing) < 0.01, existing, rounded(finished))
    shale = rounded(shale_top(SHALE_LATTICE))

    folder.mkdir(exist_ok=True)
    for name, ground, lattice, title in (
        ("existing", existing, LATTICE, "existing ground"),
        ("finished", finished, LATTICE, "finished grade"),
        ("shale_top", shale, SHALE_LATTICE, "top of shale"),
    ):
        write_raster(folder / f"{name}.tif", ground, lattice, crs=CRS, unit="m", title=title)
    grading = changed_area(existing, finished, LATTICE, margin=3.0)
    write_layers(folder / "plan.gpkg", layers_of(plan, grading), crs=CRS)
    (folder / "lab").mkdir(exist_ok=True)
    write_table(folder / "lab" / "bank.csv", bank_tests(existing, shale_top(LATTICE)))
    write_table(folder / "lab" / "field_log.csv", field_log(finished))
    write_table(folder / "lab" / "weather.csv", weather())


@dataclass(frozen=True)
class Plan:
    """The shapes that the finished grade is built from."""

    pads: dict[str, Polygon]
    court: Polygon
    basin: Polygon
    drives: dict[str, tuple[LineString, list[float], list[float]]]


def areas_of_plan(existing: np.ndarray) -> Plan:
    return Plan(
        pads={name: rectangle(here(*centre), length, width, turn) for name, centre, length, width, turn, _ in PADS},
        court=rectangle(here(*COURT[1]), *COURT[2:5]),
        basin=rectangle(here(*BASIN[1]), *BASIN[2:5]).buffer(9).buffer(-2),
        drives=campus_drives(existing),
    )


def campus_drives(existing: np.ndarray) -> dict[str, tuple[LineString, list[float], list[float]]]:
    """Centre line, stations (shares of the length) and elevations of each drive; gates lie on the ground."""
    drives = {}
    for name, line, stations, elevations in DRIVES:
        gate = float(existing[LATTICE.cell_at(*here(*line[0]))])
        drives[name] = smooth_line(there(line)), stations, [elevations[0] or gate, *elevations[1:]]
    return drives


def platforms_of(plan: Plan) -> list[Platform]:
    """Drives first: the pads that they run into win."""
    platforms = [
        Platform(name, line.buffer(DRIVE_WIDTH / 2 + 0.6), profile(line, stations, elevations))
        for name, (line, stations, elevations) in plan.drives.items()
    ]
    platforms += [Platform(name, plan.pads[name], level(grade)) for name, *_, grade in PADS]
    platforms.append(Platform(COURT[0], plan.court, tilted(here(*COURT[1]), COURT[5], COURT_SLOPE)))
    platforms.append(Platform(BASIN[0], plan.basin, level(BASIN[5]), cut_slope=3.0, fill_slope=3.0))
    return platforms


def layers_of(plan: Plan, grading: shapely.Geometry) -> dict[str, list[tuple[shapely.Geometry, dict]]]:
    """The layers of plan.gpkg. The plan is drawn to the centimetre."""
    limits = LATTICE.outline.buffer(-LIMITS_MARGIN, join_style="mitre")
    grading = grading.intersection(limits)
    pads = shapely.union_all(list(plan.pads.values()))
    lanes = shapely.union_all([line.buffer(DRIVE_WIDTH / 2) for line, *_ in plan.drives.values()])
    drives = drawn(lanes.difference(pads).difference(plan.court).intersection(limits))
    buildings = {name: building(pad, name) for name, pad in plan.pads.items()}
    green = grading.difference(shapely.union_all([*buildings.values(), plan.court, drives]))
    grades = {name: grade for name, *_, grade in PADS}
    return {
        "limits": [(limits, {"name": "property line"})],
        "grading": parts(grading, kind="limit of grading"),
        "pads": [(drawn(pad), {"pad": name, "grade": grades[name], "phase": PHASE_OF[name]})
                 for name, pad in plan.pads.items()],
        "platforms": platform_features(plan),
        "drives": [(drawn(line), {"name": name}) for name, (line, *_) in plan.drives.items()],
        "buildings": [(shape, {"building": name}) for name, shape in buildings.items()],
        "pavement": [(drawn(plan.court), {"kind": "truck court"}), *parts(drives, kind="drive")],
        "green": parts(drawn(green), kind="lawn and prairie"),
        "basin": [(drawn(plan.basin), {"name": BASIN[0], "grade": BASIN[5]})],
        "phases": phases(limits),
        "no_go": [(drawn(shape), {"reason": reason}) for reason, shape in no_go().items()],
        "roads": [(drawn(smooth_line(there(line))),
                   {"road": name, "speed_km_h": speed, "max_grade_percent": grade})
                  for name, line, speed, grade in HAUL_ROADS],
        "baseline": [(LineString(there(BASELINE)), {"name": "campus baseline", "start_station": 0.0})],
    }  # fmt: skip


def platform_features(plan: Plan) -> list[tuple[Polygon, dict]]:
    """All that is built level or to a fall, for a design that the program builds itself."""
    fall, direction = fall_of(COURT_SLOPE)
    rows = [(plan.pads[name], name, grade, 0.0, 0.0, 2.0) for name, *_, grade in PADS]
    rows += [(plan.court, COURT[0], COURT[5], fall, direction, 2.0), (plan.basin, BASIN[0], BASIN[5], 0.0, 0.0, 3.0)]
    fields = ("platform", "grade", "fall", "fall_direction", "side_slope")
    return [(drawn(shape), dict(zip(fields, row, strict=True))) for shape, *row in rows]


def fall_of(slope: tuple[float, float]) -> tuple[float, float]:
    """Fall in percent, and where to in degrees clockwise from north, of a rise per unit east and north."""
    east, north = slope
    return round(100 * float(np.hypot(east, north)), 4), round(float(np.degrees(np.arctan2(-east, -north))) % 360, 3)


def building(pad: Polygon, name: str) -> Polygon:
    """The house on a pad: 5 m in from its edge; two of them have a wing cut out."""
    house = pad.buffer(-5, join_style="mitre")
    if name in ("Aster House", "Dogwood House"):
        corner = shapely.get_coordinates(house)[2]
        turn = next(turn for pad_name, _, _, _, turn, _ in PADS if pad_name == name)
        house = house.difference(rectangle(tuple(corner), 52, 34, turn))
    return drawn(house)


def drawn(shape: shapely.Geometry) -> shapely.Geometry:
    return shapely.set_precision(shape, 0.01)


def parts(shape: shapely.Geometry, **fields: str) -> list[tuple[Polygon, dict]]:
    return [(part, dict(fields)) for part in getattr(shape, "geoms", [shape])]


def phases(limits: Polygon) -> list[tuple[Polygon, dict]]:
    """Three phases that share their edges to the last digit."""
    cuts = [LineString(there(line)) for line in PHASE_LINES]
    pieces = [limits]
    for cut in cuts:
        pieces = [piece for whole in pieces for piece in split(whole, cut).geoms]
    pieces.sort(key=lambda piece: piece.centroid.x)
    return [
        (piece, {"phase": name, "order": i + 1}) for i, (piece, name) in enumerate(zip(pieces, PHASES, strict=True))
    ]


def no_go() -> dict[str, Polygon]:
    """Ground that haul trucks keep off."""
    oaks = smooth_line(there([(232, 330), (262, 352), (268, 392), (246, 420), (216, 398), (214, 356), (232, 330)]), 3)
    creek = smooth_line(there([(408, 196), (432, 166), (470, 130)]), 3)
    return {"bur oak stand": Polygon(oaks.coords), "creek and its banks": creek.buffer(11, quad_segs=3)}


def bank_tests(existing: np.ndarray, shale: np.ndarray) -> list[dict]:
    """In-place tests of undisturbed ground: places, depths and results are typed in, elevations follow."""
    rows = []
    for number, (x, y, depth, water, dry, method) in enumerate(BANK_TESTS, 1):
        east, north = here(x, y)
        cell = LATTICE.cell_at(east, north)
        elevation = float(existing[cell]) - depth
        material = "topsoil" if depth < 0.15 else "loess" if elevation > shale[cell] else "shale"
        rows.append({
            "test": f"B{number:02d}", "material": material,
            "easting": f"{east:.1f}", "northing": f"{north:.1f}", "elevation": f"{elevation:.2f}",
            "depth": f"{depth:.2f}", "water_content_percent": f"{water:.1f}",
            "dry_density_kg_m3": dry, "method": method,
        })  # fmt: skip
    return rows


def field_log(finished: np.ndarray) -> list[dict]:
    """Density tests of the first lifts under Clover House, two a day, in the order of placing."""
    rng = np.random.default_rng(2026)
    rows = []
    for number in range(24):
        day = date(2026, 6, 9) + timedelta(days=number // 2 + 2 * (number // 10))
        x, y = 345 + rng.uniform(-18, 18), 318 + rng.uniform(-18, 18)
        east, north = here(x, y)
        rows.append({
            "test": f"F{number + 1:02d}", "date": day.isoformat(), "material": "loess",
            "easting": f"{east:.1f}", "northing": f"{north:.1f}",
            "elevation": f"{611.2 + 0.2 * (number // 2):.1f}",
            "water_content_percent": f"{rng.normal(16.6, 0.7):.1f}",
            "dry_density_kg_m3": round(float(rng.normal(1698, 17))), "method": "nuclear gauge",
        })  # fmt: skip
    return rows


def weather() -> list[dict]:
    """Daily weather of the job, June to mid August, with a dry, windy spell in July."""
    rng = np.random.default_rng(618)
    rows = []
    for number in range(75):
        day = date(2026, 6, 1) + timedelta(days=number)
        spell = float(np.clip(1.4 - abs((day - DRIEST).days) / 6, 0, 1))
        wet = number in SHOWERS
        sun = 24.5 - 0.04 * number + 3.0 * spell - 11.0 * wet
        warm = 27.0 + 3.0 * np.sin(np.pi * number / 75) + 6.0 * spell + rng.normal(0, 1.5) - 5.0 * wet
        rows.append({
            "date": day.isoformat(),
            "temperature_max_c": f"{warm:.1f}",
            "temperature_min_c": f"{warm - 12.5 - 3.0 * spell + 5.0 * wet + rng.normal(0, 1):.1f}",
            "relative_humidity_percent": round(float(63 - 34 * spell + 18 * wet + rng.normal(0, 4))),
            "wind_speed_m_s": f"{max(0.8, 2.6 + 2.4 * spell + rng.normal(0, 0.5)):.1f}",
            "solar_radiation_mj_m2": f"{sun + rng.normal(0, 1.2):.1f}",
            "rain_mm": f"{SHOWERS.get(number, 0.0):.1f}",
        })  # fmt: skip
    return rows


if __name__ == "__main__":
    main(Path(sys.argv[1]) if len(sys.argv) > 1 else Path(__file__).parent / "larkspur-campus")
