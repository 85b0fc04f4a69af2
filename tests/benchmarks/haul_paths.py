"""Distances round barriers from S sources to S targets on a ground of N × N cells, against general-purpose libraries.

    python tests/benchmarks/haul_paths.py [S] [N]

The others walk the cells of the ground: scipy's Dijkstra on a graph of eight neighbours, scikit-image's MCP_Geometric when it
is installed, networkx on a small share of the sources, since it takes minutes each. They measure a few sources and the time
for S is scaled up from them; ours is measured whole. Default: 300 sources, 1,000 × 1,000 cells of 1 m. Barriers: boxes,
winding shapes of many points, a river, and the stairs of a raster. Goal: at least three times the best of the others.

Eight neighbours are up to 8 % long; ours are the shortest to a millimetre.
"""

from __future__ import annotations

import sys
import time

import numpy as np
import shapely

from earthwork.plan.barriers import Barriers
from earthwork.plan.paths import Ways


def scene(kind: str, n: int) -> list:
    """Barriers on a square of n metres."""
    random = np.random.default_rng(0)
    if kind == "boxes":
        corner, size = random.uniform(0, n, (60, 2)), random.uniform(n / 70, n / 8, (60, 2))
        return [shapely.box(x, y, x + w / 8 + 2, y + h) for (x, y), (w, h) in zip(corner, size, strict=True)]
    if kind == "winding":
        turn = np.linspace(0, 2 * np.pi, 200, endpoint=False)
        shapes = []
        for _ in range(40):
            wave = 1 + 0.3 * np.sin(3 * turn + random.uniform(0, 6)) + 0.1 * np.sin(11 * turn)
            radius = random.uniform(0.015, 0.06) * n * wave
            ring = np.column_stack([np.cos(turn), np.sin(turn)]) * radius[:, None] + random.uniform(0, n, 2)
            shapes.append(shapely.Polygon(ring))
        return shapes
    if kind == "river":
        x = np.linspace(0, n, 3000)
        y = n / 2 + 0.12 * n * np.sin(x / 90) + 10 * np.sin(x / 7) + np.cumsum(random.normal(0, 0.15, 3000))
        return [shapely.LineString(np.column_stack([x, y])).buffer(8)]
    blocked = on_cells(scene("winding", n), n)
    rows, columns = np.nonzero(blocked)
    return list(shapely.get_parts(shapely.union_all(shapely.box(columns, rows, columns + 1, rows + 1))))


def on_cells(shapes: list, n: int) -> np.ndarray:
    """Cells of 1 m whose centre lies in a barrier."""
    shape = shapely.union_all(shapes)
    shapely.prepare(shape)
    row, column = np.mgrid[:n, :n] + 0.5
    return shapely.contains_xy(shape, column.ravel(), row.ravel()).reshape(n, n)


def by_scipy(blocked: np.ndarray, sources: np.ndarray) -> float:
    """Seconds a source, with the making of the graph shared out over all."""
    from scipy.sparse import coo_array
    from scipy.sparse.csgraph import dijkstra

    n = len(blocked)
    number = np.arange(n * n).reshape(n, n)
    start = time.perf_counter()
    tails, heads, lengths = [], [], []
    for down, right in ((0, 1), (1, 0), (1, 1), (1, -1)):
        a = number[: n - down, max(0, -right) : n - max(0, right)].ravel()
        b = number[down:, max(0, right) : n + min(0, right)].ravel()
        free = ~blocked.ravel()[a] & ~blocked.ravel()[b]
        tails.append(a[free])
        heads.append(b[free])
        lengths.append(np.full(free.sum(), np.hypot(down, right)))
    graph = coo_array((np.concatenate(lengths), (np.concatenate(tails), np.concatenate(heads))), shape=(n * n,) * 2).tocsr()
    made = time.perf_counter() - start
    start = time.perf_counter()
    for source in sources[:3]:
        dijkstra(graph, directed=False, indices=int(source[1]) * n + int(source[0]))
    return made / len(sources) + (time.perf_counter() - start) / 3


def by_scikit_image(blocked: np.ndarray, sources: np.ndarray) -> float | None:
    """Seconds a source; None where the library is not installed."""
    try:
        from skimage.graph import MCP_Geometric
    except ImportError:
        return None
    cost = MCP_Geometric(np.where(blocked, -1.0, 1.0))
    start = time.perf_counter()
    for source in sources[:3]:
        cost.find_costs([(int(source[1]), int(source[0]))])
    return (time.perf_counter() - start) / 3


def by_networkx(blocked: np.ndarray, sources: np.ndarray) -> float | None:
    """Seconds a source, by one source on a corner of a tenth of the side, scaled by the number of cells."""
    try:
        import networkx
    except ImportError:
        return None
    side = len(blocked) // 10
    graph = networkx.grid_2d_graph(side, side)
    graph.remove_nodes_from([(r, c) for r, c in np.argwhere(blocked[:side, :side])])
    start = time.perf_counter()
    networkx.single_source_dijkstra_path_length(graph, next(iter(graph)))
    return (time.perf_counter() - start) * (len(blocked) / side) ** 2


def main() -> None:
    count = int(sys.argv[1]) if len(sys.argv) > 1 else 300
    n = int(sys.argv[2]) if len(sys.argv) > 2 else 1000
    random = np.random.default_rng(1)
    Ways(Barriers.of([shapely.box(0, 0, 1, 1)])).table(np.zeros((1, 2)), np.ones((1, 2)))  # kernels compile once
    for kind in ("boxes", "winding", "river", "stairs"):
        shapes = scene(kind, n)
        blocked = on_cells(shapes, n)
        free = np.argwhere(~blocked)[:, ::-1] + 0.5
        sources, targets = (free[random.choice(len(free), count, replace=False)] for _ in range(2))
        start = time.perf_counter()
        barriers = Barriers.of(shapes)
        Ways(barriers).table(sources, targets)
        ours = time.perf_counter() - start
        others = {
            "scipy": by_scipy(blocked, sources),
            "scikit-image": by_scikit_image(blocked, sources),
            "networkx": by_networkx(blocked, sources),
        }
        known = {name: count * seconds for name, seconds in others.items() if seconds is not None}
        best = min(known, key=lambda name: known[name])
        told = ", ".join(f"{name} {seconds:,.0f} s" for name, seconds in known.items())
        print(
            f"{kind} ({len(barriers.corners)} corners): ours {ours:.2f} s; {told}: "
            f"{known[best] / ours:.0f} times {best}, the best of them"
        )


if __name__ == "__main__":
    main()
