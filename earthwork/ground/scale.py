"""How long a metre of the map is on the ground: grid scale factor and height in one number.

``ground length = map length × ground_scale``, ``ground area = map area × ground_scale²``. One number, taken at the
site's centre, serves the whole site; across 10 km of a UTM zone it changes by less than 1 part in 10,000.
"""

from __future__ import annotations

import math

from pyproj import CRS, Proj

from earthwork.crs import describe, horizontal, is_web_mercator, longitude_latitude, tied_to_earth, utm_code
from earthwork.errors import GroundError, Warning

#: Mean radius of the earth [m], rounded from 6,371,008.8 [GRS80-mean-radius]; 20 km off would change the factor at
#: 2000 m by 1 part in a million.
EARTH_RADIUS_M = 6_371_000.0

#: Semi-major axis [m] and squared eccentricity of WGS 84 [WGS84].
_WGS84_A_M = 6_378_137.0
_WGS84_F = 1 / 298.257223563
_WGS84_E2 = _WGS84_F * (2 - _WGS84_F)


def elevation_factor(height_m: float, radius_m: float = EARTH_RADIUS_M) -> float:
    """Length on the ellipsoid / length at a height: ``R / (R + h)`` [NGS-SPCS-manual].

    Args:
        height_m: mean height of the site [m]. The geoid's height (at most 107 m) is left out: 1.7 parts in 100,000.
        radius_m: radius of the earth [m], in the unit of ``height_m``.

    >>> round(elevation_factor(1000.0), 6)
    0.999843
    """
    return radius_m / (radius_m + height_m)


def combined_factor(grid_scale: float, height_m: float, radius_m: float = EARTH_RADIUS_M) -> float:
    """Map length / ground length: ``k R / (R + h)`` [NGS-SPCS-manual].

    >>> round(combined_factor(0.999981, 500.0, 20_906_000.0), 6)    # feet
    0.999957
    """
    return grid_scale * elevation_factor(height_m, radius_m)


def web_mercator_factor(latitude: float) -> float:
    """Map length / ground length in Web Mercator at a latitude [°], on the ellipsoid.

    The map is a sphere's Mercator, ``1 / cos φ`` times too long; it is fed with latitudes of the WGS 84 ellipsoid,
    whose radii of curvature M (along the meridian) and N (across) differ from the sphere's radius a. The square root
    of the areal scale ``a² / (M N cos² φ)`` [Snyder-1987, eq. 4-18 and 4-20 for N and M] makes areas right; the plain
    ``1 / cos φ`` would leave up to 0.7 % of area.

    >>> round(web_mercator_factor(60.0), 3)
    1.997
    """
    phi = math.radians(latitude)
    w2 = 1.0 - _WGS84_E2 * math.sin(phi) ** 2
    # N = a / sqrt(w2), M = a (1 − e²) / w2^1.5, so a / sqrt(M N) = w2 / sqrt(1 − e²)
    return w2 / math.sqrt(1.0 - _WGS84_E2) / math.cos(phi)


def grid_scale_factor(crs: CRS, easting: float, northing: float) -> float:
    """Map length / length on the ellipsoid at a place: the square root of the projection's areal scale.

    On a conformal projection (UTM, State Plane) this is the grid scale factor of every direction; on others it is the
    factor that makes areas and volumes right.

    Args:
        crs: a projected CRS.
        easting, northing: the place [CRS unit].

    Raises:
        GroundError: the place lies outside what the projection can show.
    """
    projection = Proj(horizontal(crs))
    longitude, latitude = projection(easting, northing, inverse=True)
    if not (math.isfinite(longitude) and math.isfinite(latitude)):
        raise GroundError(_outside(crs, easting, northing))
    if is_web_mercator(crs):
        return web_mercator_factor(latitude)
    areal = projection.get_factors(longitude, latitude).areal_scale
    if not (math.isfinite(areal) and areal > 0):
        raise GroundError(_outside(crs, easting, northing))
    return math.sqrt(areal)


def ground_scale(crs: CRS | None, centre_easting: float, centre_northing: float, mean_elevation_m: float) -> float:
    """Ground length / map length at the centre of a site: ``1 / (grid scale factor × R / (R + h))``.

    The grid scale factor comes from :func:`grid_scale_factor`; :func:`scale_warnings` says what the user must know.

    Args:
        crs: CRS of the map; None, or one that is tied to no place on earth, is a local grid, which has scale 1.
        centre_easting, centre_northing: centre of the site [CRS unit].
        mean_elevation_m: mean elevation of the site [m].

    Raises:
        GroundError: a geographic CRS (degrees are no lengths), or a place outside the projection.

    >>> round(1 / ground_scale(CRS("EPSG:32611"), 500_000.0, 4_100_000.0, 0.0), 6)
    0.9996
    """
    if crs is None:
        return 1.0
    refuse_geographic(crs, centre_easting, centre_northing)
    if not tied_to_earth(crs):
        return 1.0
    return 1.0 / combined_factor(grid_scale_factor(crs, centre_easting, centre_northing), mean_elevation_m)


def scale_warnings(crs: CRS | None, centre_easting: float, centre_northing: float) -> tuple[Warning, ...]:
    """What is doubtful about the ground scale of a CRS: none given, tied to no place, or Web Mercator."""
    if crs is None:
        message = "no CRS is given: a local grid with ground scale 1 is taken; name the CRS in [site] crs"
        return (Warning("no-crs", message),)
    if not tied_to_earth(crs):
        message = f"{describe(crs)} is tied to no place on earth: it is taken as a local grid with ground scale 1"
        return (Warning("no-crs", message),)
    if not is_web_mercator(crs):
        return ()
    longitude, latitude = longitude_latitude(crs, centre_easting, centre_northing)
    message = (
        f"{describe(crs)} is Web Mercator, made for looking at: map areas are "
        f"{web_mercator_factor(latitude) ** 2:.3f} times too large here. They are corrected by the ground scale of "
        "the site's centre; for better figures reproject the surfaces to a projection for surveys, such as "
        f"{utm_code(longitude, latitude)}"
    )
    return (Warning("web-mercator", message),)


def refuse_geographic(crs: CRS, easting: float, northing: float, what: str = "the site") -> None:
    """Raise a GroundError for a CRS in degrees (or geocentric), saying how to reproject."""
    flat = horizontal(crs)
    if flat.is_geographic:
        code = utm_code(easting, northing)
        raise GroundError(
            f"{what}: CRS is {describe(crs)}, in degrees; it must be a projected one, since degrees are no lengths. "
            f"Reproject it first, here for example to {code}: gdalwarp -t_srs {code} -r bilinear in.tif out.tif"
        )
    if flat.is_geocentric:
        raise GroundError(f"{what}: CRS is {describe(crs)}, geocentric; it must be a projected one. Reproject it first")


def _outside(crs: CRS, easting: float, northing: float) -> str:
    return (
        f"the site's centre ({easting:.6g}, {northing:.6g}) lies outside what {describe(crs)} can show; "
        "check the CRS, or state ground.ground_scale as a number"
    )
