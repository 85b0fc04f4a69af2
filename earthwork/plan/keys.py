"""Keys and benches: fill on steep ground is keyed into it and benched, which is dug and refilled.

Where stripped ground is steeper than a ratio and the fill on it reaches a height, model grading codes ask for a key at
the toe and for benches above it [ibc-j107]. Both are double-handled soil that no surface shows: they are listed, and go
into the balance only where the site file asks for it.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace
from typing import TYPE_CHECKING, Any

import numpy as np
import shapely

from earthwork.errors import Warning
from earthwork.ground.grid import Grid, Window
from earthwork.quantities.tile import Tile

if TYPE_CHECKING:
    from earthwork.quantities.area_volumes import AreaVolumes
    from earthwork.quantities.pad_ground import PadPlace
    from earthwork.quantities.site_ground import SiteGround
    from earthwork.site.model import Keys
    from earthwork.soils.card import SoilCard
    from earthwork.units import UnitSystem

#: Steepness is that of blocks about so wide, so that it is the ground's and not the survey's noise [m].
_BLOCK_M = 5.0
#: Blocks at most on a side of the site.
_MOST = 1000
#: Fill thinner than this has no toe that is keyed [m].
_THIN_M = 0.1
#: Fills on less steep ground than this are not listed [m²].
_LEAST_AREA_M2 = 10.0


class KeysTally:
    """Ground and fill on a coarse grid: mean elevation of stripped ground, share that is filled, greatest fill."""

    def __init__(self, grid: Grid, block: int | None = None) -> None:
        self.grid = grid
        cell = max(grid.cell_east_m, grid.cell_north_m)
        self.block = block or max(round(_BLOCK_M / cell), -(-max(grid.rows, grid.columns) // _MOST), 1)
        self.pieces: list[tuple[int, int, np.ndarray]] = []

    def empty(self) -> KeysTally:
        return KeysTally(self.grid, self.block)

    def add(self, tile: Tile) -> None:
        depth = tile.depth[1:-1, 1:-1]
        known = np.isfinite(depth)
        if not known.any():
            return
        filled = known & (depth > _THIN_M)
        share = filled if tile.weight is None else filled * tile.weight
        fields = [known, np.where(known, tile.stripped, 0.0), share, np.where(share > 0, depth, 0.0)]
        self.pieces.append((*_blocks(fields, tile.window, self.block),))

    def merge(self, other: KeysTally) -> None:
        self.pieces.extend(other.pieces)

    def fields(self) -> CoarseFill:
        """The coarse grid, put together."""
        height, width = -(-self.grid.rows // self.block), -(-self.grid.columns // self.block)
        whole = np.zeros((4, height, width))
        for row, column, piece in self.pieces:
            at = slice(row, row + piece.shape[1]), slice(column, column + piece.shape[2])
            whole[(slice(0, 3), *at)] += piece[:3]
            np.maximum(whole[(3, *at)], piece[3], out=whole[(3, *at)])
        cells = np.where(whole[0] > 0, whole[0], np.nan)
        ground = whole[1] / cells
        east = _slope(ground, 1, self.grid.cell_east_m * self.block)
        south = _slope(ground, 0, self.grid.cell_north_m * self.block)
        return CoarseFill(whole[2] / self.block**2, whole[3], east, south)


@dataclass(frozen=True)
class CoarseFill:
    """Blocks of the site, each (rows, columns)."""

    share: np.ndarray  #: filled share
    height: np.ndarray  #: greatest fill [m]
    east: np.ndarray  #: rise of stripped ground to the east
    south: np.ndarray  #: and to the south

    @property
    def gradient(self) -> np.ndarray:
        return np.hypot(self.east, self.south)


def _slope(ground: np.ndarray, axis: int, side: float) -> np.ndarray:
    """Central differences; one-sided beside missing ground, 0 where both sides are."""
    step = np.diff(ground, axis=axis) / side
    none = np.full([1 if a == axis else n for a, n in enumerate(ground.shape)], np.nan)
    behind, ahead = np.concatenate([none, step], axis), np.concatenate([step, none], axis)
    behind, ahead = np.where(np.isnan(behind), ahead, behind), np.where(np.isnan(ahead), behind, ahead)
    return np.nan_to_num((behind + ahead) / 2)


def _blocks(fields: Sequence[np.ndarray], window: Window, block: int) -> tuple[int, int, np.ndarray]:
    """Sums of all fields but the last, and maxima of that, over the blocks that a window touches."""
    top, left = window.row % block, window.column % block
    bottom, right = -(top + window.height) % block, -(left + window.width) % block
    padded = [np.pad(np.asarray(a, float), ((top, bottom), (left, right))) for a in fields]
    shape = (padded[0].shape[0] // block, block, padded[0].shape[1] // block, block)
    coarse = [a.reshape(shape).sum(axis=(1, 3)) for a in padded[:-1]]
    coarse.append(padded[-1].reshape(shape).max(axis=(1, 3)))
    return window.row // block, window.column // block, np.array(coarse)


@dataclass(frozen=True)
class SteepFill:
    """A fill on steep ground. Volumes are dug (bank) and refilled (compacted)."""

    fill: str  #: name of the pad that it belongs to, or its number
    area_m2: float  #: of the fill that rests on steep ground
    greatest_height_m: float
    mean_gradient_percent: float
    key_length_m: float
    key_m3: float
    benches_m3: float
    easting_m: float
    northing_m: float

    def to_dict(self) -> dict[str, Any]:
        return dict(self.__dict__)


@dataclass(frozen=True)
class KeysResult:
    """Fills on steep ground, with what keys and benches dig."""

    fills: tuple[SteepFill, ...]
    counted: bool  #: whether the balance has them
    compacted_cost_m3: float | None  #: what the balance loses by them

    @property
    def volume_m3(self) -> float:
        """Dug and refilled in all."""
        return sum(fill.key_m3 + fill.benches_m3 for fill in self.fills)

    def to_dict(self) -> dict[str, Any]:
        return {
            "fills": [fill.to_dict() for fill in self.fills],
            "volume_m3": self.volume_m3,
            "counted": self.counted,
            "compacted_cost_m3": self.compacted_cost_m3,
        }


def key_area_m2(width_m: float, depth_m: float, tilt_percent: float) -> float:
    """Section of a key: its depth at the outer edge over its width, and the wedge that its fall into the slope adds.

    >>> key_area_m2(3.0, 0.6, 2.0)    # 1.8 + 3 · 0.06 / 2
    1.89
    """
    return width_m * depth_m + width_m * (width_m * tilt_percent / 100) / 2


def bench_depth_m(bench_width_m: float, gradient: float) -> float:
    """Mean depth of level benches cut into ground of a gradient: triangles as wide as a bench, ``w tan β / 2``.

    >>> bench_depth_m(3.0, 0.25)
    0.375
    """
    return bench_width_m * gradient / 2


def keys_result(
    tally: KeysTally, table: Keys, cards: dict[str, SoilCard], places: Sequence[PadPlace], ground: SiteGround
) -> KeysResult:
    """Tell the fills apart, name them by the pad they lie at, and work out their keys and benches."""
    from scipy.ndimage import label

    found = tally.fields()
    steep = found.gradient * table.steeper_than > 1 + 1e-9
    block_m2 = tally.grid.cell_area_m2 * tally.block**2
    labels, count = label(found.share > 0, np.ones((3, 3), int))
    fills: list[SteepFill] = []
    for number in range(1, count + 1):
        here = labels == number
        area = np.where(here & steep, found.share, 0.0)
        blocks, top = float(area.sum()), float(found.height[here & steep].max(initial=0.0))
        if blocks * block_m2 < _LEAST_AREA_M2 or top < table.least_height - 1e-9:
            continue
        length = _toe_length_m(np.where(here, found.share, 0.0), found, steep, tally)
        gradient = float((area * found.gradient).sum()) / blocks
        row, column = (float((np.nonzero(area)[k] * area[area > 0]).sum()) / blocks + 0.5 for k in (0, 1))
        place = tally.grid.point(row * tally.block, column * tally.block)
        fills.append(
            SteepFill(
                fill=_name(here, tally, places, len(fills) + 1),
                area_m2=blocks * block_m2,
                greatest_height_m=top,
                mean_gradient_percent=100 * gradient,
                key_length_m=length,
                key_m3=length * key_area_m2(table.width, table.depth, table.tilt_percent),
                benches_m3=blocks * block_m2 * bench_depth_m(table.bench_width, gradient),
                easting_m=place[0],
                northing_m=place[1],
            )
        )
    fills.sort(key=lambda fill: -fill.area_m2)
    volume = sum(fill.key_m3 + fill.benches_m3 for fill in fills)
    return KeysResult(tuple(fills), table.count, _cost(volume, cards, ground))


def with_keys(volumes: AreaVolumes, keys: KeysResult, ground: SiteGround) -> AreaVolumes:
    """Volumes of a site with keys and benches among the over-excavation: dug from the uppermost stratum, and refilled."""
    dug = dict(volumes.over_excavation_by_material)
    if ground.stack.strata:
        name = ground.stack.strata[0].material
        dug[name] = dug.get(name, 0.0) + keys.volume_m3
    return replace(
        volumes, over_excavation_m3=volumes.over_excavation_m3 + keys.volume_m3, over_excavation_by_material=dug
    )


def _toe_length_m(share: np.ndarray, ground: CoarseFill, steep: np.ndarray, tally: KeysTally) -> float:
    """Length of the lower boundary of a fill on steep ground, seen across the fall of the ground.

    ``−∂(share)/∂(downhill)`` integrated over the ground is that length: what the share loses from one block to the next,
    times how far downhill that is, times the side between them.
    """
    total = 0.0
    safe = np.where(ground.gradient > 0, ground.gradient, 1.0)
    for axis, rise, side in ((1, ground.east, tally.grid.cell_north_m), (0, ground.south, tally.grid.cell_east_m)):
        downhill = -rise / safe
        here = [slice(None)] * 2
        there = [slice(None)] * 2
        here[axis], there[axis] = slice(None, -1), slice(1, None)
        lost = share[tuple(here)] - share[tuple(there)]
        # At the boundary the fall and the steepness are those of the block with more fill.
        inner = np.where(lost >= 0, downhill[tuple(here)], downhill[tuple(there)])
        on_steep = np.where(lost >= 0, steep[tuple(here)], steep[tuple(there)])
        total += float((lost * inner * on_steep).clip(min=0.0).sum()) * side * tally.block
    return total


def _name(here: np.ndarray, tally: KeysTally, places: Sequence[PadPlace], number: int) -> str:
    """The pads that a fill touches, or its number."""
    rows, columns = np.nonzero(here)
    grid, block = tally.grid, tally.block
    east = grid.west + (columns + 0.5) * block * grid.cell_east
    north = grid.north - (rows + 0.5) * block * grid.cell_north
    names = [place.name for place in places if shapely.contains_xy(place.polygon, east, north).any()]
    return ", ".join(names) if names else f"fill {number}"


def _cost(volume: float, cards: dict[str, SoilCard], ground: SiteGround) -> float | None:
    """What digging and refilling a volume of the uppermost stratum takes from the balance [m³ compacted]."""
    names = [stratum.material for stratum in ground.stack.strata]
    return refill_cost_m3(volume, cards.get(names[0]) if names else None)


def refill_cost_m3(volume_m3: float, card: SoilCard | None) -> float | None:
    """What digging a volume and refilling it takes from the balance: V (1 − SF (1 − loss)) [m³ compacted].

    All of it where what is dug is waste or topsoil, which is no fill; None where the soil is not known.
    """
    if volume_m3 == 0.0:
        return 0.0
    if card is None:
        return None
    factor = card.effective_factor if card.use in ("fill", "rock") else 0.0
    return None if factor is None else volume_m3 * (1 - factor)


def keys_left_out(keys: KeysResult, plan: str, units: UnitSystem) -> tuple[Warning, ...]:
    """That a plan does not have the keys and benches that the balance counts; nothing where there are none."""
    if not keys.counted or keys.volume_m3 == 0.0:
        return ()

    def shown(volume_m3: float) -> str:
        return f"{units.from_si(volume_m3, 'soil_volume'):,.0f} {units.label('soil_volume')}"

    message = (
        f"keys: the balance counts {shown(keys.volume_m3)} of keys and benches, dug and refilled in place; they are not in "
        f"the {plan}"
    )
    if keys.compacted_cost_m3:
        message += f", which is short of the {shown(keys.compacted_cost_m3)} of compacted soil that they take"
    message += ". Give them as an [[over_excavation]] where they are dug, and leave keys.count out"
    return (Warning("keys-not-planned", message),)
