"""What the instruments of an emulated shaft feel: from the hidden truth and the physics to readings in SI units.

How a reading is worded as a line is `io.wording`; time comes in with the call, randomness as a generator.
"""

from dataclasses import replace
from typing import Protocol

import numpy as np
from numpy.typing import NDArray

from eastfall.io.journey import Winch, down_and_up
from eastfall.io.truth import Truth, Vector
from eastfall.physics.calibration import shown
from eastfall.physics.earth import EARTH_ROTATION
from eastfall.physics.field import LocalField, local_field
from eastfall.physics.moving import lean
from eastfall.physics.settings import Air, Assumptions, Instrument

Column = NDArray[np.float64]
Columns = dict[str, Column]
"""Channels by the names of `physics.readings.CHANNELS`."""


class Scene(Protocol):
    """An emulated run: when its readings fall, and what they say."""

    interval: float
    """From one reading to the next [s]."""
    count: int | None
    """How many readings there are; None: no end."""
    duration: float
    """When everything has been shown once [s]."""

    def sample(self, time: Column, rng: np.random.Generator) -> Columns:
        """Return what the instrument says at times [s], noise included."""
        ...


def scene_for(
    assumptions: Assumptions, truth: Truth, *, rate: float, seed: int, winch: Winch | None, faces: bool
) -> Scene:
    """Return the scene of a site's kind of run.

    Parameters
    ----------
    assumptions : Assumptions
        The site.
    truth : Truth
        What is really so.
    rate : float
        Readings a second [1/s]; drops come at their own pace.
    seed : int
        Of what belongs to the scene itself, such as the air's push.
    winch : Winch, optional
        How a guided probe is driven.
    faces : bool
        Whether a guided probe is turned half round at the bottom.
    """
    if assumptions.run.kind == "guided":
        return GuidedScene(assumptions, truth, rate=rate, winch=winch, faces=faces)
    if assumptions.run.kind == "hung":
        return HungScene(assumptions, truth, rate=rate, seed=seed)
    return DropScene(assumptions, truth)


class GuidedScene:
    """A probe that rides down a guide and back up; by default at the site's line speed, else at 2 m/s."""

    count: int | None = None

    def __init__(
        self, assumptions: Assumptions, truth: Truth, *, rate: float, winch: Winch | None, faces: bool
    ) -> None:
        drive = winch or Winch(speed=abs(assumptions.guide.line_speed) or 2.0)
        self.journey = down_and_up(assumptions.shaft.depth, drive)
        self.interval = 1.0 / rate
        self.duration = self.journey.duration
        self._site = assumptions
        self._truth = truth
        self._probe = real_instrument(assumptions.instrument, truth)
        self._field = local_field(assumptions.site)
        self._faces = faces

    def sample(self, time: Column, rng: np.random.Generator) -> Columns:
        """Return depth, tilts and the slow channels at times [s]."""
        depth, speed, pull = self.journey.at(time)
        face = np.where(self._faces & (time > self.journey.turning), np.pi, 0.0)
        temperature = _temperature(self._site.air, depth)
        felt = felt_tilt(self._truth, self._field, depth, speed, pull)
        tilt_a, tilt_b = indicated_tilt(self._probe, felt, face, temperature, rng)
        east, north = self._truth.offset(depth) + self._probe.u_offset * rng.standard_normal(felt.shape)
        return _slow_channels(self._site.instrument, time, temperature, face, rng) | {
            "depth": depth * (1.0 + self._truth.depth_scale),
            "tilt_a": tilt_a,
            "tilt_b": tilt_b,
            "east": east,
            "north": north,
        }


def felt_tilt(truth: Truth, field: LocalField, depth: Column, speed: Column, pull: Column) -> Vector:
    """Return the tilt of a probe in the guide against the vertical that it feels, while it moves.

    Parameters
    ----------
    truth : Truth
        The guide: offset P(z), slope P', curvature P''.
    field : LocalField
        Gravity.
    depth, speed, pull : ndarray, shape (n,)
        z [m], v [m/s] and a = dv/dt [m/s²], down positive.

    Returns
    -------
    ndarray, shape (2, n)
        East, north [rad]; positive where the lower end leans that way.

    Notes
    -----
    In the probe's own frame everything falls with g(P, z) - r̈ - 2 ω × ṙ. Along the guide r̈ is
    (P' a + P'' v², a), and the Coriolis part leans the vertical east by ε (`moving.lean`), so that
    tilt = P' - (g_h - P' a - P'' v²)/(g_z - a) - ε. Left out: the Coriolis pull on the probe's own sideways motion,
    2 ω P' v/g or less (0.03 µrad at 2.5 m/s on a lean of 1 mm/m).
    """
    offset, slope, curvature = truth.offset(depth), truth.slope(depth), truth.curvature(depth)
    north, east, down = field.acceleration(offset[1], offset[0], depth)
    along = down - pull
    tilt: Vector = slope - (np.stack([east, north]) - slope * pull - curvature * speed**2) / along
    tilt[0] -= lean(speed, field.latitude, along)
    return tilt


