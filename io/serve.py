"""The emulated instrument served to other programs as a real one would be: one loop, no threads, ended by a signal.

The lines are made by `io.emulator`; `io.outlets` carries them.
"""

import contextlib
import json
import signal
import sys
import time
from collections import Counter
from collections.abc import Callable, Iterator, Sequence
from functools import partial
from pathlib import Path
from types import FrameType
from typing import TextIO

from eastfall.io.emulator import EmulatedLine, Emulator, refuse_pace
from eastfall.io.errors import OutputError
from eastfall.io.outlets import Clock, Outlet, PtyOutlet, TcpOutlet

_TICK = 0.02
"""The longest sleep [s]; a signal is seen within it."""


class Server:
    """Hands the lines of an emulator to its outlets as their time comes.

    Parameters
    ----------
    emulator : Emulator
        The instruments.
    outlets : sequence of Outlet
        One for each of its links.
    pace : float
        Simulated seconds in one second of the clock.
    clock : callable
        Monotonic time [s].
    """

    def __init__(
        self,
        emulator: Emulator,
        outlets: Sequence[Outlet],
        *,
        pace: float = 1.0,
        clock: Clock = time.monotonic,
    ) -> None:
        self.emulator = emulator
        self.outlets = outlets
        self.sent = [Counter[str](good=0) for _ in outlets]
        self.unheard = [0 for _ in outlets]
        self._pace = pace
        self._clock = clock
        self._start: float | None = None
        self._ended = False

    def step(self) -> float:
        """Send what is due; return how long there is nothing to do [s]."""
        heard = [one.heard() for one in self.outlets]
        now = self._clock()
        if self._start is None:
            # The journey waits at the collar for whoever listens first.
            self._start = now if any(heard) else None
            return _TICK
        until = (now - self._start) * self._pace
        for link, outlet in enumerate(self.outlets):
            self._pass_on(link, outlet, self.emulator.take(link, until), heard=heard[link])
        dues = [self.emulator.due(link) for link in range(len(self.outlets))]
        coming = [one for one in dues if one is not None]
        self._ended = not coming and not any(heard)
        next_one = min(coming, default=until + _TICK * self._pace) / self._pace + self._start
        return min(max(next_one - self._clock(), 0.0), _TICK)

    @property
    def ended(self) -> bool:
        """Whether the feed is over and nobody listens any more."""
        return self._ended

    def _pass_on(self, link: int, outlet: Outlet, lines: list[EmulatedLine], *, heard: bool) -> None:
        for one in lines:
            if heard and outlet.send(one.data):
                self.sent[link][one.fault or "good"] += 1
            else:
                self.unheard[link] += 1

    def report(self) -> dict[str, object]:
        """Return what was sent, and the truth behind it, as JSON values in SI units and radians.

        `good` and `broken` count the lines that a client was there to take, `unheard` those that none was.
        """
        links = [
            {
                "address": outlet.address,
                "good": sent["good"],
                "broken": {kind: count for kind, count in sorted(sent.items()) if kind != "good"},
                "unheard": unheard,
            }
            for outlet, sent, unheard in zip(self.outlets, self.sent, self.unheard, strict=True)
        ]
        return {"seed": self.emulator.seed, "truth": self.emulator.truth.as_dict(), "links": links}


def serve_pty(
    emulator: Emulator,
    *,
    link_path: Path | None = None,
    pace: float = 1.0,
    report: Path | None = None,
    stop: Callable[[], bool] | None = None,
    out: TextIO | None = None,
) -> None:
    """Serve every link of an emulator on a pseudo-terminal of its own, until SIGINT, SIGTERM or the end of the feed.

    Parameters
    ----------
    emulator : Emulator
        Its simulated time starts when the first program opens a device.
    link_path : Path, optional
        A name for the device; further links get it with .1, .2 and so on at the end.
    pace : float
        Simulated seconds in a real one.
    report : Path, optional
        Where to write, at the end, what was sent and what is true (JSON); nothing may stand there.
    stop : callable, optional
        Asked many times a second whether to end; by default the two signals are heeded.
    out : text stream, optional
        Where the devices are named, one a line; standard output by default.

    Raises
    ------
    LinkError
        Without pseudo-terminals, or for a pace that the lines cannot carry.
    OutputError
        If `link_path` or `report` stands already or cannot be made.
    """
    numbered = (Path(f"{link_path}.{number}") if link_path else None for number in range(1, emulator.links))
    makers = [partial(PtyOutlet, name) for name in (link_path, *numbered)]
    _serve(emulator, makers, pace=pace, report=report, stop=stop, out=out)


def serve_tcp(
    emulator: Emulator,
    *,
    host: str = "127.0.0.1",
    port: int = 0,
    pace: float = 1.0,
    report: Path | None = None,
    stop: Callable[[], bool] | None = None,
    out: TextIO | None = None,
) -> None:
    """Serve every link of an emulator on a TCP port of its own; else as `serve_pty`.

    Parameters
    ----------
    emulator, pace, report, stop, out
        As for `serve_pty`.
    host : str
        Address to listen on; this machine alone by default.
    port : int
        Of the first link, further links the next ones; 0 takes any free ones.

    Raises
    ------
    LinkError
        If a port cannot be listened on, or for a pace that the lines cannot carry.
    OutputError
        If `report` stands already or cannot be made.
    """
    makers = [partial(TcpOutlet, host, port + number if port else 0) for number in range(emulator.links)]
    _serve(emulator, makers, pace=pace, report=report, stop=stop, out=out)


def _serve(
    emulator: Emulator,
    makers: Sequence[Callable[[], Outlet]],
    *,
    pace: float,
    report: Path | None,
    stop: Callable[[], bool] | None,
    out: TextIO | None,
) -> None:
    for settings in emulator.site.links:
        refuse_pace(emulator.site, settings, pace, "emulate")
    with contextlib.ExitStack() as stack:
        paper = stack.enter_context(_opened(report)) if report else None
        asked = stop or stack.enter_context(_signals())
        outlets: list[Outlet] = []
        for make in makers:
            outlets.append(make())
            stack.callback(outlets[-1].close)
        server = Server(emulator, outlets, pace=pace)
        if paper:
            stack.callback(lambda: paper.write(json.dumps(server.report(), indent=1) + "\n"))
        print(*(one.address for one in outlets), sep="\n", file=out or sys.stdout, flush=True)
        while not asked() and not server.ended:
            time.sleep(server.step())


def _opened(report: Path) -> TextIO:
    try:
        opened: TextIO = report.open("x", encoding="utf-8")
    except OSError as error:
        raise OutputError(f"{report}: {error.strerror or error}; expected a path that is free") from error
    return opened


@contextlib.contextmanager
def _signals() -> Iterator[Callable[[], bool]]:
    """Turn SIGINT and SIGTERM into a question that the loop asks."""
    seen: list[int] = []

    def note(number: int, _frame: FrameType | None) -> None:
        seen.append(number)

    before = {number: signal.signal(number, note) for number in (signal.SIGINT, signal.SIGTERM)}
    try:
        yield lambda: bool(seen)
    finally:
        for number, handler in before.items():
            signal.signal(number, handler)
