"""The text of the starter site file, with its numbers in either unit system."""

from __future__ import annotations

#: Numbers of the template by unit system: round figures of that system, not conversions.
NUMBERS: dict[str, dict[str, str]] = {
    "metric": {
        "crs_note": "UTM zone 13N, metres", "units_note": "m, m2, m3, kg/m3, t, L", "strip": "0.15", "pavement": "0.40",
        "slab": "0.30", "undercut": "0.60", "spread": "1.5", "scarify": "0.20", "spoil": "180", "stratum": "2.5",
        "top_bank": "1250", "silt_bank": "1510", "silt_loose": "1210", "silt_max": "1780", "rock_bank": "2150",
        "rock_fill": "1950", "lift": "0.20", "deep": "3.0", "step": "0.01", "range": "[-1.5, 1.5]", "placing": "900",
        "evaporation": "5.0", "open_area": "4500", "dust_area": "5000", "dust_rate": "1.0", "supply": "420",
        "tank": "60000", "water_truck": "12000", "fill_flow": "3000", "block": "25", "heap": "12", "payload": "20",
        "cost": "0.9", "pit": "8000", "pit_price": "3.5", "tip": "20000", "tip_price": "4.0", "margin": "1.5",
        "deep_fill": "4.0", "differential": "2.0", "blanket": "0.9", "gauge": "6.0",
    },
    "us": {
        "crs_note": "Colorado North, US survey feet", "units_note": "ft, ft2, yd3, lb/ft3, short ton, US gal",
        "strip": "0.5", "pavement": "1.3", "slab": "1.0", "undercut": "2.0", "spread": "5", "scarify": "0.7",
        "spoil": "240", "stratum": "8", "top_bank": "78", "silt_bank": "94", "silt_loose": "76", "silt_max": "111",
        "rock_bank": "134", "rock_fill": "122", "lift": '"8 in"', "deep": "10", "step": "0.05", "range": "[-5, 5]",
        "placing": "1200", "evaporation": "0.2", "open_area": "48000", "dust_area": "54000", "dust_rate": "0.22",
        "supply": "110", "tank": "16000", "water_truck": "3200", "fill_flow": "800", "block": "80", "heap": "16",
        "payload": "22", "cost": "1.3", "pit": "10000", "pit_price": "2.8", "tip": "26000", "tip_price": "3.2",
        "margin": "5", "deep_fill": "13", "differential": "6.5", "blanket": "3", "gauge": "20",
    },
}  # fmt: skip

