"""How good a shrinkage factor is, what one more point of compaction costs, and how many more tests would help.

The factor is ρbank / (ρmax × Rc). Its relative variance is the sum of those of its three parts ([taylor],
product rule for independent errors): the mean bank density, the maximum density, and the mean compaction
that crews reach. Scatter of tests enters by the standard error of their mean, because the job averages over
it. Tests close together in place or time are not independent, and then the true uncertainty is larger.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import Any


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
        part = next((p for p in self.parts if p.name == name), None)
        if part is None or not part.tests or part.relative_sd == 0:
            return None
        others = self.relative_sd**2 - part.relative_sd**2
        allowed = self.relative_sd**2 / 4 - others
        if allowed <= 0:
            return None
        needed = math.ceil(part.tests * part.relative_sd**2 / allowed - 1e-9)
        return needed - part.tests

    def further_tests_of_all_to_halve(self) -> dict[str, int]:
        """Further tests of every kind, when no single kind does: four times as many of each halve their part."""
        return {part.name: 3 * part.tests for part in self.parts if part.tests}

    def to_dict(self) -> dict[str, Any]:
        shares = {p.name: (p.relative_sd / self.relative_sd) ** 2 if self.relative_sd else 0.0 for p in self.parts}
        return {
            "shrinkage_factor_sd": self.sd,
            "parts": [
                {"part": p.name, "relative_sd_percent": 100 * p.relative_sd, "tests": p.tests,
                 "share_percent": 100 * shares[p.name], "further_tests_to_halve": self.further_tests_to_halve(p.name)}
                for p in self.parts
            ],
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