def real_instrument(instrument: Instrument, truth: Truth) -> Instrument:
    """Return the instrument as it really is: what the site states, and what the truth adds unseen."""
    return replace(
        instrument,
        a_azimuth=instrument.a_azimuth + truth.azimuth,
        zero_a=instrument.zero_a + truth.zero_a,
        zero_b=instrument.zero_b + truth.zero_b,
        scale_a=instrument.scale_a * (1.0 + truth.scale_a),
        scale_b=instrument.scale_b * (1.0 + truth.scale_b),
        u_tilt=instrument.u_tilt if truth.noise is None else truth.noise,
    )


def indicated_tilt(
    probe: Instrument, tilt: Vector, face: Column, temperature: Column, rng: np.random.Generator
) -> Vector:
    """Return what the two axes show, noise included.

    Parameters
    ----------
    probe : Instrument
        As it really is.
    tilt : ndarray, shape (2, n)
        Slope of the probe toward east and north against the vertical that it feels [m/m].
    face : ndarray, shape (n,)
        How far it is turned about its own axis [rad].
    temperature : ndarray, shape (n,)
        [K].
    rng : numpy Generator
        Of the noise.

    Returns
    -------
    ndarray, shape (2, n)
        A, B [rad]. Each axis shows the arcsine of its share of the probe's own direction.
    """
    azimuth = probe.a_azimuth + probe.north_offset + face
    east, north = tilt / np.sqrt(1.0 + np.sum(tilt**2, axis=0))
    a = np.arcsin(north * np.cos(azimuth) + east * np.sin(azimuth))
    b = np.arcsin(east * np.cos(azimuth) - north * np.sin(azimuth))
    indicated: Vector = np.stack(shown(a, b, temperature, probe)) + probe.u_tilt * rng.standard_normal(
        tilt.shape
    )
    return indicated


def _temperature(air: Air, depth: Column) -> Column:
    return air.temperature + air.temperature_gradient * depth


def _slow_channels(
    instrument: Instrument, time: Column, temperature: Column, face: Column, rng: np.random.Generator
) -> Columns:
    noise = rng.standard_normal((3, time.shape[0]))
    return {
        "time": time,
        "azimuth": instrument.a_azimuth + face + np.radians(0.1) * noise[0],
        "face": face,
        "temperature": temperature + 0.05 * noise[1],
        "supply": 12.6 - 2e-5 * time + 0.01 * noise[2],
    }


class HungScene:
    """A plumb line with a swinging bob, seen at the collar (angle) or at the bob (offsets)."""

    count: int | None = None
    duration = 900.0

    def __init__(self, assumptions: Assumptions, truth: Truth, *, rate: float, seed: int) -> None:
        self.interval = 1.0 / rate
        self.length = assumptions.shaft.depth
        self._site = assumptions
        self._truth = truth
        self._probe = real_instrument(assumptions.instrument, truth)
        self._field = local_field(assumptions.site)
        from eastfall.physics.models import Models  # noqa: PLC0415 (a guided run needs nothing that hangs or falls)

        models, length = Models.of(assumptions), np.array([self.length])
        self.rest = models.bob(length) + np.array([[truth.rest_east], [truth.rest_north]])
        """Where the bob rests against the straight vertical: east, north, shape (2, 1) [m]."""
        self._reference = models.reference(length)
        self._frequency = float(np.sqrt(self._field.gravity / self.length))
        self._push = _Push(np.random.default_rng([seed, 3]), truth.air_push, self._frequency)

    def sample(self, time: Column, rng: np.random.Generator) -> Columns:
        """Return depth, the bob's offset and the line's angle at times [s]."""
        bob = self.rest + self.swing(time) + self._push.at(time)
        still = np.zeros_like(time)
        temperature = _temperature(self._site.air, still)
        tilt_a, tilt_b = indicated_tilt(self._probe, bob / self.length, still, temperature, rng)
        east, north = bob - self._reference + self._site.instrument.u_offset * rng.standard_normal(bob.shape)
        return _slow_channels(self._site.instrument, time, temperature, still, rng) | {
            "depth": still + self.length * (1.0 + self._truth.depth_scale),
            "tilt_a": tilt_a,
            "tilt_b": tilt_b,
            "east": east,
            "north": north,
        }

    def swing(self, time: Column) -> Vector:
        """Return the swing about the rest point, shape (2, n) [m].

        Notes
        -----
        The damped Foucault pendulum, with ζ = east + i north, s = sin φ and ω0² = g/L:
        ζ(t) = e^(-t/τ) e^(-iωst) (A e^(iω0t) + B e^(-iω0t)); A + B and A - B are the half axes.

        References
        ----------
        Landau, L. D. & Lifshitz, E. M. (1976), Mechanics, 3rd ed., section 39, problem 3.
        """
        truth = self._truth
        along = np.exp(1j * (np.pi / 2.0 - truth.swing_azimuth))
        turning = EARTH_ROTATION * np.sin(self._field.latitude)
        phase = self._frequency * time
        ellipse = truth.swing_major * np.cos(phase) + 1j * truth.swing_minor * np.sin(phase)
        path = along * ellipse * np.exp(-time / truth.decay - 1j * turning * time)
        return np.stack([path.real, path.imag])


