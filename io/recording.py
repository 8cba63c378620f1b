"""Open whatever holds a finished or growing run, log or capture, with the settings to read it by."""

from collections.abc import Iterator
from dataclasses import dataclass, replace
from datetime import datetime
from pathlib import Path
from typing import Protocol

from eastfall.io.arrivals import Arrival
from eastfall.io.capture import CaptureReader
from eastfall.io.errors import CaptureError
from eastfall.io.logformat import is_run_log
from eastfall.io.logreader import LogReader
from eastfall.io.pipeline import Pipeline
from eastfall.io.sitefile import SiteFile
from eastfall.io.siteplace import refusals_of
from eastfall.io.whatif import Difference, differences, with_lines_of
from eastfall.physics.expected import ExpectedCurve
from eastfall.physics.survey import Survey


class Source(Protocol):
    """Arrivals in order, from a log or a capture."""

    ended: bool
    last_time: float

    def more(self) -> list[Arrival] | None:
        """Return what comes next; None when nothing more is there now."""

    def __iter__(self) -> Iterator[Arrival]:
        """Yield all that is there."""

    def close(self) -> None:
        """Let go of the file."""


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Recording:
    """What a file holds and how it is looked at.

    Parameters
    ----------
    path : Path
        As given.
    site : SiteFile
        The settings in use.
    recorded : SiteFile or None
        Those that the run was recorded with; None for a capture.
    started_at : datetime or None
        Start of the run, UTC; None for a capture.
    interval : float or None
        Time between the lines of a capture without a clock [s].
    """

    path: Path
    site: SiteFile
    recorded: SiteFile | None
    started_at: datetime | None
    interval: float | None = None

    @property
    def is_log(self) -> bool:
        """Whether it is a run log."""
        return self.recorded is not None

    @property
    def differences(self) -> tuple[Difference, ...]:
        """What is not as recorded."""
        return differences(self.recorded, self.site) if self.recorded is not None else ()

    def source(self) -> Source:
        """Open the file and return its arrivals from the start."""
        return LogReader(self.path) if self.is_log else CaptureReader(self.path, self.interval)

    def pipeline(self, curve: ExpectedCurve | None = None, *, u_of_rows: bool = True) -> Pipeline:
        """Return a fresh pipeline for the settings in use, with their curve where it stands ready; see `Survey`."""
        with refusals_of(self.site):
            survey = Survey(
                self.site.assumptions,
                curve=curve,
                feed_watched=self.is_log and not (self.recorded or self.site).by_hand,
                notes=self.site.notes,
                u_of_rows=u_of_rows,
            )
        return Pipeline(self.site, survey, armed=None if self.is_log else True)


def open_recording(path: Path, site: SiteFile | None = None, interval: float | None = None) -> Recording:
    """Find out what a file is and what to read it by.

    Parameters
    ----------
    path : Path
        A run log or a plain-text capture.
    site : SiteFile, optional
        Other settings than the recorded ones; needed for a capture.
    interval : float, optional
        Time between the lines of a capture whose lines carry none [s].

    Raises
    ------
    LogError, CaptureError
        The file cannot be opened, or a capture lacks what is needed to read it.
    SiteFileError
        The settings in the log cannot be used.
    """
    if path.is_file() and not is_run_log(path):
        return _capture(path, site, interval)
    with LogReader(path) as reader:
        recorded, started = reader.site(), reader.started_at
    used = recorded if site is None else with_lines_of(site, recorded)
    return Recording(path=path, site=used, recorded=recorded, started_at=started)


def _capture(path: Path, site: SiteFile | None, interval: float | None) -> Recording:
    if site is None:
        raise CaptureError(
            f"{path}: is no run log; expected one, or a capture with a site file that says how its lines are read "
            "(--site of reduce, replay, report and export)"
        )
    if interval is not None and not interval > 0.0:
        raise CaptureError(f"{path}: an interval of {interval:g} s; expected more than 0 s")
    first = site.links[:1]
    if first and interval is None and first[0].form == "columns" and "time_s" not in first[0].columns:
        raise CaptureError(f"{path}: its lines carry no time_s; expected an interval between lines [s]")
    return Recording(
        path=path, site=replace(site, links=first), recorded=None, started_at=None, interval=interval
    )


def passed_over(records: int) -> str:
    """Say how many records of a log could not be read; empty if all could."""
    if not records:
        return ""
    if records == 1:
        return "1 record cannot be read and was passed over"
    return f"{records} records cannot be read and were passed over"
