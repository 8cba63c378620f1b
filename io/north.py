"""From magnetic or grid north to true north: the World Magnetic Model and the convergence of a map projection."""

from datetime import date
from math import degrees, radians

from eastfall.io.errors import SiteFileError
from eastfall.physics.settings import North


def offset_to_true(
    azimuth_from: North, *, latitude: float, longitude: float, elevation: float, on: date, grid: str = ""
) -> float:
    """Return the angle to add to an azimuth to count it from true north.

    Parameters
    ----------
    azimuth_from : {"true", "magnetic", "grid"}
        The north that azimuths are counted from.
    latitude, longitude : float
        Geodetic [rad].
    elevation : float
        Above the ellipsoid [m].
    on : date
        The day; the declination moves.
    grid : str
        The projection, as an EPSG code, for grid north.

    Returns
    -------
    float
        Declination (east positive) or meridian convergence [rad].

    Raises
    ------
    SiteFileError
        If the day is outside the magnetic model, or the projection is not known or not installed.
    """
    if azimuth_from == "magnetic":
        return _declination(latitude, longitude, elevation, on)
    if azimuth_from == "grid":
        return _convergence(latitude, longitude, grid)
    return 0.0


def _declination(latitude: float, longitude: float, elevation: float, on: date) -> float:
    from pygeomag import GeoMag  # noqa: PLC0415 (its coefficient file is read at import)

    year = on.year + (on.timetuple().tm_yday - 1) / 365.25
    east = (degrees(longitude) + 180.0) % 360.0 - 180.0
    try:
        found = GeoMag().calculate(glat=degrees(latitude), glon=east, alt=elevation / 1000.0, time=year)
    except (ValueError, OSError) as error:
        raise SiteFileError(
            f"no magnetic declination for {on}: {error}; expected azimuth_from = 'true'"
        ) from error
    return radians(found.d)


def _convergence(latitude: float, longitude: float, grid: str) -> float:
    if not grid:
        raise SiteFileError("site.grid is ''; expected an EPSG code of a projection, as EPSG:25832")
    try:
        from pyproj import Proj  # noqa: PLC0415 (an extra; only for grid north)
        from pyproj.exceptions import ProjError  # noqa: PLC0415
    except ImportError as error:
        raise SiteFileError(
            "grid north needs pyproj; expected it installed by the extra eastfall[grid]"
        ) from error
    try:
        factors = Proj(grid).get_factors(degrees(longitude), degrees(latitude))
    except ProjError as error:
        raise SiteFileError(
            f"site.grid is {grid!r}; expected an EPSG code of a projection, as EPSG:25832"
        ) from error
    return radians(factors.meridian_convergence)
