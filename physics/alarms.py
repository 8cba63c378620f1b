"""Alarms: when a condition becomes one (delays, dead band) and what state it is in (the table); no clock of its own.

The words follow IEC 62682 (2022) and the open wording of IEC 62541-9: an alarm is acknowledged or not, its condition
stands or has returned, and it may be shelved for a stated time. Conditions are taken as held between samples, so the
instant at which a delay ends is known exactly and does not depend on when anybody looks.
"""

from collections.abc import Iterator
from dataclasses import dataclass, field
from math import inf
from typing import Literal

import numpy as np
from numpy.typing import NDArray

from eastfall.physics.errors import ParameterError

State = Literal["normal", "active", "acknowledged", "returned", "latched", "shelved"]
Event = Literal["raise", "return", "acknowledge", "shelve", "expire"]

TRANSITIONS: dict[tuple[State, Event], State] = {
    ("normal", "raise"): "active",
    ("normal", "shelve"): "shelved",
    ("active", "return"): "returned",
    ("active", "acknowledge"): "acknowledged",
    ("active", "shelve"): "shelved",
    ("acknowledged", "return"): "normal",
    ("acknowledged", "shelve"): "shelved",
    ("returned", "raise"): "active",
    ("returned", "acknowledge"): "normal",
    ("returned", "shelve"): "shelved",
    ("latched", "raise"): "active",
    ("latched", "acknowledge"): "normal",
    ("latched", "shelve"): "shelved",
    ("shelved", "expire"): "normal",
}
"""State and event to the next state; a pair that is not here changes nothing."""

LATCHING: dict[tuple[State, Event], State] = {
    ("active", "return"): "latched",
    ("acknowledged", "return"): "latched",
}
"""What differs for an alarm that must be dealt with by a person even after its condition has returned."""


@dataclass(frozen=True, slots=True, kw_only=True)
class Rule:
    """How one alarm is judged.

    Parameters
    ----------
    name : str
        In words, as it is shown.
    on_delay, off_delay : float
        For how long the condition must stand, or be gone, without a break [s].
    latching : bool
        Whether it stays until acknowledged after its condition has returned.
    """

    name: str
    on_delay: float = 0.0
    off_delay: float = 0.0
    latching: bool = False

    def __post_init__(self) -> None:
        for name in ("on_delay", "off_delay"):
            value = getattr(self, name)
            if not 0.0 <= value < inf:
                raise ParameterError(name, value, "s", "zero or more")


@dataclass(frozen=True, slots=True)
class Change:
    """A transition of one alarm at an instant [s]."""

    time: float
    old: State
    new: State


BEYOND, BETWEEN, INSIDE = 1, 0, -1
"""A sample against a limit: outside it, in its dead band, or inside limit less dead band."""


def against_limit(
    value: NDArray[np.float64], limit: NDArray[np.float64] | float, dead_band: float
) -> NDArray[np.int8]:
    """Place samples against a limit with a dead band inside it.

    Parameters
    ----------
    value, limit : ndarray or float
        Sample and limit, in one unit, broadcast.
    dead_band : float
        Width of the band just inside the limit, same unit, not negative.

    Returns
    -------
    ndarray of int8
        BEYOND, BETWEEN or INSIDE; a NaN sample is BETWEEN, which neither raises nor returns an alarm.
    """
    beyond = value > limit
    inside = value <= limit - dead_band
    return beyond.view(np.int8) - inside.view(np.int8)


@dataclass(slots=True)
class Alarm:
    """One alarm with its memory: what its samples said last, since when, and its state."""

    rule: Rule
    state: State = "normal"
    since: float = -inf
    standing: bool = False
    """Whether the condition counts as there, after the delays."""
    _sample: int = BETWEEN
    _run_start: float = -inf
    _shelved_until: float = inf
    _changes: list[Change] = field(default_factory=list)

    @property
    def idle(self) -> bool:
        """Whether a further sample inside the limit can change nothing."""
        return self._sample == INSIDE and not self.standing and self._shelved_until == inf

    def sample(self, time: NDArray[np.float64], placed: NDArray[np.int8]) -> list[Change]:
        """Take samples in time order and return the transitions that they settle.

        Parameters
        ----------
        time : ndarray, shape (n,)
            Instants [s], not falling.
        placed : ndarray of int8, shape (n,)
            From `against_limit`.
        """
        if not len(time):
            return []
        turns = np.flatnonzero(np.diff(placed)) + 1
        if placed[0] != self._sample:
            turns = np.concatenate(([0], turns))
        for at, new in zip(time[turns].tolist(), placed[turns].tolist(), strict=True):
            self._settle(at)
            self._sample = new
            self._run_start = at
        self._settle(float(time[-1]))
        return self._taken()

    def tick(self, time: float) -> list[Change]:
        """Let time pass with the last sample held; return the transitions settled up to `time` [s]."""
        self._settle(time)
        return self._taken()

    def set(self, time: float, *, on: bool) -> list[Change]:
        """Say that a condition stands (or is gone) from `time` [s] on."""
        return self.sample(np.array([time]), np.array([BEYOND if on else INSIDE], dtype=np.int8))

    def acknowledge(self, time: float) -> list[Change]:
        """Acknowledge; without effect where there is nothing to acknowledge."""
        self._settle(time)
        self._apply("acknowledge", time)
        return self._taken()

    def shelve(self, time: float, seconds: float) -> list[Change]:
        """Put aside for a stated number of seconds; when it expires a standing condition is raised anew."""
        if not 0.0 < seconds < inf:
            raise ParameterError("seconds", seconds, "s", "more than 0")
        self._settle(time)
        self._shelved_until = time + seconds
        self._apply("shelve", time)
        return self._taken()

    def _settle(self, until: float) -> None:
        """Carry out what falls due up to an instant, in the order in which it falls due."""
        for due, what in iter(lambda: self._next_due(until), None):
            if what == "expire":
                self._shelved_until = inf
                self._apply("expire", due)
                if self.standing:
                    self._apply("raise", due)
            else:
                self.standing = what == "raise"
                self._apply(what, due)

    def _next_due(self, until: float) -> tuple[float, Event] | None:
        due = [one for one in self._pending() if one[0] <= until]
        return min(due, key=lambda one: one[0]) if due else None

    def _pending(self) -> Iterator[tuple[float, Event]]:
        if self._sample == BEYOND and not self.standing:
            yield self._run_start + self.rule.on_delay, "raise"
        if self._sample == INSIDE and self.standing:
            yield self._run_start + self.rule.off_delay, "return"
        if self._shelved_until < inf:
            yield self._shelved_until, "expire"

    def _apply(self, event: Event, time: float) -> None:
        new = TRANSITIONS.get((self.state, event), self.state)
        if self.rule.latching:
            new = LATCHING.get((self.state, event), new)
        if new != self.state:
            self._changes.append(Change(time, self.state, new))
            self.state, self.since = new, time

    def _taken(self) -> list[Change]:
        taken, self._changes = self._changes, []
        return taken
