"""Published and hand-recomputed values for soils: phases, states, compaction tests, units.

``provenance``: read (the figures were seen), memory (recalled), computed (inputs read or made, answer
worked out). Answers are exact arithmetic on the inputs; the tolerance is that of the rounding shown. Rows
marked "exercise" are public worked problems without a title that can be cited: cases, not authorities.
"""

from __future__ import annotations

from typing import NamedTuple

LB_FT3_WATER = 62.4  #: unit weight of water that the US textbooks use
KN_M3_WATER = 9.81  #: and the metric ones


class Phase(NamedTuple):
    """A full phase solution; densities in one unit, water content and saturation in percent."""

    moist: float
    water: float
    gravity: float
    water_density: float
    dry: float
    void_ratio: float
    porosity: float
    saturation: float
    source: str


PHASES = [
    Phase(125.0, 14.0, 2.71, LB_FT3_WATER, 109.649, 0.54221, 0.35158, 69.973,
          "Das and Sobhan, Principles of Geotechnical Engineering, 9th ed., problem 3.7 (12.5 lb in 0.1 "
          "ft3); computed"),
    Phase(18.7, 10.3, 2.71, KN_M3_WATER, 16.954, 0.56811, 0.36229, 49.132, "textbook problem, exercise; computed"),
    Phase(1.76, 10.0, 2.70, 1.0, 1.6, 0.6875, 0.4074, 39.27,
          "Holtz and Kovacs, An Introduction to Geotechnical Engineering, ch. 2; memory"),
]  # fmt: skip

#: water content [%] → zero-air-voids unit weight [lb/ft3], Gs = 2.75. Das and Sobhan; inputs read, answers
#: computed.
ZERO_AIR_VOIDS_GS_275 = {5.0: 150.86, 8.0: 140.66, 10.0: 134.59, 12.0: 129.02, 15.0: 121.49}

#: A state above zero air voids: Gs 2.65, 120 lb/ft3, 16 %: the most is 14.264 %, saturation 112.17 %.
#: Computed.
IMPOSSIBLE = {"gravity": 2.65, "dry": 120.0, "water": 16.0, "most": 14.264, "saturation": 112.17}

#: Saturated unit weight [lb/ft3] of Gs 2.68, e 0.6571. Identity; computed.
SATURATED = {"gravity": 2.68, "void_ratio": 0.6571, "saturated": 125.661}


class Borrow(NamedTuple):
    """Bank volume for a fill volume by void ratios."""

    fill: float
    fill_void_ratio: float
    bank_void_ratio: float
    bank: float
    source: str


BORROWS = [
    Borrow(150_000, 0.8, 1.4, 200_000, "engineering examination, exercise; read"),
    Borrow(5000, 0.7, 0.85, 48970.6 / 9, "Das, Fundamentals of Geotechnical Engineering, four-pit problem, pit A; memory"),
    Borrow(5000, 0.7, 1.20, 38823.5 / 6, "the same, pit B"),
    Borrow(5000, 0.7, 0.95, 40147.1 / 7, "the same, pit C"),
    Borrow(5000, 0.7, 0.75, 51470.6 / 10, "the same, pit D"),
    Borrow(5000, 0.7, 0.85, 5441.18, "three-pit exercise; the printed 5,433 or the like is a slip, recomputed"),
    Borrow(5000, 0.7, 0.95, 5735.29, "three-pit exercise, second pit; read"),
    Borrow(5000, 0.7, 1.10, 6176.47, "three-pit exercise, third pit; read"),
]  # fmt: skip

#: Three sites whose costs tie exactly when the void ratio of the fill is not rounded to 0.67: 2.7 × 10 /
#: 16.2 − 1. site → (void ratio, distance, bank volume, cost in units of excavating 1 m3). Exercise; the
#: published winner is an artefact of rounding.
TIE = {"X": (0.60, 140.0, 4800.0, 5080.0), "Y": (0.64, 80.0, 4920.0, 5080.0), "Z": (0.70, 100.0, 5100.0, 5300.0)}

#: dry unit weight of fill, water of fill; of bank → bank volume and water per 100 m3 [kN], gw 9.81.
#: Exercise; read.
BORROW_WITH_WATER = {
    "fill": 18.0,
    "fill_water": 15.0,
    "bank": 17.0,
    "bank_water": 10.0,
    "volume": 105.88,
    "water_kn": 90.0,
}

