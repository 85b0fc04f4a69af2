"""Published and derived figures on compaction water and on compaction production.

Provenance: read = the figures were seen; memory = recalled; computed = worked out from the inputs. Exercises
are public worked problems without a citable title: cases, not authorities.
"""

LB_FT3 = 16.018463374  # kg/m³, exact definition rounded
GAL_L = 3.785411784
YD3_M3 = 0.764554857984

#: dry density lb/yd³, from %, to %, rate yd³/h → lb/h, US gal/h at 8.345 lb/gal (exercise; computed)
WATER_RATE = {"dry_lb_yd3": 2600, "from": 5.0, "to": 8.0, "rate_yd3_h": 200, "lb_h": 15600, "gal_h": 1869.4}

#: [fm5-434] section 11-4: 120 lb/ft³, 7 points, 6 in lift → gal/yd² at 8.33 lb/gal (section read; figures
#: memory)
WATER_ON_LIFT = {"dry_lb_ft3": 120, "points": 7.0, "lift_ft": 0.5, "gal_yd2": 4.538, "lb_gal": 8.33}

#: identity: US gal per compacted yd³ and point, at 90, 100, 110 and 120 lb/ft³ (8.345 lb/gal)
GALLONS_PER_POINT = {90: 2.912, 100: 3.235, 110: 3.559, 120: 3.883}

#: identity: L per compacted m³ and point
LITRES_PER_POINT = {1600: 16.0, 1800: 18.0, 2000: 20.0}

#: identity: 1000 bank yd³ at 100 lb/ft³ dry, 6 points; water follows dry mass in every state, lb
WATER_OF_STATES = {"bank_lb_ft3": 100, "swell": 0.25, "points": 6.0, "volume_yd3": 1000, "lb": 162000}

#: identity: 1000 kg moist at 5 %, to 12 %, kg of water (70 on the moist mass is the usual slip)
WATER_ON_DRY_MASS = {"moist_kg": 1000, "from": 5.0, "to": 12.0, "kg": 66.667}

#: identity: 6 mm/day on one acre
ACRE_EVAPORATION = {"mm": 6.0, "area_m2": 4046.8564224, "m3": 24.281, "gal": 6414.4}

#: roller output; K01 worked example of an engineering licence text (read); K04 a handbook's own inputs,
#: recomputed: it prints 4648 m³/h because it keeps the constant 16 of ft, mph and in
ROLLERS = [
    {"width_m": 8 * 0.3048, "speed_m_s": 3 * 1609.344 / 3600, "lift_m": 6 * 0.0254, "efficiency": 50 / 60,
     "passes": 4, "m3_h": 489.0 * YD3_M3, "rel": 5e-4, "source": "16.3 W S L E / P, exercise"},
    {"width_m": 2.1, "speed_m_s": 5 / 3.6, "lift_m": 0.200, "efficiency": 0.83, "passes": 6, "m3_h": 290.5,
     "rel": 1e-4, "source": "handbook inputs, recomputed"},
]  # fmt: skip

#: loose lift of 8 in at 0.72 compacted per loose (Army table, common earth) → compacted in
LOOSE_LIFT = {"loose_in": 8.0, "factor": 0.72, "compacted_in": 5.76}

#: a full tank of 2,000 and 4,000 US gal in lb at 8.345 lb/gal (read)
FULL_TANK = {2000: 16690, 4000: 33380}
