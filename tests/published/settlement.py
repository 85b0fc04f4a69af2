"""Settlement, distortion, setbacks and undercuts: published figures, identities and rules of practice.

Rows: what, inputs, expected, relative tolerance, source, provenance.
"""

FEET = 0.3048

#: Compression under self-weight while a fill is placed and when it is placed at once (γ, H, M in kN/m³, m, kPa).
COMPRESSION = (
    ("half way up, while placed", {"height_m": 10.0, "thickness_m": 20.0, "unit_weight": 20.0, "modulus_kpa": 20_000.0}, 0.1,
     1e-12, "one-dimensional elasticity, γ z (H − z)/M", "computed by hand"),
    ("at the surface, while placed", {"height_m": 20.0, "thickness_m": 20.0, "unit_weight": 20.0, "modulus_kpa": 20_000.0}, 0.0,
     1e-12, "one-dimensional elasticity, γ z (H − z)/M", "computed by hand"),
)  # fmt: skip
COMPRESSION_AT_ONCE = (20.0, 20.0, 20_000.0, 0.2)  # H, γ, M, γ H²/2M: computed by hand

#: Creep: H [m], α [%], t1, t2, settlement [m]: s = α H log10(t2/t1), log-time creep of fills (Charles and Watts); by hand.
CREEP = ((15.0, 0.3, 1.0, 100.0, 0.09), (10.0, 1.0, 1.0, 10.0, 0.1), (10.0, 0.2, 5.0, 5.0, 0.0))

#: Settlement after completion of well compacted fills [% of height]: low and high after 3 to 4 years and after 15 to 20
#: years (the middles are taken); US Department of Defense, UFC 3-220-20, section 3-6.1.2, read.
CREEP_OBSERVED = {3.5: (0.1, 0.2), 17.5: (0.3, 0.6)}

#: A wedge fill of 0 to 20 ft over 100 ft at 1 % strain: 0.2 ft in 100 ft is 1 in 500; by hand.
WEDGE = (20 * FEET, 100 * FEET, 1.0, 0.2 * FEET, 0.002)

#: Limits of angular distortion: 1 in x, source. Read as taken up in Peru's building code E.050, table 8 (1/150 structural
#: damage, 1/250 tall rigid buildings lean, 1/300 first cracks of walls, 1/500 safe where cracks are not allowed, 1/750
#: sensitive machinery); 1/600 (frames with diagonals) read as quoted from Bjerrum.
LIMITS = {
    750: "bjerrum-1963",
    600: "bjerrum-1963",
    500: "bjerrum-1963",
    300: "skempton-macdonald-1956",
    250: "bjerrum-1963",
    150: "skempton-macdonald-1956",
}

#: Setbacks by the International Building Code, section 1808.7 and figure 1808.7.1: slope height, distance of footings from
#: the top (H/3, at most 40 ft), of buildings from the toe (H/2, at most 15 ft), all in feet. From memory.
SETBACKS = ((12, 4, 6), (30, 10, 15), (60, 20, 15), (150, 40, 15))

#: Undercut of a transition: greatest fill [ft], a third and a half of it, at least 3 ft. Common practice, no single source;
#: the 3 ft stand in San Joaquin County's standard grading specifications, p. D-4 (read).
BLANKETS = ((6, 3, 3), (15, 5, 7.5), (30, 10, 15))
