"""How good a shrinkage factor is, what one more point of compaction costs, and how many more tests would help.

The factor is ρbank / (ρmax × Rc). Its relative variance is the sum of those of its three parts ([TAYLOR],
product rule for independent errors): the mean bank density, the maximum density, and the mean compaction
that crews reach. Scatter of tests enters by the standard error of their mean, because the job averages over
it. Where the compaction was measured against that same maximum, its error cancels in the lifts tested; it
stays in, for the lifts to come (docs/method-soil.md). Tests close together in place or time are not
independent, and then the true uncertainty is larger.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import Any

#: Parts that more tests make smaller. More points on one compaction curve do not: its form, and how well
#: one sample stands for the soil, stay.
GROWS = frozenset({"bank", "compaction"})


@dataclass(frozen=True, kw_only=True)
class Part:
    """One part of the uncertainty: its relative standard deviation, and the number of tests behind it (None: no tests)."""

    name: str
    relative_sd: float
    tests: int | None = None


@dataclass(frozen=True, kw_only=True)
class ShrinkUncertainty:
    """Uncertainty of a shrinkage factor by its parts. ``unknown`` names parts that nothing was given for."""

    shrinkage_factor: float
    parts: tuple[Part, ...]
    unknown: tuple[str, ...] = ()

    @property
    def relative_sd(self) -> float:
        return math.sqrt(sum(part.relative_sd**2 for part in self.parts))

    @property
    def sd(self) -> float:
        """Standard deviation of the shrinkage factor."""
        return self.shrinkage_factor * self.relative_sd

    def further_tests_to_halve(self, name: str) -> int | None:
        """How many more tests of one kind halve the whole uncertainty; None when no number of them does.

        Each test counts the same: the variance of a mean falls with 1/n, while the other parts stay.
        """
        found = self._further({name})
        return found[name] if found else None

    def further_tests_of_all_to_halve(self) -> dict[str, int] | None:
        """Further tests of every kind that together halve it, each kind by the same factor; None when none do."""
        return self._further({part.name for part in self.parts})

    def _further(self, names: set[str]) -> dict[str, int] | None:
        grown = [p for p in self.parts if p.name in names and p.name in GROWS and p.tests and p.relative_sd > 0]
        variance = sum(part.relative_sd**2 for part in grown)
        allowed = self.relative_sd**2 / 4 - (self.relative_sd**2 - variance)
        if not grown or allowed <= 0:
            return None
        # The tiny amount keeps a factor that is whole by arithmetic from being rounded up by its last digit.
        return {p.name: math.ceil((p.tests or 0) * variance / allowed - 1e-9) - (p.tests or 0) for p in grown}

    def to_dict(self) -> dict[str, Any]:
        shares = {p.name: (p.relative_sd / self.relative_sd) ** 2 if self.relative_sd else 0.0 for p in self.parts}
        return {
            "shrinkage_factor_sd": self.sd,
            "parts": [
                {"part": p.name, "relative_sd_percent": 100 * p.relative_sd, "tests": p.tests,
                 "share_percent": 100 * shares[p.name], "further_tests_to_halve": self.further_tests_to_halve(p.name)}
                for p in self.parts
            ],
            "further_tests_of_all_to_halve": self.further_tests_of_all_to_halve(),
            "not_included": list(self.unknown),
        }  # fmt: skip


def bank_volume_per_point(max_dry_density: float, bank_dry_density: float, loss_fraction: float = 0.0) -> float:
    """Bank volume that one more point of compaction costs, per compacted volume [m³/m³].

    A compacted volume at Rc holds Rc ρmax; one point is ρmax / 100, dug as ρmax / (100 ρbank), more with
    loss.

    >>> round(bank_volume_per_point(1760.0, 1430.0), 6)
    0.012308
    """
    return max_dry_density / (100 * bank_dry_density * (1 - loss_fraction))
