"""What a replay can jump to: stations, alarms, passes, events and depths, each at its instant of the recording."""

from dataclasses import dataclass
from typing import Literal

import numpy as np
from numpy.typing import NDArray

from eastfall.io.arrivals import LineBlock, RunEvent
from eastfall.io.logreader import LogReader
from eastfall.io.recording import Recording, Source, passed_over
from eastfall.io.safetext import safe
from eastfall.physics.findings import Findings, Rows

What = Literal["station", "alarm", "pass", "note", "event"]
Column = NDArray[np.float64]

_OF_A_BLOCK = 2000
"""Rows kept of each block on the way."""
_TRACK = 200_000
"""Points kept of depth against time."""


@dataclass(frozen=True, slots=True, kw_only=True)
class Mark:
    """Something to jump to."""

    time: float
    """Of the recording, from its start [s]."""
    depth: float
    """[m]; NaN where it has none."""
    what: What
    text: str


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Index:
    """Everything to jump to in a recording.

    Parameters
    ----------
    marks : tuple of Mark
        In the order of time.
    times, depths : ndarray, shape (n,)
        Where the reading was when: instants of the recording [s] and depths [m].
    changed : str
        In what the record is not as it was written; empty if it is, or has no seals.
    """

    marks: tuple[Mark, ...]
    times: Column
    depths: Column
    changed: str = ""

    def of(self, what: What) -> tuple[Mark, ...]:
        """Return the marks of one sort."""
        return tuple(one for one in self.marks if one.what == what)

    def time_of_depth(self, depth: float, *, after: float = 0.0) -> float | None:
        """Return when a depth is first reached or passed after an instant; None if it never is.

        Parameters
        ----------
        depth : float
            [m].
        after : float
            Instant of the recording [s].
        """
        later = self.times >= after
        times, depths = self.times[later], self.depths[later]
        apart = depths - depth
        if not apart.size:
            return None
        crossed = np.flatnonzero((apart[:-1] * apart[1:] <= 0.0) & np.isfinite(apart[:-1] * apart[1:]))
        if not crossed.size:
            return float(times[0]) if apart[0] == 0.0 else None
        at = int(crossed[0])
        rise = depths[at + 1] - depths[at]
        part = 0.0 if rise == 0.0 else (depth - depths[at]) / rise
        return float(times[at] + part * (times[at + 1] - times[at]))


def split(block: LineBlock, count: int) -> tuple[LineBlock, LineBlock]:
    """Cut a block behind its first `count` lines."""
    ends = np.flatnonzero(np.frombuffer(block.data, np.uint8) == ord("\n"))
    at = int(ends[count - 1]) + 1
    return (
        LineBlock(
            data=block.data[:at], times=block.times[:count], first_line=block.first_line, link=block.link
        ),
        LineBlock(
            data=block.data[at:],
            times=block.times[count:],
            first_line=block.first_line + count,
            link=block.link,
        ),
    )


class _Clocks:
    """Turns the survey's time into the recording's, by what rows showed of both."""

    def __init__(self, rows: Rows) -> None:
        survey, host = rows.column("time"), rows.column("host_time")
        before = np.fmax.accumulate(np.concatenate([[-np.inf], survey]))[:-1]
        forward = np.isfinite(survey) & np.isfinite(host) & (survey > before)
        self._survey, self._host = survey[forward], host[forward]

    def host(self, survey: Column) -> Column:
        if not self._survey.size:
            return survey
        # Beyond the first and last pair the clocks are taken to run side by side.
        first, last = self._survey[0], self._survey[-1]
        inside = np.interp(survey, self._survey, self._host)
        before, after = np.minimum(survey - first, 0.0), np.maximum(survey - last, 0.0)
        return np.asarray(np.maximum(inside + before + after, 0.0))


def build_index(recording: Recording) -> Index:
    """Run through a recording and note what can be jumped to."""
    pipeline, source = recording.pipeline(), recording.source()
    events: list[RunEvent] = []
    found: list[Findings] = []
    for arrival in source:
        one = pipeline.take(arrival)
        found.append(Findings(rows=_thinned(one.rows), stations=one.stations, alarms=one.alarms))
        if isinstance(arrival, RunEvent):
            events.append(arrival)
    found.append(pipeline.close(source.last_time if recording.is_log else float("nan")))
    source.close()
    return _index(found, events, changed_in(source))


def changed_in(source: Source) -> str:
    """Return in what a log that was read to its end is not as it was written; empty if it is, and for a capture.

    Records that could not be read are named with it.
    """
    if not isinstance(source, LogReader):
        return ""
    found = source.verification()
    if found.state != "changed":
        return ""
    return found.reason + (f"; {passed_over(source.bad_lines)}" if source.bad_lines else "")


def _thinned(rows: Rows) -> Rows:
    return Rows(rows.data[:, :: max(1, len(rows) // _OF_A_BLOCK)])


def _index(found: list[Findings], events: list[RunEvent], changed: str) -> Index:
    rows = np.concatenate([one.rows.data for one in found], axis=1)
    rows = rows[:, :: max(1, rows.shape[1] // _TRACK)]
    table = Rows(rows)
    marks = [*_stations(found, _Clocks(table)), *_alarms(found), *_passes(table), *_said(events)]
    return Index(
        marks=tuple(sorted(marks, key=lambda one: one.time)),
        times=table.column("host_time"),
        depths=table.column("depth"),
        changed=changed,
    )


def _stations(found: list[Findings], clocks: _Clocks) -> list[Mark]:
    stations = [one for findings in found for one in findings.stations]
    times = clocks.host(np.array([one.time for one in stations]))
    return [
        Mark(
            time=time,
            depth=one.depth,
            what="station",
            text=f"{one.depth:.2f} m {one.direction}, {one.verdict}",
        )
        for one, time in zip(stations, times.tolist(), strict=True)
    ]


def _alarms(found: list[Findings]) -> list[Mark]:
    alarms = [one for findings in found for one in findings.alarms]
    return [
        Mark(
            time=max(0.0, one.host_time),
            depth=one.depth,
            what="alarm",
            text=f"{one.name}: {one.old} to {one.new}",
        )
        for one in alarms
    ]


def _passes(rows: Rows) -> list[Mark]:
    numbers, times = rows.column("passing"), rows.column("host_time")
    begins = np.flatnonzero(np.diff(numbers, prepend=np.nan) != 0.0)
    depths, directions = rows.column("depth"), rows.column("direction")
    return [
        Mark(
            time=float(times[at]),
            depth=float(depths[at]),
            what="pass",
            text=f"pass {int(numbers[at]) + 1}, {'down' if directions[at] > 0 else 'up'}",
        )
        for at in begins.tolist()
        if np.isfinite(numbers[at])
    ]


def _said(events: list[RunEvent]) -> list[Mark]:
    marks = []
    for one in events:
        if one.name == "alarm":
            continue  # the pipeline finds the same
        words = [str(one.fields[key]) for key in ("name", "text", "message", "who") if one.fields.get(key)]
        text = safe(" · ".join(words), 200)
        is_note = one.name == "note"
        marks.append(
            Mark(
                time=one.time,
                depth=float("nan"),
                what="note" if is_note else "event",
                text=text if is_note else f"{safe(one.name, 40)} {text}".strip(),
            )
        )
    return marks
