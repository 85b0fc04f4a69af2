"""The layer stack: existing → stripped → removal bottom → subgrade → finished, evaluated on windows of the grid.

Layers act by the share of a cell inside their area, so that their volumes are exact at the edges of areas:
a cell that is 30 % inside a 0.15 m strip is lowered by 0.045 m.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, field, replace

import numpy as np

from earthwork.ground.areas import Rings
from earthwork.ground.grid import Grid, Window
from earthwork.ground.surfaces import AlignedReader, Surface, SurfaceReader

#: Fields of a window by name, each (height, width); elevations and depths in m, shares in [0, 1], NaN = no data.
#: ``depth`` (subgrade − stripped), ``existing``, ``finished``; with layers also ``stripped``, ``subgrade``,
#: ``disturbed``, ``move``, and numbered ``strip0`` (depth), ``section0`` (thickness), ``excavation0`` (share),
#: ``scarify0`` (depth), ``stratum0`` (bottom). Where nobody asks for more, ``depth`` alone.
Arrays = dict[str, np.ndarray]

#: Finished and existing ground that differ by more than this are disturbed [m].
DISTURBED_OVER_M = 0.01


@dataclass(frozen=True)
class StripLayer:
    material: str
    depth_m: float
    area: Rings | None  #: None: the disturbed area


@dataclass(frozen=True)
class SectionLayer:
    name: str
    source: str
    thickness_m: float
    area: Rings | None


@dataclass(frozen=True)
class ExcavationLayer:
    name: str
    depth_m: float | None
    bottom: Surface | None
    measured_from: str
    area: Rings | None


@dataclass(frozen=True)
class ScarifyLayer:
    depth_m: float
    area: Rings | None  #: None: under fill


@dataclass(frozen=True)
class StratumLayer:
    material: str
    bottom: Surface | None
    thickness_m: float | None


@dataclass(frozen=True)
class Stack:
    """All surfaces and layers of a site on one grid.

    ``coverage`` gives the share of each cell of a window inside an area; it is handed in because ground knows nothing
    of how shares are counted.
    """

    grid: Grid
    existing: Surface
    finished: Surface
    coverage: Callable[[Rings, Window], np.ndarray]
    limits: Rings | None = None
    disturbed: Rings | None = None  #: as given; None: where finished and existing differ
    worked: Rings | None = None  #: areas of sections and over-excavations, which are disturbed as well
    move: Rings | None = None  #: what a grade shift moves; None: the disturbed area
    strips: tuple[StripLayer, ...] = ()
    sections: tuple[SectionLayer, ...] = ()
    excavations: tuple[ExcavationLayer, ...] = ()
    scarifies: tuple[ScarifyLayer, ...] = ()
    strata: tuple[StratumLayer, ...] = ()
    bands_below_m: tuple[tuple[float, str], ...] = ()  #: depths of the fill's by_depth rows and what they start from
    built_to_subgrade: bool = False  #: ``finished`` is the subgrade, and the sections lie on top of it
    moving: bool = field(default=False)  #: whether the share that a grade shift moves is wanted

    @property
    def layered(self) -> bool:
        """Whether anything lies between existing and finished ground, or fill is told apart by depth.

        A single stratum is all of the ground.
        """
        between = self.strips or self.sections or self.excavations or self.scarifies or self.strata[1:] or self.moving
        return bool(between or self.bands_below_m)

    @property
    def block(self) -> tuple[int, int] | None:
        """(rows, columns) that the files decode at once: the larger of the surfaces', None where it does not matter."""
        blocks = [s.block for s in (self.existing, self.finished) if s.block]
        return (max(b[0] for b in blocks), max(b[1] for b in blocks)) if blocks else None

    @property
    def block_start(self) -> tuple[int, int]:
        """(row, column) of the grid where a block of the file with the larger blocks begins."""
        files = [s for s in (self.existing, self.finished) if s.block]
        return max(files, key=lambda s: s.block or (0, 0)).block_start if files else (0, 0)

    @property
    def materials(self) -> list[str]:
        """Names of the strata's materials, once each, from the top down."""
        return list(dict.fromkeys(stratum.material for stratum in self.strata))

    def reader(self) -> StackReader:
        """A reader for one thread."""
        return StackReader(self)

    def derive(self, arrays: Arrays) -> None:
        """Add ``stripped``, ``subgrade`` and ``depth`` to arrays that hold the surfaces and the shares of the layers.

        Without layers ``depth`` alone, for ``stripped`` is existing ground and ``subgrade`` finished ground.
        """
        if not self.layered:
            arrays["depth"] = arrays["finished"] - arrays["existing"]
            return
        existing = arrays["existing"].astype(np.float64)
        finished = arrays["finished"].astype(np.float64)
        for i in range(len(self.strata) - 1):
            # A cell without data in any needed surface counts as missing.
            finished += 0.0 * arrays[f"stratum{i}"]
        for i, layer in enumerate(self.excavations):
            if layer.bottom is not None:
                finished += np.where(arrays[f"excavation{i}"] > 0, 0.0 * arrays[f"excavation_bottom{i}"], 0.0)
        arrays["stripped"] = existing - sum(arrays[f"strip{i}"] for i in range(len(self.strips)))
        laid = sum(arrays[f"section{i}"] for i in range(len(self.sections)))
        if self.built_to_subgrade:
            arrays["subgrade"], arrays["finished"] = finished, finished + laid
        else:
            arrays["subgrade"] = finished - laid
        arrays["depth"] = arrays["subgrade"] - arrays["stripped"]

    def shifted(self, arrays: Arrays, shift_m: float, room: Arrays | None = None) -> Arrays:
        """The arrays with subgrade, depth and, where depth rows start from it, finished ground raised where they may move.

        ``room`` keeps the memory of what is raised, to be raised again by another shift.
        """
        room = {} if room is None else room
        # of the sums by shift, only depth rows that are measured from it ask for finished ground
        from_finished = any(start == "finished" for _, start in self.bands_below_m)
        for name in ("subgrade", "depth", *(["finished"] if from_finished else [])):
            if name not in room:
                room[name] = np.empty(arrays[name].shape)
            np.multiply(arrays["move"], shift_m, out=room[name])
            room[name] += arrays[name]
        return {**arrays, **room}

    def removal_bottom(self, arrays: Arrays) -> np.ndarray:
        """What the fill rests on [m]: min(stripped, subgrade) less over-excavation, the deepest where they overlap."""
        stripped, subgrade = self.stripped(arrays), self.subgrade(arrays)
        lower = np.minimum(stripped, subgrade)
        deepest = lower
        for i, layer in enumerate(self.excavations):
            share = arrays[f"excavation{i}"]
            if layer.bottom is not None:
                target = np.minimum(lower, np.where(share > 0, arrays[f"excavation_bottom{i}"], lower))
            else:
                start = {"lower": lower, "subgrade": subgrade, "stripped": stripped}[layer.measured_from]
                target = np.minimum(lower, start - layer.depth_m)
            deepest = np.minimum(deepest, lower + share * (target - lower))
        return deepest

    @staticmethod
    def stripped(arrays: Arrays) -> np.ndarray:
        return arrays.get("stripped", arrays["existing"])

    @staticmethod
    def subgrade(arrays: Arrays) -> np.ndarray:
        return arrays.get("subgrade", arrays["finished"])

    def with_move(self, move: Rings | None) -> Stack:
        """The same stack with the share that a grade shift moves; None: the disturbed area."""
        return replace(self, move=move, moving=True)


