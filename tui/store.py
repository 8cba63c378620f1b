"""What the screen shows, gathered from findings and frozen into snapshots; no screen library, no file, no clock.

The worker thread owns the history and appends; a snapshot holds read-only views of what stood when it was taken.
"""

from collections import deque
from collections.abc import Sequence
from dataclasses import dataclass, field, replace
from math import isfinite
from typing import TYPE_CHECKING, Literal

import numpy as np

from eastfall.physics.findings import ROW_FIELDS, AlarmChange, AlarmView, Rows, Standing, Station
from eastfall.tui.words import WANTS_ANSWER

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from eastfall.io.run import Health
    from eastfall.physics.findings import Findings

Mode = Literal["live", "replay"]

KEPT = 60_000
"""Rows kept for the picture; older ones are thinned, the run log keeps all."""


REMEMBERED = 2000
"""Alarm changes kept for the history on the screen; the run log keeps all."""


class GrowingRows:
    """Columns that grow at the end, in one float64 array that doubles.

    Parameters
    ----------
    keep : int
        Above this many rows the older half is thinned: of each two neighbours the one with the larger residual
        stays, so that what was over a limit is still seen.
    """

    def __init__(self, keep: int = KEPT) -> None:
        self._keep = max(4, keep)
        self._data = np.empty((len(ROW_FIELDS), 1024))
        self._count = 0

    def __len__(self) -> int:
        return self._count

    def extend(self, rows: Rows) -> None:
        """Append a block of rows."""
        added = len(rows)
        if not added:
            return
        if self._count + added > self._data.shape[1]:
            grown = np.empty((len(ROW_FIELDS), 2 * (self._count + added)))
            grown[:, : self._count] = self._data[:, : self._count]
            self._data = grown
        self._data[:, self._count : self._count + added] = rows.data
        self._count += added
        while self._count > self._keep:
            self._thin()

    def _thin(self) -> None:
        """Halve the older half, into a new array: snapshots taken earlier keep theirs."""
        old = Rows(self._data[:, : self._count // 4 * 2])
        size = np.hypot(old.residual_east, old.residual_north).reshape(-1, 2)
        second = np.nan_to_num(size[:, 1], nan=-1.0) > np.nan_to_num(size[:, 0], nan=-1.0)
        kept = old.data[:, 2 * np.arange(size.shape[0]) + second]
        rest = self._data[:, old.data.shape[1] : self._count]
        self._count = kept.shape[1] + rest.shape[1]
        fresh = np.empty((len(ROW_FIELDS), max(1024, self._keep + self._keep // 4, self._count)))
        fresh[:, : self._count] = np.concatenate([kept, rest], axis=1)
        self._data = fresh

    def view(self) -> Rows:
        """Return all rows so far as a read-only view that later appending does not change."""
        part = self._data[:, : self._count]
        part.flags.writeable = False
        return Rows(part)


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Snapshot:
    """All that the screen needs at one moment."""

    mode: Mode = "live"
    time: float = 0.0
    rows: Rows = field(default_factory=Rows.none)
    stations: tuple[Station, ...] = ()
    alarms: tuple[AlarmView, ...] = ()
    standing: Standing | None = None
    health: "Health | None" = None
    playing: bool = True
    """A replay that runs; a live run always does."""
    speed: float = 1.0
    duration: float | None = None
    """Of a replayed record [s]."""
    ended: bool = False
    keeping_up: bool = False
    """A replay at the newest end of a record that is being written."""
    armed: bool = True
    """False while a drop waits for the shaft to be declared clear."""
    changes: tuple[AlarmChange, ...] = ()
    """What alarms did so far, on the run's clock; the newest `REMEMBERED`."""
    said: tuple["Said", ...] = ()
    """What people said and did so far."""
    trouble: str = ""
    """What stopped the source, in one line."""
    serial: int = 0
    """Rises with every snapshot of one source."""


@dataclass(frozen=True, slots=True, kw_only=True)
class Said:
    """A note, an acknowledgement, a shelving or an arming, and by whom."""

    time: float
    """On the run's clock [s]."""
    text: str
    is_note: bool = False


class History:
    """Findings as they come, kept for the picture.

    Parameters
    ----------
    mode : {"live", "replay"}
        What the snapshots are labelled with.
    keep : int
        Rows kept at full detail and thinned beyond; see `GrowingRows`.
    """

    def __init__(self, mode: Mode, keep: int = KEPT) -> None:
        self._mode: Mode = mode
        self._keep = keep
        self._serial = 0
        self.clear()

    def clear(self) -> None:
        """Forget everything, as when a replay starts over."""
        self._rows = GrowingRows(self._keep)
        self._stations: dict[int, Station] = {}
        self._changes: deque[AlarmChange] = deque(maxlen=REMEMBERED)
        self._changed: tuple[AlarmChange, ...] | None = ()
        self._frozen: tuple[Station, ...] | None = ()

    def add(self, findings: "Sequence[Findings]", until: float = 0.0) -> None:
        """Take what one step brought; `until` is the time on the run's clock [s] that it came by."""
        for one in findings:
            self._rows.extend(one.rows)
            for station in one.stations:  # a station that is worked out anew comes with its old number
                self._stations[station.number] = station
                self._frozen = None
        self._date(findings, until)

    def _date(self, findings: "Sequence[Findings]", until: float) -> None:
        """Put alarm changes on the run's clock; what has no instant there came by now."""
        for change in (change for one in findings for change in one.alarms):
            moment = change.host_time if isfinite(change.host_time) else until
            self._changes.append(replace(change, time=moment))
            self._changed = None

    def snapshot(self, *, alarms: tuple[AlarmView, ...] = (), **state: object) -> Snapshot:
        """Freeze what stands now; `state` are further fields of `Snapshot`."""
        self._serial += 1
        if self._frozen is None:
            self._frozen = tuple(self._stations[number] for number in sorted(self._stations))
        if self._changed is None:
            self._changed = tuple(self._changes)
        return Snapshot(
            mode=self._mode,
            rows=self._rows.view(),
            stations=self._frozen,
            alarms=alarms,
            changes=self._changed,
            serial=self._serial,
            **state,  # type: ignore[arg-type]  # the caller names fields of Snapshot; a wrong name raises
        )


def in_order(alarms: Sequence[AlarmView]) -> list[AlarmView]:
    """Return those that wait for an answer first, newest first among equals."""
    return sorted(alarms, key=lambda one: (one.state not in WANTS_ANSWER, -one.since))


def last_pass(rows: Rows) -> int:
    """Return the index at which the newest pass begins."""
    passing: NDArray[np.float64] = rows.column("passing")
    if not passing.size:
        return 0
    return (
        int(passing.size - np.argmax((passing != passing[-1])[::-1])) if (passing != passing[-1]).any() else 0
    )
