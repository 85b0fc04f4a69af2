"""The walk on a cluster: runs of bands go to the workers of an existing engine, counts and half seams come back.

Each worker reads its own part of the files, so the rasters never pass through the network; counts are merged here, from
north to south as on one machine, and so give the same digits.
"""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

from earthwork.errors import EarthworkError
from earthwork.ground.stack import Arrays, Stack

if TYPE_CHECKING:
    from earthwork.quantities.engine import Tally, Walk

#: Runs of bands per worker thread: enough to even out their speeds, few enough to keep the files' caches warm.
_RUNS_PER_THREAD = 4

Part = tuple[range, dict[int, list["Tally"]], dict[tuple[int, str], Arrays]]


def walk_on_cluster(whole: Walk, client: Any) -> None:
    """Walk all bands by the workers of a ``dask.distributed.Client``.

    Raises:
        EarthworkError: the package is not installed, or a tally cannot be sent (one that writes a file, say).
    """
    try:
        from distributed import as_completed
    except ImportError:
        raise EarthworkError(
            "a cluster was asked for, but the package distributed is not installed; install earthwork[cluster]"
        ) from None
    for tally in whole.tallies:
        if not getattr(tally, "portable", True):
            raise EarthworkError(
                f"{type(tally).__name__} writes a file while the ground is walked, and cannot be sent to a cluster; "
                "run that output on one machine"
            )
    threads = max(sum(client.nthreads().values()), 1)
    length = max(1, -(-whole.bands // (_RUNS_PER_THREAD * threads)))
    runs = [range(k, min(k + length, whole.bands)) for k in range(0, whole.bands, length)]
    empty = [tally.empty() for tally in whole.tallies]
    settings = (whole.tile_cells, whole.edges)
    shared = client.scatter((whole.stack, empty, settings), broadcast=True, hash=False)
    futures = [client.submit(_walk_run, shared, run, pure=False) for run in runs]
    try:
        for _, part in as_completed(futures, with_results=True):
            _take(whole, part)
    finally:
        client.cancel(futures)


def _walk_run(shared: tuple[Stack, list[Tally], tuple[int, list[int]]], run: range) -> Part:
    """On a worker: walk a run of bands with one thread, and keep every count apart."""
    from earthwork.quantities.engine import Walk

    stack, tallies, (tile_cells, edges) = shared
    walk = Walk(stack, tallies, None, tile_cells=tile_cells, edges=edges)
    walk.next_unit = -1  # nothing is merged here: the order of merging is that of the whole
    walk.run(run, 1)
    return run, walk.counted, walk.rims


def _take(whole: Walk, part: Part) -> None:
    run, counted, rims = part
    for unit, counts in counted.items():
        whole.finish(unit, counts)
    for (above, side), rows in rims.items():
        whole.seam(above, side, rows)
    whole.note_done(len(run))
