"""Check values for the hanging line, its swing, the moving line and the way from tilt to offset.

The tolerance is half a unit of the last printed digit; where it is wider, the reason stands beside it.
"""

from functools import partial
from math import pi, radians

import numpy as np

from eastfall.physics.air import AirColumn, air_column
from eastfall.physics.calibration import pair_faces
from eastfall.physics.field import LocalField, local_field
from eastfall.physics.hung import converge, free_period, hang, single_swing, stretch
from eastfall.physics.moving import lean
from eastfall.physics.published.check import PublishedCheck
from eastfall.physics.settings import Air, Line, Site
from eastfall.physics.swing import RestPointTracker
from eastfall.physics.swing_checks import airy_precession, schuler_mean
from eastfall.physics.tilt import OffsetSum, direction, ratio_factor

_OWN = "reckoned from the formula, apart from the program"
_STEEL = 0.006165  # kg/m of 1 mm steel wire
# A damped swing about 100 that starts 10 away and keeps 0.95 of it from one turn to the next.
_TURNS = (110.0, 90.5, 109.025, 91.42625, 108.1450625)


def _field() -> LocalField:
    return local_field(Site(latitude=pi / 4))


def _air(field: LocalField) -> AirColumn:
    return air_column(Air(density=1.25, cross_flow=((0.0, 500.0, 1.0, pi / 2),)), field)


def _bob_ratio(bob_mass: float, mass_per_length: float) -> float:
    """Offset of the bob of a 1000 m line in units of κL²."""
    field = _field()
    found = hang(field, Line(bob_mass=bob_mass, mass_per_length=mass_per_length), 1000.0)
    return float(found.bob_north) / (field.curvature * 1000.0**2)


def _blown() -> float:
    field = _field()
    return float(hang(field, Line(bob_mass=50.0), 500.0, _air(field)).air_east)


def _stretched(part: str) -> float:
    found = stretch(Line(bob_mass=50.0, mass_per_length=_STEEL), 1000.0, 9.81)
    return float(getattr(found, part))


_LEAN, _TOWARD = np.radians([15.0, 25.0]), np.radians([20.0, 45.0])


def _course(axis: int) -> float:
    """Step of the course 100, inclination 15° to 25°, azimuth 20° to 45°: 0 east, 1 north."""
    east, north = direction(_LEAN, _TOWARD)
    return float(OffsetSum(method="minimum-curvature").update([0.0, 100.0], north, east)[axis][-1])


def _course_factor() -> float:
    unit = np.stack([*direction(_LEAN, _TOWARD), np.cos(_LEAN)])
    return float(ratio_factor(unit[:, :1], unit[:, 1:])[0])


def _course_down() -> float:
    """Return the vertical step by the program's factor; the program sums no verticals itself."""
    return 50.0 * float(np.sum(np.cos(_LEAN))) * _course_factor()


def _faces(part: str) -> float:
    """Pair the readings 359 and -339, in units of sin(tilt)/20000."""
    pair = pair_faces([10.0], np.arcsin([359.0 / 20000.0]), [10.0], np.arcsin([-339.0 / 20000.0]))
    if part == "sum":
        return float(pair.face_sum[0]) * 20000.0
    return 24.0 * float(np.sin(pair.tilt[0]))


def _swing_turn(latitude_deg: float) -> float:
    """Return the turning of the swing plane [°/h]."""
    return float(np.degrees(RestPointTracker(radians(latitude_deg)).turn) * 3600.0)


def _shaft_rule() -> float:
    """Single swing of a light 800 m line in units of the rule's √L."""
    return 0.5 * float(free_period(Line(), 800.0, 9.81)) / float(single_swing(800.0))


