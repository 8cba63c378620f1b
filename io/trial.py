"""A port listened to for a while: raw lines as they come, and how a line form reads each; nothing is recorded.

The thread that reads lets go of the port soon after it is told to; what the screen shows of it is the screen's.
"""

import threading
import time
from collections import Counter, deque
from collections.abc import Callable, Sequence
from dataclasses import dataclass
from math import degrees

import numpy as np

from eastfall.io.arrivals import LineBlock
from eastfall.io.errors import LinkError
from eastfall.io.forms import decoder_for
from eastfall.io.framing import Splitter
from eastfall.io.links import Link, open_link
from eastfall.io.safetext import safe
from eastfall.io.sitefile import LinkSettings, SiteFile
from eastfall.physics.errors import EastfallError
from eastfall.physics.readings import Readings

KEPT = 400
"""Lines kept, the newest."""
POLL = 0.1
"""Longest wait for bytes [s]: a stop is seen within it."""
RELEASED_IN = 0.3
"""The port is let go of within this [s] after a stop."""
PENDING = 200
"""Bytes without a line end that are shown."""
_SETTLED, _RATE_AFTER, _RATE_LINES = 1.0, 3.0, 3
"""Lines are counted after the first of these times, since what waited in a port's buffer comes all at once; a rate is
told so long [s] and so many lines later."""


@dataclass(frozen=True, slots=True, kw_only=True)
class Heard:
    """What has come up to now."""

    state: str
    """opening, open, ended, lost or closed."""
    trouble: str = ""
    """Why it could not be opened, or was lost; safe text."""
    lines: tuple[bytes, ...] = ()
    """The newest lines, oldest first, without their ends."""
    count: int = 0
    """Lines that have come in all."""
    pending: bytes = b""
    """What came after the last line end."""
    seconds: float = 0.0
    """Since the port is open."""
    rate: float | None = None
    """Lines in a second as an instrument sends them; None as long as that cannot be told, and for files."""


class Trial:
    """Listens to one link in a thread of its own.

    Parameters
    ----------
    settings : LinkSettings
        What to open; its form is not used.
    site : SiteFile, optional
        For an `emulate:` link.
    index : int
        The link's place in the site file.
    clock : callable
        Monotonic time [s].
    """

    def __init__(
        self,
        settings: LinkSettings,
        site: SiteFile | None = None,
        index: int = 0,
        *,
        clock: Callable[[], float] = time.monotonic,
    ) -> None:
        self.settings = settings
        self._site, self._index = site, index
        self._clock = clock
        self._stop = threading.Event()
        self._lock = threading.Lock()
        self._lines: deque[bytes] = deque(maxlen=KEPT)
        self._count = 0
        self._pending = b""
        self._state, self._trouble = "opening", ""
        self._opened: float | None = None
        self._as_sent = False
        self._early: tuple[float, int] | None = None
        self._thread = threading.Thread(target=self._listen, name="port trial", daemon=True)

    def start(self) -> None:
        """Open the link and listen."""
        self._thread.start()

    def stop(self) -> bool:
        """Let go of the link; return whether that is done."""
        self._stop.set()
        if self._thread.ident is not None:
            self._thread.join(RELEASED_IN)
        return not self._thread.is_alive()

    def heard(self) -> Heard:
        """Return what has come up to now."""
        with self._lock:
            since = 0.0 if self._opened is None else self._clock() - self._opened
            return Heard(
                state=self._state,
                trouble=self._trouble,
                lines=tuple(self._lines),
                count=self._count,
                pending=self._pending,
                seconds=since,
                rate=self._rate(since),
            )

    def _rate(self, since: float) -> float | None:
        if not self._as_sent or since < _SETTLED:
            return None
        if self._early is None:
            self._early = since, self._count
        seconds, count = since - self._early[0], self._count - self._early[1]
        return count / seconds if seconds >= _RATE_AFTER and count >= _RATE_LINES else None

    def _listen(self) -> None:
        try:
            if self.settings.url == "-":
                raise LinkError(
                    "-: standard input is the keyboard here; expected a port, an address or a file"
                )
            link = open_link(
                self.settings, self._site, self._index, clock=self._clock, cancelled=self._stop.is_set
            )
        except (EastfallError, OSError) as error:
            self._say("lost", safe(str(error), 200))
            return
        try:
            self._opened = self._clock()
            self._as_sent = not (getattr(link, "patient", False) or self.settings.url.startswith("emulate:"))
            self._say("open")
            self._take_all(link)
        except LinkError as error:
            self._say("lost", safe(str(error), 200))
        finally:
            link.close()

    def _take_all(self, link: Link) -> None:
        splitter = Splitter()
        # A file gives everything at once: a person could read none of it.
        pause = POLL if getattr(link, "patient", False) else 0.0
        while not self._stop.wait(pause):
            data = link.read(POLL)
            if data is None:
                self._keep((splitter.cut_off() + b"\n").lstrip(b"\n"), b"")
                self._say("ended")
                return
            if data:
                self._keep(splitter.feed(data), splitter.pending)
        self._say("closed")

    def _keep(self, data: bytes, pending: bytes) -> None:
        lines = data.split(b"\n")[:-1]
        with self._lock:
            self._lines.extend(lines)
            self._count += len(lines)
            self._pending = pending[-PENDING:]

    def _say(self, state: str, trouble: str = "") -> None:
        with self._lock:
            self._state, self._trouble = state, trouble


