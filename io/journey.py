"""The journey of an emulated winch: depth, speed and acceleration over time as a chain of steady accelerations."""

from dataclasses import dataclass
from itertools import pairwise
from math import sqrt

import numpy as np
from numpy.typing import ArrayLike, NDArray

from eastfall.physics.errors import ParameterError

CREEP = 0.25
"""Speed near the end of a long move, as a fraction of the cruise (common practice, no source)."""


@dataclass(frozen=True, slots=True, kw_only=True)
class Phase:
    """A stretch of time with one acceleration."""

    duration: float
    """[s]."""
    acceleration: float
    """[m/s²], down positive."""


@dataclass(frozen=True, slots=True, kw_only=True)
class Winch:
    """How the winch is driven."""

    speed: float = 2.0
    """Cruise [m/s], down or up."""
    acceleration: float = 0.25
    """[m/s²], the size of it."""
    creep_length: float = 4.0
    """Length of slow travel before the bottom and before the collar [m]."""
    stops: tuple[float, ...] = ()
    """Depths [m] where it stands on the way down and on the way up."""
    stop_time: float = 8.0
    bottom_time: float = 6.0
    collar_time: float = 5.0
    """Standing time [s] at a stop, at the bottom and at the collar before the start."""

    def __post_init__(self) -> None:
        for name in ("speed", "acceleration"):
            value = getattr(self, name)
            if not value > 0.0:
                raise ParameterError(name, value, "", "more than 0")


class Journey:
    """Down from the collar to the bottom and back up, and standing at the collar ever after.

    Parameters
    ----------
    phases : sequence of Phase
        The chain, from depth 0 at rest.
    """

    def __init__(self, phases: tuple[Phase, ...]) -> None:
        time, depth, speed = [0.0], [0.0], [0.0]
        for one in phases:
            depth.append(depth[-1] + speed[-1] * one.duration + 0.5 * one.acceleration * one.duration**2)
            speed.append(speed[-1] + one.acceleration * one.duration)
            time.append(time[-1] + one.duration)
        speed[-1] = 0.0  # what rounding left would carry the winch away in the endless last phase
        self.duration = time[-1]
        """[s]."""
        self.turning = time[int(np.argmax(depth))]
        """When the bottom is reached [s]."""
        self._knots = np.array([time, depth, speed, [one.acceleration for one in phases] + [0.0]])

    def at(self, time: ArrayLike) -> tuple[NDArray[np.float64], NDArray[np.float64], NDArray[np.float64]]:
        """Return depth [m], speed [m/s] and acceleration [m/s²] at times [s], shape (n,) each, down positive."""
        t = np.atleast_1d(np.asarray(time, dtype=float))
        which = np.searchsorted(self._knots[0], t, side="right") - 1
        start, depth, speed, pull = self._knots[:, np.maximum(which, 0)]
        since = t - start
        return depth + speed * since + 0.5 * pull * since**2, speed + pull * since, pull


def down_and_up(depth: float, winch: Winch) -> Journey:
    """Plan the journey to a depth [m] and back, with the winch's stops on both ways."""
    halts = sorted({one for one in winch.stops if 0.0 < one < depth})
    levels = [0.0, *halts, depth, *reversed(halts), 0.0]
    phases = [_still(winch.collar_time)]
    for start, end in pairwise(levels):
        creep = winch.creep_length if end in (0.0, depth) else 0.0
        phases += _move(end - start, winch, creep)
        phases.append(_still(_standing_time(end, depth, winch)))
    return Journey(tuple(one for one in phases if one.duration > 0.0))


def _standing_time(level: float, depth: float, winch: Winch) -> float:
    if level == 0.0:
        return winch.collar_time
    return winch.bottom_time if level == depth else winch.stop_time


def _still(duration: float) -> Phase:
    return Phase(duration=duration, acceleration=0.0)


def _move(distance: float, winch: Winch, creep_length: float) -> list[Phase]:
    """Plan a move from rest to rest; a move too short for cruise and creep goes as a plain ramp up and down."""
    sign, length = (1.0, distance) if distance > 0.0 else (-1.0, -distance)
    v, a, c = winch.speed, winch.acceleration, CREEP * winch.speed
    ramps = (v**2 + (v**2 - c**2) + c**2) / (2.0 * a)
    if creep_length <= 0.0 or length < ramps + creep_length:
        return _ramps(sign, length, v, a)
    cruise = (length - ramps - creep_length) / v
    plan = ((v / a, a), (cruise, 0.0), ((v - c) / a, -a), (creep_length / c, 0.0), (c / a, -a))
    return [Phase(duration=duration, acceleration=sign * pull) for duration, pull in plan]


def _ramps(sign: float, length: float, v: float, a: float) -> list[Phase]:
    top = min(v, sqrt(a * length))
    plan = ((top / a, a), ((length - top**2 / a) / top, 0.0), (top / a, -a))
    return [Phase(duration=max(duration, 0.0), acceleration=sign * pull) for duration, pull in plan]
