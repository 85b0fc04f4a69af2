"""Published and worked examples of hauling and mass curves.

[nunnally2007] Nunnally, Construction Methods and Management, 7th ed., ch. 4: figures from memory, recomputed.
[garber2009] Garber and Hoel, Traffic and Highway Engineering, 4th ed., ch. 14, mass-diagram problem with its table of
moments: the moments and the cost of 5,642 were read; the print rounds distances, the sum of the moments is 5,642.25.
"exercise": a public worked problem without a citable title, or a definition.
"""

#: what, inputs, expected, relative tolerance, source
CYCLES = [
    ("load 10, haul 15, dump 5, back at 0.8 of the haul [min]", {"load": 10, "haul": 15, "dump": 5, "back": 12}, 42.0,
     1e-12, "exercise (engineering licence worksheet), read"),
]  # fmt: skip

#: A truck of 12 yd³ behind a loader of 95 yd³/h: 7 miles out at 30 mph, back at 40 mph, 3 minutes to dump. The print
#: has the cycle of 0.585 h right and the number of trucks wrong; recomputed.
HIGHWAY_TRUCK = {"capacity": 12, "loader_per_hour": 95, "miles": 7, "out_mph": 30, "back_mph": 40, "dump_min": 3,
                 "cycle_h": 0.58465, "trucks": 4.628}  # fmt: skip

#: Loader of 300 bank yd³/h at 100 %, 0.8 worked; trucks of 12 bank yd³, 8 min travel and 2 min fixed; five trucks at
#: 20 an hour, loader at 40: production, cost per bank yd³ (exercise of the Nunnally family, computed).
FLEET = {"loader_per_hour": 300, "efficiency": 0.8, "capacity": 12, "travel_min": 8, "fixed_min": 2, "trucks": 5,
         "loader_cost": 40, "truck_cost": 20, "load_min": 2.4, "cycle_min": 12.4, "needed": 5.1667,
         "production": 232.26, "cost": 0.60278}  # fmt: skip

#: Scraper of 100 ton, tires sink 2 in, grade 5 %: 100 lb/ton rolling, 20,000 lb and 10 % up, 0 down [nunnally2007].
RESISTANCE = {"weight_ton": 100, "penetration_in": 2, "grade": 5, "rolling_lb_ton": 100, "up_lb": 20_000,
              "up_percent": 10, "down_lb": 0, "down_percent": 0}  # fmt: skip

#: grade, lb per ton of 2,000 lb by the sine, by the rule of 20 lb per percent (computed)
GRADES = [(1.0, 19.999, 20), (10.0, 199.007, 200)]

#: Moments of overhaul [station·yd³] and money per station·yd³ [garber2009]
OVERHAUL = {"moments": (266.6, 157.0, 85.8, 54.825), "unit_cost": 10.0, "cost": 5642.25, "printed": 5642}
