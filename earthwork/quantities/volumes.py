"""Cut and fill between stripped ground and subgrade, by zone and material: ``earthwork.volumes(site)``."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import TYPE_CHECKING, Any

import numpy as np

from earthwork.errors import GroundError, Warning
from earthwork.quantities.area_volumes import AreaVolumes, area_volumes
from earthwork.quantities.coverage import clear_rounding, polygon_share, take_out, touching
from earthwork.quantities.engine import Progress, Tally, walk
from earthwork.quantities.fields import Sums
from earthwork.quantities.site_ground import SiteGround, open_site
from earthwork.quantities.split import VALID
from earthwork.quantities.survey_error import false_volume_m3, volume_error
from earthwork.quantities.tile import Tile
from earthwork.results import Result
from earthwork.site import Site, load_site

if TYPE_CHECKING:
    import pandas


class VolumesTally:
    """Sums of all fields over the site, over each zone, and over what is outside all zones."""

    def __init__(self, ground: SiteGround) -> None:
        self.ground = ground
        self.total = Sums.none(ground.stack)
        self.outside = Sums.none(ground.stack)
        self.zones: dict[int, Sums] = {}
        self.missing = 0.0
        self.missing_rows = (np.inf, -np.inf)
        self.missing_columns = (np.inf, -np.inf)

    depth_only = True  #: engine: without layers, the surfaces themselves are not asked for

    @property
    def key(self) -> tuple[str, int]:
        """Commands that run together count the same ground once."""
        return ("volumes", id(self.ground))

    def empty(self) -> VolumesTally:
        return VolumesTally(self.ground)

    def add(self, tile: Tile) -> None:
        if tile.weight is not None and not tile.weight.any():
            return
        if self.ground.zone_names:
            self._add_zones(tile)
        self.total.add(tile, tile.weight)
        if tile.depth_sums[0][VALID] < tile.window.height * tile.window.width:
            self._note_missing(tile)

    def merge(self, other: VolumesTally) -> None:
        self.total.merge(other.total)
        self.outside.merge(other.outside)
        for index, sums in other.zones.items():
            if index in self.zones:
                self.zones[index].merge(sums)
            else:
                self.zones[index] = sums
        self.missing += other.missing
        self.missing_rows = _hull(self.missing_rows, other.missing_rows)
        self.missing_columns = _hull(self.missing_columns, other.missing_columns)

    def _add_zones(self, tile: Tile) -> None:
        window = tile.window
        outside = np.ones((window.height, window.width)) if tile.weight is None else tile.weight.copy()
        rings = self.ground.zones
        assert rings is not None
        for zone in touching(rings, window):
            found = polygon_share(rings, zone, window)
            if found is None:
                continue
            part, share = found
            row, column = part.row - window.row, part.column - window.column
            take_out(outside, share, row, column)
            sums = self.zones.setdefault(zone, Sums.none(tile.stack))
            sums.add(tile, share, row, column)
        if clear_rounding(outside):
            self.outside.add(tile, outside)

    def _note_missing(self, tile: Tile) -> None:
        lost = ~np.isfinite(tile.depth[1:-1, 1:-1])
        if tile.weight is not None:
            self.missing += float(tile.weight[lost].sum())
            lost &= tile.weight > 0
        else:
            self.missing += float(lost.sum())
        if lost.any():
            rows, columns = np.flatnonzero(lost.any(axis=1)), np.flatnonzero(lost.any(axis=0))
            window = tile.window
            self.missing_rows = _hull(self.missing_rows, (window.row + rows[0], window.row + rows[-1] + 1))
            self.missing_columns = _hull(
                self.missing_columns, (window.column + columns[0], window.column + columns[-1] + 1)
            )


def _hull(a: tuple[float, float], b: tuple[float, float]) -> tuple[float, float]:
    return (min(a[0], b[0]), max(a[1], b[1]))


@dataclass(frozen=True, kw_only=True)
class VolumesResult(Result):
    """Cut and fill of a site; see the JSON of ``volumes``."""

    total: AreaVolumes
    zones: tuple[AreaVolumes, ...]
    outside_zones: AreaVolumes | None
    ground: SiteGround

    @property
    def disturbed_area_m2(self) -> float:
        return self.total.disturbed_area_m2

    @property
    def materials(self) -> list[dict[str, Any]]:
        """Bank volumes by material, strata first, then what only strips name."""
        total = self.total
        names = dict.fromkeys([*total.cut_by_material, *total.strips])
        return [
            {
                "material": name,
                "cut_m3": total.cut_by_material.get(name, 0.0),
                "strip_m3": total.strips.get(name, 0.0),
                "over_excavation_m3": total.over_excavation_by_material.get(name, 0.0),
            }
            for name in names
        ]

    def survey_error(self) -> dict[str, float | None] | None:
        """Standard deviations of the volumes from the error of the survey; None where the site gives none.

        Independent noise alone understates them by one to two orders: without a correlated part and a bias they are None.
        """
        given = self.ground.surfaces.site.model.ground.survey_error
        if given is None:
            return None
        errors = {
            "noise_m": given.noise,
            "correlated_m": given.correlated,
            "range_m": given.range,
            "bias_m": given.bias,
        }
        cell, total = self.ground.stack.grid.cell_area_m2, self.total
        untouched = max(total.area_m2 - total.disturbed_area_m2, 0.0)
        false_cut = {"false_cut_m3": false_volume_m3(given.noise, given.correlated, untouched)}
        if not (given.correlated or given.bias):
            keys = ("cut_sd_m3", "fill_sd_m3", "cut_minus_fill_sd_m3", "noise_m3", "correlated_m3", "bias_m3")
            return {**dict.fromkeys(keys), **false_cut}
        whole = volume_error(total.area_m2, cell, **errors)
        return {
            "cut_sd_m3": volume_error(total.cut_area_m2, cell, **errors).total_m3,
            "fill_sd_m3": volume_error(total.fill_area_m2, cell, **errors).total_m3,
            "cut_minus_fill_sd_m3": whole.total_m3,
            "noise_m3": whole.noise_m3,
            "correlated_m3": whole.correlated_m3,
            "bias_m3": whole.bias_m3,
            **false_cut,
        }

    def to_dict(self) -> dict[str, Any]:
        grid = self.ground.stack.grid
        total = self.total
        return {
            "grid": {
                "crs": self.ground.crs_name,
                "cell_m": [grid.cell_east_m, grid.cell_north_m]
                if abs(grid.cell_east - grid.cell_north) > 1e-9 * grid.cell_east
                else grid.cell_east_m,
                "rows": grid.rows,
                "columns": grid.columns,
                "ground_scale": grid.ground_scale,
                "sample": self.ground.sample,
                "resampling": self.ground.resampling,
                "notes": list(self.ground.surfaces.notes),
            },
            "total": total.to_dict(),
            "zones": [zone.to_dict() for zone in self.zones],
            "outside_zones": self.outside_zones.to_dict() if self.outside_zones else None,
            "disturbed_area_m2": total.disturbed_area_m2,
            "materials": self.materials,
            "strip_m3": total.strip_m3,
            "section_m3": total.section_m3,
            "sections": [{"section": n, "section_m3": v} for n, v in total.sections.items()],
            "over_excavation_m3": total.over_excavation_m3,
            "scarify_m3": total.scarify_m3,
            "survey_error": self.survey_error(),
            "unsplit": {"cut_m3": total.unsplit_cut_m3, "fill_m3": total.unsplit_fill_m3},
        }

    def tables(self) -> dict[str, pandas.DataFrame]:
        import pandas as pd

        rows = [{"zone": "whole site", **_plain(self.total)}]
        rows += [_plain(zone) for zone in self.zones]
        if self.outside_zones:
            rows.append({"zone": "outside all zones", **_plain(self.outside_zones)})
        tables = {"volumes": pd.DataFrame(rows)}
        if self.materials:
            tables["materials"] = pd.DataFrame(self.materials)
        return tables


def _plain(area: AreaVolumes) -> dict[str, Any]:
    row = area.to_dict()
    row.pop("materials")
    return row


def volumes(
    site: Site | str | Path,
    *,
    threads: int | None = None,
    progress: Progress | None = None,
    tallies: Sequence[Tally] = (),
    client: Any = None,
) -> VolumesResult:
    """Cut and fill volumes between stripped ground and subgrade, by zone and material.

    Args:
        site: a checked site, or the path of its file.
        threads: default: one a processor, at most 4; the result is the same for any number.
        progress: called with (bands done, bands in all).
        tallies: further questions to count in the same pass.
        client: a ``dask.distributed.Client`` whose workers read the ground, for rasters that outgrow one machine.

    Raises:
        EarthworkError: bad input; the message says what, where and how to mend it.
    """
    site = site if isinstance(site, Site) else load_site(site)
    return count_volumes(site, open_site(site), threads=threads, progress=progress, tallies=tallies, client=client)


def count_volumes(
    site: Site,
    ground: SiteGround,
    *,
    threads: int | None = None,
    progress: Progress | None = None,
    tallies: Sequence[Tally] = (),
    client: Any = None,
    tile_cells: int | None = None,
    band_rows: int | None = None,
) -> VolumesResult:
    """As :func:`volumes`, on a ground that is already open."""
    tally = VolumesTally(ground)
    walk(
        ground.stack,
        [*tallies, tally],
        threads=threads,
        progress=progress,
        client=client,
        tile_cells=tile_cells,
        band_rows=band_rows,
    )
    return volumes_result(site, ground, tally)


def volumes_result(site: Site, ground: SiteGround, tally: VolumesTally) -> VolumesResult:
    """The result of a tally that has seen all of the ground."""
    cell = ground.stack.grid.cell_area_m2
    counted = float(tally.total.values[VALID]) * cell
    if counted == 0.0:
        raise GroundError(
            f"{site.name}: no cell has data in all surfaces"
            + (" inside the limits" if ground.stack.limits else "")
            + "; check the nodata values and that the surfaces cover the same ground"
        )
    missing = tally.missing * cell
    if ground.limits_area_m2 is not None:
        missing = max(ground.limits_area_m2 - counted, 0.0)
    missing = missing if missing > 1e-9 * counted else 0.0
    total = area_volumes(ground, tally.total, None, missing)
    lost = [_zone_lost(ground, tally, i) for i in range(len(ground.zone_names))]
    zones = tuple(
        area_volumes(ground, tally.zones.get(i, Sums.none(ground.stack)), name, lost[i] + ground.zone_beyond_m2[i])
        for i, name in enumerate(ground.zone_names)
    )
    outside = None
    if zones:
        outside_missing = max(missing - sum(lost), 0.0)
        outside = area_volumes(ground, tally.outside, None, outside_missing if outside_missing > 1e-6 else 0.0)
    warnings = (*ground.warnings, *_missing_warning(site, ground, tally, missing), *_idle_warning(total))
    return VolumesResult(
        units=site.units, warnings=warnings, total=total, zones=zones, outside_zones=outside, ground=ground
    )


def _zone_lost(ground: SiteGround, tally: VolumesTally, zone: int) -> float:
    """Ground of the site in a zone that has no data [m²]."""
    area = ground.zone_areas_m2[zone]
    counted = float(tally.zones[zone].values[VALID]) * ground.stack.grid.cell_area_m2 if zone in tally.zones else 0.0
    lost = area - counted
    return lost if lost > 1e-9 * max(area, 1.0) else 0.0


def _idle_warning(total: AreaVolumes) -> list[Warning]:
    """Nothing to move is rarely meant: the same file was given twice, or a band, say."""
    if total.cut_m3 or total.fill_m3 or total.over_excavation_m3 or total.strip_m3:
        return []
    return [
        Warning(
            "nothing-to-move",
            "existing ground and subgrade are the same everywhere; check that the two surfaces are the right files",
        )
    ]


def _missing_warning(site: Site, ground: SiteGround, tally: VolumesTally, missing_m2: float) -> list[Warning]:
    if missing_m2 <= 0:
        return []
    grid, label = ground.stack.grid, site.units.label("area")

    def area(square_metres: float) -> str:
        return f"{site.units.from_si(square_metres, 'area'):,.0f} {label}"

    text = f"{area(missing_m2)} of the site have no data"
    inside_m2 = min(tally.missing * grid.cell_area_m2, missing_m2)
    if inside_m2 > 0:
        west, north = grid.point(tally.missing_rows[0], tally.missing_columns[0])
        east, south = grid.point(tally.missing_rows[1], tally.missing_columns[1])
        place = f"within easting {west:.2f} to {east:.2f}, northing {south:.2f} to {north:.2f}"
        beyond_m2 = missing_m2 - inside_m2
        if beyond_m2 > 1e-6 * missing_m2:
            text += f": {area(inside_m2)} {place}, and {area(beyond_m2)} beyond what the surfaces cover"
        else:
            text += f", {place}"
    else:
        text += ": they lie beyond what the surfaces cover"
    return [Warning("missing-data", text + "; they count neither as cut nor as fill")]