CHECKS = (
    PublishedCheck(
        name="bob on a light wire, κL²",
        source=_OWN,
        mark="calculation",
        unit="",
        expected=1.0,
        tolerance=1e-9,
        compute=partial(_bob_ratio, 50.0, 0.0),
    ),
    PublishedCheck(
        name="end of a wire without bob, 3/4 κL²",
        source=_OWN + "; gravity taken as constant there, it grows by 6e-5 over the line",
        mark="calculation",
        unit="",
        expected=0.75,
        tolerance=1e-5,
        compute=partial(_bob_ratio, 0.0, _STEEL),
    ),
    PublishedCheck(
        name="bob of 50 kg on 1000 m of 1 mm steel wire, in κL²",
        source=_OWN,
        mark="calculation",
        unit="",
        expected=0.98118,
        tolerance=5e-6,
        compute=partial(_bob_ratio, 50.0, _STEEL),
    ),
    PublishedCheck(
        name="bob of 100 kg on 1000 m of 1 mm steel wire, in κL²",
        source=_OWN,
        mark="calculation",
        unit="",
        expected=0.99018,
        tolerance=5e-6,
        compute=partial(_bob_ratio, 100.0, _STEEL),
    ),
    PublishedCheck(
        name="field line at 1000 m and 45°",
        source=_OWN,
        mark="calculation",
        unit="mm",
        expected=0.415,
        tolerance=5e-4,
        compute=lambda: 1e3 * float(_field().field_line(1000.0)[0]),
    ),
    PublishedCheck(
        name="1 m/s of air across 500 m of 1 mm wire with 50 kg",
        source=_OWN,
        mark="calculation",
        unit="m",
        expected=0.25,
        tolerance=5e-3,
        compute=_blown,
    ),
    PublishedCheck(
        name="two lines 5 m apart, nearer at 1000 m",
        source=_OWN + ", R 6371 km",
        mark="calculation",
        unit="mm",
        expected=0.785,
        tolerance=5e-4,
        compute=lambda: 1e3 * float(converge(5.0, 1000.0, 6371e3)),
    ),
    PublishedCheck(
        name="stretch of 1000 m of 1 mm steel wire by 50 kg",
        source=_OWN + ", g 9.81",
        mark="calculation",
        unit="m",
        expected=3.123,
        tolerance=5e-4,
        compute=partial(_stretched, "bob"),
    ),
    PublishedCheck(
        name="stretch of 1000 m of 1 mm steel wire by its own weight",
        source=_OWN + ", g 9.81",
        mark="calculation",
        unit="m",
        expected=0.193,
        tolerance=5e-4,
        compute=partial(_stretched, "wire"),
    ),
    PublishedCheck(
        name="single swing of a free line in units of √L (m, s)",
        source='Lueger (1904), Lexikon der gesamten Technik, "Schachtlotung": about √L',
        mark="published",
        unit="",
        expected=1.0,
        tolerance=5e-3,  # the rule takes π² for g: 0.31 % at 9.81
        compute=_shaft_rule,
    ),
    PublishedCheck(
        name="turning of the swing plane at the pole",
        source=_OWN + " for one turn in a sidereal day",
        mark="calculation",
        unit="°/h",
        expected=15.041,
        tolerance=5e-4,
        compute=partial(_swing_turn, 90.0),
    ),
    PublishedCheck(
        name="turning of the swing plane at 45°",
        source=_OWN,
        mark="calculation",
        unit="°/h",
        expected=10.636,
        tolerance=5e-4,
        compute=partial(_swing_turn, 45.0),
    ),
    PublishedCheck(
        name="turning of the ellipse of a 67 m pendulum, 3 m by 0.05 m",
        source="Airy (1851), Mon. Not. R. Astron. Soc. 11; formula from memory, value agrees with an integration",
        mark="memory",
        unit="µrad/s",
        expected=4.79,
        tolerance=5e-3,
        compute=lambda: 1e6 * float(airy_precession(67.0, 3.0, 0.05, 2.0 * pi * (67.0 / 9.81) ** 0.5)),
    ),
    PublishedCheck(
        name="Schuler mean of three turning points",
        source=_OWN + ": rest 100, amplitude 10, ratio 0.95",
        mark="calculation",
        unit="",
        expected=100.00625,
        tolerance=1e-9,
        compute=lambda: schuler_mean(_TURNS[:3]),
    ),
    PublishedCheck(
        name="Schuler mean of four turning points",
        source=_OWN + ": rest 100, amplitude 10, ratio 0.95",
        mark="calculation",
        unit="",
        expected=100.00015625,
        tolerance=1e-9,
        compute=lambda: schuler_mean(_TURNS[:4]),
    ),
    PublishedCheck(
        name="lean of the felt vertical at 10 m/s and 60°",
        source=_OWN,
        mark="calculation",
        unit="µrad",
        expected=74.0,
        tolerance=0.5,
        compute=lambda: 1e6 * float(lean(10.0, radians(60.0), 9.81)),
    ),
    PublishedCheck(
        name="between a pass down and one up, 1000 m at 10 m/s and 60°",
        source=_OWN,
        mark="calculation",
        unit="mm",
        expected=149.0,
        tolerance=0.5,
        compute=lambda: (
            1e6 * float(lean(10.0, radians(60.0), 9.81)) - 1e6 * float(lean(-10.0, radians(60.0), 9.81))
        ),
    ),
    PublishedCheck(
        name="minimum curvature, course 100, 15° to 25°, azimuth 20° to 45°: north",
        source="worked example of the method, printed in directional survey texts; formula Taylor & Mason (1972)",
        mark="published",
        unit="ft",
        expected=27.22,
        tolerance=5e-3,
        compute=partial(_course, 1),
    ),
    PublishedCheck(
        name="minimum curvature, the same course: east",
        source="worked example of the method, printed in directional survey texts; formula Taylor & Mason (1972)",
        mark="published",
        unit="ft",
        expected=19.45,
        tolerance=5e-3,
        compute=partial(_course, 0),
    ),
    PublishedCheck(
        name="minimum curvature, the same course: vertical",
        source="worked example of the method, printed in directional survey texts; formula Taylor & Mason (1972)",
        mark="published",
        unit="ft",
        expected=94.01,
        tolerance=5e-3,
        compute=_course_down,
    ),
    PublishedCheck(
        name="minimum curvature, the same course: ratio factor",
        source=_OWN,
        mark="calculation",
        unit="",
        expected=1.00428,
        tolerance=5e-6,
        compute=_course_factor,
    ),
    PublishedCheck(
        name="face sum of the readings 359 and -339",
        source="Mikkelsen (2007), short course on field measurements",
        mark="published",
        unit="1/20000",
        expected=20.0,
        tolerance=0.01,  # the readings are sines, the sum is of angles: 0.003 apart
        compute=partial(_faces, "sum"),
    ),
    PublishedCheck(
        name="deviation over 24 inches of the readings 359 and -339",
        source="Mikkelsen (2007), short course on field measurements",
        mark="published",
        unit="in",
        expected=0.4188,
        tolerance=5e-5,
        compute=partial(_faces, "deviation"),
    ),
)
"""In the order in which they are shown."""