class _Push:
    """Irregular displacement of a bob by the air: many sines with periods around the swing's, but not near it."""

    def __init__(self, rng: np.random.Generator, size: float, frequency: float) -> None:
        # Near its own frequency the bob would answer with a growing swing, which is the swing's business.
        slow, fast = rng.uniform(-1.8, -0.3, (2, 12)), rng.uniform(0.3, 1.4, (2, 12))
        self._frequency = frequency * np.exp(np.concatenate([slow, fast], axis=1))
        self._phase = rng.uniform(0.0, 2.0 * np.pi, self._frequency.shape)
        self._amplitude = size * np.sqrt(2.0 / self._frequency.shape[1])

    def at(self, time: Column) -> Vector:
        """Return the displacement at times [s], shape (2, n) [m]."""
        angle = self._frequency[:, :, None] * time + self._phase[:, :, None]
        pushed: Vector = self._amplitude * np.sum(np.sin(angle), axis=1)
        return pushed


class DropScene:
    """Bodies released one after the other; each leaves one mark where it is caught."""

    def __init__(self, assumptions: Assumptions, truth: Truth) -> None:
        depth = assumptions.shaft.depth
        levels = truth.levels or (round(depth / 3.0), round(2.0 * depth / 3.0), depth)
        self.levels = np.array(levels, dtype=float)
        self.interval = truth.drop_every
        self.count: int | None = truth.bodies * len(levels)
        self.duration = self.interval * truth.bodies * len(levels)
        self._site = assumptions
        self._truth = truth
        from eastfall.physics.models import Models  # noqa: PLC0415 (as above)

        models = Models.of(assumptions)
        there = models.body(float(self.levels.max())).at(self.levels)
        drift = np.array([[truth.rest_east], [truth.rest_north]])
        self.middle = np.stack([there.east, there.north]) - models.reference(self.levels) + drift
        """Middle of the marks at each level, against the run's reference line: east, north, shape (2, levels) [m]."""
        self._fall_time = there.time

    def sample(self, time: Column, rng: np.random.Generator) -> Columns:
        """Return depth and mark of the bodies released at times [s], level after level."""
        number = np.rint(time / self.interval).astype(int)
        level = np.minimum(number // self._truth.bodies, self.levels.shape[0] - 1)
        noise = rng.standard_normal((5, 2, time.shape[0]))
        body = self._site.body
        at_release = (body.u_release, body.u_release_speed) if body else (0.0, 0.0)
        spread = at_release[0] * noise[0] + at_release[1] * self._fall_time[level] * noise[1]
        east, north = self.middle[:, level] + spread + self._site.instrument.u_offset * noise[2]
        temperature = _temperature(self._site.air, self.levels[level])
        return _slow_channels(self._site.instrument, time, temperature, np.zeros_like(time), rng) | {
            "depth": self.levels[level] * (1.0 + self._truth.depth_scale),
            "east": east,
            "north": north,
            # A falling body feels no vertical: what its level shows is only how it tumbles.
            "tilt_a": np.radians(2.0) * noise[3, 0],
            "tilt_b": np.radians(2.0) * noise[3, 1],
        }
