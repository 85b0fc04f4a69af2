"""When no plan exists: which sinks lack a source, or which sources lack a sink, with the proof."""

from __future__ import annotations

from typing import Any

import numpy as np

from earthwork.errors import PlanError
from earthwork.plan.transport_costs import Array, Costs

#: A part of the total supply that counts as rounding: closing errors of the caller's sums.
CLOSING_ERROR = 1e-9


class TransportInfeasible(PlanError):
    """Supplies and needs do not fit: the columns can be served by the rows only, and those fall short by
    ``amount``.

    ``shortage`` is true where needs lack a supply, false where supplies lack a place to go. The amount is in the unit
    of the first of the columns that lack, or of the first of the rows.
    """

    def __init__(self, *, rows: Array, columns: Array, amount: float, shortage: bool) -> None:
        self.rows, self.columns, self.amount, self.shortage = rows, columns, amount, shortage
        what = "sinks lack a source" if shortage else "sources lack a sink"
        count = len(columns if shortage else rows)
        super().__init__(f"{count} {what}: {amount:g} cannot be placed")


def name_infeasible(supply: Array, need: Array, costs: Costs) -> TransportInfeasible:
    """Which needs lack a supply, or which supplies lack a place to go; slack comes last in both.

    The least amount on forbidden moves is found first; from the columns that receive it every row that could
    help is reached over allowed moves. Those serve no one else, which proves the shortage (Hall's theorem
    with amounts: a cut of the network). Supplies without a sink are the same with rows and columns swapped.
    """
    import ot

    total = supply.sum()
    allowed = np.isfinite(costs.block())
    plan = (
        ot.emd(supply / total, need / total, (~allowed).astype(float), numItermax=10**9, check_marginals=False) * total
    )
    columns, rows, lacking, closed = _cut(plan, allowed, need, supply)
    if closed and lacking > CLOSING_ERROR * total:
        return TransportInfeasible(rows=rows, columns=columns, amount=lacking, shortage=True)
    rows, columns, left, _ = _cut(plan.T, allowed.T, supply, need)
    return TransportInfeasible(rows=rows, columns=columns, amount=left, shortage=False)


def _cut(plan: Array, allowed: Array, need: Array, supply: Array) -> tuple[Array, Array, float, bool]:
    """Columns that lack a supply, the rows that could help, the lack, and whether slack is out of it."""
    wanting: Any = np.asarray(np.where(allowed, 0.0, plan).sum(axis=0) > CLOSING_ERROR * supply.sum())
    wanting[-1] = False
    helping = np.zeros(len(supply), bool)
    while True:
        reached: Any = allowed[:, wanting].any(axis=1)
        more: Any = np.asarray(wanting) | ((plan > 0) & allowed)[reached].any(axis=0)
        if (more == wanting).all() and (reached == helping).all():
            break
        wanting, helping = more, reached
    closed = not (helping[-1] or wanting[-1])
    helping[-1], wanting[-1] = False, False
    return (
        np.flatnonzero(wanting),
        np.flatnonzero(helping),
        float(need[wanting].sum() - supply[helping].sum()),
        closed,
    )
