"""Captures of a known guide seen by an instrument with known errors; worked out here, not by the program."""

from dataclasses import dataclass

import numpy as np

from eastfall.physics.readings import Readings

OMEGA = 7.292115e-5  # GRS80, Moritz (1980)
GRAVITY = 9.8167
COS = np.cos(np.radians(57.3))
DEPTH = 120.0
SPEED = 2.0
RATE = 10.0


@dataclass(frozen=True)
class Guide:
    """A guide that wanders: sines over depth, east and north [m]."""

    size: tuple[float, float] = (0.012, -0.009)
    wave: tuple[float, float] = (170.0, 95.0)

    def offset(self, depth):
        """Give the offset from the top, shape (2, n) [m]."""
        return np.stack(
            [a * np.sin(2.0 * np.pi * depth / w) for a, w in zip(self.size, self.wave, strict=True)]
        )

    def slope(self, depth):
        """Give its derivative, shape (2, n)."""
        return np.stack(
            [
                a * 2.0 * np.pi / w * np.cos(2.0 * np.pi * depth / w)
                for a, w in zip(self.size, self.wave, strict=True)
            ]
        )

    def curvature(self, depth):
        """Give its second derivative, shape (2, n) [1/m]."""
        return np.stack(
            [
                -a * (2.0 * np.pi / w) ** 2 * np.sin(2.0 * np.pi * depth / w)
                for a, w in zip(self.size, self.wave, strict=True)
            ]
        )


@dataclass(frozen=True)
class Errors:
    """What errs unseen: zeros [rad], relative scale, azimuth [rad], noise of one reading [rad]."""

    zero_a: float = 0.0
    zero_b: float = 0.0
    scale: float = 0.0
    azimuth: float = 0.0
    noise: float = np.radians(0.002)


def ride(rest=0.0):
    """Give time, depth and speed down and up again, with a rest at the bottom [s]; ramps of 1 m/s²."""
    leg = DEPTH / SPEED + SPEED
    time = np.arange(0.0, 2.0 * leg + rest, 1.0 / RATE)
    into = np.clip(time, 0.0, leg) - np.clip(time - leg - rest, 0.0, leg)
    ramp = np.minimum(np.minimum(into, leg - into), SPEED)
    depth = np.where(
        into < leg / 2.0, ramp**2 / 2.0 + np.maximum(into - SPEED, 0.0) * SPEED, DEPTH - ramp**2 / 2.0
    )
    late = np.maximum(leg - into - SPEED, 0.0) * SPEED
    depth = np.where(into < leg / 2.0, depth, depth - late)
    moving = np.where(time < leg, 1.0, np.where(time >= leg + rest, -1.0, 0.0)) * ramp
    return time, depth, moving


def capture(seed, errors=None, *, guide=None, faces=False, told=True, rest=0.0):
    """Give readings of a ride, as the instrument shows them."""
    errors, guide, rng = errors or Errors(), guide or Guide(), np.random.default_rng(seed)
    time, depth, moving = ride(rest)
    east, north = guide.slope(depth)
    # In the probe's frame everything falls with g - r̈ - 2ω × ṙ: a plumb guide shows west going down, a bend is felt as
    # v² P'', and a lean under acceleration as P' pull.
    pull = np.gradient(moving, time)
    bends = (guide.slope(depth) * pull + guide.curvature(depth) * moving**2) / (GRAVITY - pull)
    east = east - 2.0 * OMEGA * moving * COS / (GRAVITY - pull) + bends[0]
    north = north + bends[1]
    up = time > time[np.argmax(depth)] + rest / 2.0
    face = np.where(faces & up, np.pi, 0.0)
    azimuth = errors.azimuth + face
    a = north * np.cos(azimuth) + east * np.sin(azimuth)
    b = east * np.cos(azimuth) - north * np.sin(azimuth)
    noise = rng.normal(0.0, errors.noise, (2, time.size))
    return Readings.of(
        time=time,
        depth=np.round(depth, 3),
        tilt_a=errors.zero_a + (1.0 + errors.scale) * a + noise[0],
        tilt_b=errors.zero_b + (1.0 + errors.scale) * b + noise[1],
        **({"face": face} if told and faces else {}),
    )
