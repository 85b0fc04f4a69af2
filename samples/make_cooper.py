"""Makes the ground and the plan of the sample site Cooper Ridge (US units, State Plane in US survey feet).

    python samples/make_cooper.py

Place, names and figures are invented. The story of the site is told in samples/cooper-ridge/README.md.
"""

from __future__ import annotations

import sys
from pathlib import Path

import numpy as np
import shapely
from shapely import LineString, Polygon
from terrain import (
    Lattice,
    Platform,
    changed_area,
    draw,
    grade_into,
    hill,
    level,
    profile,
    roughness,
    rounded,
    smooth_line,
    write_layers,
    write_raster,
    write_table,
)

CRS = "EPSG:2274"  # NAD83 / Tennessee, US survey feet
WEST, SOUTH = 2_006_400.0, 612_300.0
LATTICE = Lattice(WEST, SOUTH + 1080, 3.0, 360, 420)
LIMITS_MARGIN = 24.0

#: The street follows the crest of the ridge.
STREET = [(30, 300), (260, 420), (480, 470), (720, 600), (950, 720), (1232, 760)]
STREET_WIDTH = 34.0
STATIONS = [0.0, 0.30, 0.55, 0.78, 1.0]
GRADES = [638.0, 642.8, 640.0, 647.8, 645.0]
LOTS_PER_SIDE = 9
LOT_DEPTH = (27.0, 205.0)
PAD_BACK = 98.0
PAD_SIZE = (66.0, 54.0)
#: pad elevation less street elevation in front of it [ft], from west to east, north side and south side
STEP = {
    "North": [-1.0, -1.0, 0.5, -1.0, -1.0, 0.5, -0.5, -1.5, -2.0],
    "South": [-1.0, -1.5, -2.0, -0.5, -3.0, -2.0, -0.5, -1.5, -2.0],
}


def here(x: float, y: float) -> tuple[float, float]:
    """Coordinates of a place given in feet from the south-west corner."""
    return WEST + x, SOUTH + y


def there(line: list[tuple[float, float]]) -> list[tuple[float, float]]:
    return [here(x, y) for x, y in line]


def existing_ground() -> np.ndarray:
    """A ridge with knobs and saddles, a draw on either flank."""
    east, north = LATTICE.centres()
    crest = smooth_line(there([(-300, 180), (200, 400), (480, 485), (720, 590), (950, 705), (1600, 800)]))
    points = shapely.points(east, north)
    along = ((east - WEST) * 0.94 + (north - SOUTH) * 0.34 + 220) / 2000
    away = shapely.distance(crest, points)
    top = 641 + 4.5 * np.sin(11.0 * along + 0.6) + 4.0 * along
    round_top = np.hypot(away, 55) - 55
    ground = top - 40 * (1 - np.exp(-((round_top / 330) ** 1.25)))
    ground += hill(east, north, at=here(250, 430), height=3.5, radii=(110, 80), turn=25)
    ground += hill(east, north, at=here(820, 650), height=4.5, radii=(130, 70), turn=30)
    ground -= draw(east, north, line=there([(440, 610), (330, 1250)]), depths=(0.5, 11), widths=(40, 100))
    ground -= draw(east, north, line=there([(620, 400), (800, -160)]), depths=(0.5, 12), widths=(45, 100))
    ground -= draw(east, north, line=there([(1040, 610), (1290, 160)]), depths=(0.5, 8), widths=(35, 80))
    ground += roughness(LATTICE, seed=17, wavelength=220, amplitude=0.8, steepness=2.6)
    return ground + roughness(LATTICE, seed=23, wavelength=14, amplitude=0.06)


def main(folder: Path) -> None:
    existing = rounded(existing_ground())
    street = smooth_line(there(STREET))
    pads, grades = house_pads(street)
    platforms = [Platform("Cooper Ridge Drive", street.buffer(STREET_WIDTH / 2 + 4), profile(street, STATIONS, GRADES))]
    platforms += [Platform(name, pad, level(grades[name])) for name, pad in pads.items()]
    finished = grade_into(existing, LATTICE, platforms)
    finished = np.where(np.abs(finished - existing) < 0.03, existing, rounded(finished))

    folder.mkdir(exist_ok=True)
    write_raster(folder / "existing.tif", existing, LATTICE, crs=CRS, title="existing ground")
    write_raster(folder / "finished.tif", finished, LATTICE, crs=CRS, title="finished grade")
    grading = changed_area(existing, finished, LATTICE, margin=9.0)
    write_layers(folder / "plan.gpkg", layers_of(street, pads, grades, grading), crs=CRS)
    (folder / "lab").mkdir(exist_ok=True)
    write_table(folder / "lab" / "bank.csv", bank_tests(existing))


def lot_names() -> list[tuple[str, int, str, int]]:
    """Name, place along the street (0 = west), side, and phase of each lot."""
    names = []
    for place in range(LOTS_PER_SIDE):
        for side in ("North", "South"):
            number = 2 * place + (1 if side == "North" else 2)
            phase = 1 if place < 5 else 2
            names.append((f"Lot {number:02d}, Cooper Ridge Section 4, {side} Side", place, side, phase))
    return names


def beside(street: LineString, share: float, offset: float) -> tuple[float, float]:
    """A place beside the street, + to its left (north)."""
    length = street.length
    here_, ahead = (street.interpolate(min(max(share * length + step, 0), length)) for step in (-15, 15))
    along = np.array([ahead.x - here_.x, ahead.y - here_.y])
    along /= np.hypot(*along)
    middle = street.interpolate(share * length)
    return middle.x - along[1] * offset, middle.y + along[0] * offset


