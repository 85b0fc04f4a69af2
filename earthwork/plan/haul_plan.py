"""From sources, sinks and costs to the cheapest plan and the hauls that it is made of."""

from __future__ import annotations

from collections.abc import Sequence, Set
from dataclasses import dataclass, replace

import numpy as np

from earthwork.errors import PlanError
from earthwork.plan import phases
from earthwork.plan.haul_costs import HaulCosts
from earthwork.plan.haul_errors import no_way_error, shortage_error, surplus_error
from earthwork.plan.haul_places import Places, Sink, Source
from earthwork.plan.stockpiles import PileProblem, solve_with_piles
from earthwork.plan.transport import TransportPlan, solve_transport
from earthwork.plan.transport_costs import Costs
from earthwork.plan.transport_cut import TransportInfeasible

Array = np.ndarray

#: Plans with more pairs, over straight distances, keep no matrix of them.
_MANY_PAIRS = 4_000_000
#: Pairs whose ways are measured one by one; each takes some tens of bytes.
_MOST_PAIRS = 25_000_000
#: Pairs whose straight distances are worked out on the way: a pass over them takes seconds.
_MOST_STRAIGHT = 1_000_000_000


@dataclass(frozen=True, kw_only=True)
class Leg:
    """One haul of a material from place to place; earth that waits on a stockpile makes two."""

    source: int  #: index of the source that the earth comes from
    sink: int  #: index of the sink that it ends in
    start: tuple[float, float]
    end: tuple[float, float]
    from_name: str
    to_name: str
    mass_kg: float
    phase: int
    pile: int | None = None  #: index of the stockpile that it starts from


@dataclass(frozen=True, kw_only=True)
class HaulPlan:
    """The cheapest plan of a site.

    ``transport`` is in kg by source and m³ by sink; ``cost`` is all money: hauls, rehandling, prices and openings.
    """

    transport: TransportPlan
    legs: tuple[Leg, ...]
    cost: float
    opened: tuple[str, ...]  #: places with an opening cost that are used


def plan_haul(costs: HaulCosts) -> HaulPlan:
    """The cheapest plan.

    Raises:
        PlanError: none exists; the message names what lacks what.
    """
    return _Planner(costs).plan()


