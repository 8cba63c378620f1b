"""How fast falls are looked up and simulated, as ratios within one run; run it by itself, it is no test.

The yardstick of the simulated drops is a loop of scipy's `solve_ivp` over the same forces, written as plain scalar
arithmetic, with the tolerance at which it is as exact as the program.
"""

import math
import time
from collections.abc import Callable

import numpy as np
from scipy.integrate import solve_ivp

from eastfall.physics.air import GAS_CONSTANT, AirColumn, air_column
from eastfall.physics.earth import EARTH_ROTATION
from eastfall.physics.fall import fall
from eastfall.physics.field import LocalField, local_field
from eastfall.physics.settings import Air, Body, Site
from eastfall.physics.spread import landing_spread, monte_carlo

Row = tuple[str, str, float, float]

FIELD = local_field(Site(latitude=math.radians(57.3)))
AIR = air_column(Air(), FIELD)
BODY = Body(mass=0.514, diameter=0.05)
DEPTH = 940.0
DROPS = 100_000
LOOPED = 200
"""Drops that the slow loop is timed over; the rest is scaled."""


def _seconds(work: Callable[[], object], repeats: int) -> float:
    """Processor time of the shortest of several runs, the one least disturbed by whatever else the machine does."""
    spans = []
    for _ in range(repeats):
        start = time.process_time()
        work()
        spans.append(time.process_time() - start)
    return min(spans)


def scalar_rates(
    field: LocalField, air: AirColumn, body: Body
) -> Callable[[float, np.ndarray], tuple[float, ...]]:
    """Equation of motion of a smooth sphere in still air over one layer of rock, in plain floats."""
    sine, cosine = (2.0 * EARTH_ROTATION * turn(field.plumb_latitude) for turn in (math.sin, math.cos))
    a, b = (float(one) for one in field.layer_terms[:, -1])
    radius, bend, top = field.mean_radius, field.curvature, field.gravity
    pull_north, pull_east = top / field.meridian_radius, top / field.prime_vertical_radius
    given = air.settings
    size, volume = body.diameter, math.pi * body.diameter**3 / 6.0
    scale = 0.5 * 0.25 * math.pi * size**2 / body.mass

    def rates(_: float, y: np.ndarray) -> tuple[float, ...]:
        north, east, down, v_north, v_east, v_down = y.tolist()
        r = radius - down
        gravity = a / (r * r) + b * r
        warm = given.temperature + given.temperature_gradient * down
        x = given.temperature_gradient * down / given.temperature + 1e-300
        level = math.log1p(x) / x
        growing = (1.0 - level) / x if x > 1e-4 else 0.5 - x / 3.0
        lift = (top * level + (gravity - top) * growing) * down / (GAS_CONSTANT * given.temperature)
        density = given.density * given.temperature / warm * math.exp(lift)
        viscosity = 1.458e-6 * warm * math.sqrt(warm) / (warm + 110.4)
        speed = math.sqrt(v_north * v_north + v_east * v_east + v_down * v_down)
        reynolds = max(density * speed * size / viscosity, 1e-30)
        q = reynolds / 2.63e5
        bluff = 2.6 * reynolds / 5.0 / (1.0 + (reynolds / 5.0) ** 1.52)
        drag = 24.0 + reynolds * (bluff + 0.411 * q**0.06 / (1.0 + q**8) + reynolds**0.8 / 461000.0)
        brake = scale * viscosity / size * drag
        weight = 1.0 - density * volume / body.mass
        return (
            v_north,
            v_east,
            v_down,
            (gravity * bend * down - pull_north * north) * weight - sine * v_east - brake * v_north,
            -pull_east * east * weight + sine * v_north + cosine * v_down - brake * v_east,
            (gravity + top * bend * north) * weight - cosine * v_east - brake * v_down,
        )

    return rates


def looped_drops(releases: np.ndarray) -> np.ndarray:
    """East and north at the bottom, shape (2, drops), one `solve_ivp` for each release (east, north and speeds)."""
    rates = scalar_rates(FIELD, AIR, BODY)

    def bottom(_: float, y: np.ndarray) -> float:
        return y[2] - DEPTH

    bottom.terminal = True  # type: ignore[attr-defined]
    found = []
    for east, north, v_east, v_north in releases.T:
        start = [north, east, 0.0, v_north, v_east, 0.0]
        end = solve_ivp(rates, (0.0, 100.0), start, rtol=1e-6, atol=1e-9, events=bottom).y_events[0][0]
        found.append((end[1], end[0]))
    return np.array(found).T


def lookup_rows() -> list[Row]:
    """Time building the path of a 4 km fall in air, and looking it up."""
    path = fall(FIELD, to_depth=4000.0, body=BODY, air=AIR)
    depths = np.linspace(1.0, 4000.0, 4000)
    built = _seconds(lambda: fall(FIELD, to_depth=4000.0, body=BODY, air=AIR), 20)
    looked = _seconds(lambda: path.at(depths), 20) / depths.size
    return [
        ("a depth looked up in a 4 km fall", "integrating to that depth", built / looked, 1000.0),
        ("building a 4 km fall in air", "50 ms", 0.050 / built, 1.0),
    ]


def monte_carlo_row() -> Row:
    """100,000 releases in air against the loop; both must give the same drops."""
    draws = np.random.default_rng(1831).standard_normal((7, DROPS))[:4, :LOOPED]
    releases = draws * np.array([[BODY.u_release]] * 2 + [[BODY.u_release_speed]] * 2)
    start = time.process_time()
    slow = looped_drops(releases)
    loop = (time.process_time() - start) * DROPS / LOOPED
    runs: list[object] = []
    fast = _seconds(
        lambda: runs.append(
            monte_carlo(
                FIELD, depths=[DEPTH], body=BODY, air=AIR, drops=DROPS, generator=np.random.default_rng(1831)
            )
        ),
        3,
    )
    drops = runs[-1]
    same = np.stack([drops.east[:LOOPED, 0], drops.north[:LOOPED, 0]])  # type: ignore[attr-defined]
    apart = float(np.abs(same - slow).max())
    linear = landing_spread(FIELD, depths=[DEPTH], body=BODY, air=AIR)
    drawn = drops.spread()  # type: ignore[attr-defined]
    print(f"{DROPS} drops {fast:.2f} s, loop {loop:.0f} s; same drops differ by {1e6 * apart:.2f} µm at most")
    print(f"spread east {1e3 * drawn.u_east[0]:.3f} mm, linear {1e3 * linear.u_east[0]:.3f} mm")
    return ("100,000 releases in air", "a loop of solve_ivp", loop / fast, 500.0)


def rows() -> list[Row]:
    """Work, yardstick, how many times faster, and how many are wanted."""
    return [*lookup_rows(), monte_carlo_row()]


def main() -> int:
    """Print the table; 1 if a ratio falls short."""
    found = rows()
    for work, yardstick, ratio, at_least in found:
        print(f"{work:40} {yardstick:28} {ratio:10.0f}  at least {at_least:.0f}")
    return int(any(ratio < at_least for _, _, ratio, at_least in found))


if __name__ == "__main__":
    raise SystemExit(main())
