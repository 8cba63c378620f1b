"""The fall against an independent integration in the inertial frame, with 20 digits and the full normal field."""

from math import pi

import mpmath
import numpy as np
import pytest

from eastfall.physics.earth import EARTH_ROTATION, GRS80
from eastfall.physics.fall import fall
from eastfall.physics.field import local_field
from eastfall.physics.settings import Site

DIGITS = 20
DEGREES = 3
"""Zonal terms J2 to J6; the next is below 1e-11 of gravity."""


def _zonals() -> list[mpmath.mpf]:
    """J2n of the level ellipsoid: Heiskanen & Moritz (1967), Physical Geodesy, chapter 2, with J2 of GRS80."""
    j2, e2 = mpmath.mpf("108263e-8"), mpmath.mpf(GRS80.eccentricity_squared)
    return [
        (-1) ** (n + 1) * 3 * e2**n / ((2 * n + 1) * (2 * n + 3)) * (1 - n + 5 * n * j2 / e2)
        for n in range(1, DEGREES + 1)
    ]


def _attraction(x: mpmath.mpf, y: mpmath.mpf, z: mpmath.mpf, zonals: list[mpmath.mpf]) -> list[mpmath.mpf]:
    """Gradient of GM/r [1 - Σ J2n (a/r)^2n P2n(sin φ)] by its derivatives along r and along sin φ."""
    gm, a = mpmath.mpf(GRS80.gm), mpmath.mpf(GRS80.semimajor_axis)
    r = mpmath.sqrt(x * x + y * y + z * z)
    s = z / r
    legendre, slope = [mpmath.mpf(1), s], [mpmath.mpf(0), mpmath.mpf(1)]
    for n in range(1, 2 * DEGREES):
        legendre.append(((2 * n + 1) * s * legendre[n] - n * legendre[n - 1]) / (n + 1))
        slope.append(slope[n - 1] + (2 * n + 1) * legendre[n])
    radial, turning = mpmath.mpf(1), mpmath.mpf(0)
    for n, zonal in enumerate(zonals, start=1):
        share = zonal * (a / r) ** (2 * n)
        radial -= (2 * n + 1) * share * legendre[2 * n]
        turning -= share * slope[2 * n]
    pull, twist = -gm / r**3 * radial, gm / r**2 * turning
    return [pull * x - twist * s * x / r, pull * y - twist * s * y / r, pull * z + twist * (1 - s * s)]


def _collar(latitude: mpmath.mpf, height: mpmath.mpf) -> tuple[mpmath.mpf, mpmath.mpf]:
    """Distance from the axis and from the equator's plane."""
    e2 = mpmath.mpf(GRS80.eccentricity_squared)
    normal = GRS80.semimajor_axis / mpmath.sqrt(1 - e2 * mpmath.sin(latitude) ** 2)
    return (normal + height) * mpmath.cos(latitude), (normal * (1 - e2) + height) * mpmath.sin(latitude)


def _inertial_fall(
    latitude: float, elevation: float, depth: float
) -> tuple[mpmath.mpf, mpmath.mpf, mpmath.mpf]:
    """Time, east and north when a body at rest against the turning Earth has fallen `depth` along the plumb line."""
    zonals, turn = _zonals(), mpmath.mpf(EARTH_ROTATION)
    axis, polar = _collar(mpmath.mpf(latitude), mpmath.mpf(elevation))
    # The plumb line at the release: attraction and centrifugal there.
    pull = _attraction(axis, mpmath.mpf(0), polar, zonals)
    out, up = pull[0] + turn**2 * axis, pull[2]
    gravity = mpmath.sqrt(out**2 + up**2)
    down = (out / gravity, up / gravity)
    orbit = mpmath.odefun(
        lambda _, y: [*y[3:], *_attraction(*y[:3], zonals)], 0, [axis, 0, polar, 0, turn * axis, 0]
    )

    def against_earth(t: mpmath.mpf) -> tuple[mpmath.mpf, mpmath.mpf, mpmath.mpf]:
        x, y, z = orbit(t)[:3]
        c, s = mpmath.cos(turn * t), mpmath.sin(turn * t)
        outward, east, polewards = c * x + s * y - axis, c * y - s * x, z - polar
        return outward * down[0] + polewards * down[1], east, outward * down[1] - polewards * down[0]

    start = mpmath.sqrt(2 * depth / gravity)
    time = mpmath.findroot(
        lambda t: against_earth(t)[0] - depth, (start, start * mpmath.mpf("0.9999")), tol=1e-16
    )
    _, east, north = against_earth(time)
    return time, east, north


@pytest.mark.independent
@pytest.mark.parametrize(
    ("latitude_deg", "elevation", "depth"), [(45.0, 100.0, 100.0), (-60.0, 1500.0, 1000.0)]
)
def test_fall_in_open_air_agrees_with_inertial_frame(
    latitude_deg: float, elevation: float, depth: float
) -> None:
    """Time, east and south agree with an integration that knows nothing of local frames."""
    latitude = latitude_deg * pi / 180
    with mpmath.workdps(DIGITS):
        time, east, north = (float(one) for one in _inertial_fall(latitude, elevation, depth))
    site = Site(latitude=latitude, elevation=elevation, rock_density=((0.0, 0.0),))
    there = fall(local_field(site, ellipsoid=GRS80), to_depth=depth).at(depth)
    assert np.sign(north) == -np.sign(latitude)
    # The height formula leaves out (h/a)³ of g and the curvature is that at the collar: parts in 1e8 of the time, and
    # 3e-4 of the 32 µm by which the plumb line bends over a kilometre.
    assert float(there.time) == pytest.approx(time, rel=5e-9)
    assert float(there.east) == pytest.approx(east, abs=1e-9)
    assert float(there.north) == pytest.approx(north, abs=1e-8 * depth / 1000)