@dataclass(frozen=True, slots=True)
class LineRead:
    """One line, and how it is read."""

    raw: bytes
    verdict: str
    """good, bad, unused (says nothing to this form) or waiting (its partner comes later)."""
    words: str
    """The values with their units, or what is wrong and what was expected."""


class LineReader:
    """Reads lines one by one by a line form, and counts.

    Parameters
    ----------
    settings : LinkSettings
        The form.

    Raises
    ------
    ParameterError
        The form cannot be used.
    """

    def __init__(self, settings: LinkSettings) -> None:
        self._decoder = decoder_for(settings)
        self._number = 0
        self.good = self.bad = self.unused = 0
        """Lines; a sentence that waits for its partner is counted when that has come, or cannot come any more."""
        self.faults: Counter[str] = Counter()

    def read(self, lines: Sequence[bytes]) -> list[LineRead]:
        """Tell how lines are read that follow those before."""
        return [self._read(line) for line in lines]

    def _read(self, line: bytes) -> LineRead:
        self._number += 1
        whole = line.replace(b"\n", b" ") + b"\n"
        said = self._decoder.decode(
            LineBlock(data=whole, times=np.array([-float(self._number)]), first_line=self._number)
        )
        self.good += len(said.readings) + said.partners
        self.bad += said.rejected.size
        self.unused += said.unused
        self.faults.update(said.faults)
        if len(said.readings):
            return LineRead(line, "good", in_words(said.readings))
        if self._decoder.pending:
            return LineRead(line, "waiting", "waits for the sentence that completes it")
        if said.examples:
            _, kind, _, expected = said.examples[-1]
            return LineRead(line, "bad", f"{kind}; expected {expected}")
        return LineRead(line, "unused", "says nothing that this form reads")


def in_words(readings: Readings) -> str:
    """Return the last reading of a block with units; the time only where it is the instrument's own."""
    last = {name: float(readings.column(name)[-1]) for name in ("time", "host_time", *_WORDED)}
    clock = [f"time {last['time']:.3f} s"] if last["time"] != last["host_time"] else []
    spoken = [
        f"{label} {size(last[name]):.{digits}f}{unit}"
        for name, (label, size, digits, unit) in _WORDED.items()
        if np.isfinite(last[name])
    ]
    return "  ".join([*clock, *spoken])


_Worded = tuple[str, Callable[[float], float], int, str]
_WORDED: dict[str, _Worded] = {
    "depth": ("depth", float, 3, " m"),
    "tilt_a": ("A", degrees, 4, "°"),
    "tilt_b": ("B", degrees, 4, "°"),
    "east": ("east", lambda metres: 1e3 * metres, 1, " mm"),
    "north": ("north", lambda metres: 1e3 * metres, 1, " mm"),
    "azimuth": ("azimuth", degrees, 1, "°"),
    "temperature": ("", lambda kelvin: kelvin - 273.15, 1, " °C"),
    "supply": ("", float, 2, " V"),
    "face": ("face", degrees, 0, "°"),
}
