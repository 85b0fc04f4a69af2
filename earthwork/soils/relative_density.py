"""Relative density: how a free-draining soil is judged, between its loosest and its densest state.

With few fines water drains out under the rammer and the compaction curve has no peak; the vibrating-table
maximum and the poured minimum take its place ([ASTM-D4253], [ASTM-D4254]).
"""

from __future__ import annotations

from earthwork.errors import SoilError

#: Largest share of fines [% of dry mass] for which the two tests hold ([ASTM-D4253], [ASTM-D4254], scopes).
FINES_LIMIT_PERCENT = 15.0


def relative_density_percent(dry_density: float, min_dry_density: float, max_dry_density: float) -> float:
    """Relative density [%]: Dr = ρmax (ρd − ρmin) / (ρd (ρmax − ρmin)), 0 at the minimum, 100 at the maximum.

    Below 0 or over 100 is possible in the field, and is given as it is. Source: [UFC-3-220-20], eq. 3-5; [DAS].

    >>> relative_density_percent(1600.0, 1500.0, 1800.0)
    37.5
    """
    _check(min_dry_density, max_dry_density)
    if not dry_density > 0:
        raise SoilError(f"relative density: dry density is {dry_density:g}; it must be more than 0")
    spread = max_dry_density - min_dry_density
    return 100 * max_dry_density * (dry_density - min_dry_density) / (dry_density * spread)


def dry_density_of_relative(relative_density_percent: float, min_dry_density: float, max_dry_density: float) -> float:
    """Dry density at a relative density: ρd = ρmax ρmin / (ρmax − Dr (ρmax − ρmin)). Source: [DAS].

    >>> dry_density_of_relative(37.5, 1500.0, 1800.0)
    1600.0
    """
    _check(min_dry_density, max_dry_density)
    below = max_dry_density - relative_density_percent / 100 * (max_dry_density - min_dry_density)
    if not below > 0:
        raise SoilError(f"relative density is {relative_density_percent:g} %; no dry density reaches it")
    return max_dry_density * min_dry_density / below


def relative_compaction_of_relative_density(
    relative_density_percent: float, min_dry_density: float, max_dry_density: float
) -> float:
    """Relative compaction [%] that is the same state: Rc = R0 / (1 − Dr (1 − R0)), R0 = ρmin / ρmax.

    Exact when both refer to the same maximum. Source: [DAS], from the definitions.

    >>> round(relative_compaction_of_relative_density(37.5, 1500.0, 1800.0), 4)
    88.8889
    """
    return 100 * dry_density_of_relative(relative_density_percent, min_dry_density, max_dry_density) / max_dry_density


def lee_singh_relative_compaction(relative_density_percent: float) -> float:
    """Relative compaction [%] by correlation, when no minimum density was tested: Rc = 80 + 0.2 Dr.

    A fit to 47 granular soils ([LEE-SINGH], from memory; its two ends also in [UFC-3-220-20], section 3-5.1); the
    exact relation needs the two densities. Holds for Dr of 0 to 100 %.

    >>> lee_singh_relative_compaction(50.0)
    90.0
    """
    if not 0 <= relative_density_percent <= 100:
        raise SoilError(f"relative density is {relative_density_percent:g} %; the correlation holds for 0 to 100 %")
    return 80 + 0.2 * relative_density_percent


def lee_singh_relative_density(relative_compaction_percent: float) -> float:
    """Relative density [%] by the same correlation: Dr = 5 (Rc − 80), for Rc of 80 to 100 % ([LEE-SINGH]).

    >>> lee_singh_relative_density(95.0)
    75.0
    """
    if not 80 <= relative_compaction_percent <= 100:
        raise SoilError(
            f"relative compaction is {relative_compaction_percent:g} %; the correlation holds for 80 to 100 %"
        )
    return 5 * (relative_compaction_percent - 80)


def _check(min_dry_density: float, max_dry_density: float) -> None:
    if not 0 < min_dry_density < max_dry_density:
        raise SoilError(
            f"relative density: the minimum dry density {min_dry_density:g} must be more than 0 and below "
            "the maximum "
            f"{max_dry_density:g}"
        )
