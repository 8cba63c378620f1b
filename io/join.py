"""Several links on one clock: depth from the winch, tilt from the probe, joined by time; a missing partner is no guess.

The link that says tilts or offsets leads: its readings stay as they are. Each other link is a partner whose channels
are interpolated linearly at the instant at which the leading link's reading was taken. All instants are host times less
the link's stated latency, because the instruments' own clocks have nothing in common.

A leading reading waits until its partners have spoken at or after its instant. Where the two samples of a partner on
either side of it are more than `gap` apart, or there is none before it, the partner is missing: a depth then makes the
reading a counted fault, any other channel stays NaN and is counted. So the answer depends on the times alone, not on
how lines were cut into blocks or in which order the links' blocks came.

A bad line of any link waits likewise until every reading that came before it has gone on: what follows from it (when
lines cannot be read too often) is dated by the reading before it, and that must not depend on the waiting.
"""

from collections.abc import Sequence
from dataclasses import dataclass, field
from math import inf

import numpy as np
from numpy.typing import NDArray

from eastfall.io.decoded import IGNORED, QUANTITIES
from eastfall.io.sitefile import LinkSettings
from eastfall.physics.errors import ParameterError
from eastfall.physics.readings import CHANNELS, Readings

GAP = 2.0
"""Longest time between two samples of a partner that is interpolated over [s] (common practice, no source)."""
HELD = 1 << 17
"""Readings that wait, and samples that are kept, for each link at most; beyond it the oldest go."""
NO_DEPTH = "depth missing"
NO_PARTNER = "partner missing"

_SIDEWAYS = frozenset({"tilt_a", "tilt_b", "east", "north"})
_TURN = 2.0 * np.pi
_NO_TIMES = np.empty(0)

Column = NDArray[np.float64]


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Joined:
    """What can be said now."""

    readings: Readings
    rejected: Column = field(default_factory=lambda: _NO_TIMES)
    """Host times of bad lines, and of leading readings without a depth, that no earlier reading can follow [s]."""
    missing: int = 0
    """Leading readings that had no depth; they are counted faults."""
    bare: int = 0
    """Readings that are handed on without some channel of a partner."""


class Join:
    """Joins the readings of a site's links.

    Parameters
    ----------
    links : sequence of LinkSettings
        In the order of the site file; their `columns` say which channels each one speaks.
    gap : float
        See the module [s].

    Raises
    ------
    ParameterError
        Not exactly one link says tilts or offsets, or two links say the same channel.
    """

    def __init__(self, links: Sequence[LinkSettings], gap: float = GAP) -> None:
        spoken = [_channels(one) for one in links]
        self._leader = _leader_of(spoken)
        self._gap = gap
        self._partners = {
            index: _Partner([one for one in CHANNELS if one in channels], links[index].latency)
            for index, channels in enumerate(spoken)
            if index != self._leader
        }
        self._latency = links[self._leader].latency if links else 0.0
        self._waiting = Readings.none()
        self._bad = _NO_TIMES
        self._heard = -inf

    @property
    def pending(self) -> int:
        """Leading readings that wait for a partner."""
        return len(self._waiting)

    @property
    def oldest(self) -> float:
        """Host time of the first leading reading that waits [s]; infinite if none does."""
        return float(self._waiting.host_time[0]) if len(self._waiting) else inf

    def push(self, link: int, readings: Readings, rejected: Column = _NO_TIMES) -> Joined:
        """Take readings of one link; return what is complete.

        Parameters
        ----------
        link : int
            Which link they are from.
        readings : Readings
            In the order of arrival.
        rejected : ndarray
            Host times of the link's bad lines among them [s].
        """
        if not self._partners:
            return Joined(readings=readings, rejected=rejected)
        if rejected.size:
            self._bad = np.concatenate([self._bad, rejected])
        if link != self._leader:
            self._partners[link].add(readings)
        elif len(readings):
            self._waiting = Readings.joined([self._waiting, readings])
            self._heard = max(self._heard, float(readings.host_time[-1]))
        spoken = min(one.latest for one in self._partners.values())
        ready = int(np.searchsorted(self._instants(), spoken, side="right"))
        return self._complete(max(ready, len(self._waiting) - HELD))

    def tick(self, host_time: float) -> Joined:
        """Give up waiting where no sample that can still come would be near enough.

        Parameters
        ----------
        host_time : float
            Now [s]; every line that arrived before has been pushed.
        """
        if not self._partners:
            return Joined(readings=Readings.none())
        self._heard = max(self._heard, host_time)
        slowest = max(one.latency for one in self._partners.values())
        late = np.searchsorted(self._instants(), host_time - slowest - self._gap, side="left")
        return self._complete(int(late))

    def close(self) -> Joined:
        """End: what still waits goes without its partners."""
        self._heard = inf
        return self._complete(len(self._waiting))

    def _instants(self) -> Column:
        return self._waiting.host_time - self._latency

    def _complete(self, count: int) -> Joined:
        """Take the first `count` waiting readings and give them their partners' channels."""
        if count <= 0:
            return Joined(readings=Readings.none(), rejected=self._settled())
        instants = self._instants()[:count]
        data = self._waiting.data[:, :count].copy()
        self._waiting = self._waiting[count:]
        kept, bare = np.ones(count, dtype=bool), np.zeros(count, dtype=bool)
        for partner in self._partners.values():
            found = partner.at(instants, self._gap)
            for name, values in found.items():
                data[CHANNELS.index(name)] = values
            lacking = partner.lacking(instants, self._gap)
            if "depth" in found:
                kept &= ~lacking
            else:
                bare |= lacking
        if not kept.all():
            self._bad = np.concatenate([self._bad, data[CHANNELS.index("host_time"), ~kept]])
        return Joined(
            readings=Readings(data[:, kept]),
            rejected=self._settled(),
            missing=count - int(np.count_nonzero(kept)),
            bare=int(np.count_nonzero(bare & kept)),
        )

    def _settled(self) -> Column:
        """Take out the bad lines that no reading from before them can follow any more."""
        if not self._bad.size:
            return _NO_TIMES
        bad = np.sort(self._bad)
        count = int(np.searchsorted(bad, min(self.oldest, self._heard), side="left"))
        count = max(count, bad.size - HELD) if self._heard < inf else bad.size
        self._bad = bad[count:]
        return bad[:count]


