"""The lines that stand before any volume: what it runs between, what is deducted, and what is not counted."""

from __future__ import annotations

from typing import Any

from earthwork.reporting.display import plain, show
from earthwork.reporting.page import Notes
from earthwork.site import Site


def basis(site: Site, volumes: dict[str, Any]) -> Notes:
    """What the volumes of a site are, in five lines.

    Args:
        site: the site.
        volumes: the ``result`` of **volumes**, SI.
    """
    return Notes(
        heading="What these volumes are",
        lines=(
            subgrade_line(site),
            not_counted_line(site),
            scale_line(site, volumes),
            missing_line(site, volumes),
            sample_line(site, volumes),
            *volumes["grid"].get("notes", []),
            *error_lines(site, volumes),
        ),
    )


def subgrade_line(site: Site) -> str:
    """Which surface the volumes run to, and which sections were deducted to get there."""
    sections = site.model.section
    design = site.model.design
    start = "Volumes run from stripped ground to subgrade. "
    if not sections:
        if design is not None and design.elevation_is == "subgrade":
            return start + "Pad elevations are given at subgrade; no section is deducted."
        return start + "No section is deducted: subgrade is taken to be the finished grade."
    listed = ", ".join(
        f"{s.name} {show(s.thickness, 'length', site.units)} "
        + ("(imported)" if s.source == "imported" else f"(of {s.source})")
        for s in sections
    )
    return start + f"Deducted from finished grade: {listed}."


def not_counted(site: Site) -> list[str]:
    """What is in no figure of this site, by name."""
    missing = [] if site.model.allowance else ["trench, footing and pool spoil (no allowance is given)"]
    if not site.model.strip:
        missing.append("stripping (none is given)")
    keys = [] if site.model.keys.count else ["keys and benches"]
    return [*missing, *keys, "slope overbuild", "dewatering"]


def not_counted_line(site: Site) -> str:
    """What no figure counts, and which lump allowances the site gives for what no surface shows."""
    line = "Not counted: " + ", ".join(not_counted(site)) + "."
    if site.model.allowance:
        names = ", ".join(a.name for a in site.model.allowance)
        line += f" No surface shows the allowances ({names}): they are in the balance, not in cut and fill."
    return line


def scale_line(site: Site, volumes: dict[str, Any]) -> str:
    """The ground scale and what it does to the volumes."""
    scale = volumes["grid"]["ground_scale"]
    given = site.model.ground.ground_scale != "auto"
    source = "as the site file says" if given else "from the CRS and the mean elevation"
    if scale == 1.0:
        return "Ground scale 1: map lengths are taken as ground lengths" + (f", {source}." if given else ".")
    total = volumes["total"]
    moved = total["cut_m3"] + total["fill_m3"]
    effect = moved * (1 - 1 / scale**2)
    percent = 100 * (scale**2 - 1)
    places = 2 if abs(percent) >= 0.1 else 3
    return (
        f"Ground scale {scale:.6f} ({source}): it changes volumes by {plain(percent, places, sign=True)} %, "
        f"{show(effect, 'soil_volume', site.units, sign=True)} of cut and fill together."
    )


def missing_line(site: Site, volumes: dict[str, Any]) -> str:
    """The area without data, which is in no figure."""
    missing = volumes["total"]["missing_area_m2"]
    if not missing:
        return "No ground is missing: both surfaces have data everywhere."
    share = 100 * missing / (missing + volumes["total"]["area_m2"])
    return (
        f"Missing: {show(missing, 'area', site.units)} ({plain(share, 1 if share >= 1 else 2)} %) "
        "of the ground has no data and is in no figure."
    )


def error_lines(site: Site, volumes: dict[str, Any]) -> list[str]:
    """How well the volumes are known from the survey, where the site says how good the survey is."""
    error = volumes.get("survey_error")
    if not error:
        return []
    false = show(error["false_cut_m3"], "soil_volume", site.units)
    noise = (
        f"On untouched ground its noise makes up to {false} of false cut and as much false fill, which are not removed."
    )
    if error["cut_sd_m3"] is None:
        line = (
            "Error of the survey: not given for the volumes, since noise that is independent in each cell understates it by "
            "one to two orders; state the correlated part and the bias in ground.survey_error too."
        )
    else:
        cut, fill = (show(error[key], "soil_volume", site.units) for key in ("cut_sd_m3", "fill_sd_m3"))
        line = f"Error of the survey (one standard deviation): cut ± {cut}, fill ± {fill}."
    return [f"{line} {noise}"]


def sample_line(site: Site, volumes: dict[str, Any]) -> str:
    """What a raster value stands for, the cell, and what splitting cells at the zero line changed."""
    grid, total, unsplit = volumes["grid"], volumes["total"], volumes.get("unsplit")
    sides = grid["cell_m"] if isinstance(grid["cell_m"], list) else [grid["cell_m"]]
    cell = " × ".join(show(side, "length", site.units) for side in sides)
    what = "its cell" if grid["sample"] == "cell" else "a grid node, with patches between four"
    line = f"A raster value stands for {what} ({cell}; {grid['rows']:,} rows × {grid['columns']:,} columns)."
    if unsplit:
        change = total["cut_m3"] - unsplit["cut_m3"]
        added = show(change, "soil_volume", site.units)
        line += f" Splitting cells at the zero line adds {added} to cut and to fill alike."
    return line