class _Planner:
    def __init__(self, costs: HaulCosts) -> None:
        self.costs = costs
        self.places: Places = costs.places
        self.every: list[Source | Sink] = [*costs.places.sources, *costs.places.sinks]
        table, row_class, column_class, scale = self._classes()
        self.scale = scale
        self.moves = self._moves(table, row_class, column_class)
        self.weight = self._weights()

    def plan(self) -> HaulPlan:
        transport, pile, opened = self._with_openings()
        fees = sum(place.opening for place in self.every if place.name in opened)
        return HaulPlan(
            transport=transport, legs=tuple(self._legs(transport, pile)), cost=transport.cost + fees, opened=opened
        )

    # --- the problem ---------------------------------------------------------------------------------------------

    def _classes(self) -> tuple[Array, Array, Array, Array]:
        """Prices by class of source and of sink, the classes, and the scale of each sink.

        Sinks whose volumes stand in one ratio to those of another, for all materials, are of its class and count in its
        volume: so bands of compaction stay a pure network where all soils change alike.
        """
        sources, sinks = self.places.sources, self.places.sinks
        row_keys = [(s.material, s.kind, s.cost_per_kg, s.phase, s.name if s.opening else "") for s in sources]
        rows = list(dict.fromkeys(row_keys))
        kinds: list[Sink] = []
        column_class, scale = np.zeros(len(sinks), np.int64), np.ones(len(sinks))
        lookup: dict[tuple, list[int]] = {}
        for j, sink in enumerate(sinks):
            like = (
                sink.kind == "fill", tuple(sink.m3_per_kg), sink.phase, tuple(sink.cost_per_kg.items()),
                sink.name if sink.opening else "",
            )  # fmt: skip
            for k in lookup.setdefault(like, []):
                ratio = _ratio(sink, kinds[k])
                if ratio is not None:
                    column_class[j], scale[j] = k, ratio
                    break
            else:
                lookup[like].append(len(kinds))
                column_class[j] = len(kinds)
                kinds.append(sink)
        table = np.full((len(rows), len(kinds)), np.inf)
        for c, sink in enumerate(kinds):
            for r, (material, kind, price, phase, _) in enumerate(rows):
                late = phase is not None and sink.phase is not None and phase > sink.phase
                if material in sink.m3_per_kg and not late and (kind == "cut" or sink.kind == "fill"):
                    table[r, c] = price + sink.cost_per_kg.get(material, 0.0)
        self.kinds, self.row_materials = kinds, [row[0] for row in rows]
        return table, np.array([rows.index(key) for key in row_keys], np.int64), column_class, scale

    def _weights(self) -> Array:
        """Volume that a kilogram makes, by class of source and of sink."""
        rows = [[sink.m3_per_kg.get(m, 1.0) for sink in self.kinds] for m in self.row_materials]
        return np.array(rows, float).reshape(len(self.row_materials), len(self.kinds))

    def _moves(self, table: Array, row_class: Array, column_class: Array) -> Costs:
        """Cost of a kilogram from each source to each sink."""
        costs = self.costs
        n, m = len(row_class), len(column_class)
        areas = costs.ways.areas
        open_ground = not areas.barriers and not areas.roads and not areas.built
        straight = (costs.ways.straight or open_ground) and not costs.by_time and not areas.phases
        most = _MOST_STRAIGHT if straight else _MOST_PAIRS
        if n * m > most:
            raise PlanError(
                f"haul: {n:,} sources and {m:,} sinks make {n * m / 1e6:,.0f} million possible moves; the most is "
                f"{most / 1e6:,.0f} million. Make haul.block larger"
                + ("" if straight else ', or take distance = "straight"')
            )
        if straight and n * m > _MANY_PAIRS:
            return Costs(
                rate=np.full(n, costs.price("") * costs.ways.factor), way=np.ones(m), table=table, row_class=row_class,
                column_class=column_class, row_place=costs.from_place, column_place=costs.to_place,
            )  # fmt: skip
        return Costs(
            rate=np.ones(n), way=np.ones(m), table=table, row_class=row_class, column_class=column_class,
            distance=costs.per_kg(),
        )  # fmt: skip

    # --- solving -------------------------------------------------------------------------------------------------

    def _with_openings(self) -> tuple[TransportPlan, Array, tuple[str, ...]]:
        """The cheapest plan with what places cost to be used at all: branch and bound over those places.

        Where it is undecided whether a place opens, its cost is spread over all that it could give or take: no choice
        is cheaper than such a plan.
        """
        fee = {place.name: place.opening for place in self.every if place.opening > 0}
        best, chosen = np.inf, frozenset(fee)
        failure: PlanError | None = None
        waiting: list[tuple[frozenset[str], frozenset[str]]] = [(frozenset(), frozenset())] if fee else []
        while waiting:
            opened, closed = waiting.pop()
            spread = self._spread(fee.keys() - opened - closed)
            try:
                plan, _ = self._solve(closed, replace(self.moves, table=self.moves.table + spread))
            except PlanError as error:
                failure = failure or error
                continue
            bound = plan.cost + sum(fee[name] for name in opened)
            used = self._used(plan) & fee.keys()
            paid = float(plan.amounts @ spread[self.moves.row_class[plan.rows], self.moves.column_class[plan.columns]])
            total = plan.cost - paid + sum(fee[name] for name in used)
            if total < best:
                best, chosen = total, frozenset(used)
            undecided = used - opened
            if undecided and bound < best - 1e-12 * abs(best):
                name = max(undecided, key=lambda n: (fee[n], n))
                waiting += [(opened | {name}, closed), (opened, closed | {name})]
        if fee and not np.isfinite(best):
            assert failure is not None
            raise failure
        plan, pile = self._solve(frozenset(fee) - chosen, self.moves)
        used = self._used(plan)
        return plan, pile, tuple(name for name in fee if name in used)

    def _spread(self, undecided: Set[str]) -> Array:
        """Opening costs by class of source and of sink, for each kilogram of the most that a place could move [1/kg]."""
        sources, sinks = self.places.sources, self.places.sinks
        cut = sum(s.mass_kg for s in sources if s.kind == "cut")
        most_fill = sum(max((s.volume_m3 / w for w in s.m3_per_kg.values()), default=0) for s in sinks if not s.spare)
        table = np.zeros(self.moves.table.shape)
        for i, source in enumerate(sources):
            if source.name in undecided:
                table[self.moves.row_class[i]] += source.opening / min(source.mass_kg, most_fill or np.inf)
        for j, sink in enumerate(sinks):
            if sink.name in undecided:
                c = self.moves.column_class[j]
                table[:, c] += sink.opening * np.maximum(self.weight[:, c] / sink.volume_m3, 1 / cut if cut else 0.0)
        return table

    def _used(self, plan: TransportPlan) -> set[str]:
        return {self.places.sources[i].name for i in plan.rows} | {self.places.sinks[j].name for j in plan.columns}

    def _solve(self, closed: frozenset[str], moves: Costs) -> tuple[TransportPlan, Array]:
        """The cheapest plan without some places, and the stockpile of each of its moves that waits."""
        sources, sinks = self.places.sources, self.places.sinks
        supply = np.array([0.0 if s.name in closed else s.mass_kg for s in sources])
        need = np.array([0.0 if s.name in closed else s.volume_m3 for s in sinks]) / self.scale
        spare_rows = np.array([s.spare for s in sources], bool)
        spare_columns = np.array([s.spare for s in sinks], bool)
        try:
            plan = solve_transport(
                supply, need, moves, weight=self.weight, spare_rows=spare_rows, spare_columns=spare_columns
            )
        except TransportInfeasible as error:
            raise self._explained(error) from None
        pile = self._pile_of(plan)
        overfull = self._overfull(plan, pile)
        if overfull is not None:
            problem = PileProblem(self.costs, moves, self.weight, supply, need, spare_rows, spare_columns)
            solved = solve_with_piles(problem)
            if solved is None:
                raise overfull
            plan, pile = solved
        plan = replace(plan, unfilled=plan.unfilled * self.scale, column_marginal=plan.column_marginal / self.scale)
        return plan, pile

    def _pile_of(self, plan: TransportPlan) -> Array:
        """The cheapest stockpile of each move; it counts for moves that wait only."""
        waiting = phases.waits(self.costs.dug[plan.rows], self.costs.filled[plan.columns])
        if not waiting.any():
            return np.zeros(len(plan.rows), np.int64)
        return self.costs.rounds().pile[plan.rows, plan.columns]

    def _explained(self, error: TransportInfeasible) -> PlanError:
        """What lacks what, by name, and by how much."""
        shut = self._shut_in()
        if shut is not None:
            return shut
        sources = [self.places.sources[i] for i in error.rows]
        sinks = [self.places.sinks[j] for j in error.columns]
        cards, units = self.costs.cards, self.costs.ways.units
        if error.shortage:
            lack = error.amount * float(self.scale[error.columns[0]])
            behind = self._closed_off(self.places.sources, error.columns, axis=1)
            return shortage_error(sinks, sources, lack, cards, units, closed_off=behind)
        behind = self._closed_off(self.places.sinks, error.rows, axis=0)
        return surplus_error(sources, sinks, error.amount, cards, units, closed_off=behind)

    def _closed_off(self, places: Sequence[Source | Sink], to: Array, *, axis: int) -> list[str]:
        """Pits or tips that may serve some sinks (axis 1) or sources (axis 0), and have a way to none of them."""
        distance = self.moves.distance
        if distance is None:
            return []
        may = self._allowed().take(to, axis=axis)
        shut = may.any(axis=axis) & ~(may & np.isfinite(distance.take(to, axis=axis))).any(axis=axis)
        return [place.name for place, s in zip(places, shut, strict=True) if s and place.spare]

    def _allowed(self) -> Array:
        """Which source may serve which sink, ways or not, (n, m)."""
        return np.isfinite(self.moves.table)[self.moves.row_class][:, self.moves.column_class]

    def _shut_in(self) -> PlanError | None:
        """Blocks that barriers close in on all sides."""
        moves = self.moves
        if moves.distance is None:
            return None
        allowed = self._allowed()
        open_ = allowed & np.isfinite(moves.distance)
        pairs: list[tuple[Sequence[Source | Sink], int]] = [(self.places.sources, 1), (self.places.sinks, 0)]
        for places, axis in pairs:
            shut = allowed.any(axis=axis) & ~open_.any(axis=axis)
            names = [place.name for place, s in zip(places, shut, strict=True) if s and not place.spare]
            if names:
                return no_way_error(names, out=axis == 1)
        return None

    # --- legs ----------------------------------------------------------------------------------------------------

    def _legs(self, plan: TransportPlan, pile: Array) -> list[Leg]:
        """The hauls of a plan; those of a material between the same places in a phase are one."""
        dug, filled = self.costs.dug[plan.rows], self.costs.filled[plan.columns]
        phase, waiting = phases.hauled_in(dug, filled), phases.waits(dug, filled)
        legs: dict[tuple, Leg] = {}
        for k, (i, j) in enumerate(zip(plan.rows.tolist(), plan.columns.tolist(), strict=True)):
            source, sink = self.places.sources[i], self.places.sinks[j]
            whole = Leg(
                source=i, sink=j, start=source.place, end=sink.place, from_name=source.name, to_name=sink.name,
                mass_kg=float(plan.amounts[k]), phase=int(phase[k]),
            )  # fmt: skip
            for leg in self._over_pile(whole, int(pile[k])) if waiting[k] else [whole]:
                key = (leg.from_name, leg.to_name, source.material, leg.phase)
                known = legs.get(key)
                legs[key] = leg if known is None else replace(known, mass_kg=known.mass_kg + leg.mass_kg)
        return list(legs.values())

    def _over_pile(self, whole: Leg, pile: int) -> list[Leg]:
        name = self.costs.piles[pile].name
        east, north = self.costs.pile_place[pile].tolist()
        dug = int(self.costs.dug[whole.source])
        return [
            replace(whole, end=(east, north), to_name=name, phase=dug),
            replace(whole, start=(east, north), from_name=name, pile=pile),
        ]

    def _overfull(self, plan: TransportPlan, pile: Array) -> PlanError | None:
        """What to say of a plan that heaps more on a stockpile than it holds; None where none does."""
        costs, i, j = self.costs, plan.rows, plan.columns
        waiting = phases.waits(costs.dug[i], costs.filled[j])
        if not waiting.any():
            return None
        density = np.array([costs.cards[s.material].loose_dry_density_kg_m3 for s in self.places.sources])
        count, loose = len(costs.ways.areas.phases), plan.amounts / density[i]
        held = phases.stored(
            pile[waiting], costs.dug[i[waiting]], costs.filled[j[waiting]], loose[waiting], len(costs.piles), count
        )
        unit, label = costs.ways.units.factor("soil_volume"), costs.ways.units.label("soil_volume")
        for site, volumes in zip(costs.piles, held, strict=True):
            stays = np.array([s.name == site.name for s in self.places.sinks], bool)[j]
            volumes = volumes + np.cumsum(np.bincount(np.maximum(costs.dug[i[stays]], 0), loose[stays], count))
            worst = int(volumes[:-1].argmax())
            if site.capacity is not None and volumes[worst] > site.capacity * (1 + 1e-9):
                return PlanError(
                    f'haul: stockpile "{site.name}" would hold {volumes[worst] / unit:,.0f} {label} (loose) after phase '
                    f"{costs.ways.areas.phases[worst]}, and no other plan spares it enough: its capacity of "
                    f"{site.capacity / unit:,.0f} {label} is too small by up to "
                    f"{(volumes[worst] - site.capacity) / unit:,.0f}. "
                    "Raise it, or add a [[stockpile]] or a [[borrow]]"
                )
        return None


def _ratio(sink: Sink, other: Sink) -> float | None:
    """By what the volumes of one sink are to be multiplied to be those of another; None where materials differ."""
    ratios = [weight / other.m3_per_kg[material] for material, weight in sink.m3_per_kg.items()]
    if not ratios:
        return 1.0
    return ratios[0] if max(ratios) - min(ratios) <= 1e-12 * ratios[0] else None
