"""Compaction effort: the energy that a laboratory test puts into a volume of soil, and which test is which.

Maximum density rises and optimum falls with effort, so a number without its method means nothing.
"""

from __future__ import annotations

import re
from dataclasses import dataclass
from typing import Literal

from earthwork.errors import SoilError
from earthwork.units import STANDARD_GRAVITY_M_S2

Effort = Literal["standard", "modified"]

#: Nominal energy [kJ/m³] by effort: 600 (12,400 ft·lbf/ft³) and 2,700 (56,000 ft·lbf/ft³)
#: ([ASTM-D698], [ASTM-D1557], scopes).
NOMINAL_ENERGY_KJ_M3: dict[Effort, float] = {"standard": 600.0, "modified": 2700.0}

#: What a method's name holds → its effort. AASHTO T 99 and T 180 and the 2.5 kg and 4.5 kg rammers of BS
#: 1377-4 and EN 13286-2 are the counterparts of the two ASTM methods (from memory).
_NAMES: tuple[tuple[str, Effort], ...] = (
    (r"D\s*-?\s*698\b", "standard"),
    (r"D\s*-?\s*1557\b", "modified"),
    (r"\bT\s*-?\s*99\b", "standard"),
    (r"\bT\s*-?\s*180\b", "modified"),
    (r"\bSTANDARD\b(?!\s+TEST)", "standard"),
    (r"\bMODIFIED\b", "modified"),
    (r"\b2[.,]5\s*KG\b", "standard"),
    (r"\b4[.,]5\s*KG\b", "modified"),
)


def effort_of(method: str) -> Effort | None:
    """The effort that a method's name tells; None when it tells none, or both.

    >>> effort_of("ASTM D698-12 Method B"), effort_of("AASHTO T 180"), effort_of("in-house")
    ('standard', 'modified', None)
    """
    found = {effort for pattern, effort in _NAMES if re.search(pattern, method.upper())}
    return found.pop() if len(found) == 1 else None


def same_method(first: str, second: str) -> bool:
    """Whether two names mean one effort: by what they tell, else by their letters.

    >>> same_method("ASTM D698", "standard proctor"), same_method("ASTM D698", "ASTM D1557")
    (True, False)
    """
    a, b = effort_of(first), effort_of(second)
    if a or b:
        return a == b
    return re.sub(r"\W", "", first).lower() == re.sub(r"\W", "", second).lower()


@dataclass(frozen=True)
class Rammer:
    """What strikes the soil: rammer mass [kg], drop [m], blows per layer, layers, mould volume [m³]."""

    mass_kg: float
    drop_m: float
    blows: int
    layers: int
    mould_volume_m3: float


def compaction_energy_kj_m3(rammer: Rammer) -> float:
    """Energy per volume of soil [kJ/m³]: E = m g h N n / V.

    Raises:
        SoilError: any of them 0 or less.

    >>> round(compaction_energy_kj_m3(Rammer(2.495, 0.3048, 25, 3, 0.000943894)), 1)
    592.6
    """
    values = (rammer.mass_kg, rammer.drop_m, rammer.blows, rammer.layers, rammer.mould_volume_m3)
    if not all(value > 0 for value in values):
        raise SoilError(f"compaction effort: {rammer} has a value that is not more than 0; check it")
    work_j = rammer.mass_kg * STANDARD_GRAVITY_M_S2 * rammer.drop_m * rammer.blows * rammer.layers
    return work_j / rammer.mould_volume_m3 / 1000
