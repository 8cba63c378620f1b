"""The hidden truth of an emulated shaft: how its guide really runs, where its line really rests, what errs unseen.

How that looks to an instrument is `io.scenes`; nothing here is ever shown to the program under test.
"""

from dataclasses import asdict, dataclass, replace

import numpy as np
from numpy.typing import ArrayLike, NDArray

from eastfall.physics.errors import ParameterError
from eastfall.physics.settings import Assumptions

Vector = NDArray[np.float64]
"""Shape (2, n): east, north."""


def _refuse_unless(ok: bool, name: str, value: object, expected: str) -> None:
    if not ok:
        raise ParameterError(name, value, "", expected)


@dataclass(frozen=True, slots=True, kw_only=True)
class Wave:
    """A slow wander of the guide: a sine over depth."""

    wavelength: float
    """[m]."""
    phase: float = 0.0
    """At the collar [rad]."""
    east: float = 0.0
    """Amplitude [m]."""
    north: float = 0.0

    def __post_init__(self) -> None:
        _refuse_unless(self.wavelength > 0.0, "wavelength", self.wavelength, "more than 0 m")


@dataclass(frozen=True, slots=True, kw_only=True)
class Bulge:
    """A place where the guide stands out and comes back: a bell over depth."""

    depth: float
    """Of its top [m]."""
    width: float
    """From the top to where the bell has fallen to 0.61 of it [m]."""
    east: float = 0.0
    """Height [m]."""
    north: float = 0.0

    def __post_init__(self) -> None:
        _refuse_unless(self.width > 0.0, "width", self.width, "more than 0 m")


@dataclass(frozen=True, slots=True, kw_only=True)
class Bend:
    """A place from which the guide runs on with another slope."""

    depth: float
    """Of its middle [m]."""
    width: float
    """Scale of the transition [m]."""
    east: float = 0.0
    """Change of slope [m/m]."""
    north: float = 0.0

    def __post_init__(self) -> None:
        _refuse_unless(self.width > 0.0, "width", self.width, "more than 0 m")


@dataclass(frozen=True, slots=True, kw_only=True)
class Truth:
    """What is really so in an emulated shaft; everything that is not given is perfect.

    Offsets are (east, north) against the straight vertical through the reference point at the collar.
    """

    lean_east: float = 0.0
    """Slope of the whole guide [m/m]."""
    lean_north: float = 0.0
    waves: tuple[Wave, ...] = ()
    bulges: tuple[Bulge, ...] = ()
    bends: tuple[Bend, ...] = ()

    rest_east: float = 0.0
    """Where a hung bob rests, or the middle of the drops lies, beyond what is expected [m]."""
    rest_north: float = 0.0
    swing_major: float = 0.0
    """Half axes of the swing when the run starts [m]; a negative minor axis runs clockwise seen from above."""
    swing_minor: float = 0.0
    swing_azimuth: float = 0.0
    """Of the major axis, clockwise from north [rad]."""
    decay: float = 3600.0
    """Time for the swing to fall to 1/e [s]."""
    air_push: float = 0.0
    """Slow irregular push of the air on a hung bob, root mean square of each coordinate [m]."""

    levels: tuple[float, ...] = ()
    """Where dropped bodies are caught and their marks read [m]; empty: shaft depth and two levels above."""
    bodies: int = 12
    """Dropped to each level."""
    drop_every: float = 6.0
    """Time from one body to the next [s]."""

    zero_a: float = 0.0
    """Error of the instrument beyond what the site states: zero [rad]."""
    zero_b: float = 0.0
    scale_a: float = 0.0
    """Relative."""
    scale_b: float = 0.0
    azimuth: float = 0.0
    """[rad]."""
    depth_scale: float = 0.0
    """Relative: positive makes the encoder show too much."""
    noise: float | None = None
    """Random error of one tilt [rad]; None: as the site states."""

    def __post_init__(self) -> None:
        _refuse_unless(self.decay > 0.0, "decay", self.decay, "more than 0 s")
        _refuse_unless(self.drop_every > 0.0, "drop_every", self.drop_every, "more than 0 s")
        _refuse_unless(self.bodies > 0, "bodies", self.bodies, "1 or more")

    def offset(self, depth: ArrayLike) -> Vector:
        """Return where the guide is, shape (2, n) [m]; (0, 0) at the collar."""
        z = np.atleast_1d(np.asarray(depth, dtype=float))
        shape = sum((_wave(one, z, 0) - _wave(one, np.zeros(1), 0) for one in self.waves), self._lean * z)
        for bulge in self.bulges:
            shape = shape + _bulge(bulge, z, 0) - _bulge(bulge, np.zeros(1), 0)
        for bend in self.bends:
            shape = shape + _bend(bend, z, 0) - _bend(bend, np.zeros(1), 0)
        return shape

    def slope(self, depth: ArrayLike) -> Vector:
        """Return the guide's slope, shape (2, n) [m/m], positive where the lower end leans east, north."""
        return self._derivative(np.atleast_1d(np.asarray(depth, dtype=float)), 1)

    def curvature(self, depth: ArrayLike) -> Vector:
        """Return the change of the guide's slope with depth, shape (2, n) [1/m]."""
        return self._derivative(np.atleast_1d(np.asarray(depth, dtype=float)), 2)

    def _derivative(self, z: NDArray[np.float64], order: int) -> Vector:
        start = self._lean * np.ones_like(z) if order == 1 else np.zeros((2, z.shape[0]))
        shape = sum((_wave(one, z, order) for one in self.waves), start)
        shape = sum((_bulge(one, z, order) for one in self.bulges), shape)
        return sum((_bend(one, z, order) for one in self.bends), shape)

    @property
    def _lean(self) -> Vector:
        return np.array([[self.lean_east], [self.lean_north]])

    def as_dict(self) -> dict[str, object]:
        """Return everything as plain values in SI units and radians, for a report."""
        return asdict(self)


