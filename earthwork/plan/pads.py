"""What each pad stands on: ``earthwork.pads(site)``. A screen by stated rules; no judgement that a pad is safe."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, field
from pathlib import Path
from typing import TYPE_CHECKING, Any

from earthwork.errors import PlanError, SiteFileError, Warning
from earthwork.ground import areas
from earthwork.ground.grid import Grid
from earthwork.plan.keys import KeysResult, KeysTally, keys_result, refill_cost_m3
from earthwork.plan.pad_measures import Steepest, differential_distance_m, steepest
from earthwork.plan.pad_rules import NaturalGround, Screen, Shares, classes_that_hold, natural_ground
from earthwork.plan.pad_slopes import SlopesBeside, slopes_beside
from earthwork.plan.settlement import DistortionLimit, blanket_asked_m, limits_exceeded
from earthwork.quantities.engine import Progress, Tally, walk
from earthwork.quantities.pad_ground import PadPlace, open_pads
from earthwork.quantities.pads import PadField, PadsTally, PadSums
from earthwork.quantities.placed_tests import site_cards
from earthwork.quantities.site_ground import SiteGround, open_site
from earthwork.results import Result
from earthwork.site import Site, load_site
from earthwork.soils.card import SoilCard, soil_warnings

if TYPE_CHECKING:
    import pandas

    from earthwork.site.model import Pads

#: Percentile of the thickness that makes a fill deep.
_DEEP_PART = 0.95
#: A slope under this is level: half a millimetre in fifty metres lies under what surfaces are stored with.
_LEVEL = 1e-5


@dataclass(frozen=True)
class Undercut:
    """What it takes to bring the fill under a whole footprint to the blanket that is asked for.

    ``volume_m3`` is dug (bank) and refilled (compacted); ``compacted_cost_m3`` is what the balance loses by it.
    """

    asked_m: float
    volume_m3: float
    compacted_cost_m3: float | None

    def to_dict(self) -> dict[str, Any]:
        return dict(self.__dict__)


@dataclass(frozen=True, kw_only=True)
class PadReport:
    """One pad; thicknesses are of fill under its footprint, from the removal bottom to subgrade."""

    pad: str
    area_m2: float
    footprint_m2: float
    judged_on: str  #: "pad" or "building"
    class_name: str
    class_before_undercut: str
    flags: tuple[str, ...]
    cut_share_percent: float
    fill_share_percent: float
    max_fill_m: float
    min_fill_m: float
    mean_fill_m: float
    p95_fill_m: float
    differential_fill_m: float
    differential_distance_m: float | None
    max_cut_m: float
    natural_ground: NaturalGround
    settlement_low_m: float | None
    settlement_high_m: float | None
    settlement_index: float
    max_distortion: float | None
    distortion_limits: tuple[DistortionLimit, ...]
    steepest_change: Steepest | None
    undercut: Undercut | None
    slopes: SlopesBeside
    compression_while_placing_m: float | None
    creep_per_year_m: float | None
    wait_days: float | None
    missing_area_m2: float

    def to_dict(self) -> dict[str, Any]:
        """The row of the JSON document."""
        plain = ("pad", "area_m2", "footprint_m2", "judged_on")
        row: dict[str, Any] = {key: getattr(self, key) for key in plain}
        row["class"] = self.class_name
        row["class_before_undercut"] = self.class_before_undercut
        row["flags"] = list(self.flags)
        for key in ("cut_share_percent", "fill_share_percent", "max_fill_m", "min_fill_m", "mean_fill_m", "p95_fill_m",
                    "differential_fill_m", "differential_distance_m", "max_cut_m"):  # fmt: skip
            row[key] = getattr(self, key)
        row["natural_ground"] = self.natural_ground.to_dict()
        for key in ("settlement_low_m", "settlement_high_m", "settlement_index", "max_distortion"):
            row[key] = getattr(self, key)
        row["distortion_limits"] = [
            {"one_in": limit.x, "means": limit.means, "source": limit.source} for limit in self.distortion_limits
        ]
        change = self.steepest_change
        row["steepest_change"] = None if change is None else {
            "change_m": change.change, "length_m": change.length_m,
            "from": list(change.start), "to": list(change.end),
        }  # fmt: skip
        row["undercut"] = self.undercut.to_dict() if self.undercut else None
        row["slopes"] = self.slopes.to_dict()
        for key in ("compression_while_placing_m", "creep_per_year_m", "wait_days", "missing_area_m2"):
            row[key] = getattr(self, key)
        return row


@dataclass(frozen=True, kw_only=True)
class PadsResult(Result):
    """All pads of a site; see the JSON of ``pads``."""

    pads: tuple[PadReport, ...]
    keys: KeysResult
    places: tuple[PadPlace, ...] = field(repr=False)
    fields: tuple[PadField, ...] = field(repr=False)
    ground: SiteGround = field(repr=False)
    known_settlement: bool

    def __getitem__(self, name: str) -> PadReport:
        """The pad of a name."""
        return next(pad for pad in self.pads if pad.pad == name)

    @property
    def grid(self) -> Grid:
        return self.ground.stack.grid

    def to_dict(self) -> dict[str, Any]:
        return {"pads": [pad.to_dict() for pad in self.pads], "keys": self.keys.to_dict()}

    def tables(self) -> dict[str, pandas.DataFrame]:
        """``pads``: a row for each pad; ``keys``: a row for each fill on steep ground."""
        import pandas as pd

        rows = []
        for pad in self.pads:
            row = pad.to_dict()
            ground, slopes, undercut = row.pop("natural_ground"), row.pop("slopes"), row.pop("undercut") or {}
            change, limits = row.pop("steepest_change") or {}, row.pop("distortion_limits")
            row["flags"] = "; ".join(row["flags"])
            row["natural_ground"] = ground["material"]
            row["natural_ground_percent_of_maximum"] = ground["percent_of_maximum"]
            row["natural_ground_flags"] = "; ".join(ground["flags"])
            row["distortion_limits"] = "; ".join(f"1 in {limit['one_in']:g}: {limit['means']}" for limit in limits)
            row["steepest_change_m"], row["over_m"] = change.get("change_m"), change.get("length_m")
            for key in ("asked_m", "volume_m3", "compacted_cost_m3"):
                row[f"undercut_{key}"] = undercut.get(key)
            rows.append({**row, **{f"slope_{key}": value for key, value in slopes.items()}})
        return {"pads": pd.DataFrame(rows), "keys": pd.DataFrame(self.keys.to_dict()["fills"])}


def pads(
    site: Site | str | Path,
    *,
    threads: int | None = None,
    progress: Progress | None = None,
    tallies: Sequence[Tally] = (),
) -> PadsResult:
    """Judge the ground under each pad of a site.

    Args:
        site: a checked site with ``[pads]``, or the path of its file.
        threads, progress, tallies: as for :func:`earthwork.volumes`.

    Raises:
        EarthworkError: bad input; the message says what, where and how to mend it.
    """
    site = site if isinstance(site, Site) else load_site(site)
    model = site.model
    where = site.path or site.name
    if model.pads is None:
        raise SiteFileError(f"{where}: pads needs a [pads] section")
    if not model.stratum and not model.borrow:
        raise SiteFileError(f"{where}: pads needs at least one [[stratum]], or a [[borrow]] with its material")
    cards = site_cards(site)
    ground = open_site(site)
    warnings = [*ground.warnings, *soil_warnings(cards)]
    grid = ground.stack.grid
    places = open_pads(site, grid, warnings)
    tally = PadsTally(areas.rings_on(grid, [place.footprint for place in places]), grid)
    keys = KeysTally(grid)
    walk(ground.stack, [tally, keys, *tallies], threads=threads, progress=progress)
    reader = ground.stack.reader()
    try:
        judge = _Judge(site, ground, cards, lambda window: reader.read(window)["finished"])
        found = [judge.report(place, tally.sums.get(i), tally.field(i)) for i, place in enumerate(places)]
    finally:
        reader.close()
    screen = judge.screen
    if not screen.known:
        warnings.append(Warning("settlement-unknown", _RELATIVE))
    return PadsResult(
        units=site.units,
        warnings=tuple(dict.fromkeys([*warnings, *judge.warnings])),
        pads=tuple(found),
        keys=keys_result(keys, model.keys, cards, places, ground),
        places=places,
        fields=tuple(tally.field(i) for i in range(len(places))),
        ground=ground,
        known_settlement=screen.known,
    )


_RELATIVE = (
    "pads: neither settlement_percent nor tests are given; settlement is a relative index only (1 at the limits for deep "
    "and differential fill), and no distortion is worked out"
)


class _Judge:
    """Turns sums and fields into reports, by the rules of one site."""

    def __init__(self, site: Site, ground: SiteGround, cards: dict[str, SoilCard], finished: Any) -> None:
        assert site.model.pads is not None
        self.site = site
        self.table: Pads = site.model.pads
        self.ground = ground
        self.cards = cards
        self.finished = finished
        self.grid = ground.stack.grid
        self.screen = Screen.of(self.table, cards)
        self.warnings: list[Warning] = []

    def report(self, place: PadPlace, sums: PadSums | None, thickness: PadField) -> PadReport:
        """The report of one pad.

        Raises:
            PlanError: there is no ground under it.
        """
        if sums is None or sums.area == 0.0 or not thickness.inside.any():
            east, north = place.footprint.centroid.coords[0]
            raise PlanError(
                f'pads: pad "{place.name}" at ({east:.2f}, {north:.2f}) has no ground under it: it is outside the '
                "data, or smaller than a cell. Move it, extend the surfaces, or give a smaller ground.cell"
            )
        cell = self.grid.cell_area_m2
        shares = Shares(100 * sums.cut_area / sums.area, 100 * sums.fill_area / sums.area)
        p95 = thickness.quantile(_DEEP_PART)
        low, high = sums.min_thickness, sums.max_thickness
        asked = blanket_asked_m(high, self.table.blanket, self.table.blanket_ratio)
        mended = low >= asked - 1e-9
        holds = classes_that_hold(shares, p95, self.table, mended=mended)
        before = classes_that_hold(shares, thickness.quantile(_DEEP_PART, thickness.before), self.table)
        settlement = self.screen.range_m(high) if self.screen.known else (None, None)
        gauge = self.table.gauge_length
        distortion = None
        if self.screen.known:
            distortion = steepest(thickness, self.screen.range_m(thickness.thickness)[1], gauge, self.grid)
        slope = distortion.slope if distortion else 0.0
        natural = self._natural(sums)
        slopes = slopes_beside(place.polygon, place.building, self.grid, self.finished)
        flags = [*holds]
        if "transition" in before and mended:
            flags.append("transition mended")
        if high - low >= self.table.differential_fill - 1e-9:
            flags.append("differential fill")
        if slope * self.table.distortion_limit > 1 + 1e-9:
            flags.append("distortion")
        if (slopes.shortfall_m or 0.0) > 0.01:
            flags.append("setback")
        if sums.missing * cell > 0.01:
            flags.append("missing ground")
        self._warn_missing(place, sums)
        return PadReport(
            pad=place.name,
            area_m2=areas.ground_area_m2(place.polygon, self.grid),
            footprint_m2=areas.ground_area_m2(place.footprint, self.grid),
            judged_on="building" if place.buildings else "pad",
            class_name=holds[0],
            class_before_undercut=before[0],
            flags=tuple(flags),
            cut_share_percent=shares.cut_percent,
            fill_share_percent=shares.fill_percent,
            max_fill_m=high,
            min_fill_m=low,
            mean_fill_m=sums.thickness / sums.area,
            p95_fill_m=p95,
            differential_fill_m=high - low,
            differential_distance_m=differential_distance_m(thickness, self.grid),
            max_cut_m=max(sums.max_cut, 0.0),
            natural_ground=natural,
            settlement_low_m=None if settlement[0] is None else float(settlement[0]),
            settlement_high_m=None if settlement[1] is None else float(settlement[1]),
            settlement_index=max(p95 / self.table.deep_fill, (high - low) / self.table.differential_fill),
            max_distortion=1 / slope if slope > _LEVEL else None,
            distortion_limits=limits_exceeded(slope),
            steepest_change=steepest(thickness, thickness.thickness, gauge, self.grid),
            undercut=self._undercut(asked, thickness, natural) if "transition" in before and not mended else None,
            slopes=slopes,
            compression_while_placing_m=self.screen.placing_m(high),
            creep_per_year_m=self.screen.rate_m_per_year(high),
            wait_days=self.screen.wait_days(high),
            missing_area_m2=sums.missing * cell,
        )

    def _natural(self, sums: PadSums) -> NaturalGround:
        strata = self.ground.stack.strata
        by_name: dict[str, float] = {}
        for index, area in sums.strata.items():
            name = strata[index].material
            by_name[name] = by_name.get(name, 0.0) + 100 * area / sums.area
        return natural_ground(list(by_name.items()), self.cards)

    def _undercut(self, asked: float, thickness: PadField, natural: NaturalGround) -> Undercut:
        volume = thickness.below(asked) * self.grid.cell_area_m2
        return Undercut(asked, volume, refill_cost_m3(volume, self.cards.get(natural.material or "")))

    def _warn_missing(self, place: PadPlace, sums: PadSums) -> None:
        missing = sums.missing * self.grid.cell_area_m2
        if missing > 0.01:
            units = self.site.units
            east, north = place.footprint.centroid.coords[0]
            message = (
                f'pad "{place.name}" at ({east:.2f}, {north:.2f}): no data on '
                f"{units.from_si(missing, 'area'):,.1f} {units.label('area')} of it; it is judged on the rest"
            )
            self.warnings.append(Warning("pad-missing-ground", message))
