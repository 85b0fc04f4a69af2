"""Cut-and-fill earthwork balance and compaction-shrink planner.

>>> import earthwork                               # doctest: +SKIP
>>> site = earthwork.Site.open("site.toml")        # doctest: +SKIP
>>> earthwork.balance(site).surplus_compacted_m3   # doctest: +SKIP

Each command of ``earthwork`` is a function here of the same name; all names load when they are first used.
"""

from importlib import import_module
from typing import Any

__version__ = "0.1.0"

_HOME = {
    "Site": "earthwork.site",
    "volumes": "earthwork.quantities.volumes",
    "soil": "earthwork.plan.soil",
    "proctor": "earthwork.soils.bench",
    "fit_proctor_file": "earthwork.soils.bench",
    "check": "earthwork.plan.check",
    "balance": "earthwork.plan.balance",
    "lifts": "earthwork.plan.lifts",
    "water": "earthwork.plan.water",
    "pads": "earthwork.plan.pads",
    "report": "earthwork.reporting.report.run",
    "haul": "earthwork.plan.haul",
    "EarthworkError": "earthwork.errors",
}
__all__ = ["__version__", *_HOME]


def __getattr__(name: str) -> Any:
    if name in _HOME:
        value = getattr(import_module(_HOME[name]), name)
        globals()[name] = value
        return value
    raise AttributeError(f"module 'earthwork' has no attribute {name!r}")


def __dir__() -> list[str]:
    return sorted(__all__)
