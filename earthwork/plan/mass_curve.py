"""The mass curve along a baseline: ordinates, balance points, freehaul and overhaul, limit of economic haul.

The curve is drawn in compacted-equivalent volume (cut × effective factor), so that it closes where cut serves fill.
Earth is paired as a mass diagram pairs it: every cut with the nearest fill that still lacks earth, in nested chords
that never cross, which is the least haul on a line. A chord's length is the haul of its layer, so areas under the
curve are haul moments (method of moments: volume × distance) [garber2009, ch. 14].
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from functools import cached_property

import numpy as np

Array = np.ndarray


@dataclass(frozen=True)
class Layer:
    """A slice of the curve between two levels: earth that is hauled along chords of a length that runs evenly.

    ``cut_from``, ``cut_to`` and ``fill_from``, ``fill_to``: stations of the two flanks [m], at the two levels each.
    """

    volume_m3: float
    cut_from: float
    cut_to: float
    fill_from: float
    fill_to: float

    @property
    def lengths_m(self) -> tuple[float, float]:
        """Haul at the two levels [m]."""
        return abs(self.fill_from - self.cut_from), abs(self.fill_to - self.cut_to)

    @property
    def moment_m4(self) -> float:
        """Volume × distance [m³·m]."""
        return self.volume_m3 * sum(self.lengths_m) / 2

    def beyond(self, limit_m: float) -> tuple[float, float]:
        """Volume hauled over more than a distance [m³], and its moment over that distance [m³·m]."""
        short, far = sorted(self.lengths_m)
        if far <= limit_m:
            return 0.0, 0.0
        if short >= limit_m:
            return self.volume_m3, self.volume_m3 * ((short + far) / 2 - limit_m)
        share = (far - limit_m) / (far - short)
        return self.volume_m3 * share, self.volume_m3 * share * (far - limit_m) / 2


@dataclass(frozen=True)
class Rest:
    """Earth between two stations that meets no fill (waste) or no cut (borrow)."""

    kind: str  #: "waste" or "borrow"
    volume_m3: float
    start_m: float
    stop_m: float


@dataclass(frozen=True)
class MassCurve:
    """A mass curve.

    ``stations_m`` (k + 1,): edges of the intervals, rising. ``cut_m3`` (k,): bank; ``compacted_m3`` (k,): what the cut
    makes as fill, after loss; ``fill_m3`` (k,): compacted need.

    Cut of 100 then 50, fill of 80 then 70, all as compacted; the curve rises to 100 and ends at 0:

    >>> curve = MassCurve(np.array([0.0, 10, 20, 30, 40]), *np.array([[100.0, 0, 50, 0], [100, 0, 50, 0], [0, 80, 0, 70]]))
    >>> [float(y) for y in curve.ordinates_m3]
    [0.0, 100.0, 20.0, 70.0, 0.0]
    >>> curve.moment_m4, float(np.trapezoid(curve.ordinates_m3, curve.stations_m))
    (1900.0, 1900.0)
    """

    stations_m: Array
    cut_m3: Array
    compacted_m3: Array
    fill_m3: Array

    @cached_property
    def ordinates_m3(self) -> Array:
        """Compacted-equivalent volume in hand at each station edge (k + 1,)."""
        return np.concatenate([[0.0], np.cumsum(self.compacted_m3 - self.fill_m3)])

    @property
    def bank_per_compacted(self) -> float:
        """Bank volume that gives one compacted-equivalent volume, over all the cut; 1 without cut."""
        made = float(self.compacted_m3.sum())
        return float(self.cut_m3.sum()) / made if made > 0 else 1.0

    @property
    def balance_points_m(self) -> list[float]:
        """Stations where the curve crosses or touches zero after it has left it."""
        found: list[float] = []
        x, y = self.stations_m, self.ordinates_m3
        tiny = 1e-12 * float(np.abs(y).max(initial=0.0))
        for k in range(len(x) - 1):
            a, b = y[k], y[k + 1]
            if abs(b) <= tiny < abs(a):
                found.append(float(x[k + 1]))
            elif abs(a) > tiny and (a > 0) != (b > 0):
                found.append(float(x[k] + (x[k + 1] - x[k]) * a / (a - b)))
        return found

    @cached_property
    def _paired(self) -> tuple[list[Layer], list[Rest]]:
        """Layers and what is left over: cut and fill met one after the other wait on a stack for their like."""
        layers: list[Layer] = []
        waiting: list[list[float]] = []  # [amount (+ cut, − fill), from, to]
        for k in range(len(self.stations_m) - 1):
            amount = float(self.compacted_m3[k] - self.fill_m3[k])
            start, stop = float(self.stations_m[k]), float(self.stations_m[k + 1])
            while amount != 0.0 and waiting and (waiting[-1][0] > 0) != (amount > 0):
                before = waiting[-1]
                part = min(abs(before[0]), abs(amount))
                split = before[2] - (before[2] - before[1]) * part / abs(before[0])
                reach = start + (stop - start) * part / abs(amount)
                flanks = (split, before[2], reach, start) if amount < 0 else (reach, start, split, before[2])
                layers.append(Layer(part, *flanks))
                sign = 1.0 if amount > 0 else -1.0
                amount -= sign * part
                before[0] += sign * part
                before[2], start = split, reach
                if before[0] == 0.0:
                    waiting.pop()
            if amount != 0.0:
                waiting.append([amount, start, stop])
        least = 1e-12 * float(self.compacted_m3.sum() + self.fill_m3.sum())
        rests = [Rest("waste" if w[0] > 0 else "borrow", abs(w[0]), w[1], w[2]) for w in waiting if abs(w[0]) > least]
        return layers, rests

    @property
    def layers(self) -> list[Layer]:
        """The earth that is hauled along the line, in layers."""
        return self._paired[0]

    @property
    def rests(self) -> list[Rest]:
        """Where earth is wasted or borrowed."""
        return self._paired[1]

    @property
    def within_m3(self) -> float:
        """Earth used in the interval where it is cut, which the curve does not show."""
        return float(np.minimum(self.compacted_m3, self.fill_m3).sum())

    @property
    def volume_m3(self) -> float:
        """Compacted-equivalent volume hauled from interval to interval."""
        return float(sum(layer.volume_m3 for layer in self.layers))

    @property
    def moment_m4(self) -> float:
        """Haul moment, compacted-equivalent volume × distance."""
        return float(sum(layer.moment_m4 for layer in self.layers))

    @property
    def mean_haul_m(self) -> float | None:
        """Mean haul of what is hauled; None where nothing is."""
        return self.moment_m4 / self.volume_m3 if self.volume_m3 > 0 else None

    def overhaul(self, freehaul_m: float) -> Overhaul:
        """What is hauled over more than the freehaul distance, by the method of moments."""
        beyond = [layer.beyond(freehaul_m) for layer in self.layers]
        return Overhaul(
            freehaul_m=freehaul_m,
            volume_m3=sum(b[0] for b in beyond),
            moment_m4=sum(b[1] for b in beyond),
            hauled_m3=self.volume_m3,
            bank_per_compacted=self.bank_per_compacted,
        )


@dataclass(frozen=True)
class Overhaul:
    """Overhaul along a mass curve; volumes are compacted-equivalent unless named bank."""

    freehaul_m: float
    volume_m3: float
    moment_m4: float
    hauled_m3: float
    bank_per_compacted: float

    @property
    def freehaul_m3(self) -> float:
        """Volume hauled within the freehaul distance."""
        return self.hauled_m3 - self.volume_m3

    @property
    def mean_m(self) -> float | None:
        """Mean distance of overhaul beyond freehaul."""
        return self.moment_m4 / self.volume_m3 if self.volume_m3 > 0 else None

    @property
    def bank_m3(self) -> float:
        return self.volume_m3 * self.bank_per_compacted

    def bank_stations(self, station_m: float) -> float:
        """Overhaul as it is paid, bank volume × station [m³·station]."""
        return self.moment_m4 * self.bank_per_compacted / station_m


def limit_of_economic_haul_m(freehaul_m: float, *, borrow_cost: float, overhaul_cost: float, station_m: float) -> float:
    """Haul over which wasting and borrowing is cheaper than hauling [m].

    ``freehaul + borrow cost / overhaul cost`` [garber2009, ch. 14].

    Args:
        borrow_cost: money for a volume of borrow with what wasting the cut costs.
        overhaul_cost: money for a volume over one station, > 0.

    >>> limit_of_economic_haul_m(5 * 100, borrow_cost=5, overhaul_cost=0.25, station_m=100) / 100
    25.0
    """
    if overhaul_cost <= 0:
        raise ValueError(f"overhaul cost is {overhaul_cost:g}; it must be more than 0")
    return freehaul_m + station_m * borrow_cost / overhaul_cost


def average_end_area_m3(areas_m2: Sequence[float] | Array, spacing_m: float | Array) -> Array:
    """Volumes between sections from the mean of their areas.

    >>> average_end_area_m3([0.0, 20.0], 30.0)
    array([300.])
    """
    areas = np.asarray(areas_m2, float)
    return (areas[:-1] + areas[1:]) / 2 * spacing_m


def prismoidal_m3(
    areas_m2: Sequence[float] | Array, middle_m2: Sequence[float] | Array, spacing_m: float | Array
) -> Array:
    """Volumes between sections by the prismoidal formula, with the areas half-way between them.

    A pyramid with a base of 20 and a height of 30 has 200, where end areas say 300:

    >>> prismoidal_m3([0.0, 20.0], [5.0], 30.0)
    array([200.])
    """
    areas, middle = np.asarray(areas_m2, float), np.asarray(middle_m2, float)
    return (areas[:-1] + 4 * middle + areas[1:]) / 6 * spacing_m