#: Das, compaction problem: 10,000 yd3 at 103.5 lb/ft3 dry from bank soil of 105 lb/ft3 moist at 18 %;
#: 20-ton loads. Read.
BANK_YARDS = {"fill": 103.5, "bank_moist": 105.0, "water": 18.0, "compacted": 10_000, "bank": 11631.4, "loads": 824.4}

#: Budhu, Soil Mechanics and Foundations, ch. 5 problem: 95 % of 19 kN/m3 from bank soil of 17.2 kN/m3 at
#: 8.2 %. Computed.
BORROW_RATIO = {"maximum": 19.0, "percent": 95.0, "bank_moist": 17.2, "water": 8.2, "ratio": 1.13547,
                "target": 11.0, "water_kn_m3": 0.5054}  # fmt: skip

#: Budhu, ch. 4 example: 45,000 m3 at 18 kN/m3; bank e 0.69, Gs 2.7, 15 %. Computed with 9.81.
EMBANKMENT = {"fill": 18.0, "volume": 45_000, "void_ratio": 0.69, "gravity": 2.7, "water": 15.0, "bank": 15.673,
              "bank_volume": 51_682, "saturation": 58.7}  # fmt: skip

#: bank, loose, compacted weights; load factor, shrinkage factor, swell %, shrink %. Nunnally, Construction
#: Methods and Management, ch. 2; memory.
NUNNALLY = {"bank": 2800, "loose": 1960, "compacted": 3500, "load_factor": 0.7, "shrinkage_factor": 0.8,
            "swell": 42.857, "shrink": 20.0, "loose_volume": 1e6, "bank_volume": 700_000,
            "compacted_volume": 560_000}  # fmt: skip

#: A chain whose published load count is wrong: 750,000 compacted needs 990,000 loose, 198,000 loads of 5.
#: Recomputed.
CHAIN = {"bank": 2800, "loose": 2500, "compacted": 3300, "load_factor": 0.892857, "shrinkage_factor": 0.848485,
         "compacted_volume": 750_000, "loose_volume": 990_000}  # fmt: skip

#: (bank, loose) → swell %, load factor. Licence review course, exercise; read.
SWELL = (3500.0, 2800.0, 25.0, 0.8)

#: Volume conversion, bank = 1 → (loose, compacted). Two handbook tables that disagree on clay: the first
#: read, the second (US Army FM 5-434, table 1-1) from memory.
CONVERSION_TABLES = {
    "sand": ((1.12, 0.95), (1.11, 0.95)),
    "common earth": ((1.25, 0.90), (1.25, 0.90)),
    "clay": ((1.27, 0.90), (1.43, 0.90)),
    "blasted rock": ((1.50, 1.30), (1.50, 1.30)),
}

#: Loose volume over bank volume less 1 [%], of what is dug: coarse soils about 10, fine soils 30 to 40 (UFC 3-220-20, section
#: 3-4.3.2). Read.
BULKING = {"coarse": (10.0, 10.0), "fine": (30.0, 40.0)}

#: Fill volume of one bank volume of rock: least (porous, friable rock) and greatest (hard rock in even pieces). UFC 3-220-20,
#: section 3-4.3.2. Read.
ROCK_FILL = (1.10, 1.50)

#: Compacted dry unit weight [lb/ft3] and optimum [%] by AASHTO class, and the type of ours that is nearest. FHWA
#: NHI-05-037, table 5-18. Read.
COMPACTED = [
    ("A-1", "gravel", (115, 134), (5, 15)),
    ("A-2", "silty gravel", (109, 134), (9, 18)),
    ("A-2", "silty sand", (109, 134), (9, 18)),
    ("A-2", "clayey sand", (109, 134), (9, 18)),
    ("A-3", "sand", (100, 119), (5, 12)),
    ("A-4", "silt", (94, 125), (10, 20)),
    ("A-6", "lean clay", (94, 119), (10, 30)),
    ("A-7", "fat clay", (81, 115), (15, 35)),
]

#: Plasticity index of high expansion, low and high end (FHWA NHI-05-037, table 5-24, after Holtz and Gibbs). Read.
EXPANSIVE = (25.0, 41.0)

