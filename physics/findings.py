"""What the engine says: rows, stations, alarm changes and the standing answer, as frozen records in SI units."""

from dataclasses import dataclass
from math import nan
from typing import Literal

import numpy as np
from numpy.typing import NDArray

Verdict = Literal["within", "over", "undecided"]
Pass = Literal["down", "up"]

ROW_FIELDS = (
    "time",  # on the clock of the instrument's lines, or of their arrival where they carry none [s]
    "depth",  # [m]
    "speed",  # of the line [m/s], down positive
    "passing",  # number of the pass, from 0; even down, odd up when the run starts downward
    "direction",  # +1 down, -1 up
    "measured_east",  # [m]
    "measured_north",
    "expected_east",
    "expected_north",
    "u_east",  # standard uncertainty of the residual [m]
    "u_north",
    "warning",  # limit in force at that depth [m]
    "action",
    "host_time",  # of the arrival, on this machine's clock, from the start of the run [s]
)
_ROW = {name: row for row, name in enumerate(ROW_FIELDS)}


@dataclass(frozen=True, slots=True, eq=False)
class Rows:
    """Findings of single readings.

    Parameters
    ----------
    data : ndarray, shape (len(ROW_FIELDS), n)
        One row a field, in the order of `ROW_FIELDS`.
    """

    data: NDArray[np.float64]

    @classmethod
    def none(cls) -> "Rows":
        """Return an empty block."""
        return cls(np.empty((len(ROW_FIELDS), 0)))

    def __len__(self) -> int:
        return self.data.shape[1]

    def column(self, name: str) -> NDArray[np.float64]:
        """Return one field, shape (n,), in SI units."""
        return self.data[_ROW[name]]

    @property
    def residual_east(self) -> NDArray[np.float64]:
        """Measured less expected [m]."""
        return self.column("measured_east") - self.column("expected_east")

    @property
    def residual_north(self) -> NDArray[np.float64]:
        """Measured less expected [m]."""
        return self.column("measured_north") - self.column("expected_north")


@dataclass(frozen=True, slots=True, kw_only=True)
class Share:
    """One input's part of an uncertainty, as a standard uncertainty [m]."""

    name: str
    east: float
    north: float


@dataclass(frozen=True, slots=True, kw_only=True)
class Halt:
    """What a probe showed while it rested: robust mean of its slope, scatter of single readings, both in m/m."""

    east: float
    north: float
    scatter_east: float
    scatter_north: float
    seconds: float


@dataclass(frozen=True, slots=True, kw_only=True)
class Station:
    """A closed station: measured, expected, and what follows; lengths in metres, offsets east and north."""

    number: int
    depth: float
    passing: int
    direction: Pass
    time: float
    measured_east: float
    measured_north: float
    expected_east: float
    expected_north: float
    u_east: float
    u_north: float
    warning: float
    action: float
    verdict: Verdict
    readings: int
    still: bool
    """Closed from readings at rest (True) or taken in passing (False)."""
    inputs: tuple[str, ...] = ()
    """What the uncertainty comes from."""
    parts: tuple[tuple[float, float], ...] = ()
    """Standard uncertainty from each input alone, east and north [m]; where one cause moves both, with its signs."""
    correlations: tuple[float, ...] = ()
    """Of the two parts of each input: 1 of one cause, 0 of two independent ones; none given is 0 of all."""
    covariance: float = 0.0
    """Of residual east and north [m²]."""
    halt: Halt | None = None
    """The readings at rest that a still station was closed from."""
    face: float | None = None
    """In which face the probe was, 0 or pi [rad]; None where the readings do not say."""
    lean: float | None = None
    """Length of the residual's change from the station before in the same pass, a metre of depth [m/m]."""
    u_lean: float | None = None
    lean_verdict: Verdict | None = None
    clearance: float | None = None
    """From where this station is to the shaft wall [m]."""
    u_clearance: float | None = None
    clearance_verdict: Verdict | None = None
    spread_east: float | None = None
    spread_north: float | None = None
    """Of single bodies about their mean: standard deviation of the marks at a level [m]; None for other stations."""

    @property
    def residual_east(self) -> float:
        """Measured less expected [m]."""
        return self.measured_east - self.expected_east

    @property
    def residual_north(self) -> float:
        """Measured less expected [m]."""
        return self.measured_north - self.expected_north

    @property
    def shares(self) -> tuple[Share, ...]:
        """The budget of `u_east` and `u_north`: inputs that matter, largest first."""
        named = zip(self.inputs, self.parts, strict=True)
        found = [
            Share(name=name, east=abs(east), north=abs(north))
            for name, (east, north) in named
            if east or north
        ]
        return tuple(sorted(found, key=lambda one: -(one.east**2 + one.north**2)))


@dataclass(frozen=True, slots=True, kw_only=True)
class AlarmChange:
    """One transition of one alarm."""

    time: float
    """On the clock of the readings: the instrument's, where its lines carry a time [s]."""
    depth: float
    name: str
    old: str
    new: str
    message: str = ""
    """What it is about, in words with numbers and units."""
    host_time: float = nan
    """The same instant on this machine's clock, from the start of the run [s]."""


