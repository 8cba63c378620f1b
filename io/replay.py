"""A recorded run played again at any pace, also while another process records it; what it shows is the live run's.

Arrivals go through the same pipeline in the order of the file. `advance` cuts them at an instant of the recording and
lets time pass to it, so what stands on the screen is what stood there live; the pace is the caller's.
"""

from collections import Counter, deque
from math import inf, nan
from pathlib import Path
from types import MappingProxyType

import numpy as np

from eastfall.io.arrivals import TOLD, Arrival, LineBlock, RunEvent
from eastfall.io.logreader import LogReader
from eastfall.io.logtail import last_time
from eastfall.io.recording import Recording, open_recording
from eastfall.io.replayindex import Index, Mark, build_index, changed_in, split
from eastfall.io.run import Health, LinkHealth, RunUpdate
from eastfall.io.safetext import safe
from eastfall.io.sitefile import SiteFile
from eastfall.io.whatif import Difference
from eastfall.physics.findings import Findings

__all__ = ["Index", "Mark", "Replay"]

_RATE_OVER = 5.0
"""The rate of a link is that of the last few seconds [s]."""


class Replay:
    """One recording, from its start.

    Parameters
    ----------
    path : Path
        A run log (any part of it), or a capture.
    site : SiteFile, optional
        Other settings than the recorded ones: what if. The recording itself is only ever read.
    interval : float, optional
        Time between the lines of a capture without a clock [s].
    follow : bool
        Whether another process may still be writing the log: then its end is not the end of the run until the log
        says so.

    Raises
    ------
    LogError, CaptureError, SiteFileError
        The file cannot be used.

    Attributes
    ----------
    time : float
        Where the replay stands, from the start of the run [s].
    restarts : int
        How often it went back. After that, findings are those from the start of the run: a picture starts anew.
    on_the_way : bool
        Whether the last step stopped before its end, because it had played as many lines as it was to.
    """

    def __init__(
        self,
        path: Path,
        site: SiteFile | None = None,
        *,
        interval: float | None = None,
        follow: bool = False,
    ) -> None:
        self.recording: Recording = open_recording(path, site, interval)
        self.follow = follow and self.recording.is_log
        self.restarts = -1
        self._index: Index | None = None
        self._duration = last_time(path) if self.recording.is_log else self._length_of_capture()
        self._source = self.recording.source()
        self._restart()

    def _length_of_capture(self) -> float:
        source = self.recording.source()
        for _ in source:
            pass
        source.close()
        return source.last_time

    def _restart(self) -> None:
        self._source.close()
        self._source = self.recording.source()
        self.pipeline = self.recording.pipeline()
        self._waiting: deque[Arrival] = deque()
        self._lines: Counter[int] = Counter()
        self._recent: dict[int, deque[tuple[float, int]]] = {}
        self._closed = False
        self.on_the_way = False
        self.time = 0.0
        self.restarts += 1

    @property
    def site(self) -> SiteFile:
        """The settings in use."""
        return self.recording.site

    @property
    def differences(self) -> tuple[Difference, ...]:
        """Where they are not the recorded ones."""
        return self.recording.differences

    @property
    def duration(self) -> float:
        """Last time of the recording so far [s]."""
        return max(self._duration, self._source.last_time)

    @property
    def changed(self) -> str:
        """In what the record is not as it was written, once all of it was read; empty if it is."""
        if self._index is not None:
            return self._index.changed
        return changed_in(self._source) if self._closed else ""

    @property
    def ended(self) -> bool:
        """Whether everything was played and the run is closed."""
        return self._closed

    @property
    def index(self) -> Index:
        """What can be jumped to; made at the first call by a pass over the whole recording."""
        if self._index is None:
            self._index = build_index(self.recording)
        return self._index

    def advance(self, to_time: float, *, most: float = inf) -> RunUpdate:
        """Play up to an instant.

        Parameters
        ----------
        to_time : float
            [s]; an instant before `time` plays nothing.
        most : float
            Lines after which to stop on the way (see `on_the_way`), so that a jump over a long recording needs no more
            memory than one over a short one; the same call again goes on.

        Returns
        -------
        RunUpdate
            What it brought; at the end of the recording the run is closed.
        """
        to_time = max(to_time, self.time)
        found = self._play(to_time, most)
        if self.on_the_way:
            return self._update(found)
        if not self._closed and self._all_played() and to_time >= self.duration:
            self._closed = True
            found.append(self.pipeline.close(self._source.last_time if self.recording.is_log else nan))
            to_time = self.duration
        elif not self._closed and self.recording.is_log:
            found.append(self.pipeline.tick(to_time))
        self.time = min(to_time, self.duration) if self._closed or not self.follow else to_time
        return self._update(found)

    def _play(self, until: float, most: float) -> list[Findings]:
        """Take what came by an instant, or the first `most` lines of it."""
        found: list[Findings] = []
        taken = 0
        while taken < most and (arrival := self._next(until)) is not None:
            found.append(self._take(arrival))
            taken += len(arrival) if isinstance(arrival, LineBlock) else 0
        self.on_the_way = taken >= most and self._peek() is not None and self._next_instant() <= until
        if self.on_the_way:
            self.time = max(self.time, self._next_instant())
        return found

    def catch_up(self, now: float, *, most: float = inf) -> RunUpdate:
        """Play everything that is there, for a log that is being written.

        Parameters
        ----------
        now : float
            Time since the start of the run by this machine's clock [s]; what is already due by then (a silent feed)
            is found even where no line tells of it.
        most : float
            As for `advance`.
        """
        found = self._play(inf, most)
        if self.on_the_way:
            return self._update(found)
        if self._all_played() and not self._closed:
            self._closed = True
            found.append(self.pipeline.close(self._source.last_time if self.recording.is_log else nan))
        self.time = self.duration
        if not self._closed:
            self.time = max(self.time, now)
            found.append(self.pipeline.tick(self.time))
        return self._update(found)

    def step(self) -> RunUpdate:
        """Play what arrived at the next instant of the recording."""
        if self._peek() is None:
            return self.advance(self.duration)
        return self.advance(max(self._next_instant(), self.time))

    def seek(self, time: float, *, most: float = inf) -> RunUpdate:
        """Go to an instant; backwards means from the start again, as fast as it goes.

        Parameters
        ----------
        time : float
            [s]; held inside the recording.
        most : float
            As for `advance`, which goes on from there.
        """
        time = min(max(time, 0.0), self.duration)
        if time < self.time or self._closed:
            self._restart()
        return self.advance(time, most=most)

    def close(self) -> None:
        """Let go of the file."""
        self._source.close()

    # -- arrivals --------------------------------------------------------------------------------------------------

    def _peek(self) -> Arrival | None:
        while not self._waiting:
            more = self._source.more()
            if more is None:
                return None
            self._waiting += more
        return self._waiting[0]

    def _next_instant(self) -> float:
        """Return when the first of what waits arrived [s]: of one of the links, or the event before any line."""
        begins = inf
        for one in self._waiting:
            if isinstance(one, RunEvent):
                return min(begins, one.time)
            begins = min(begins, float(one.times[0]) if len(one) else self.time)
        return begins

    def _next(self, until: float) -> Arrival | None:
        """Return the next arrival, or the part of it that came by `until`."""
        self._peek()
        later: set[int] = set()
        for place, one in enumerate(self._waiting):
            if isinstance(one, RunEvent):
                if one.time > until or (place > 0 and one.name != TOLD):
                    return None
                del self._waiting[place]
                return one
            if one.link in later:
                continue
            late = np.flatnonzero(one.times > until)
            count = int(late[0]) if late.size else len(one)
            if count == len(one):
                del self._waiting[place]
                return one
            if count:
                ready, self._waiting[place] = split(one, count)
                return ready
            later.add(one.link)
        return None

    def _take(self, arrival: Arrival) -> Findings:
        if isinstance(arrival, LineBlock):
            if len(arrival):
                self._count(arrival)
        elif arrival.name == "end":
            self._closed = True
        return self.pipeline.take(arrival)

    def _all_played(self) -> bool:
        if self._waiting:
            return False
        if isinstance(self._source, LogReader) and self.follow:
            return self._source.ended
        return True

    # -- how things stand ------------------------------------------------------------------------------------------

    def _count(self, block: LineBlock) -> None:
        self._lines[block.link] += len(block)
        recent = self._recent.setdefault(block.link, deque(maxlen=10_000))
        after = block.times[-1] - _RATE_OVER
        times, counts = np.unique(block.times[block.times >= after], return_counts=True)
        recent.extend(zip(times.tolist(), counts.tolist(), strict=True))

    def _update(self, found: list[Findings]) -> RunUpdate:
        survey = self.pipeline.survey
        return RunUpdate(
            findings=tuple(one for one in found if len(one.rows) or one.stations or one.alarms),
            standing=survey.standing(),
            alarms=survey.alarms(),
            health=self._health(),
            time=self.time,
            armed=self.pipeline.armed,
        )

    def _health(self) -> Health:
        links = max(len(self.site.links), 1)
        return Health(
            links=tuple(self._link(number) for number in range(links)),
            frames=self.pipeline.frames,
            rejected=self.pipeline.rejected,
            faults=MappingProxyType(dict(self.pipeline.faults)),
            log_path=str(self.recording.path),
            log_bytes=0,
            log_state="following" if self.follow else "changed" if self.changed else "replay",
            set_aside=self.pipeline.set_aside,
        )

    def _link(self, number: int) -> LinkHealth:
        recent = self._recent.get(number, deque())
        while recent and recent[0][0] < self.time - _RATE_OVER:
            recent.popleft()
        url = safe(self.site.links[number].url, 80) if self.site.links else ""
        fault = self.pipeline.last_faults.get(number)
        return LinkHealth(
            name=url,
            url=url,
            state="ended" if self._closed else "open",
            retry_in=None,
            lines=self._lines[number],
            rate=sum(count for _, count in recent) / _RATE_OVER,
            silent_for=max(self.time - recent[-1][0], 0.0) if recent else self.time,
            last_fault=f"line {fault[0]}: {fault[1]}: {fault[2]}; expected {fault[3]}" if fault else "",
            queue_dropped=0,
        )
