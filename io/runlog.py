"""Writing the run log: raw lines first, sealed, synced, rolled by size; reading it is `logreader`'s.

What "recorded" means here. When `raw` or `event` returns, the record stands in the file as far as the operating
system is concerned: killing this program at any moment cannot lose it. What is older than `sync_every` (one second)
has also been forced to the device: a power cut loses at most that. `bytes_written` counts the first, `bytes_synced`
the second.

When a write fails (full disk, device gone) nothing of the batch counts as recorded: the file is cut back to the end
of the last whole record, `OutputError` is raised once for that call, and the caller keeps the batch and calls again.
No half record is left in the middle: as long as the file cannot be cut back, nothing more is written to it.
"""

import contextlib
import time
from collections.abc import Callable, Iterator, Sequence
from dataclasses import dataclass
from datetime import UTC, datetime
from importlib.metadata import version
from pathlib import Path

import msgspec

from eastfall.io.arrivals import LineBlock, RunEvent
from eastfall.io.errors import OutputError
from eastfall.io.logformat import SCHEMA, SUFFIX, EventRecord, Header, Previous, RawRecord, file_name
from eastfall.io.logpart import LogPart, refused
from eastfall.io.logreader import LogReader, read_log
from eastfall.io.seal import Verification, verify_log
from eastfall.io.sitefile import SiteFile

__all__ = ["LogReader", "RunLogWriter", "Verification", "read_log", "verify_log"]

_NAMES = 99
_FILE_NAME_TIME = "%Y%m%dT%H%M%SZ"


@dataclass(frozen=True, slots=True, kw_only=True)
class LogPolicy:
    """When the writer seals, syncs and begins a new part."""

    roll_bytes: int = 256 << 20
    """Size of a part at which the next is begun [bytes]."""
    seal_every: float = 5.0
    """Longest stretch of the run without a seal [s]."""
    sync_every: float = 1.0
    """Longest time that bytes wait before they are forced to the device [s]."""


def _header(site: SiteFile, started: datetime, kind: str | None) -> Header:
    return Header(
        eastfall="run log",
        schema=SCHEMA,
        program=version("eastfall"),
        started_at=started.isoformat().replace("+00:00", "Z"),
        kind=kind or site.assumptions.run.kind,
        source=site.path,
        site=site.text,
    )


def _names(folder: Path, site: SiteFile, started: datetime) -> Iterator[Path]:
    name = file_name(site.assumptions.site.name, started.strftime(_FILE_NAME_TIME))
    yield folder / name
    for number in range(2, _NAMES + 1):
        yield folder / f"{name.removesuffix(SUFFIX)}-{number}{SUFFIX}"


def _raw_records(block: LineBlock) -> list[RawRecord]:
    """Return one record for each run of lines with the same time."""
    lines = block.data.decode("latin-1").split("\n")[:-1]
    times = block.times.tolist()
    records = []
    begin = 0
    for end in range(1, len(times) + 1):
        if end == len(times) or times[end] != times[begin]:
            records.append(RawRecord(t=times[begin], raw=lines[begin:end], link=block.link))
            begin = end
    return records


