"""Which material goes into which fill, as the haul plan brings it."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace
from typing import TYPE_CHECKING

import numpy as np

from earthwork.plan.fill_areas import FillArea
from earthwork.plan.fill_mix import MixPart, arriving
from earthwork.quantities.lift_tally import CoarseGrid
from earthwork.soils.card import SoilCard

if TYPE_CHECKING:
    from earthwork.plan.haul import HaulResult

#: Share of the even mix that every fill gets: none where the plan's blocks and the fills can be reconciled so.
_EVEN = (0.0, 1e-6)
_ROUNDS = 2000
_CLOSE = 1e-13


@dataclass(frozen=True)
class PlannedMixes:
    """The mix of each fill area by a haul plan, and the dry mass that the plan puts into all of them [kg]."""

    mixes: dict[str, tuple[MixPart, ...]]
    placed_kg: dict[str, float]


def planned_mixes(
    plan: HaulResult,
    areas: Sequence[FillArea],
    coarse: CoarseGrid,
    cards: Mapping[str, SoilCard],
    drying_points: float,
) -> PlannedMixes | None:
    """The mix of each fill area from the moves of a haul plan; None where nothing is moved into them.

    A block of the plan counts for the fill area that its centre lies in or nearest to. Blocks and fill areas do not
    coincide, so the volumes are then scaled, fill by fill and material by material in turn, until every fill is
    filled and every material takes the share of all fill that it has in the plan (iterative proportional fitting).

    Args:
        drying_points: water content lost between the cut and the lift [points].
    """
    area_of = _areas_of_blocks(plan, areas, coarse)
    placed_uses = ("fill", "rock")  # respread topsoil goes to the same blocks
    moves = [m for m in plan.moves if m.to_name in area_of and cards[m.material].use in placed_uses and m.compacted_m3]
    materials = list(dict.fromkeys(move.material for move in moves))
    if not materials:
        return None
    brought = np.zeros((len(areas), len(materials)))
    placed = dict.fromkeys(materials, 0.0)
    for move in moves:
        brought[area_of[move.to_name], materials.index(move.material)] += move.compacted_m3 or 0.0
        placed[move.material] += 1000.0 * move.dry_mass_t
    volumes = np.array([area.compacted_m3 for area in areas])
    shares = fitted_shares(brought, volumes)
    parts = [MixPart(cards[name], 1.0, arriving(cards[name], drying_points)) for name in materials]
    mixes = {
        area.name: tuple(replace(part, share=float(s)) for part, s in zip(parts, row, strict=True) if s > 0)
        for area, row in zip(areas, shares, strict=True)
    }
    # the plan also brings what makes up for scarified ground, which is in no lift
    scale = float(volumes.sum() / brought.sum())
    return PlannedMixes(mixes, {name: mass * scale for name, mass in placed.items()})


def fitted_shares(brought: np.ndarray, volumes: np.ndarray) -> np.ndarray:
    """Share of each material in each area: rows add up to 1, and over all areas each has its share of ``brought``.

    Args:
        brought: compacted volume by area and material, (areas, materials); no column all 0.
        volumes: of the areas, more than 0.

    >>> fitted_shares(np.array([[8.0, 0.0], [0.0, 2.0]]), np.array([8.0, 2.0])).round(4).tolist()
    [[1.0, 0.0], [0.0, 1.0]]
    """
    wanted = brought.sum(axis=0) / brought.sum() * volumes.sum()
    for even in _EVEN:
        fitted = brought * (1.0 - even) + even * np.outer(volumes, wanted / volumes.sum())
        fitted[fitted.sum(axis=1) == 0.0] = wanted  # a fill that no block lies in takes the mix of all
        for _ in range(_ROUNDS):
            fitted *= (volumes / fitted.sum(axis=1))[:, None]
            placed = fitted.sum(axis=0)
            if np.abs(placed / wanted - 1.0).max() < _CLOSE:
                return fitted / fitted.sum(axis=1, keepdims=True)
            fitted *= wanted / placed
    return fitted / fitted.sum(axis=1, keepdims=True)


def _areas_of_blocks(plan: HaulResult, areas: Sequence[FillArea], coarse: CoarseGrid) -> dict[str, int]:
    """Index of the fill area of every fill block."""
    numbers = np.full((coarse.rows, coarse.columns), -1)
    for i, area in enumerate(areas):
        numbers[area.cells] = i
    rows, columns = np.nonzero(numbers >= 0)
    unit = coarse.grid.unit_m
    found = {}
    for block in plan.blocks:
        if block.kind == "fill" and len(rows):
            row, column = coarse.grid.cell(block.easting_m / unit, block.northing_m / unit)
            away = (rows + 0.5 - row / coarse.side) ** 2 + (columns + 0.5 - column / coarse.side) ** 2
            nearest = int(np.argmin(away))
            found[block.block] = int(numbers[rows[nearest], columns[nearest]])
    return found