def _channels(settings: LinkSettings) -> frozenset[str]:
    names = frozenset(QUANTITIES[name].channel for name in settings.columns if name != IGNORED)
    return names - {"time"}


def _leader_of(spoken: Sequence[frozenset[str]]) -> int:
    leading = [index for index, channels in enumerate(spoken) if channels & _SIDEWAYS]
    if len(spoken) <= 1:
        return 0
    if len(leading) != 1:
        raise ParameterError("link.columns", len(leading), "links with tilts or offsets", "exactly one link")
    for name in CHANNELS:
        if sum(name in channels for channels in spoken) > 1:
            raise ParameterError(
                "link.columns", name, "on more than one link", 'one link; "-" for it on the others'
            )
    return leading[0]


class _Partner:
    """The samples of one partner that may still be needed."""

    def __init__(self, names: Sequence[str], latency: float) -> None:
        self.latency = latency
        self._names = tuple(names)
        self._rows = [CHANNELS.index(name) for name in names]
        self._times = np.empty(0)
        self._values = np.empty((len(self._rows), 0))

    @property
    def latest(self) -> float:
        """The instant of the newest sample [s]."""
        return float(self._times[-1]) if self._times.size else -np.inf

    def add(self, readings: Readings) -> None:
        """Take samples."""
        self._times = np.concatenate([self._times, readings.host_time - self.latency])[-HELD:]
        self._values = np.concatenate([self._values, readings.data[self._rows]], axis=1)[:, -HELD:]

    def _around(self, instants: Column) -> tuple[NDArray[np.intp], NDArray[np.intp]]:
        """Return the samples before, and at or after, each instant; -1 and the number of samples where there is none.

        Of samples with one time the first counts after an instant and the last before it: what comes later with a
        time that is already there changes nothing.
        """
        after = np.searchsorted(self._times, instants, side="left")
        return after - 1, after

    def lacking(self, instants: Column, gap: float) -> NDArray[np.bool_]:
        """Return whether there is nothing near enough at each instant; forgets what is no longer needed."""
        before, after = self._around(instants)
        times = np.concatenate(
            [self._times, [np.inf, -np.inf]]
        )  # after the last, before the first (index -1)
        exact = times[after] == instants
        lacking: NDArray[np.bool_] = ~exact & (times[after] - times[before] > gap)
        self._forget(int(before[-1]))
        return lacking

    def _forget(self, first: int) -> None:
        if first > 0:
            self._times, self._values = self._times[first:], self._values[:, first:]

    def at(self, instants: Column, gap: float) -> dict[str, Column]:
        """Return each channel at the instants; NaN where the samples around are too far apart."""
        before, after = self._around(instants)
        times = np.concatenate([self._times, [np.inf, -np.inf]])
        with np.errstate(invalid="ignore"):
            share = (instants - times[before]) / (times[after] - times[before])
        apart = times[after] - times[before]
        share = np.where(times[after] == instants, 1.0, np.where(apart <= gap, share, np.nan))
        nothing = np.full((len(self._rows), 2), np.nan)
        values = np.concatenate([self._values, nothing], axis=1)
        low, high = values[:, before], values[:, after]
        return {name: _between(name, low[row], high[row], share) for row, name in enumerate(self._names)}


def _between(name: str, low: Column, high: Column, share: Column) -> Column:
    """Interpolate one channel; an azimuth the short way round, a face not at all."""
    if name == "face":
        return np.where(share == 1.0, high, np.where(np.isnan(share), np.nan, low))
    step = high - low
    if name == "azimuth":
        step = (step + np.pi) % _TURN - np.pi
    mixed = low + share * step
    return np.where(share == 1.0, high, mixed)  # an exact hit needs no sample before it
