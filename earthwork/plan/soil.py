"""The soil cards of a site, as a command."""

from __future__ import annotations

from pathlib import Path

from earthwork.quantities.placed_tests import site_cards
from earthwork.site import Site, load_site
from earthwork.soils.card import soil_warnings
from earthwork.soils.result import SoilResult


def soil(site: Site | str | Path) -> SoilResult:
    """The soil card of each material of a site: densities, factors, water contents, tests and how sure they are.

    Args:
        site: a checked site, or the path of its file.

    Raises:
        EarthworkError: a file of tests that cannot be read, or a soil that cannot be; the message lists every fault.
    """
    site = site if isinstance(site, Site) else load_site(site)
    cards = site_cards(site)
    return SoilResult(units=site.units, warnings=soil_warnings(cards), cards=tuple(cards.values()))
