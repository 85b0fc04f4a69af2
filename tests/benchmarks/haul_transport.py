"""A haul plan over straight distances against the bare network simplex, and one too large for a matrix of costs.

    python tests/benchmarks/haul_transport.py [N] [LARGE]

Both sides solve the same N cut × N fill blocks (default 1,000), each as a whole process with its imports and again inside
one process. The bare side makes the matrix of distances and calls the solver; ours is a certified plan with the cost of
one more unit at each block and its ties. Goals: at most 3 times the bare solver (1.5 with imports); LARGE (default
10,000) to proven optimality within 1 GiB. 0 leaves the large one out.
"""

from __future__ import annotations

import json
import resource
import subprocess
import sys
import time

import numpy as np


def instance(n: int) -> tuple[np.ndarray, np.ndarray, np.ndarray, np.ndarray]:
    """Supplies, needs and places of blocks on rolling ground: cut on the heights, fill in the hollows."""
    random = np.random.default_rng(0)
    place = random.uniform(0, 1000, (2 * n, 2))
    height = np.sin(place[:, 0] / 180) * np.cos(place[:, 1] / 210) + random.normal(0, 0.3, 2 * n)
    order = np.argsort(height)
    supply, need = random.uniform(50, 500, n), random.uniform(50, 500, n)
    return supply, need * supply.sum() / need.sum(), place[order[n:]], place[order[:n]]


def bare(n: int) -> dict[str, float]:
    """The solver alone, on a matrix of distances."""
    import ot

    supply, need, cut, fill = instance(n)
    start = time.perf_counter()
    difference = cut[:, None, :] - fill[None, :, :]
    distance = np.sqrt((difference**2).sum(axis=2))
    total = supply.sum()
    plan, _ = ot.emd(supply / total, need / total, distance, numItermax=10**9, log=True)
    return {"inner_s": time.perf_counter() - start, "cost": float((plan * distance).sum() * total)}


def ours(n: int) -> dict[str, float]:
    """The certified plan."""
    from earthwork.plan.transport import solve_transport
    from earthwork.plan.transport_costs import Costs

    supply, need, cut, fill = instance(n)
    solve_transport(*[np.ones(2)] * 2, Costs.straight(cut[:2], fill[:2]))  # imports and compiled kernels are not counted
    start = time.perf_counter()
    plan = solve_transport(supply, need, Costs.straight(cut, fill))
    proof = plan.certificate
    return {
        "inner_s": time.perf_counter() - start, "cost": plan.cost, "gap": proof.relative_gap,
        "moves_checked": proof.moves_checked,
    }  # fmt: skip


def child(side: str, n: int, runs: int) -> dict[str, float]:
    """Median of some runs of one side as a process."""
    found = []
    for _ in range(runs):
        start = time.perf_counter()
        done = subprocess.run([sys.executable, __file__, f"--{side}", str(n)], capture_output=True, text=True, check=True)
        row = json.loads(done.stdout.splitlines()[-1])
        found.append({**row, "wall_s": time.perf_counter() - start})
    return sorted(found, key=lambda row: row["wall_s"])[len(found) // 2]


def main() -> None:
    if sys.argv[1:2] and sys.argv[1].startswith("--"):
        row = {"--bare": bare, "--ours": ours}[sys.argv[1]](int(sys.argv[2]))
        row["peak_mb"] = resource.getrusage(resource.RUSAGE_SELF).ru_maxrss / 1024
        print(json.dumps(row))
        return
    n = int(sys.argv[1]) if len(sys.argv) > 1 else 1000
    large = int(sys.argv[2]) if len(sys.argv) > 2 else 10_000
    child("ours", n, 1)  # kernels compile once
    a, b = child("bare", n, 3), child("ours", n, 3)
    assert abs(a["cost"] - b["cost"]) <= 1e-9 * a["cost"], (a, b)
    print(f"{n} × {n}: bare {a['inner_s']:.3f} s, plan {b['inner_s']:.3f} s: {b['inner_s'] / a['inner_s']:.2f} times")
    ratio = b["wall_s"] / a["wall_s"]
    print(f"  as processes: {a['wall_s']:.2f} s, {b['wall_s']:.2f} s: {ratio:.2f} times; gap {b['gap']:.1e}")
    if large:
        c = child("ours", large, 1)
        print(
            f"{large} × {large}: {c['inner_s']:.1f} s, peak {c['peak_mb']:.0f} MB, gap {c['gap']:.1e} over "
            f"{c['moves_checked']:,.0f} moves"
        )


if __name__ == "__main__":
    main()
