"""Speed of the line and tilt physics, each against a yardstick in the same run."""

from collections.abc import Callable, Iterator
from math import pi, radians, sqrt
from time import process_time

import numpy as np

from eastfall.physics.air import air_column
from eastfall.physics.field import local_field
from eastfall.physics.hung import hang
from eastfall.physics.moving import LineSpeed
from eastfall.physics.settings import Air, Line, Site
from eastfall.physics.swing import RestPointTracker
from eastfall.physics.tilt import OffsetSum

Row = tuple[str, str, float, float]


def best(work: Callable[[], object], repeats: int) -> float:
    """Shortest of several runs by the processor's own time [s], so that a busy machine does not count."""
    times = []
    for _ in range(repeats):
        start = process_time()
        work()
        times.append(process_time() - start)
    return min(times)


def _swung(time: np.ndarray) -> np.ndarray:
    omega = sqrt(9.81 / 800.0)
    noise = np.random.default_rng(1).normal(0.0, 3e-4, (2, time.size))
    return 0.05 * np.exp((1j * omega - 1.0 / 4000.0) * time) + noise[0] + 1j * noise[1]


def swing_row() -> Row:
    """One reading and a fresh estimate with an hour of 10 Hz behind it."""
    time = np.arange(36_600) / 10.0
    value = _swung(time)
    tracker = RestPointTracker(radians(57.0), 800.0, 9.81)
    tracker.update(time[:36_000], value.real[:36_000], value.imag[:36_000])
    tracker.estimate()
    rows: Iterator[int] = iter(range(36_000, 36_600))

    def one() -> None:
        i = next(rows)
        tracker.update(time[i : i + 1], value.real[i : i + 1], value.imag[i : i + 1])
        tracker.estimate()

    return "swing: one update and estimate after an hour of 10 Hz", "5 ms", 5e-3 / best(one, 200), 1.0


def speed_rows() -> list[Row]:
    """Line speed in large and in small blocks."""
    time = np.arange(2_000_000) / 50.0
    depth = np.round(2.0 * time, 2)
    large = best(lambda: LineSpeed().update(time, depth), 3)
    tracker = LineSpeed()
    tracker.update(time[:1000], depth[:1000])
    starts = iter(range(1000, 2_000_000, 10))

    def small() -> None:
        i = next(starts)
        tracker.update(time[i : i + 10], depth[i : i + 10])

    return [
        ("line speed: 2,000,000 rows at 50 Hz", "0.2 s", 0.2 / large, 1.0),
        ("line speed: a block of 10 rows", "100 µs", 100e-6 / best(small, 3000), 1.0),
    ]


def sum_row() -> Row:
    """Sum the offsets of a long log, against NumPy's bare running sums of the same three columns."""
    depth = np.arange(2_000_000) * 0.01
    slope = 1e-3 * np.sin(depth)
    ours = best(lambda: OffsetSum().update(depth, slope, slope), 3)
    bare = best(lambda: np.cumsum(np.stack([depth, slope, slope]), axis=1), 3)
    return "offset sum: 2,000,000 rows", "a tenth of three bare running sums' speed", 10.0 * bare / ours, 1.0


def hang_row() -> Row:
    """Hang a thousand lengths of line at once, against one by one."""
    field = local_field(Site(latitude=pi / 4))
    air = air_column(Air(cross_flow=((100.0, 120.0, 1.0, 0.0), (480.0, 700.0, 0.5, 1.0))), field)
    line, lengths = Line(mass_per_length=0.006165), np.linspace(1.0, 1000.0, 1000)
    together = best(lambda: hang(field, line, lengths, air), 10)
    alone = best(lambda: [hang(field, line, one, air) for one in lengths[::20]], 3) * 20.0
    return "hanging line: 1000 lengths at once", "one by one", alone / together, 20.0


def rows() -> list[Row]:
    """Work, yardstick, ratio and the least that is wanted of it."""
    return [swing_row(), *speed_rows(), sum_row(), hang_row()]


def main() -> None:
    """Print the table."""
    for work, yardstick, ratio, at_least in rows():
        print(f"{work:<58} {ratio:8.2f} x  (at least {at_least:g}) against {yardstick}")


if __name__ == "__main__":
    main()