class StackReader:
    """One thread's way to the surfaces of a stack."""

    def __init__(self, stack: Stack) -> None:
        self.stack = stack
        self.existing = stack.existing.reader()
        self.finished = stack.finished.reader()
        self.bottoms: dict[str, SurfaceReader] = {}
        self._held = [np.empty(0), np.empty(0)]
        for i, stratum in enumerate(stack.strata):
            if stratum.bottom is not None:
                self.bottoms[f"stratum{i}"] = stratum.bottom.reader()
        for i, layer in enumerate(stack.excavations):
            if layer.bottom is not None:
                self.bottoms[f"excavation_bottom{i}"] = layer.bottom.reader()

    def close(self) -> None:
        for reader in (self.existing, self.finished, *self.bottoms.values()):
            reader.close()

    def read_depth(
        self, window: Window, room: Callable[[str, np.dtype], np.ndarray], with_finished: bool = False
    ) -> Arrays:
        """The depth alone, of a site without layers; and the finished ground where it is wanted.

        ``room`` gives the array that a field of a name and type is written into, (height, width).
        """
        existing = self._read_held(self.existing, 0, window)
        finished = self._read_held(self.finished, 1, window)
        depth = room("depth", np.result_type(finished, existing))
        np.subtract(finished, existing, out=depth)
        if not with_finished:
            return {"depth": depth}
        kept = room("finished", finished.dtype)
        kept[...] = finished
        return {"depth": depth, "finished": kept}

    def _read_held(self, reader: SurfaceReader, which: int, window: Window) -> np.ndarray:
        """Read a surface to where the last tile was: coming by new memory costs as much as looking through it."""
        if not isinstance(reader, AlignedReader):
            return reader.read(window)
        cells = window.height * window.width
        if self._held[which].size < cells:
            self._held[which] = np.empty(cells, reader.dtype)
        return reader.read(window, self._held[which][:cells].reshape(window.height, window.width))

    def read(self, window: Window) -> Arrays:
        """All fields of a window, see :data:`Arrays`."""
        arrays = self.read_base(window)
        self.stack.derive(arrays)
        return arrays

    def read_base(self, window: Window) -> Arrays:
        """The fields that :meth:`Stack.derive` gets the others from; the base surfaces alone without layers."""
        stack = self.stack
        arrays: Arrays = {"existing": self.existing.read(window), "finished": self.finished.read(window)}
        if not stack.layered:
            return arrays
        disturbed = self._disturbed(arrays, window)
        arrays["disturbed"] = disturbed

        def share(area: Rings | None) -> np.ndarray:
            return disturbed if area is None else stack.coverage(area, window)

        if stack.moving:
            arrays["move"] = share(stack.move)
        for i, strip in enumerate(stack.strips):
            arrays[f"strip{i}"] = strip.depth_m * share(strip.area)
        for i, section in enumerate(stack.sections):
            arrays[f"section{i}"] = section.thickness_m * share(section.area)
        for i, excavation in enumerate(stack.excavations):
            arrays[f"excavation{i}"] = share(excavation.area)
        for i, scarify in enumerate(stack.scarifies):
            if scarify.area is not None:
                arrays[f"scarify{i}"] = scarify.depth_m * share(scarify.area)
        for name, reader in self.bottoms.items():
            arrays[name] = reader.read(window).astype(np.float64)
        self._strata(arrays)
        return arrays

    def _disturbed(self, arrays: Arrays, window: Window) -> np.ndarray:
        stack = self.stack
        if stack.disturbed is not None:
            return stack.coverage(stack.disturbed, window)
        differs = np.abs(arrays["finished"] - arrays["existing"]) > DISTURBED_OVER_M
        disturbed = differs.astype(np.float64)
        if stack.worked is not None:
            np.maximum(disturbed, stack.coverage(stack.worked, window), out=disturbed)
        return disturbed

    def _strata(self, arrays: Arrays) -> None:
        """Bottoms of the strata, none above its top: a pinched-out layer has no thickness."""
        top = arrays["existing"].astype(np.float64)
        for i, stratum in enumerate(self.stack.strata[:-1]):
            name = f"stratum{i}"
            if stratum.bottom is None:
                arrays[name] = top - (stratum.thickness_m or 0.0)
            else:
                arrays[name] = np.minimum(arrays[name], top)
            top = arrays[name]
