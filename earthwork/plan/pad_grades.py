"""Each pad's own grade for least cost: curves of cut and fill from the ground, a convex program, exact volumes at the end."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass, replace
from typing import TYPE_CHECKING, Any

import numpy as np
import shapely

from earthwork.errors import PlanError, Warning
from earthwork.ground import areas
from earthwork.plan.grade_solver import Balancing, Costs, Grades, PadCurve, StepLimit, cost_of, solve_grades
from earthwork.plan.pad_looks import PadLooks
from earthwork.quantities.area_volumes import AreaVolumes, area_volumes
from earthwork.quantities.engine import walk
from earthwork.quantities.site_ground import SiteGround
from earthwork.quantities.volumes import VolumesTally
from earthwork.site import Site
from earthwork.soils.card import SoilCard

if TYPE_CHECKING:
    from earthwork.ground.open_design import BuiltDesign
    from earthwork.plan.account import Account
    from earthwork.site.pads_model import PadMoves

#: Shifts at which the ground is looked at, ends of the range included.
_LOOKS = 9
#: Solutions on exact volumes at most: the curves leave out how slopes of neighbours meet at unequal shifts.
_EXACT_ROUNDS = 4
#: What bringing or taking away costs, in hauls on the site, where the site file has no price.
_FAR = 10.0

AccountOf = Callable[[AreaVolumes], "Account"]


@dataclass(frozen=True)
class PadMove:
    """One pad before and after."""

    pad: str
    elevation_before_m: float
    elevation_after_m: float
    shift_m: float
    saves: float  #: money that this move saves, the others moved as they are; by the curves
    held_by: str  #: what keeps it: "fixed", "lowest", "highest", "step to …", or "" when it lies where it is cheapest

    def to_dict(self) -> dict[str, Any]:
        return dict(self.__dict__)


@dataclass(frozen=True)
class PadGrades:
    """The pads at their own grades. Volumes are exact: of the design built again at the rounded grades."""

    pads: tuple[PadMove, ...]
    cost_before: float
    cost_after: float
    cut_before_m3: float
    cut_after_m3: float
    fill_before_m3: float
    fill_after_m3: float
    surplus_before_m3: float
    surplus_after_m3: float
    costs: Costs
    average_distance_m: float
    warnings: tuple[Warning, ...]

    def to_dict(self) -> dict[str, Any]:
        row = {name: value for name, value in self.__dict__.items() if name not in ("pads", "costs", "warnings")}
        row["pads"] = [pad.to_dict() for pad in self.pads]
        row["cost_per_m3"] = dict(self.costs.__dict__)
        return row


def move_pads(
    site: Site, ground: SiteGround, cards: dict[str, SoilCard], account_of: AccountOf, *, threads: int | None = None
) -> PadGrades:
    """Find each pad's own grade.

    Args:
        site: a site with ``[design]`` and ``balance.pad_moves``.
        ground: opened; its stack is that of the design as drawn.
        cards: by material.
        account_of: gives the account of the site at given volumes.
        threads: of the walks.

    Raises:
        PlanError: names that are no pads, or limits that cannot all be kept (the pair is named).
    """
    return _Mover(site, ground, cards, account_of, threads).result()


class _Mover:
    def __init__(
        self, site: Site, ground: SiteGround, cards: dict[str, SoilCard], account_of: AccountOf, threads: int | None
    ) -> None:
        assert ground.design is not None
        assert site.model.balance.pad_moves is not None
        self.site = site
        self.ground = ground
        self.cards = cards
        self.account_of = account_of
        self.threads = threads
        self.built: BuiltDesign = ground.design
        self.table: PadMoves = site.model.balance.pad_moves
        self.warnings: list[Warning] = []
        self.names = [pad.name for pad in self.built.pads]
        _check_names(self.table, self.names)
        self.grade = {
            pad.name: float(_mean_grade(element))
            for pad, element in zip(self.built.pads, self.built.design.pads, strict=True)
        }

    def result(self) -> PadGrades:
        groups = self._groups()
        ranges = [self._range(group) for group in groups]
        looked = self._look(ranges)
        curves = [looked.curve(group) for group in groups]
        before = self._exact({})
        account = self.account_of(before)
        costs, distance = self._costs(looked)
        balancing = Balancing(
            surplus_m3=account.surplus_m3,
            required_m3=account.required_m3,
            cut_m3=sum(curve.at(0.0)[0] for curve in curves),
            fill_m3=sum(curve.at(0.0)[1] for curve in curves),
            factor=_factor(account),
            target_m3=self.site.model.balance.target_surplus,
        )
        steps = self._steps()
        found, volumes = self._on_exact_volumes(groups, curves, ranges, steps, costs, balancing)
        if found.gap > 0:
            message = f"balance.pad_moves: the search stopped early; a plan up to {100 * found.gap:.2g} % cheaper may exist"
            self.warnings.append(Warning("pad-move-gap", message))
        after = self.account_of(volumes)
        shifts = {name: float(s) for group, s in zip(groups, found.shifts_m, strict=True) for name in group}
        return PadGrades(
            pads=tuple(self._move(name, groups, curves, ranges, steps, costs, balancing, found) for name in shifts),
            cost_before=_cost(before, account, costs, balancing.target_m3),
            cost_after=_cost(volumes, after, costs, balancing.target_m3),
            cut_before_m3=before.cut_m3,
            cut_after_m3=volumes.cut_m3,
            fill_before_m3=before.fill_m3,
            fill_after_m3=volumes.fill_m3,
            surplus_before_m3=account.surplus_m3,
            surplus_after_m3=after.surplus_m3,
            costs=costs,
            average_distance_m=distance,
            warnings=tuple(self.warnings),
        )

    # --- what may move -------------------------------------------------------------------------------------------

    def _groups(self) -> list[tuple[str, ...]]:
        """Groups of pads, in the order of the design; a pad that no group names is one by itself."""
        group_of = {name: group for group in self.table.groups for name in group}
        return list(dict.fromkeys(group_of.get(name, (name,)) for name in self.names))

    def _range(self, group: tuple[str, ...]) -> tuple[float, float]:
        """Lowest and highest shift of a group: the narrowest of its pads."""
        low, high = self.table.range
        limits = {limit.pad: limit for limit in self.table.limit}
        for name in group:
            if name in self.table.fixed:
                low, high = max(low, 0.0), min(high, 0.0)
            limit = limits.get(name)
            if limit is not None and limit.lowest is not None:
                low = max(low, limit.lowest - self.grade[name])
            if limit is not None and limit.highest is not None:
                high = min(high, limit.highest - self.grade[name])
        if low > high + 1e-9:
            units = self.site.units
            raise PlanError(
                f"balance.pad_moves: {_listed(group)} cannot move within all of its limits: at least "
                f"{units.from_si(low, 'length'):+.3f} and at most {units.from_si(high, 'length'):+.3f} "
                f"{units.label('length')}. Widen the range or a limit"
            )
        return low, max(low, high)

    def _steps(self) -> list[StepLimit]:
        """Limits between neighbours, and between the pairs that the site file names."""
        named = {tuple(sorted(step.between)): step.greatest for step in self.table.step}
        if self.table.greatest_step is not None:
            reach = self.table.neighbours_within / (self.built.design.grid.unit_m * self.built.design.grid.ground_scale)
            shapes = np.array([pad.polygon for pad in self.built.pads], dtype=object)
            for i, j in zip(*shapely.STRtree(shapes).query(shapes, "dwithin", distance=reach), strict=True):
                if i < j:
                    pair = tuple(sorted((self.names[i], self.names[j])))
                    named.setdefault(pair, self.table.greatest_step)
        return [StepLimit(a, b, most, self.grade[a], self.grade[b]) for (a, b), most in sorted(named.items())]

    # --- what it costs -------------------------------------------------------------------------------------------

    def _costs(self, looked: PadLooks) -> tuple[Costs, float]:
        """Money per m³, and the average haul on the site [m]."""
        units, model = self.site.units, self.site.model
        volume = units.factor("soil_volume")
        per_kg_m = (model.haul.cost if model.haul else 1.0) / (units.factor("mass") * units.factor("road"))
        density = self._placed_density()
        distance = self.table.average_distance or looked.distance_m
        on_site = per_kg_m * density * distance
        bring, away = self.table.import_cost, self.table.export_cost
        return Costs(
            dig=self.table.dig_cost / volume,
            fill=self.table.fill_cost / volume,
            on_site=on_site,
            bring=self._bring(per_kg_m, on_site, looked) if bring is None else bring / volume,
            take_away=self._away(per_kg_m, on_site, looked) if away is None else away / volume,
        ), distance

    def _placed_density(self) -> float:
        """Dry density of fill, mean of the materials that may be placed [kg/m³]."""
        known = [c.fill_dry_density_kg_m3 for c in self.cards.values() if c.use in ("fill", "rock")]
        return float(np.mean([d for d in known if d is not None] or [1700.0]))

    def _bring(self, per_kg_m: float, on_site: float, looked: PadLooks) -> float:
        borrow = next(iter(self.site.model.borrow), None)
        card = self.cards.get(borrow.material) if borrow is not None else None
        if borrow is None or card is None or card.fill_dry_density_kg_m3 is None:
            self._assumed("no [[borrow]] with a price is given: bringing a compacted m³ is taken", _FAR)
            return _FAR * on_site
        mass = card.fill_dry_density_kg_m3 / (1 - card.loss_fraction)
        units = self.site.units
        if borrow.price_per == "mass":
            price = borrow.price * mass / units.factor("mass")
        else:
            density = card.dry_density_kg_m3("bank" if borrow.price_per == "bank" else "loose")
            price = borrow.price * mass / density / units.factor("soil_volume")
        return max(price + per_kg_m * mass * looked.away_m(borrow.at, "fill"), 0.0)

    def _away(self, per_kg_m: float, on_site: float, looked: PadLooks) -> float:
        place = next(iter(self.site.model.disposal), None)
        card = next((c for c in self.cards.values() if c.fill_dry_density_kg_m3 is not None), None)
        if place is None or card is None or card.fill_dry_density_kg_m3 is None:
            self._assumed("no [[disposal]] is given: taking a compacted m³ away is taken", _FAR)
            return _FAR * on_site
        mass = card.fill_dry_density_kg_m3
        price = place.price * mass / card.loose_dry_density_kg_m3 / self.site.units.factor("soil_volume")
        return max(price + per_kg_m * mass * looked.away_m(place.at, "cut"), 0.0)

    def _assumed(self, text: str, times: float) -> None:
        message = f"balance.pad_moves: {text} to cost {times:g} hauls on the site; give import_cost and export_cost"
        self.warnings.append(Warning("pad-move-cost-assumed", message))

    # --- volumes -------------------------------------------------------------------------------------------------

    def _look(self, ranges: Sequence[tuple[float, float]]) -> PadLooks:
        """Cut and fill of each pad with its slopes at shifts of all pads together, by plain sums over the cells."""
        low, high = min(r[0] for r in ranges), max(r[1] for r in ranges)
        shifts = np.unique(np.r_[np.linspace(low, high, _LOOKS), 0.0])
        looked = PadLooks(self.built.design, shifts, self.names)
        for k, shift in enumerate(shifts):
            built = self.built if shift == 0.0 else self.built.raised(dict.fromkeys(self.names, float(shift)))
            looked.take(k, replace(self.ground.stack, finished=built.design), built.design)
        return looked

    def _exact(self, shifts_m: dict[str, float]) -> AreaVolumes:
        """Volumes of the whole site with pads at other grades: the design is built again and the ground walked."""
        ground = self.ground
        moved = {name: shift for name, shift in shifts_m.items() if shift != 0.0}
        if moved:
            built = self.built.raised(moved)
            stack = replace(ground.stack, finished=built.design)
            if self.site.model.ground.disturbed is None and stack.disturbed is not None:
                shape = areas.union_area([built.area, ground.worked_shape])
                stack = replace(stack, disturbed=areas.rings_on(stack.grid, [shape]))
            ground = replace(ground, stack=stack)
        tally = VolumesTally(replace(ground, zone_names=(), zones=None))
        walk(ground.stack, [tally], threads=self.threads)
        return area_volumes(ground, tally.total, None, 0.0)

    def _on_exact_volumes(
        self,
        groups: Sequence[tuple[str, ...]],
        curves: Sequence[PadCurve],
        ranges: Sequence[tuple[float, float]],
        steps: Sequence[StepLimit],
        costs: Costs,
        balancing: Balancing,
    ) -> tuple[Grades, AreaVolumes]:
        """Solve, build, count, and set the curves right by what they missed, until the surplus is what they say."""
        step = self.site.model.balance.step or self.site.units.to_si(0.01, "length")
        aim, best = balancing, None
        for _ in range(_EXACT_ROUNDS):
            solved = solve_grades(curves, ranges, steps, costs, aim)
            found = _rounded(solved, step, ranges, curves, steps)
            shifts = {name: float(s) for group, s in zip(groups, found, strict=True) for name in group}
            volumes = self._exact(shifts)
            account = self.account_of(volumes)
            cost = _cost(volumes, account, costs, balancing.target_m3)
            if best is None or cost < best[0] - 1e-9 * abs(best[0]):
                best = cost, Grades(found, cost, account.surplus_m3, solved.gap), volumes
            missed = account.surplus_m3 - cost_of(found, curves, costs, aim)[1]
            one_step = step * sum(abs(_slope_of(c, s)) for c, s in zip(curves, found, strict=True))
            if abs(missed) <= max(one_step / 2, 1e-6):
                break
            aim = replace(aim, surplus_m3=aim.surplus_m3 + missed)
        assert best is not None
        return best[1], best[2]

    def _move(
        self,
        name: str,
        groups: Sequence[tuple[str, ...]],
        curves: Sequence[PadCurve],
        ranges: Sequence[tuple[float, float]],
        steps: Sequence[StepLimit],
        costs: Costs,
        balancing: Balancing,
        found: Grades,
    ) -> PadMove:
        g = next(k for k, group in enumerate(groups) if name in group)
        shift = float(found.shifts_m[g])
        back = found.shifts_m.copy()
        back[g] = 0.0
        saves = cost_of(back, curves, costs, balancing)[0] - cost_of(found.shifts_m, curves, costs, balancing)[0]
        held = ""
        low, high = ranges[g]
        tolerance = (self.site.model.balance.step or self.site.units.to_si(0.01, "length")) / 2 + 1e-9
        if high - low < 1e-9:
            held = "fixed"
        elif shift <= low + tolerance:
            held = "lowest"
        elif shift >= high - tolerance:
            held = "highest"
        for limit in steps:
            if name in (limit.one, limit.other) and not held:
                other = limit.other if name == limit.one else limit.one
                at = {n: float(s) for group, s in zip(groups, found.shifts_m, strict=True) for n in group}
                apart = limit.elevation_one_m + at[limit.one] - limit.elevation_other_m - at[limit.other]
                if abs(apart) >= limit.greatest_m - tolerance:
                    held = f"step to {other}"
        return PadMove(name, self.grade[name], self.grade[name] + shift, shift, saves, held)


def _check_names(table: PadMoves, names: Sequence[str]) -> None:
    import difflib

    used = [("fixed", name) for name in table.fixed]
    used += [("groups", name) for group in table.groups for name in group]
    used += [("limit", limit.pad) for limit in table.limit]
    used += [("step", name) for step in table.step for name in step.between]
    faults = []
    for where, name in used:
        if name not in names:
            near = difflib.get_close_matches(name, names, n=1)
            hint = f'did you mean "{near[0]}"?' if near else f"pads are: {', '.join(names)}"
            faults.append(f'balance.pad_moves.{where}: there is no pad "{name}"; {hint}')
    if faults:
        raise PlanError("\n  ".join(faults))


def _mean_grade(element: Any) -> float:
    """Grade of a pad at the middle of its polygon [m]."""
    if element.plane is None:
        return float(element.triangles.reshape(-1, 3)[:, 2].mean())
    x, y = float(np.mean(element.ring_x[:-1])), float(np.mean(element.ring_y[:-1]))
    return float(element.grade_at(np.array([x]), np.array([y]))[0])


def _listed(names: Sequence[str]) -> str:
    return " and ".join(f'"{name}"' for name in names)


def _factor(account: Account) -> float:
    """Compacted m³ made of a bank m³ of the site's cut."""
    usable = [a for a in account.materials if a.is_fill and a.compacted_m3 is not None]
    cut = sum(a.cut_bank_m3 for a in account.materials)
    made = sum((a.compacted_m3 or 0.0) * a.cut_bank_m3 / a.bank_m3 for a in usable if a.bank_m3 > 0)
    return made / cut if cut > 0 else 1.0


