"""What the plant can place: rollers, digging and hauling; and which of them holds the work back first."""

from __future__ import annotations

from collections.abc import Mapping


def roller_output_m3_h(
    width_m: float, speed_m_s: float, lift_thickness_m: float, efficiency: float, passes: float
) -> float:
    """Compacted volume that one roller finishes in an hour [m³/h]: ``W·S·t·E/P``.

    Args:
        width_m: rolled width of a pass, more than 0.
        speed_m_s: while rolling, more than 0.
        lift_thickness_m: compacted, more than 0.
        efficiency: share of the hour that it rolls, more than 0 and at most 1.
        passes: that the density takes, more than 0.

    Source: [FM-5-434] and any construction handbook; in m, km/h and mm the constant is 1.

    >>> round(roller_output_m3_h(2.1, 5 / 3.6, 0.2, 0.83, 6), 1)
    290.5
    """
    for name, value, unit in (
        ("width", width_m, " m"), ("speed", speed_m_s, " m/s"), ("lift thickness", lift_thickness_m, " m"),
        ("efficiency", efficiency, ""), ("passes", passes, ""),
    ):  # fmt: skip
        if not value > 0:
            raise ValueError(f"roller: {name} is {value:g}{unit}; it must be more than 0")
    if efficiency > 1:
        raise ValueError(f"roller: efficiency is {efficiency:g}; it must be at most 1")
    return width_m * speed_m_s * 3600.0 * lift_thickness_m * efficiency / passes


#: The order in which limits that allow the same volume are named.
LIMITS = ("digging", "hauling", "water", "rolling", "drying")


def first_limit(limits: Mapping[str, float | None]) -> tuple[str | None, float | None]:
    """Name and volume of the smallest known limit; (None, None) where none is known.

    >>> first_limit({"digging": 2000.0, "water": 1500.0, "rolling": None})
    ('water', 1500.0)
    """
    known = {name: volume for name, volume in limits.items() if volume is not None}
    if not known:
        return None, None
    order = {name: i for i, name in enumerate(LIMITS)}
    name = min(known, key=lambda n: (known[n], order.get(n, len(order))))
    return name, known[name]
