"""What a replay can jump to: stations, alarms, passes, events and depths, each at its instant of the recording."""

from collections.abc import Iterator
from dataclasses import dataclass
from typing import Literal

import numpy as np
from numpy.typing import NDArray

from eastfall.io.arrivals import Arrival, LineBlock, RunEvent
from eastfall.io.recording import Recording
from eastfall.io.safetext import safe
from eastfall.physics.findings import Findings, Rows

What = Literal["station", "alarm", "pass", "note", "event"]
Column = NDArray[np.float64]

_PIECE = 1000
"""Lines at a time: how finely the two clocks are held against each other."""
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
    """

    marks: tuple[Mark, ...]
    times: Column
    depths: Column

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
    """Turns the survey's time into the recording's, by what each piece of the recording showed of both."""

    def __init__(self) -> None:
        self._survey: list[float] = []
        self._host: list[float] = []

    def note(self, survey: float, host: float) -> None:
        if np.isfinite(survey) and (not self._survey or survey > self._survey[-1]):
            self._survey.append(survey)
            self._host.append(host)

    def host(self, survey: Column) -> Column:
        if not self._survey:
            return survey
        # Beyond the first and last pair the clocks are taken to run side by side.
        first, last = self._survey[0], self._survey[-1]
        inside = np.interp(survey, self._survey, self._host)
        before, after = np.minimum(survey - first, 0.0), np.maximum(survey - last, 0.0)
        return np.asarray(np.maximum(inside + before + after, 0.0))


def _pieces(source: Iterator[Arrival]) -> Iterator[Arrival]:
    for arrival in source:
        if isinstance(arrival, LineBlock):
            yield from _cut(arrival)
        else:
            yield arrival


def _cut(block: LineBlock) -> Iterator[LineBlock]:
    ends = np.flatnonzero(np.frombuffer(block.data, np.uint8) == ord("\n")) + 1
    begin = 0
    for first in range(0, len(block), _PIECE):
        times = block.times[first : first + _PIECE]
        end = int(ends[first + times.size - 1])
        yield LineBlock(
            data=block.data[begin:end], times=times, first_line=block.first_line + first, link=block.link
        )
        begin = end


def build_index(recording: Recording) -> Index:
    """Run through a recording and note what can be jumped to."""
    pipeline, source = recording.pipeline(), recording.source()
    clocks, events = _Clocks(), []
    found: list[Findings] = []
    for arrival in _pieces(iter(source)):
        one = pipeline.take(arrival)
        found.append(Findings(rows=_thinned(one.rows), stations=one.stations, alarms=one.alarms))
        if isinstance(arrival, RunEvent):
            events.append(arrival)
        elif len(one.rows):
            clocks.note(float(one.rows.column("time")[-1]), float(arrival.times[-1]))
    found.append(pipeline.close(source.last_time if recording.is_log else float("nan")))
    source.close()
    return _index(found, events, clocks)


def _thinned(rows: Rows) -> Rows:
    return Rows(rows.data[:, :: max(1, len(rows) // 100)])


def _index(found: list[Findings], events: list[RunEvent], clocks: _Clocks) -> Index:
    rows = np.concatenate([one.rows.data for one in found], axis=1)
    rows = rows[:, :: max(1, rows.shape[1] // _TRACK)]
    table = Rows(rows)
    times = clocks.host(table.column("time"))
    marks = [*_stations(found, clocks), *_alarms(found, clocks), *_passes(table, times), *_said(events)]
    return Index(
        marks=tuple(sorted(marks, key=lambda one: one.time)), times=times, depths=table.column("depth")
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


def _alarms(found: list[Findings], clocks: _Clocks) -> list[Mark]:
    alarms = [one for findings in found for one in findings.alarms]
    times = clocks.host(np.array([one.time for one in alarms]))
    return [
        Mark(time=time, depth=one.depth, what="alarm", text=f"{one.name}: {one.old} to {one.new}")
        for one, time in zip(alarms, times.tolist(), strict=True)
    ]


def _passes(rows: Rows, times: Column) -> list[Mark]:
    numbers = rows.column("passing")
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