def edges() -> np.ndarray:
    """Where along the street one lot ends and the next begins, as shares of its length."""
    return np.linspace(0.08, 0.955, LOTS_PER_SIDE + 1)


def lot_shapes(street: LineString) -> dict[str, Polygon]:
    """The lots; neighbours share their corners to the last digit."""
    lots = {}
    for name, place, side, _ in lot_names():
        sign = 1 if side == "North" else -1
        first, last = edges()[place], edges()[place + 1]
        corners = [(first, LOT_DEPTH[0]), (last, LOT_DEPTH[0]), (last, LOT_DEPTH[1]), (first, LOT_DEPTH[1])]
        places = [beside(street, share, sign * offset) for share, offset in corners]
        lots[name] = Polygon(np.round(places, 2))
    return lots


def house_pads(street: LineString) -> tuple[dict[str, Polygon], dict[str, float]]:
    """A pad on each lot and its grade, set down from the street in front of it."""
    pads, grades = {}, {}
    elevation = profile(street, STATIONS, GRADES)
    for name, place, side, _ in lot_names():
        sign = 1 if side == "North" else -1
        middle = (edges()[place] + edges()[place + 1]) / 2
        near, far = PAD_BACK - PAD_SIZE[1] / 2, PAD_BACK + PAD_SIZE[1] / 2
        axis = np.array([beside(street, middle, sign * offset) for offset in (near, far)])
        back = (axis[1] - axis[0]) / PAD_SIZE[1]
        half = np.array([back[1], -back[0]]) * PAD_SIZE[0] / 2
        corners = [axis[0] - half, axis[0] + half, axis[1] + half, axis[1] - half]
        pads[name] = Polygon(np.round(corners, 2))
        front = elevation(np.array([beside(street, middle, 0)]))[0]
        grades[name] = round(float(front) + STEP[side][place], 1)
    return pads, grades


def layers_of(
    street: LineString, pads: dict[str, Polygon], grades: dict[str, float], grading: shapely.Geometry
) -> dict[str, list[tuple[shapely.Geometry, dict]]]:
    """The layers of plan.gpkg, drawn to a hundredth of a foot."""
    limits = LATTICE.outline.buffer(-LIMITS_MARGIN, join_style="mitre")
    grading = shapely.set_precision(grading.intersection(limits), 0.01)
    paved = shapely.set_precision(street.buffer(STREET_WIDTH / 2, cap_style="flat").intersection(limits), 0.01)
    houses = {name: pad.buffer(-6, join_style="mitre") for name, pad in pads.items()}
    lawn = grading.difference(shapely.union_all([paved, *houses.values()]))
    phase_of = {name: phase for name, _, _, phase in lot_names()}
    lots = lot_shapes(street)
    soft = Polygon(there([(540, 428), (588, 440), (618, 402), (606, 362), (570, 352), (538, 384)]))
    return {
        "limits": [(limits, {"name": "tract"})],
        "grading": [(part, {"kind": "limit of grading"}) for part in shapely.get_parts(grading)],
        "lots": [(lot, {"lot": name, "phase": phase_of[name]}) for name, lot in lots.items()],
        "pads": [(pad, {"lot": name, "grade": grades[name], "phase": phase_of[name]}) for name, pad in pads.items()],
        "houses": [(shapely.set_precision(house, 0.01), {"lot": name}) for name, house in houses.items()],
        "pavement": [(paved, {"street": "Cooper Ridge Drive"})],
        "lawn": [(part, {"kind": "lawn"}) for part in shapely.get_parts(shapely.set_precision(lawn, 0.01))],
        "soft": [(soft, {"kind": "bed of an old farm pond"})],
        "baseline": [(shapely.set_precision(street, 0.01), {"name": "Cooper Ridge Drive", "start_station": 0.0})],
    }


#: x, y [ft from the south-west corner], depth [ft], water content [%], dry density [lb/ft³]
BANK_TESTS = [
    (220, 398, 2.0, 22.1, 98.9),
    (255, 415, 4.0, 23.4, 97.2),
    (300, 440, 3.0, 22.8, 98.1),
    (500, 482, 2.5, 24.0, 96.4),
    (540, 500, 5.0, 23.7, 97.0),
    (700, 590, 2.0, 21.9, 99.6),
    (730, 610, 4.5, 22.6, 98.8),
    (860, 672, 3.0, 23.1, 98.3),
    (900, 700, 6.0, 23.9, 97.5),
    (1100, 745, 2.0, 22.2, 99.1),
]


def bank_tests(existing: np.ndarray) -> list[dict]:
    """Drive cylinders in the clay of the ridge; elevations follow from place and depth."""
    rows = []
    for number, (x, y, depth, water, dry) in enumerate(BANK_TESTS, 1):
        east, north = here(x, y)
        rows.append({
            "test": f"D-{number}", "material": "lean clay", "easting": f"{east:.1f}", "northing": f"{north:.1f}",
            "elevation": f"{float(existing[LATTICE.cell_at(east, north)]) - depth:.1f}", "depth": depth,
            "water_content_percent": water, "dry_density_lb_ft3": dry, "method": "drive cylinder",
        })  # fmt: skip
    return rows


if __name__ == "__main__":
    main(Path(sys.argv[1]) if len(sys.argv) > 1 else Path(__file__).parent / "cooper-ridge")
