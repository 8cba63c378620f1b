"""A whole recording through the engine, headless: stations, verdicts and alarms out; streamed, in flat memory."""

from collections.abc import Callable, Mapping
from dataclasses import dataclass
from datetime import datetime
from math import nan
from pathlib import Path
from types import MappingProxyType

import numpy as np

from eastfall.io.arrivals import LineBlock, RunEvent
from eastfall.io.capture import CaptureReader, refuse
from eastfall.io.logreader import LogReader
from eastfall.io.pipeline import Pipeline
from eastfall.io.recording import Recording, Source, open_recording
from eastfall.io.seal import Verification
from eastfall.io.sitefile import SiteFile
from eastfall.io.siteplace import refusals_of
from eastfall.io.whatif import Difference
from eastfall.physics.board import ACTION
from eastfall.physics.expected import ExpectedCurve, expected_curve
from eastfall.physics.findings import Result, Standing, Verdict
from eastfall.physics.settings import Assumptions
from eastfall.physics.verdict import worst

_MOST_EVENTS = 10_000
_ROOM = 30_000_000
"""Bytes asked for and given back once before a reduction, never touched.

The C library of Linux gives the memory of each block of rows back to the system and takes it anew for the next, page by
page, until a piece this large has been freed (M_MMAP_THRESHOLD of mallopt(3) is dynamic, up to 32 MiB). It saves a
fifth of the time; smaller blocks, tried first, made it worse.
"""
_KEPT = frozenset({"note", "acknowledge", "shelve", "mark", "armed", "condition", "start", "end", "lost"})


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Reduction:
    """Everything that a recording comes to."""

    path: Path
    site: SiteFile
    """The settings used."""
    differences: tuple[Difference, ...]
    """Where they are not those that were recorded."""
    started_at: datetime | None
    kind: str
    frames: int
    rejected: int
    faults: Mapping[str, int]
    unused: Mapping[str, int]
    """Readings that were read well and left aside, by reason."""
    unreadable: int
    """Records of the log that could not be read and were passed over; 0 for a capture, which has none."""
    result: Result
    standing: Standing | None
    """The answer as it stood at the end."""
    events: tuple[RunEvent, ...]
    """What people said and did, in order; the first ten thousand."""
    duration: float
    """Last time recorded [s]."""
    verification: Verification | None
    """What the seals say; None for a capture."""

    @property
    def is_log(self) -> bool:
        """Whether the recording says when its lines arrived: a run log does, a capture does not."""
        return self.verification is not None

    @property
    def own_clock(self) -> bool:
        """Whether the instrument's lines carry a time of their own, which alarms then go by."""
        return any("time_s" in one.columns for one in self.site.links)

    @property
    def seal_state(self) -> str:
        """Intact, cut short or changed; empty for a capture, which has no seals."""
        return self.verification.state if self.verification is not None else ""

    @property
    def missing(self) -> int:
        """Lines and events that the record says it lacks, since they could not be written."""
        counts = [one.fields.get("count") for one in self.events if one.name == "lost"]
        return sum(one for one in counts if isinstance(one, int) and one > 0)

    @property
    def verdict(self) -> Verdict | None:
        """The worst verdict of any station; None without stations."""
        return worst(one.verdict for one in self.result.stations)

    @property
    def exceeded(self) -> bool:
        """Whether a limit was exceeded: a station over, or an action alarm."""
        return self.verdict == "over" or any(
            one.name == ACTION and one.new == "active" for one in self.result.alarms
        )


def reduce_file(
    path: Path,
    *,
    site: SiteFile | None = None,
    interval: float | None = None,
    curve_for: Callable[[Assumptions], ExpectedCurve] = expected_curve,
) -> Reduction:
    """Reduce a run log or a capture.

    Parameters
    ----------
    path : Path
        Any part of a run log, or a plain-text capture.
    site : SiteFile, optional
        Settings to use instead of the recorded ones; needed for a capture.
    interval : float, optional
        Time between the lines of a capture without a clock [s].
    curve_for : callable
        Gives the expected curve for settings; one that remembers saves time over many runs of a site.

    Returns
    -------
    Reduction
        The same findings, to the last bit, as the live run had, if no other settings are given.

    Raises
    ------
    LogError, CaptureError, SiteFileError
        The file cannot be used; for a capture that does not fit its line form, with its first lines.
    """
    np.empty(_ROOM, dtype=np.uint8)
    recording = open_recording(path, site, interval)
    with refusals_of(recording.site):
        curve = curve_for(recording.site.assumptions)
    pipeline = recording.pipeline(curve, u_of_rows=False)
    source = recording.source()
    try:
        events = run_through(source, pipeline, is_log=recording.is_log)
        if isinstance(source, CaptureReader) and not pipeline.survey.result().frames:
            raise refuse(path, recording.site, source.lines)
        return _reduction(recording, source, pipeline, events)
    finally:
        source.close()


def run_through(source: Source, pipeline: Pipeline, *, is_log: bool) -> list[RunEvent]:
    """Take every arrival and close the run; return what people said and did."""
    events: list[RunEvent] = []
    for arrival in source:
        pipeline.take(arrival)
        if not isinstance(arrival, LineBlock) and arrival.name in _KEPT and len(events) < _MOST_EVENTS:
            events.append(arrival)
    pipeline.close(source.last_time if is_log else nan)
    return events


def _reduction(recording: Recording, source: Source, pipeline: Pipeline, events: list[RunEvent]) -> Reduction:
    survey = pipeline.survey
    return Reduction(
        path=recording.path,
        site=recording.site,
        differences=recording.differences,
        started_at=recording.started_at,
        kind=recording.site.assumptions.run.kind,
        frames=pipeline.frames,
        rejected=pipeline.rejected,
        faults=MappingProxyType(dict(pipeline.faults)),
        unused=MappingProxyType(dict(survey.unused)),
        unreadable=source.bad_lines if isinstance(source, LogReader) else 0,
        result=survey.result(),
        standing=survey.standing(),
        events=tuple(events),
        duration=source.last_time,
        verification=source.verification() if isinstance(source, LogReader) else None,
    )