#: Oversize: finer fraction [lb/ft3], share, gravity of the coarse part, water 62.4 → whole by G γF γw / (G γw PF + γF PC);
#: water contents of both parts [%] → of the whole. UFC 3-220-20, eqs 3-6 and 3-7 (read); answers computed.
OVERSIZE = {"fine": 118.0, "percent": 22.0, "gravity": 2.65, "whole": 125.9351, "fine_water": 13.0, "coarse_water": 1.5,
            "whole_water": 10.47}  # fmt: skip

#: Retention curve of Fredlund and Xing: a, n, m, residual suction, suction [kPa] → water content over its saturated value,
#: cut to the digits shown. Tests of the library geotecha. Read.
RETENTION = {"curve": (427.0, 0.794, 0.613, 3000.0), "suction": 10_000.0, "at_least": 0.40, "below": 0.41}


class Effort(NamedTuple):
    """Compaction effort: rammer [lbf], drop [ft], blows, layers, mould [ft3] → energy [ft·lbf/ft3]."""

    rammer: float
    drop: float
    blows: int
    layers: int
    mould: float
    energy: float
    nominal_kj_m3: float
    source: str


EFFORTS = [
    Effort(5.5, 1.0, 25, 3, 1 / 30, 12375, 600, "ASTM D698, 4 in mould; nominal 12,400 (600 kN·m/m3) read"),
    Effort(5.5, 1.0, 56, 3, 0.075, 12320, 600, "ASTM D698, 6 in mould; blows, layers, rammer read, volume memory"),
    Effort(10.0, 1.5, 25, 5, 1 / 30, 56250, 2700, "ASTM D1557, 4 in mould; nominal 56,000 (2,700) read"),
    Effort(10.0, 1.5, 56, 5, 0.075, 56000, 2700, "ASTM D1557, 6 in mould; blows, layers, rammer read, volume memory"),
]

#: A laboratory sheet of a public record (City of Santa Ana, December 2018, ASTM D1557, silty sand with
#: gravel): mould 0.0332 ft3; net mass [g], tins [g]; printed water contents [%] and dry unit weights
#: [lb/ft3]. Read. Printed result 134.0 lb/ft3 at 7.5 %; the parabola through the three points has its top
#: at 134.06 and 7.567 (computed).
LAB_SHEET = {
    "mould_ft3": 0.0332, "net_g": (1991, 2162, 2156), "moist_tin_g": (601.7, 511.0, 492.5),
    "dry_tin_g": (577.9, 479.3, 452.2), "tin_g": (39.6, 38.4, 39.2), "water": (4.42, 7.19, 9.76),
    "dry_lb_ft3": (126.6, 133.9, 130.4), "parabola": (7.567, 134.06),
}  # fmt: skip

#: Moist field density 2,280 kg/m3 at 8.5 %, maximum 2,150: 97.74 %, where the moist density would claim 106
#: %. Exercise.
MOIST_TRAP = {"moist": 2280.0, "water": 8.5, "maximum": 2150.0, "dry": 2101.38, "percent": 97.739}

#: Das and Sobhan, 9th ed., problem 6.12: relative density 82 % between 14.2 and 16.9 kN/m3. Inputs read,
#: computed.
RELATIVE_DENSITY = {"percent": 82.0, "low": 14.2, "high": 16.9, "dry": 16.341, "relative_compaction": 96.69}

#: Lee and Singh 1971, as quoted in Das: Rc = 80 + 0.2 Dr. Memory; both ends read in UFC 3-220-20, section 3-5.1.
LEE_SINGH = {0.0: 80.0, 50.0: 90.0, 82.0: 96.4, 100.0: 100.0}

#: Scopes of the standards [%]: ASTM D698 oversize over 19 mm, D4253 and D4254 fines, D4718 least oversize
#: and most oversize over 4.75 and 19 mm (2015 edition). Read.
SCOPES = {"d4253_fines": 15.0, "d4718_least": 5.0, "d4718_over_475": 40.0, "d4718_over_19": 30.0}

#: Density units in kg/m3: pound per cubic foot; kg/m3 in lb/yd3; lb/ft3 in kN/m3. Definitions; computed.
DENSITY_UNITS = {"lb_ft3": 16.01846337, "kg_m3_in_lb_yd3": 1.685554936, "lb_ft3_in_kn_m3": 0.157087464}
