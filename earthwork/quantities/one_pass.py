"""Several commands on one site, one pass over its ground.

Each command is a plain function that walks the ground when it needs to. Here they take turns: a command runs until it
asks for a walk and then waits; when all wait (or are done), one walk counts the tallies of all of them, and they go on.
One command runs at a time, in the order given, so nothing is shared in a hurry and the results do not depend on timing.

Tiles of the first pass are kept where they fit into memory, and later questions about the same ground (the refinement
of a grade shift, a plan that looks again) are answered from them: the files are then read once, whatever is asked.
"""

from __future__ import annotations

import threading
from collections.abc import Callable, Mapping, Sequence
from concurrent.futures import ThreadPoolExecutor
from contextvars import copy_context
from dataclasses import dataclass
from typing import Any

from earthwork.errors import EarthworkError
from earthwork.ground.stack import Stack
from earthwork.quantities.engine import Progress, Tally, thread_count, walk
from earthwork.quantities.sharing import SHARED
from earthwork.quantities.site_ground import SiteGround
from earthwork.quantities.tile import Tile
from earthwork.site import Site

#: Fields of all tiles together that are kept for later questions [bytes].
KEPT_BYTES = 400_000_000


@dataclass(frozen=True)
class Answer:
    """What a command came to: its result, or the error that stopped it."""

    result: Any = None
    error: EarthworkError | None = None


class OnePass:
    """The pass that commands share.

    Args:
        site: the site of all commands.
        ground: opened with everything that any of them needs (``moving`` where one shifts the grade).
        tallies: further questions, counted in the first pass.
        threads, progress: of the walks.
        kept_bytes: most memory for tiles that later questions are answered from.
    """

    def __init__(
        self,
        site: Site,
        ground: SiteGround,
        *,
        tallies: Sequence[Tally] = (),
        threads: int | None = None,
        progress: Progress | None = None,
        kept_bytes: int = KEPT_BYTES,
    ) -> None:
        self.passes = 0  #: walks over the files so far
        self._site = site
        self._ground = ground
        self._extra = list(tallies)
        self._threads = threads
        self._progress = progress
        self._kept: _Kept | None = _Kept() if _field_bytes(ground.stack) <= kept_bytes else None

    def run(self, commands: Mapping[str, Callable[[], Any]]) -> dict[str, Answer]:
        """Run the commands together.

        Raises:
            BaseException: anything but an EarthworkError that a command raises, and interrupts.
        """
        runners = [_Command(name, call, self) for name, call in commands.items()]
        try:
            for runner in runners:
                runner.step()
            waiting = [r for r in runners if r.request]
            # also without a command that asks, the further tallies want their pass
            while waiting or (self.passes == 0 and self._extra):
                self._count([r.request for r in waiting if r.request])
                for runner in waiting:
                    runner.step()
                waiting = [r for r in runners if r.request]
        except BaseException:
            for runner in runners:
                runner.cancel()
            raise
        return {r.name: r.answer for r in runners}

    # --- what a command meets ---------------------------------------------------------------------------------------

    def ground(self, site: Site) -> SiteGround | None:
        return self._ground if site is self._site else None

    def walk(self, stack: Stack, tallies: Sequence[Tally]) -> None:
        _current().wait_for(_Request(stack, tallies))

    # --- the passes -------------------------------------------------------------------------------------------------

    def _count(self, requests: list[_Request]) -> None:
        """One pass for all requests on the shared ground, then one for each other ground."""
        shared = self._ground.stack
        here = [t for r in requests if r.stack is shared for t in r.tallies]
        if here or self.passes == 0:
            self._count_here(here)
        for request in requests:
            if request.stack is not shared:
                walk(request.stack, request.tallies, threads=self._threads)

    def _count_here(self, tallies: list[Tally]) -> None:
        unique, copies = _without_copies(tallies)
        if self.passes and self._kept:
            self._kept.replay(self._ground.stack, unique, thread_count(self._threads))
        else:
            first = self.passes == 0
            every = [*unique, *(self._extra if first else ()), *([self._kept] if self._kept and first else ())]
            walk(self._ground.stack, every, threads=self._threads, progress=self._progress)
            self.passes += 1
        for copy, original in copies:
            copy.merge(original)


