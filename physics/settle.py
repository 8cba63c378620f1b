"""What would settle an undecided verdict: more readings, or a better known input; the words are the screen's."""

from dataclasses import dataclass
from math import ceil, sqrt
from typing import Protocol

from eastfall.physics.budget import COVERAGE_FACTOR
from eastfall.physics.kinds.base import BY_READINGS
from eastfall.physics.verdict import direction, horizontal


class _Decided(Protocol):
    @property
    def residual_east(self) -> float: ...
    @property
    def residual_north(self) -> float: ...
    @property
    def u_east(self) -> float: ...
    @property
    def u_north(self) -> float: ...
    @property
    def covariance(self) -> float: ...
    @property
    def action(self) -> float: ...
    @property
    def readings(self) -> int: ...
    @property
    def inputs(self) -> tuple[str, ...]: ...
    @property
    def parts(self) -> tuple[tuple[float, float], ...]: ...
    @property
    def correlations(self) -> tuple[float, ...]: ...


@dataclass(frozen=True, slots=True, kw_only=True)
class Remedy:
    """One input that alone would decide.

    Parameters
    ----------
    name : str
        As in the budget.
    present, needed : float
        Its part of the uncertainty of the residual's length, now and for a decision [m].
    """

    name: str
    present: float
    needed: float

    @property
    def factor(self) -> float:
        """By what its standard uncertainty must be multiplied, below 1."""
        return self.needed / self.present


@dataclass(frozen=True, slots=True, kw_only=True)
class Settling:
    """What would decide.

    Parameters
    ----------
    u, u_needed : float
        Standard uncertainty of the residual's length, now and for a decision [m]; 0 needed where it lies on the limit.
    more_readings : int or None
        So many besides those there are, taken alike; None where no number of them would do.
    remedies : tuple of Remedy
        Inputs of which any one would do, the least effort first.
    leans_to : {"within", "over"}
        What it would most likely turn out to be.
    """

    u: float
    u_needed: float
    more_readings: int | None
    remedies: tuple[Remedy, ...]
    leans_to: str


def settle(station: _Decided) -> Settling | None:
    """Say what would settle a station's verdict against its action limit.

    Parameters
    ----------
    station : Station
        Or anything that has its residual, budget and limit.

    Returns
    -------
    Settling or None
        None where the verdict is not undecided, or cannot be told (NaN).

    Notes
    -----
    With the guard band 2u (see `verdict`) a length r is decided against a limit T once u ≤ |T - r|/2. The residual
    is taken to stay where it is; a part p_i of u² = Σ p_i² (along the residual) alone decides if it can be brought to
    √((T - r)²/4 - u² + p_i²).
    """
    length, u = (float(one) for one in horizontal(*_of(station)))
    needed = abs(station.action - length) / COVERAGE_FACTOR
    if not u > needed:
        return None
    parts = _along(station)
    found = []
    for name, part in parts.items():
        room = needed**2 - (u**2 - part**2)
        # Rounding of the squares: what is left beside one input is never taken for room.
        if part > 0.0 and room > 1e-12 * u**2:
            found.append(Remedy(name=name, present=part, needed=sqrt(room)))
    return Settling(
        u=u,
        u_needed=needed,
        more_readings=_more(station, parts, u, needed),
        remedies=tuple(sorted(found, key=lambda one: -one.factor)),
        leans_to="within" if length <= station.action else "over",
    )


def _of(station: _Decided) -> tuple[float, float, float, float, float]:
    return (
        station.residual_east,
        station.residual_north,
        station.u_east,
        station.u_north,
        station.covariance,
    )


def _along(station: _Decided) -> dict[str, float]:
    """Return each input's part of the uncertainty of the length [m]."""
    toward_east, toward_north = direction(*_of(station))
    correlations = station.correlations or (0.0,) * len(station.inputs)
    found = {}
    for name, part, together in zip(station.inputs, station.parts, correlations, strict=True):
        east, north = toward_east * part[0], toward_north * part[1]
        found[name] = sqrt(max(east**2 + north**2 + 2.0 * together * east * north, 0.0))
    return found


def _more(station: _Decided, parts: dict[str, float], u: float, needed: float) -> int | None:
    random = sum(part**2 for name, part in parts.items() if name in BY_READINGS)
    room = needed**2 - (u**2 - random)
    if random <= 0.0 or room <= 1e-12 * u**2:
        return None
    return ceil(station.readings * (random / room - 1.0))
