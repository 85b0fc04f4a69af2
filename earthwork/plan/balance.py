"""The haul balance of a site: available against required, imports and exports, and the grade shift that balances it."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass, replace
from pathlib import Path
from typing import TYPE_CHECKING, Any

from earthwork.errors import SiteFileError, Warning
from earthwork.plan.account import Account, MaterialAccount, account, unlayered_material
from earthwork.plan.grade_shift import Root, ShiftTally, find_shift, trial_shifts
from earthwork.plan.keys import KeysResult, KeysTally, keys_result, with_keys
from earthwork.plan.movements import LedgerRow, Movement, Settlement, settle
from earthwork.quantities.area_volumes import AreaVolumes, area_volumes
from earthwork.quantities.engine import Progress, Tally, walk
from earthwork.quantities.placed_tests import site_cards
from earthwork.quantities.site_ground import SiteGround, open_site
from earthwork.quantities.volumes import VolumesResult, VolumesTally, volumes_result
from earthwork.results import Result
from earthwork.site import Site, load_site
from earthwork.site.model import SiteModel
from earthwork.soils.card import SoilCard, soil_warnings

if TYPE_CHECKING:
    import pandas

    from earthwork.plan.pad_grades import PadGrades


_MOVEMENT_COLUMNS = ["direction", "material", "reason", "dry_mass_t", "bank_m3", "loose_m3", "compacted_m3", "loads"]


@dataclass(frozen=True)
class GradeShift:
    """The site at another height of its grade."""

    shift_m: float
    area_m2: float
    cut_m3: float
    fill_m3: float
    surplus_compacted_m3: float
    surplus_change_per_cm_m3: float
    edge_step_m: float
    shift_exact_m: float
    surplus_at_exact_m3: float

    def to_dict(self) -> dict[str, float]:
        return dict(self.__dict__)


@dataclass(frozen=True, kw_only=True)
class BalanceResult(Result):
    """What the site has, what it needs, and what follows; see the JSON of ``balance``."""

    volumes: VolumesResult
    cards: dict[str, SoilCard]
    account: Account
    settlement: Settlement
    grade_shift: GradeShift | None
    grade_shift_note: str | None
    grade_shift_nearest: GradeShift | None
    grade_curve: tuple[tuple[float, float], ...]  #: (shift [m], surplus [m³ compacted])
    target_surplus_m3: float
    keys: KeysResult | None = None  #: keys and benches, where the site counts them
    pad_grades: PadGrades | None = None  #: each pad's own grade, where the site asks for it

    @property
    def available_compacted_m3(self) -> float:
        return self.account.available_m3

    @property
    def required_compacted_m3(self) -> float:
        return self.account.required_m3

    @property
    def surplus_compacted_m3(self) -> float:
        """Available − required; negative is a shortage."""
        return self.account.surplus_m3

    @property
    def imports(self) -> tuple[Movement, ...]:
        return self.settlement.imports

    @property
    def exports(self) -> tuple[Movement, ...]:
        return self.settlement.exports

    @property
    def ledger(self) -> tuple[LedgerRow, ...]:
        return self.settlement.ledger

    def to_dict(self) -> dict[str, Any]:
        account = self.account
        return {
            "materials": [_material_row(a) for a in account.materials],
            "available_compacted_m3": account.available_m3,
            "required_compacted_m3": account.required_m3,
            "required": {
                "fill_m3": account.fill_m3,
                "over_excavation_refill_m3": account.refill_m3,
                "scarify_m3": account.scarify_m3,
                "allowance_m3": account.allowance_m3,
                "section_m3": account.section_m3,
            },
            "surplus_compacted_m3": account.surplus_m3,
            "surplus_compacted_sd_m3": account.sd_m3,
            "target_surplus_m3": self.target_surplus_m3,
            "imports": [m.to_dict() for m in self.imports],
            "exports": [m.to_dict() for m in self.exports],
            "topsoil": self.settlement.topsoil.to_dict(),
            "per_shrink_point_m3": account.per_shrink_point_m3,
            "grade_shift": self.grade_shift.to_dict() if self.grade_shift else None,
            "grade_shift_note": self.grade_shift_note,
            "grade_shift_nearest": self.grade_shift_nearest.to_dict() if self.grade_shift_nearest else None,
            "grade_curve": [{"shift_m": s, "surplus_compacted_m3": v} for s, v in self.grade_curve],
            "ledger": [
                {"from": r.source, "to": r.sink, "material": r.material, "dry_mass_t": r.dry_mass_kg / 1000}
                for r in self.ledger
            ],
            "keys": self.keys.to_dict() if self.keys else None,
            "pad_grades": self.pad_grades.to_dict() if self.pad_grades else None,
            "ledger_closure_t": self.settlement.open_kg / 1000,
        }

    def tables(self) -> dict[str, pandas.DataFrame]:
        import pandas as pd

        result = self.to_dict()
        movements = [{"direction": "import", **m.to_dict()} for m in self.imports]
        movements += [{"direction": "export", **m.to_dict()} for m in self.exports]
        pads = {"pad_grades": pd.DataFrame(result["pad_grades"]["pads"])} if self.pad_grades else {}
        return {
            "materials": pd.DataFrame(result["materials"]),
            "movements": pd.DataFrame(movements, columns=_MOVEMENT_COLUMNS),
            "grade_curve": pd.DataFrame(result["grade_curve"]),
            "ledger": pd.DataFrame(result["ledger"]),
            **pads,
        }


def _material_row(a: MaterialAccount) -> dict[str, Any]:
    return {
        "material": a.material,
        "use": a.use,
        "cut_bank_m3": a.cut_bank_m3,
        "strip_bank_m3": a.strip_bank_m3,
        "over_excavation_bank_m3": a.over_excavation_bank_m3,
        "allowance_bank_m3": a.allowance_bank_m3,
        "dry_mass_t": a.dry_mass_kg / 1000,
        "lost_t": a.lost_kg / 1000,
        "compacted_m3": a.compacted_m3,
        "loose_m3": a.loose_m3,
    }


def balance(
    site: Site | str | Path,
    *,
    threads: int | None = None,
    progress: Progress | None = None,
    tallies: Sequence[Tally] = (),
) -> BalanceResult:
    """Haul balance of a site, and the shift of its grade that gives the wanted surplus.

    Args:
        site: a checked site, or the path of its file.
        threads, progress, tallies: as for :func:`earthwork.volumes`; the tallies see the site as it is, unshifted.

    Raises:
        EarthworkError: bad input; the message says what, where and how to mend it.
    """
    site = site if isinstance(site, Site) else load_site(site)
    model = site.model
    if not model.stratum and not model.borrow:
        raise SiteFileError(
            f"{site.path or site.name}: balance needs at least one [[stratum]] (what the cut is made of), "
            "or a [[borrow]] with its material"
        )
    cards = site_cards(site)
    ground = open_site(site, moving=True)
    low, high = model.balance.shift_range
    main = VolumesTally(ground)
    trials = ShiftTally(ground.stack, trial_shifts(low, high))
    keys = KeysTally(ground.stack.grid) if model.keys.count else None
    walk(ground.stack, [main, trials, *([keys] if keys else []), *tallies], threads=threads, progress=progress)
    volumes = volumes_result(site, ground, main)
    dug = keys_result(keys, model.keys, cards, (), ground) if keys else None

    def counted(volumes: AreaVolumes) -> AreaVolumes:
        return volumes if dug is None else with_keys(volumes, dug, ground)

    seen = _Seen(model, cards, ground, threads, counted)
    seen.take(trials)
    curve = {shift: surplus for shift, surplus in seen.surplus.items() if low <= shift <= high}
    step = model.balance.step or site.units.to_si(0.01, "length")
    root = find_shift(curve, model.balance.target_surplus, step, seen.evaluate)
    result = replace(_result(site, cards, volumes, seen, root, sorted(trials.shifts)), keys=dug)
    if model.balance.pad_moves is None:
        return result
    from earthwork.plan.pad_grades import move_pads

    grades = move_pads(site, ground, cards, lambda v: account(model, cards, counted(v)), threads=threads)
    return replace(result, pad_grades=grades, warnings=(*result.warnings, *grades.warnings))


class _Seen:
    """Every shift that was evaluated, with its volumes and its surplus."""

    def __init__(
        self,
        model: SiteModel,
        cards: dict[str, SoilCard],
        ground: SiteGround,
        threads: int | None,
        counted: Callable[[AreaVolumes], AreaVolumes],
    ) -> None:
        self.counted = counted
        self.model = model
        self.cards = cards
        self.ground = ground
        self.threads = threads
        self.volumes: dict[float, AreaVolumes] = {}
        self.surplus: dict[float, float] = {}

    def take(self, tally: ShiftTally) -> None:
        for shift, sums in tally.sums.items():
            self.volumes[shift] = area_volumes(self.ground, sums, None, 0.0)
            self.surplus[shift] = account(self.model, self.cards, self.counted(self.volumes[shift])).surplus_m3

    def evaluate(self, shifts: Sequence[float]) -> dict[float, float]:
        """Surplus at further shifts, in one pass over the ground."""
        tally = ShiftTally(self.ground.stack, shifts)
        walk(self.ground.stack, [tally], threads=self.threads)
        self.take(tally)
        return {shift: self.surplus[shift] for shift in shifts}

    def slope_per_cm(self, shift: float) -> float:
        """Change of the surplus for one centimetre of grade, from the nearest shifts on either side."""
        known = sorted(self.surplus)
        i = known.index(shift)
        a, b = known[max(i - 1, 0)], known[min(i + 1, len(known) - 1)]
        return 0.01 * (self.surplus[b] - self.surplus[a]) / (b - a) if b > a else 0.0


def _result(
    site: Site,
    cards: dict[str, SoilCard],
    volumes: VolumesResult,
    seen: _Seen,
    root: Root,
    shown: list[float],
) -> BalanceResult:
    model = site.model
    total = seen.counted(volumes.total)
    here = account(model, cards, total)
    settled = settle(model, cards, here, total)
    found = _grade_shift(seen, root.rounded_m, root.exact_m) if root.exact_m is not None else None
    nearest = None if found else _grade_shift(seen, root.nearest_m, root.nearest_m)
    warnings = [*volumes.warnings, *soil_warnings(cards)]
    if not model.stratum and volumes.total.cut_m3 > 0:
        warnings.append(
            Warning(
                "cut-material-assumed",
                f"no [[stratum]] is given: all cut is taken for {unlayered_material(model)}, "
                "the material of the first borrow site",
            )
        )
    return BalanceResult(
        units=site.units,
        warnings=tuple(dict.fromkeys(warnings)),
        volumes=volumes,
        cards=cards,
        account=here,
        settlement=settled,
        grade_shift=found,
        grade_shift_note=None if found else _no_shift_note(site, seen.surplus),
        grade_shift_nearest=nearest,
        grade_curve=tuple((s, seen.surplus[s]) for s in shown),
        target_surplus_m3=model.balance.target_surplus,
    )


def _no_shift_note(site: Site, surplus: dict[float, float]) -> str:
    """Why there is no grade shift, in the site's units."""
    low, high = site.model.balance.shift_range
    if low == high:
        return "balance.shift_range leaves no room for a shift"
    length, volume = site.units.label("length"), site.units.label("soil_volume")

    def shown(value: float, dimension: str, digits: str) -> str:
        return f"{site.units.from_si(value, dimension):{digits}}".replace("-", "−")

    ends = " to ".join(
        f"{shown(surplus[s], 'soil_volume', ',.0f')} {volume} at {shown(s, 'length', '+.2f')} {length}"
        for s in (high, low)
    )
    target = shown(site.model.balance.target_surplus, "soil_volume", ",.0f")
    return (
        f"no shift between {shown(low, 'length', '.2f')} and {shown(high, 'length', '.2f')} {length} gives a surplus of "
        f"{target} {volume}: it runs from {ends}"
    )


def _grade_shift(seen: _Seen, shift: float | None, exact: float | None) -> GradeShift:
    assert shift is not None
    assert exact is not None
    at = seen.volumes[shift]
    return GradeShift(
        shift_m=shift,
        area_m2=at.move_area_m2,
        cut_m3=at.cut_m3,
        fill_m3=at.fill_m3,
        surplus_compacted_m3=seen.surplus[shift],
        surplus_change_per_cm_m3=seen.slope_per_cm(shift),
        edge_step_m=abs(shift),
        shift_exact_m=exact,
        surplus_at_exact_m3=seen.surplus[exact],
    )
