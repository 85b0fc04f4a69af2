"""What ``report`` returns: the results of all its parts, and the files that it wrote."""

from __future__ import annotations

from dataclasses import dataclass
from pathlib import Path
from typing import TYPE_CHECKING, Any

from earthwork.reporting.report.answers import summary
from earthwork.reporting.report.hand_check import HandCheck, as_document
from earthwork.reporting.report.parts import Parts
from earthwork.results import Result

if TYPE_CHECKING:
    import pandas


@dataclass(frozen=True, kw_only=True)
class ReportResult(Result):
    """All results of a site in one; see the JSON of ``report``."""

    parts: Parts
    checks: tuple[HandCheck, ...]
    directory: Path
    groups: tuple[str, ...]
    written: tuple[Path, ...] = ()

    def __getitem__(self, command: str) -> Result:
        """The result of a command that the report has."""
        result: Result = self.parts.results[command]
        return result

    def to_dict(self) -> dict[str, Any]:
        return {
            "summary": summary(self.parts),
            **{name: self.parts.documents.get(name) for name in _NAMES},
            "left_out": [{"command": name, "reason": why} for name, why in self.parts.left_out.items()],
            "hand_check": as_document(self.checks),
        }

    def tables(self) -> dict[str, pandas.DataFrame]:
        """The tables of all parts, by command and name: ``balance_ledger``."""
        return {
            name if name == command else f"{command}_{name}": table
            for command, result in self.parts.results.items()
            for name, table in result.tables().items()
        }


_NAMES = ("volumes", "soil", "balance", "lifts", "water", "haul", "pads")