class RunLogWriter:
    """One run's log, open for writing; `create` makes one.

    Attributes
    ----------
    state : str
        "recording", "closed", or what is wrong.
    bytes_synced : int
        Bytes that were forced to the device, over all parts.
    """

    def __init__(
        self, path: Path, header: Header, policy: LogPolicy, clock: Callable[[], float] = time.monotonic
    ) -> None:
        self._header = header
        self._policy = policy
        self._clock = clock
        self._first = path
        self._part = LogPart(path, header)
        self._earlier = 0
        self._last_time = 0.0
        self._unsealed_since: float | None = None
        self._roll_at = policy.roll_bytes
        self._synced_at = clock()
        self.bytes_synced = self._part.size
        self.state = "recording"

    @classmethod
    def create(
        cls,
        folder: Path,
        site: SiteFile,
        *,
        started_at: datetime,
        kind: str | None = None,
        policy: LogPolicy | None = None,
        clock: Callable[[], float] = time.monotonic,
    ) -> "RunLogWriter":
        """Start a new log in `folder`, which is made if need be; nothing that stands there is touched.

        Parameters
        ----------
        folder : Path
            Where logs go.
        site : SiteFile
            Its text is kept whole in the header.
        started_at : datetime
            Start of the run, aware; kept in UTC.
        kind : str, optional
            Kind of run; the site file's by default.
        policy : LogPolicy, optional
            When to seal, sync and roll.
        clock : callable
            Seconds on a clock that never steps back, for the syncs.

        Raises
        ------
        OutputError
            The folder cannot be made or written.
        """
        started = started_at.astimezone(UTC)
        try:
            folder.mkdir(parents=True, exist_ok=True)
        except OSError as cause:
            raise refused(folder, cause) from cause
        header = _header(site, started, kind)
        for path in _names(folder, site, started):
            with contextlib.suppress(FileExistsError):
                return cls(path, header, policy or LogPolicy(), clock)
        raise OutputError(
            f"{path}: stands already, and so do all names like it; move them or name another folder"
        )

    @property
    def path(self) -> Path:
        """The part being written."""
        return self._part.path

    @property
    def bytes_written(self) -> int:
        """Bytes handed to the operating system, over all parts."""
        return self._earlier + self._part.size

    @property
    def seal(self) -> str:
        """The last seal of the chain."""
        return self._part.seal

    def raw(self, block: LineBlock) -> None:
        """Record lines as they came, before anything interprets them.

        Raises
        ------
        OutputError
            Nothing of the block was recorded; call again with the same block.
        """
        records = _raw_records(block)
        if records:
            self._append(records, float(block.times[-1]))

    def event(self, event: RunEvent) -> None:
        """Record an event at the place in the file where it takes effect.

        Raises
        ------
        OutputError
            It was not recorded; call again.
        """
        self._append([EventRecord(event.time, event.name, dict(event.fields))], event.time)

    def tick(self, time: float) -> None:
        """Let time pass [s since the start of the run]: seal and sync what is due, see that the file is still there.

        Raises
        ------
        OutputError
            The file cannot be written or synced, or is gone and cannot be made again.
        """
        if self.state == "closed":
            return
        self._sync_if_due()
        if self._seal_due(time):
            self._write([], time)

    def close(self, time: float) -> None:
        """Write the final seal, sync and close; a second call does nothing.

        Raises
        ------
        OutputError
            The final seal could not be written. The file is closed all the same, and what it holds stays good.
        """
        if self.state == "closed":
            return
        try:
            if self._part.is_gone():
                self._part.rescue()
            self._part.write([], seal_at=max(float(time), self._last_time), end="closed")
            self._part.sync()
            self.bytes_synced = self.bytes_written
        finally:
            self._part.close()
            self.state = "closed"

    def _append(self, records: Sequence[msgspec.Struct], time: float) -> None:
        if self.state == "closed":
            raise OutputError(f"{self.path}: is closed; nothing more can be recorded in it")
        self._sync_if_due()
        if self._part.size >= self._roll_at:
            self._roll()
        self._write(records, time)

    def _seal_due(self, time: float) -> bool:
        return self._unsealed_since is not None and time - self._unsealed_since >= self._policy.seal_every

    def _write(self, records: Sequence[msgspec.Struct], time: float) -> None:
        """Write the seal that is due and then records, in one piece, so that a retry repeats neither."""
        try:
            due = self._seal_due(time)
            self._part.write(records, seal_at=self._last_time if due else None)
        except OutputError as error:
            self.state = f"not recording: {error}"
            raise
        self.state = "recording"
        self._last_time = max(self._last_time, float(time))
        if due:
            self._unsealed_since = None
        if records and self._unsealed_since is None:
            self._unsealed_since = time

    def _sync_if_due(self) -> None:
        now = self._clock()
        if now - self._synced_at < self._policy.sync_every:
            return
        # Before it can fail: then it is tried again an interval later, not at every line.
        self._synced_at = now
        try:
            if self._part.is_gone():
                self._part.rescue()
            if self.bytes_synced < self.bytes_written:
                self._part.sync()
        except OutputError as error:
            self.state = f"not recording: {error}"
            raise
        self.bytes_synced = self.bytes_written

    def _roll(self) -> None:
        """Go on in a new part; if none can be made, stay in this one and try again a tenth of a part later.

        The new part's header is on the device before the old part is closed with a seal that names it: wherever a
        kill falls, no record is lost, and at worst an empty part stands beside the log.
        """
        old = self._part
        stem = self._first.name.removesuffix(SUFFIX)
        path = self._first.with_name(f"{stem}.part-{old.number + 1:04d}{SUFFIX}")
        previous = Previous(old.path.name, old.next_seal())
        header = msgspec.structs.replace(self._header, part=old.number + 1, previous=previous)
        self._roll_at = old.size + self._policy.roll_bytes // 10
        try:
            new = LogPart(path, header)
        except OSError:
            return
        try:
            old.write([], seal_at=self._last_time, end="rolled", following=path.name)
            old.sync()
        except OutputError:
            new.discard()
            return
        old.close()
        self._earlier += old.size
        self._part, self._roll_at = new, self._policy.roll_bytes
        self._unsealed_since = None
