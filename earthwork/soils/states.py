"""Bank, loose and compacted: the factors between the states of one soil, from dry densities.

Every factor is a ratio of dry densities, because only the dry mass is the same in all states ([NUNNALLY],
ch. 2). A percentage says its base in its name.
"""

from __future__ import annotations

from earthwork.errors import SoilError


def shrinkage_factor(bank_dry_density: float, fill_dry_density: float) -> float:
    """Compacted volume made of one bank volume: SF = ρd,bank / ρd,fill. Over 1 is bulking (most rock).

    >>> shrinkage_factor(1600.0, 2000.0)
    0.8
    """
    _need_positive(bank_dry_density, fill_dry_density)
    return bank_dry_density / fill_dry_density


def shrink_percent_of_bank(shrinkage_factor: float) -> float:
    """Volume lost per bank volume [%]: 100 (1 − SF).

    >>> round(shrink_percent_of_bank(0.8), 9)
    20.0
    """
    return 100 * (1 - shrinkage_factor)


def shrink_percent_of_fill(shrinkage_factor: float) -> float:
    """Bank volume needed over the fill volume, per fill volume [%]: 100 (1/SF − 1).

    >>> round(shrink_percent_of_fill(0.8), 9)
    25.0
    """
    _need_positive(shrinkage_factor)
    return 100 * (1 / shrinkage_factor - 1)


def fill_dry_density_of_shrink(bank_dry_density: float, shrink_percent_of_bank: float) -> float:
    """Dry density of the fill that a stated shrink of the bank volume makes: ρd,bank / (1 − s).

    >>> fill_dry_density_of_shrink(1600.0, 20.0)
    2000.0
    """
    if not shrink_percent_of_bank < 100:
        raise SoilError(f"shrink of the bank volume is {shrink_percent_of_bank:g} %; it must be below 100 %")
    return bank_dry_density / (1 - shrink_percent_of_bank / 100)


def swell_percent(bank_dry_density: float, loose_dry_density: float) -> float:
    """Volume gained by digging, per bank volume [%]: 100 (ρd,bank / ρd,loose − 1).

    >>> round(swell_percent(3500.0, 2800.0), 9)
    25.0
    """
    _need_positive(bank_dry_density, loose_dry_density)
    return 100 * (bank_dry_density / loose_dry_density - 1)


def loose_dry_density_of_swell(bank_dry_density: float, swell_percent: float) -> float:
    """Dry density of the loose soil that a stated swell makes: ρd,bank / (1 + swell).

    >>> loose_dry_density_of_swell(3500.0, 25.0)
    2800.0
    """
    if not swell_percent > -100:
        raise SoilError(f"swell of the bank volume is {swell_percent:g} %; it must be over -100 %")
    return bank_dry_density / (1 + swell_percent / 100)


def load_factor(bank_dry_density: float, loose_dry_density: float) -> float:
    """Bank volume in one loose volume: ρd,loose / ρd,bank.

    >>> load_factor(2800.0, 1960.0)
    0.7
    """
    _need_positive(bank_dry_density, loose_dry_density)
    return loose_dry_density / bank_dry_density


def _need_positive(*values: float) -> None:
    for value in values:
        if not value > 0:
            raise SoilError(f"states of a soil: a density or factor is {value:g}; it must be more than 0")