def _cost(volumes: AreaVolumes, account: Account, costs: Costs, target_m3: float) -> float:
    """Money for digging, filling, moving on the site, bringing and taking away."""
    bring = max(target_m3 - account.surplus_m3, 0.0)
    away = max(account.surplus_m3 - target_m3, 0.0)
    moved = max(account.required_m3 - bring, 0.0)
    cost = costs.dig * volumes.cut_m3 + costs.fill * volumes.fill_m3 + costs.on_site * moved
    return cost + costs.bring * bring + costs.take_away * away


def _slope_of(curve: PadCurve, shift_m: float) -> float:
    """How the difference of cut and fill changes with the shift [m³/m]."""
    width = float(curve.shifts_m[-1] - curve.shifts_m[0])
    if width <= 0:
        return 0.0
    h = width / (4 * len(curve.shifts_m))
    (c0, f0), (c1, f1) = curve.at(shift_m - h), curve.at(shift_m + h)
    return ((f1 - f0) - (c1 - c0)) / (2 * h)


def _rounded(
    grades: Grades,
    step: float,
    ranges: Sequence[tuple[float, float]],
    curves: Sequence[PadCurve],
    steps: Sequence[StepLimit],
) -> np.ndarray:
    """Shifts rounded to the step where that keeps all limits, else as they are."""
    rounded = np.round(grades.shifts_m / step) * step
    low, high = np.array(ranges).T
    rounded = np.clip(rounded, low, high)
    group = {name: g for g, curve in enumerate(curves) for name in curve.names}
    kept = all(limit.kept(rounded[group[limit.one]], rounded[group[limit.other]]) for limit in steps)
    return rounded if kept else grades.shifts_m
