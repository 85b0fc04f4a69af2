"""The haul plan of a site: which earth goes where, how far, in how many loads, at what cost.

``haul(site)`` is the command. The plan is the cheapest one there is, with its proof; see docs/method-haul.md.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass, replace
from pathlib import Path
from typing import TYPE_CHECKING, Any

import numpy as np

from earthwork.errors import PlanError, SiteFileError, Warning
from earthwork.plan.fleet import Fleet, fleet_of, road_warnings
from earthwork.plan.haul_costs import HaulCosts
from earthwork.plan.haul_moves import Move, moves_of
from earthwork.plan.haul_places import Places, Sink, Source, middle_of, places_of
from earthwork.plan.haul_plan import HaulPlan, plan_haul
from earthwork.plan.haul_ways import HaulWays
from earthwork.plan.keys import KeysTally, keys_left_out, keys_result
from earthwork.plan.line_haul import LineHaul, LineTally, line_haul
from earthwork.plan.relief import Relief
from earthwork.plan.transport import Certificate
from earthwork.quantities.blocks import BlockTally, ReliefTally
from earthwork.quantities.engine import Progress, Tally, walk
from earthwork.quantities.haul_areas import HaulAreas, open_haul_areas
from earthwork.quantities.placed_tests import site_cards
from earthwork.quantities.site_ground import SiteGround, open_site
from earthwork.quantities.volumes import VolumesResult, VolumesTally, volumes_result
from earthwork.results import Result
from earthwork.site import Site, load_site
from earthwork.site.haul_rules import ON_SITE_STOCKPILE
from earthwork.site.model import Stockpile
from earthwork.soils.card import SoilCard, soil_warnings

if TYPE_CHECKING:
    import pandas

#: The ground that rise and fall are taken from is averaged over squares of about this size [m].
_RELIEF_M = 10.0
_RELIEF_SQUARES = 1000
#: A plan whose masses do not close to this share is an error of the program.
_CLOSURE = 1e-9


@dataclass(frozen=True, kw_only=True)
class Block:
    """A place of the plan. ``marginal_cost``: money for one more dry tonne there; None where it cannot be placed."""

    block: str
    kind: str
    material: str | None
    phase: str | None
    easting_m: float
    northing_m: float
    dry_mass_t: float | None
    compacted_m3: float | None
    moved_t: float  #: dry mass that leaves a source or reaches a sink
    marginal_cost: float | None

    def to_dict(self) -> dict[str, Any]:
        return dict(self.__dict__)


@dataclass(frozen=True, kw_only=True)
class HaulResult(Result):
    """Moves, places and figures of a haul plan; see the JSON of ``haul``."""

    moves: tuple[Move, ...]
    blocks: tuple[Block, ...]
    cost: float
    opened: tuple[str, ...]
    ties: tuple[tuple[str, str], ...]
    certificate: Certificate
    loads_by_destination: tuple[dict[str, Any], ...] | None
    fleet: Fleet | None
    line: LineHaul | None
    volumes: VolumesResult
    areas: HaulAreas
    cards: dict[str, SoilCard]

    @property
    def dry_mass_t(self) -> float:
        """Dry mass moved, each move counted."""
        return math.fsum(move.dry_mass_t for move in self.moves)

    @property
    def total_t_km(self) -> float:
        return math.fsum(move.dry_mass_t * move.distance_m / 1000 for move in self.moves)

    @property
    def mean_distance_m(self) -> float | None:
        """Mean haul by dry mass; None where nothing moves."""
        mass = self.dry_mass_t
        return 1000 * self.total_t_km / mass if mass > 0 else None

    @property
    def loads(self) -> int | None:
        """Whole loads, rounded up once for each material and destination; None without a truck."""
        if self.loads_by_destination is None:
            return None
        return sum(row["loads"] for row in self.loads_by_destination)

    def to_dict(self) -> dict[str, Any]:
        proof = self.certificate
        return {
            "moves": [move.to_dict() for move in self.moves],
            "blocks": [block.to_dict() for block in self.blocks],
            "mean_distance_m": self.mean_distance_m,
            "total_t_km": self.total_t_km,
            "cost": self.cost,
            "loads": self.loads,
            "loads_by_destination": None if self.loads_by_destination is None else list(self.loads_by_destination),
            "opened": list(self.opened),
            "ties": [{"from": a, "to": b} for a, b in self.ties],
            "certificate": {
                "cost_without_openings": proof.cost,
                "lower_bound": proof.lower_bound,
                "relative_gap": proof.relative_gap,
                "worst_reduced_cost": proof.worst_reduced_cost,
                "moves_checked": proof.moves_checked,
                "method": proof.method,
            },
            "fleet": self.fleet.to_dict() if self.fleet else None,
            "mass_curve": self.line.to_dict() if self.line else None,
        }

    def matrix(self) -> pandas.DataFrame:
        """Dry mass [t] from each source (rows) to each destination (columns)."""
        import pandas as pd

        table = pd.DataFrame(
            {
                "from": [m.from_name for m in self.moves],
                "to": [m.to_name for m in self.moves],
                "dry_mass_t": [m.dry_mass_t for m in self.moves],
            }
        )
        if table.empty:
            return pd.DataFrame(columns=["from"])
        order = {"from": [b.block for b in self.blocks], "to": [b.block for b in self.blocks]}
        wide = table.pivot_table(index="from", columns="to", values="dry_mass_t", aggfunc="sum", fill_value=0.0)
        rows = [name for name in order["from"] if name in wide.index]
        columns = [name for name in order["to"] if name in wide.columns]
        return wide.reindex(index=rows, columns=columns).reset_index().rename_axis(columns=None)

    def _matrix_with_units(self) -> pandas.DataFrame:
        """The matrix with its unit in each heading, by which it is shown in the units of the site."""
        return self.matrix().rename(columns=lambda name: name if name == "from" else f"{name}_t")

    def tables(self) -> dict[str, pandas.DataFrame]:
        import pandas as pd

        tables = {
            "haul": pd.DataFrame([move.to_dict() for move in self.moves]),
            "blocks": pd.DataFrame([block.to_dict() for block in self.blocks]),
            "matrix": self._matrix_with_units(),
        }
        if self.loads_by_destination is not None:
            tables["loads"] = pd.DataFrame(list(self.loads_by_destination))
        if self.fleet is not None:
            tables["trucks"] = self.fleet.table()
        if self.line is not None:
            tables["mass_curve"] = self.line.table()
        return tables


class HaulTallies:
    """What a haul plan asks of the ground in the one pass over it."""

    def __init__(self, site: Site, ground: SiteGround) -> None:
        self.areas = open_haul_areas(site, ground)
        stack, grid = ground.stack, ground.stack.grid
        side = max(grid.rows, grid.columns) / _RELIEF_SQUARES
        step = max(1, math.ceil(side), round(_RELIEF_M / min(grid.cell_east_m, grid.cell_north_m)))
        self.blocks = BlockTally(stack, self.areas.layout)
        self.relief = ReliefTally(stack, step)
        self.line = LineTally.of(site, ground, self.areas) if self.areas.baseline is not None else None

    @property
    def all(self) -> list[Tally]:
        return [self.blocks, self.relief, *([self.line] if self.line else [])]


def haul(
    site: Site | str | Path,
    *,
    threads: int | None = None,
    progress: Progress | None = None,
    tallies: Sequence[Tally] = (),
) -> HaulResult:
    """The cheapest haul plan of a site.

    Args:
        site: a checked site, or the path of its file.
        threads, progress, tallies: as for :func:`earthwork.volumes`.

    Raises:
        EarthworkError: bad input, or no plan is possible; the message says what, where and how to mend it.
    """
    site = site if isinstance(site, Site) else load_site(site)
    if site.model.haul is None:
        raise SiteFileError(f"{site.path or site.name}: haul needs [haul]; an empty one plans with its defaults")
    cards = site_cards(site)
    ground = open_site(site)
    counted = HaulTallies(site, ground)
    main = VolumesTally(ground)
    keys = KeysTally(ground.stack.grid) if site.model.keys.count else None
    walk(ground.stack, [main, *counted.all, *([keys] if keys else []), *tallies], threads=threads, progress=progress)
    result = haul_result(site, cards, volumes_result(site, ground, main), counted, threads=threads)
    if keys is None:
        return result
    dug = keys_result(keys, site.model.keys, cards, (), ground)
    return replace(result, warnings=(*result.warnings, *keys_left_out(dug, "haul plan", site.units)))


def haul_result(
    site: Site,
    cards: dict[str, SoilCard],
    volumes: VolumesResult,
    counted: HaulTallies,
    *,
    threads: int | None = None,
) -> HaulResult:
    """The plan from tallies that have seen all of the ground; see :func:`haul`."""
    model, areas = site.model, counted.areas
    assert model.haul is not None
    places = places_of(model, cards, site.units, areas, counted.blocks)
    step, grid = counted.relief.step, areas.frame.grid
    relief = Relief(counted.relief.elevations(), step * grid.cell_east_m, step * grid.cell_north_m)
    ways = HaulWays(model.haul, site.units, areas, relief, threads)
    costs = HaulCosts(model, cards, places, ways, _piles(site, places, areas))
    plan = plan_haul(costs)
    moves = moves_of(costs, plan)
    _check_closure(places, plan, moves)
    warnings = [*volumes.warnings, *areas.warnings, *soil_warnings(cards), *places.warnings, *ways.warnings]
    fleet = fleet_of(model, moves, ways) if model.haul.truck else None
    warnings += [*_warnings(site, places, moves, areas), *road_warnings(fleet, moves, ways)]
    return HaulResult(
        units=site.units,
        warnings=tuple(dict.fromkeys(warnings)),
        moves=moves,
        blocks=(*_blocks(places, plan, areas), *_pile_blocks(costs, plan, areas)),
        cost=plan.cost,
        opened=plan.opened,
        ties=tuple((places.sources[i].name, places.sinks[j].name) for i, j in plan.transport.ties.tolist()),
        certificate=plan.transport.certificate,
        loads_by_destination=_whole_loads(moves) if model.haul.truck else None,
        fleet=fleet,
        line=line_haul(site, cards, counted.line) if counted.line else None,
        volumes=volumes,
        areas=areas,
        cards=cards,
    )


def _piles(site: Site, places: Places, areas: HaulAreas) -> Sequence[Stockpile]:
    """Stockpiles where earth may wait; one in the middle of the cut where none is given and phases need it."""
    if site.model.stockpile or not areas.phases:
        return site.model.stockpile
    at = areas.frame.map(np.array([middle_of(places.sources, places.sinks)]))[0]
    return (Stockpile(name=ON_SITE_STOCKPILE, at=(float(at[0]), float(at[1]))),)


def _check_closure(places: Places, plan: HaulPlan, moves: Sequence[Move]) -> None:
    """All that is dug leaves, every fill is filled, and the moves cost what the plan says.

    Raises:
        PlanError: they do not, which is an error of the program.
    """
    transport = plan.transport
    out = np.bincount(transport.rows, transport.amounts, len(places.sources))
    dug = np.array([s.mass_kg if s.kind == "cut" else 0.0 for s in places.sources])
    cut = np.array([s.kind == "cut" for s in places.sources], bool)
    volumes = [
        amount * places.sinks[j].m3_per_kg[places.sources[i].material]
        for i, j, amount in zip(transport.rows, transport.columns, transport.amounts, strict=True)
    ]
    got = np.bincount(transport.columns, volumes, len(places.sinks))
    fill = np.array([s.kind == "fill" for s in places.sinks], bool)
    need = np.array([s.volume_m3 if s.kind == "fill" else 0.0 for s in places.sinks])
    fees = plan.cost - transport.cost
    paid = math.fsum(move.cost for move in moves) + fees
    size = math.fsum(abs(move.cost) for move in moves) + abs(fees)
    for what, off, whole in (
        ("dry mass dug and moved", np.abs(out - dug)[cut].sum(), dug.sum()),
        ("fill needed and placed", np.abs(got - need)[fill].sum(), need.sum()),
        ("cost of the plan and of its moves", abs(paid - plan.cost), size),
    ):
        if off > _CLOSURE * max(whole, 1e-300) and off > 1e-6:
            raise PlanError(
                f"haul: {what} differ by {off / max(whole, 1e-300):.1e} of {whole:.6g}; they must agree to {_CLOSURE:g}. "
                "This is an error of the program; please report it with the site file"
            )


def _blocks(places: Places, plan: HaulPlan, areas: HaulAreas) -> list[Block]:
    """The places of the plan, with what they give or need and what one more tonne costs."""
    transport = plan.transport
    out = np.bincount(transport.rows, transport.amounts, len(places.sources))
    into = np.bincount(transport.columns, transport.amounts, len(places.sinks))
    found = []
    for i, source in enumerate(places.sources):
        found.append(
            _block(
                source, areas, material=source.material, moved=out[i], marginal=float(transport.row_marginal[i]),
                dry_mass_t=source.mass_kg / 1000 if math.isfinite(source.mass_kg) else None,
            )
        )  # fmt: skip
    volume = np.zeros(len(places.sinks))
    for i, j, amount in zip(transport.rows, transport.columns, transport.amounts, strict=True):
        volume[j] += amount * places.sinks[j].m3_per_kg[places.sources[i].material]
    for j, sink in enumerate(places.sinks):
        per_kg = volume[j] / into[j] if into[j] > 0 else next(iter(sink.m3_per_kg.values()), math.nan)
        found.append(
            _block(
                sink, areas, material=next(iter(sink.m3_per_kg)) if len(sink.m3_per_kg) == 1 else None, moved=into[j],
                marginal=float(transport.column_marginal[j]) * per_kg,
                compacted_m3=sink.volume_m3 if sink.kind == "fill" else None,
            )
        )  # fmt: skip
    return found


def _pile_blocks(costs: HaulCosts, plan: HaulPlan, areas: HaulAreas) -> list[Block]:
    """The stockpiles where earth waits, unless they are places of the plan already."""
    known = {sink.name for sink in costs.places.sinks}
    found = []
    for k, pile in enumerate(costs.piles):
        moved = math.fsum(leg.mass_kg for leg in plan.legs if leg.pile == k)
        if moved > 0 and pile.name not in known:
            east, north = costs.pile_place[k].tolist()
            place = Sink(name=pile.name, kind="stockpile", place=(east, north), volume_m3=math.inf, m3_per_kg={})
            found.append(_block(place, areas, material=None, moved=moved, marginal=math.inf))
    return found


def _block(
    place: Source | Sink,
    areas: HaulAreas,
    *,
    material: str | None,
    moved: float,
    marginal: float,
    dry_mass_t: float | None = None,
    compacted_m3: float | None = None,
) -> Block:
    east, north = areas.frame.map(np.array([place.place]))[0] * areas.frame.grid.unit_m
    phase = areas.phases[place.phase] if areas.phases and place.phase is not None else None
    return Block(
        block=place.name, kind=place.kind, material=material, phase=phase, easting_m=float(east),
        northing_m=float(north), dry_mass_t=dry_mass_t, compacted_m3=compacted_m3, moved_t=float(moved) / 1000,
        marginal_cost=1000 * marginal if math.isfinite(marginal) else None,
    )  # fmt: skip


def _whole_loads(moves: Sequence[Move]) -> tuple[dict[str, Any], ...]:
    """Whole loads of each material to each destination."""
    sums: dict[tuple[str, str], float] = {}
    for move in moves:
        assert move.loads is not None
        key = (move.material, move.to_name)
        sums[key] = sums.get(key, 0.0) + move.loads
    return tuple(
        {"material": material, "to": to, "loads": math.ceil(loads - 1e-9 * max(loads, 1.0))}
        for (material, to), loads in sums.items()
    )


def _warnings(site: Site, places: Places, moves: Sequence[Move], areas: HaulAreas) -> list[Warning]:
    found = []
    units = site.units
    kept = [m for m in moves if m.to_name == ON_SITE_STOCKPILE]
    if kept:
        place = areas.frame.map(np.array([kept[0].points[-1]]))[0]
        volume = units.from_si(math.fsum(m.loose_m3 for m in kept), "soil_volume")
        found.append(
            Warning(
                "surplus-stockpiled",
                f"{volume:,.0f} {units.label('soil_volume')} (loose) go to a stockpile on the site, taken to lie in the "
                f"middle of the cut at ({place[0]:.0f}, {place[1]:.0f}), because no [[disposal]] is given. "
                "Give one, or a [[stockpile]] with its place",
            )
        )
    blind = math.fsum(m.unknown_m * m.dry_mass_t for m in moves)
    if blind > 0:
        share = 100 * blind / max(math.fsum(m.distance_m * m.dry_mass_t for m in moves), 1e-300)
        found.append(
            Warning(
                "grade-unknown",
                f"{share:.{1 if share < 1 else 0}f} % of the haul runs over ground that the surfaces do not cover; "
                "it counts as level there",
            )
        )
    haul = site.model.haul
    if haul is not None and haul.cost == 0 and haul.cost_by == "distance":
        found.append(
            Warning(
                "haul-free", "haul.cost is 0: distance costs nothing, so the plan minds prices alone. Give haul.cost"
            )
        )
    if haul is not None and haul.distance == "straight" and areas.barriers:
        found.append(Warning("barriers-ignored", 'haul.distance = "straight": distances run through haul.barriers'))
    return found