def _wave(wave: Wave, z: NDArray[np.float64], order: int) -> Vector:
    k = 2.0 * np.pi / wave.wavelength
    # Each derivative of a sine is k times the sine a quarter turn ahead.
    value = k**order * np.sin(k * z + wave.phase + order * np.pi / 2.0)
    return np.outer([wave.east, wave.north], value)


def _bulge(bulge: Bulge, z: NDArray[np.float64], order: int) -> Vector:
    x = (z - bulge.depth) / bulge.width
    factor = (np.ones_like(x), -x / bulge.width, (x**2 - 1.0) / bulge.width**2)[order]
    return np.outer([bulge.east, bulge.north], factor * np.exp(-0.5 * x**2))


def _bend(bend: Bend, z: NDArray[np.float64], order: int) -> Vector:
    x = (z - bend.depth) / bend.width
    step = 0.5 * (1.0 + np.tanh(0.5 * x))  # the logistic step, safe for large |x|
    value = (bend.width * np.logaddexp(0.0, x), step, step * (1.0 - step) / bend.width)[order]
    return np.outer([bend.east, bend.north], value)


def draw_truth(assumptions: Assumptions, seed: int, *, errors: bool = False) -> Truth:
    """Draw a truth that is in keeping with a site: offsets of about the warning limit, errors as uncertain as stated.

    Parameters
    ----------
    assumptions : Assumptions
        The site as the program knows it.
    seed : int
        The same seed gives the same truth; 0 or more.
    errors : bool
        Whether the instrument errs beyond what the site states, by draws from its standard uncertainties.

    Returns
    -------
    Truth
    """
    _refuse_unless(seed >= 0, "seed", seed, "0 or more")
    rng = np.random.default_rng([seed, 1])
    truth = _with_swing(_drawn_shape(assumptions, rng), assumptions, rng)
    return _with_errors(truth, assumptions, rng) if errors else truth


def _drawn_shape(assumptions: Assumptions, rng: np.random.Generator) -> Truth:
    depth, size = assumptions.shaft.depth, assumptions.limits.warning
    toward, across = rng.uniform(0.0, 2.0 * np.pi, 2)
    east, north = float(np.sin(toward)), float(np.cos(toward))
    lean = 0.6 * size / depth
    wave = Wave(
        wavelength=depth / rng.uniform(2.5, 4.0),
        phase=rng.uniform(0.0, 2.0 * np.pi),
        east=0.1 * size * float(np.sin(across)),
        north=0.1 * size * float(np.cos(across)),
    )
    top = rng.uniform(0.55, 0.65) * depth
    bulge = Bulge(depth=top, width=0.09 * depth, east=0.9 * size * east, north=0.9 * size * north)
    bend = Bend(depth=0.75 * depth, width=0.03 * depth, east=-1.2 * lean * east, north=-1.2 * lean * north)
    return Truth(
        lean_east=lean * east, lean_north=lean * north, waves=(wave,), bulges=(bulge,), bends=(bend,)
    )


def _with_swing(truth: Truth, assumptions: Assumptions, rng: np.random.Generator) -> Truth:
    size = assumptions.limits.warning
    toward = rng.uniform(0.0, 2.0 * np.pi)
    return replace(
        truth,
        rest_east=0.5 * size * float(np.sin(toward)),
        rest_north=0.5 * size * float(np.cos(toward)),
        swing_major=rng.uniform(2.0, 4.0) * size,
        swing_minor=rng.uniform(-0.5, 0.5) * size,
        swing_azimuth=rng.uniform(0.0, 2.0 * np.pi),
        decay=rng.uniform(800.0, 2000.0),
        air_push=0.02 * size,
    )


def _with_errors(truth: Truth, assumptions: Assumptions, rng: np.random.Generator) -> Truth:
    probe = assumptions.instrument
    return replace(
        truth,
        zero_a=rng.normal(0.0, probe.u_zero),
        zero_b=rng.normal(0.0, probe.u_zero),
        scale_a=rng.normal(0.0, probe.u_scale),
        scale_b=rng.normal(0.0, probe.u_scale),
        azimuth=rng.normal(0.0, probe.u_azimuth),
        depth_scale=rng.normal(0.0, probe.u_depth_fraction),
    )
