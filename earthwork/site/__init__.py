"""The site file (TOML) as a checked, typed, frozen :class:`Site`."""

from earthwork.site.load import Site, check_site, load_site, site_from_files

__all__ = ["Site", "check_site", "load_site", "site_from_files"]