TEMPLATE = """\
# Juniper Bench: an invented starter site. Change it into yours, a line at a time:
#   earthwork check site.toml       says what is wrong, and which commands can run
#   earthwork balance site.toml     the whole job
# Plain numbers are in the units of [site] ({units_note}); a string may carry its own: "8 in", "150 mm".
# File names are relative to this file. Every section but [site] and [ground] may be left out.

[site]
name = "Juniper Bench"
units = "{units}"                      # "metric" or "us"

[ground]
existing = "existing.tif"             # as surveyed; {crs_note}
finished = "finished.tif"             # finished grade of the plan
limits = {{ file = "plan.gpkg", layer = "limits" }}      # only ground inside counts
disturbed = {{ file = "plan.gpkg", layer = "grading" }}  # stripped, and what may move

[zones]                               # everything is reported by these too
area = {{ file = "plan.gpkg", layer = "phases" }}
name = "phase"

# --- what is taken off, and what is laid on --------------------------------------------

[[strip]]                             # topsoil comes off first, in the disturbed area
material = "topsoil"
depth = {strip}

[[section]]                           # volumes run to subgrade: what is laid on it is deducted
name = "yard pavement"
thickness = {pavement}
area = {{ file = "plan.gpkg", layer = "pads", where = "pad = 'yard'" }}
source = "imported"

[[section]]
name = "slab and base"
thickness = {slab}
area = {{ file = "plan.gpkg", layer = "pads", where = "pad = 'hall'" }}
source = "imported"

[[over_excavation]]                   # dug out under the building and refilled
name = "hall"
depth = {undercut}
measured_from = "lower"               # of stripped ground and subgrade
spread = {spread}
area = {{ file = "plan.gpkg", layer = "pads", where = "pad = 'hall'" }}

[[scarify]]                           # under fill
depth = {scarify}

[[allowance]]                         # what no surface shows; + adds soil to the site
name = "trench and footing spoil"
material = "silt"
volume = {spoil}
state = "bank"

# --- the ground, from the top -------------------------------------------------------------

[[stratum]]
material = "silt"
thickness = {stratum}                       # or bottom = "rock_top.tif"

[[stratum]]                           # the last one has no bottom
material = "claystone"

[material.topsoil]
use = "topsoil"                       # fill | rock | topsoil | waste
specific_gravity = 2.65
bank.dry_density = {top_bank}
bank.water_content = 14               # percent of dry mass, everywhere
loose.swell_percent = 25

[material.silt]
use = "fill"
specific_gravity = 2.68
bank.dry_density = {silt_bank}
bank.water_content = 9
loose.dry_density = {silt_loose}
proctor = {{ method = "ASTM D698", max_dry_density = {silt_max}, optimum_water_content = 15.0 }}
loss_percent = 2

[material.claystone]
use = "rock"                          # no compaction test: say what it becomes
specific_gravity = 2.70
bank.dry_density = {rock_bank}
bank.water_content = 4
loose.swell_percent = 40
fill.dry_density = {rock_fill}

[fill]
relative_compaction = 95              # required, % of the material's own maximum
expected_compaction = 97              # the mean that the crew will reach: it costs soil
water_content_offset = 0.0            # target, points from optimum
water_content_window = [-2.0, 2.0]
lift_thickness = {lift}
by_depth = [ {{ below = {deep}, relative_compaction = 98, expected_compaction = 99 }} ]

# --- the plan --------------------------------------------------------------------------------

[balance]
target_surplus = 0
step = {step}                           # the grade shift is rounded to this
shift_area = {{ file = "plan.gpkg", layer = "pads" }}
shift_range = {range}

[water]
placing_rate = {placing}                    # compacted volume per working day
work_hours = 10
evaporation = {evaporation}
open_area = {open_area}
waste_percent = 5
dust = {{ area = {dust_area}, rate = {dust_rate}, passes_per_day = 3 }}
supply = {{ flow = {supply}, hours = 24 }}
tank = {{ volume = {tank} }}
truck = {{ capacity = {water_truck}, fill_flow = {fill_flow}, travel_time = 10, spread_time = 8, efficiency = 0.83 }}

[haul]
block = {block}
truck = {{ heaped_volume = {heap}, payload = {payload} }}
cost = {cost}                            # money per t·km (us: ton·mile) of dry mass

[[borrow]]
name = "bench pit"
at = {pit_at}
material = "silt"
capacity = {pit}
price = {pit_price}

[[disposal]]
name = "quarry backfill"
at = {tip_at}
capacity = {tip}
price = {tip_price}

[pads]
area = {{ file = "plan.gpkg", layer = "pads" }}
name = "pad"
building_margin = {margin}
deep_fill = {deep_fill}
differential_fill = {differential}
blanket = {blanket}
gauge_length = {gauge}
"""


def site_text(units: str, *, pit_at: tuple[float, float], tip_at: tuple[float, float]) -> str:
    """The starter site file.

    Args:
        units: ``"metric"`` or ``"us"``.
        pit_at, tip_at: (easting, northing) of the borrow and the disposal site.
    """
    places = {"pit_at": f"[{pit_at[0]:.1f}, {pit_at[1]:.1f}]", "tip_at": f"[{tip_at[0]:.1f}, {tip_at[1]:.1f}]"}
    return TEMPLATE.format(units=units, **NUMBERS[units], **places)
