"""What every command returns: a frozen result with its warnings, its JSON form and its tables."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

from earthwork.errors import Warning
from earthwork.units import UnitSystem

if TYPE_CHECKING:
    import pandas


@dataclass(frozen=True, kw_only=True)
class Result:
    """Base of the results. Quantities are SI; ``units`` is the system to show them in."""

    units: UnitSystem
    warnings: tuple[Warning, ...] = ()

    def to_dict(self) -> dict[str, Any]:
        """The ``result`` object of the JSON document: SI, the unit in each key, None for what is absent."""
        raise NotImplementedError

    def tables(self) -> dict[str, pandas.DataFrame]:
        """Tables by name, SI, the unit in each column name; the first is the main one."""
        raise NotImplementedError

    def _repr_html_(self) -> str:
        return "".join(
            f"<h4>{name.replace('_', ' ')}</h4>{table.to_html(index=False, border=0)}"
            for name, table in self.tables().items()
        )