@dataclass(frozen=True, slots=True, kw_only=True)
class Closure:
    """What the sum shows where the up pass ends, against the down pass there."""

    depth: float
    east: float
    north: float
    expected_east: float
    expected_north: float
    """What the moving line alone would leave."""

    @property
    def misclosure_east(self) -> float:
        """What the moving line does not explain [m]."""
        return self.east - self.expected_east

    @property
    def misclosure_north(self) -> float:
        """What the moving line does not explain [m]."""
        return self.north - self.expected_north


@dataclass(frozen=True, slots=True, kw_only=True)
class FaceSums:
    """Readings in two faces, paired by depth; one entry a depth, angles in radians."""

    depth: tuple[float, ...]
    sum_a: tuple[float, ...]
    sum_b: tuple[float, ...]
    """Reading in face 0 plus reading in face 180, freed from the lean of the moving line and the stated zeros."""
    suspect: tuple[bool, ...]
    """Whether either sum stands apart from the others."""
    mean_a: float
    mean_b: float
    spread_a: float
    spread_b: float
    zero_a: float
    zero_b: float
    """What is left of the zero offsets after the stated ones [rad]; NaN from fewer than two good pairs."""
    u_zero_a: float
    u_zero_b: float
    unpaired: int
    """Depths seen in one face only."""

    @property
    def suspect_depths(self) -> tuple[float, ...]:
        """Depths whose sums stand apart [m]."""
        return tuple(z for z, one in zip(self.depth, self.suspect, strict=True) if one)


@dataclass(frozen=True, slots=True, kw_only=True)
class Best:
    """The best estimate of the residual at a depth from all passes and a known end; lengths in metres."""

    depth: float
    east: float
    north: float
    u_east: float
    u_north: float
    warning: float
    action: float
    verdict: Verdict
    passes: int
    apart_east: float
    apart_north: float
    """Up pass, tied at the shallowest common station, less down pass; 0 from one pass."""
    tied: bool
    """Whether the misclosure at a known end was distributed over depth."""
    inputs: tuple[str, ...] = ()
    parts: tuple[tuple[float, float], ...] = ()
    """Standard uncertainty from each input alone, east and north [m]; where one cause moves both, with its signs."""
    covariance: float = 0.0
    """Of residual east and north [m²]."""


@dataclass(frozen=True, slots=True, kw_only=True)
class RestPoint:
    """Where a swinging bob would come to rest, as the swing shows it."""

    east: float
    north: float
    u_east: float
    u_north: float
    covariance_east_north: float
    period: float
    decay: float
    """Time for the swing to fall to 1/e [s]."""
    swings: float
    """Full swings seen."""
    fits: bool
    message: str = ""
    u_period: float = nan
    free_period: float = nan
    """Of a free line of this length and weight [s]; NaN where the length is not known."""
    amplitude: float = nan
    """Of the newest swing, to each side [m]."""
    width: float = nan
    """Half of the narrow way across its ellipse [m]; negative for a clockwise bob."""
    swings_needed: float = nan
    """Full swings in all after which both expanded uncertainties should be under 0.5 mm."""
    schuler_east: float = nan
    schuler_north: float = nan
    """Schuler mean of the turning points, the check on paper [m]."""


@dataclass(frozen=True, slots=True, kw_only=True)
class Standing:
    """The answer as it stands now."""

    time: float
    depth: float
    speed: float
    passing: int
    direction: Pass
    measured_east: float
    measured_north: float
    expected_east: float
    expected_north: float
    u_east: float
    u_north: float
    warning: float
    action: float
    verdict: Verdict
    rest_point: RestPoint | None
    hold_still: float | None
    """Seconds still to wait for a still station to close; None when moving or closed."""
    wall_clearance: float | None
    frames: int
    """Readings used so far."""
    notes: tuple[str, ...] = ()
    """What a reader must know of the answer: outside the model, line touching, air."""
    covariance: float = 0.0
    """Of residual east and north [m²]."""

    @property
    def residual_east(self) -> float:
        """Measured less expected [m]."""
        return self.measured_east - self.expected_east

    @property
    def residual_north(self) -> float:
        """Measured less expected [m]."""
        return self.measured_north - self.expected_north


@dataclass(frozen=True, slots=True, kw_only=True)
class AlarmView:
    """One alarm as the screen lists it."""

    name: str
    state: str
    since: float
    """On this machine's clock, from the start of the run [s]."""
    depth: float
    message: str


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Findings:
    """What one block of readings, or the passing of time, brought."""

    rows: Rows
    stations: tuple[Station, ...] = ()
    alarms: tuple[AlarmChange, ...] = ()


@dataclass(frozen=True, slots=True, kw_only=True)
class Result:
    """The whole run."""

    frames: int
    stations: tuple[Station, ...]
    alarms: tuple[AlarmChange, ...]
    closure: Closure | None
    rest_point: RestPoint | None
    faces: FaceSums | None = None
    best: tuple[Best, ...] = ()
    """By depth; empty where one pass without a known end is all there is."""
    notes: tuple[str, ...] = ()
    """What a reader must know of the answer."""
