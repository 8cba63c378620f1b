"""Journeys and swings worked out here, not by the program, and how they are fed to the engine."""

import itertools
from math import cos, radians

import numpy as np

from eastfall.physics.readings import Readings
from eastfall.physics.survey import Survey

OMEGA = 7.292115e-5  # GRS80, Moritz (1980)


G = 9.8167


COS = cos(radians(57.3))


def journey(
    *, speed=2.0, depth=300.0, rate=20.0, seed=None, lean=(0.0, 0.0), zero=0.0, noise=3.5e-5, azimuth=0.0
):
    """Give readings of a probe run down and up a straight guide that leans by `lean` (east, north) in m/m.

    The winch speeds up and slows down at 1 m/s². The tilts are worked out here from the textbook Coriolis
    acceleration, not by the program: a probe moving down at v, speeding up by a, feels the vertical lean east by
    2ωv cos φ/(g - a), so a plumb guide shows that much west.
    """
    rng = np.random.default_rng(seed)
    leg = depth / speed + speed
    time = np.arange(0.0, 2.0 * leg + 0.5 / rate, 1.0 / rate)
    into = np.where(time <= leg, time, 2.0 * leg - time)
    gone = np.clip(into, 0.0, speed) ** 2 / 2.0 + np.clip(into - speed, 0.0, leg - 2.0 * speed) * speed
    late = np.clip(into - (leg - speed), 0.0, speed)
    depth_now = gone + speed * late - late**2 / 2.0
    down = np.where(time <= leg, 1.0, -1.0)
    moving = down * np.minimum(np.minimum(into, leg - into), speed).clip(0.0)
    pull = np.where(into < speed, 1.0, np.where(into > leg - speed, -1.0, 0.0))
    east = lean[0] - 2.0 * OMEGA * moving * COS / (G - pull)
    north = np.full_like(time, lean[1])
    a = north * np.cos(azimuth) + east * np.sin(azimuth) + zero
    b = -north * np.sin(azimuth) + east * np.cos(azimuth) + zero
    if seed is not None:
        a, b = a + rng.normal(0, noise, time.size), b + rng.normal(0, noise, time.size)
    return Readings.of(time=time, depth=np.round(depth_now, 3), tilt_a=a, tilt_b=b)


def run(assumptions, readings, cuts=()):
    """Feed readings in pieces, close, and give the survey and its findings joined."""
    survey, found = Survey(assumptions), []
    for begin, end in itertools.pairwise([0, *sorted(cuts), len(readings)]):
        found.append(survey.feed(readings[begin:end]))
    survey.close(float(readings.host_time[-1]))
    return survey, np.concatenate([one.rows.data for one in found], axis=1)


def swinging():
    """Give readings of a bob lowered to 50 m, swinging there, lowered to 60 m and swinging there."""
    rng = np.random.default_rng(8)
    time = np.arange(0.0, 200.0, 0.1)
    depth = np.interp(time, [0.0, 20.0, 100.0, 105.0, 200.0], [40.0, 50.0, 50.0, 60.0, 60.0])
    east = 0.02 * np.cos(time * np.sqrt(G / depth)) * np.exp(-time / 400.0) + rng.normal(0, 3e-4, time.size)
    return Readings.of(time=time, depth=depth, east=east, north=rng.normal(0, 3e-4, time.size))