def _without_copies(tallies: Sequence[Tally]) -> tuple[list[Tally], list[tuple[Tally, Tally]]]:
    """Tallies that ask the same (their ``key`` says so) are counted once: (unique ones, (copy, original) pairs)."""
    unique: list[Tally] = []
    copies: list[tuple[Tally, Tally]] = []
    known: dict[Any, Tally] = {}
    for tally in tallies:
        key = getattr(tally, "key", None)
        if key is not None and key in known:
            copies.append((tally, known[key]))
            continue
        if key is not None:
            known[key] = tally
        unique.append(tally)
    return unique, copies


def _field_bytes(stack: Stack) -> int:
    fields = 7 + len(stack.strips) + len(stack.sections) + 2 * len(stack.excavations) + len(stack.strata)
    return stack.grid.rows * stack.grid.columns * 8 * (fields + len(stack.scarifies))


class _Kept:
    """A tally that keeps the tiles of a walk, by the bands and seams that they were counted in."""

    def __init__(self) -> None:
        self._units: list[list[Tile]] = []
        self._tiles: list[Tile] = []

    def empty(self) -> _Kept:
        return _Kept()

    def add(self, tile: Tile) -> None:
        self._tiles.append(Tile(tile.stack, tile.window, tile.arrays, seam=tile.seam))

    def merge(self, other: _Kept) -> None:
        self._units.append(other._tiles)

    def replay(self, stack: Stack, tallies: Sequence[Tally], threads: int) -> None:
        """Count tallies as a walk over the ground would, band by band, with the same grouping of sums."""

        def count(unit: list[Tile]) -> list[Tally]:
            counts = [tally.empty() for tally in tallies]
            for kept in unit:
                tile = Tile(stack, kept.window, dict(kept.arrays), seam=kept.seam)
                for part in counts:
                    part.add(tile)
            return counts

        with ThreadPoolExecutor(threads) as pool:
            for counts in pool.map(count, self._units):
                for tally, part in zip(tallies, counts, strict=True):
                    tally.merge(part)


# --- taking turns ---------------------------------------------------------------------------------------------------


@dataclass(frozen=True)
class _Request:
    stack: Stack
    tallies: Sequence[Tally]


class _Cancelled(BaseException):
    """Ends the thread of a command whose pass was given up."""


class _Turn(threading.local):
    """Which command runs in this thread."""

    command: _Command | None = None


_TURN = _Turn()


def _current() -> _Command:
    if _TURN.command is None:
        raise RuntimeError("a shared pass is walked by the commands that it runs")
    return _TURN.command


class _Command:
    """A command in a thread of its own, which runs only while :meth:`step` waits for it."""

    def __init__(self, name: str, call: Callable[[], Any], shared: OnePass) -> None:
        self.name = name
        self.call = call
        self.shared = shared
        self.request: _Request | None = None
        self.answer = Answer()
        self._error: BaseException | None = None
        self._go = threading.Semaphore(0)
        self._back = threading.Semaphore(0)
        self._cancelled = False
        self._thread: threading.Thread | None = None

    def step(self) -> None:
        """Let the command run until it asks for a walk or ends."""
        self.request = None
        if self._thread is None:
            context = copy_context()
            self._thread = threading.Thread(target=context.run, args=(self._run,), name=self.name, daemon=True)
            self._thread.start()
        else:
            self._go.release()
        self._back.acquire()
        if self._error is not None:
            raise self._error

    def cancel(self) -> None:
        """Let a waiting command end at once."""
        self._cancelled = True
        self._go.release()

    def wait_for(self, request: _Request) -> None:
        """Called by the command: wait until a pass has counted its tallies."""
        self.request = request
        self._back.release()
        self._go.acquire()
        if self._cancelled:
            raise _Cancelled

    def _run(self) -> None:
        _TURN.command = self
        SHARED.set(self.shared)
        try:
            self.answer = Answer(result=self.call())
        except EarthworkError as error:
            self.answer = Answer(error=error)
        except _Cancelled:
            pass
        except BaseException as error:
            self._error = error
        finally:
            self._back.release()
