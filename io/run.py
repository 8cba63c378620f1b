"""A live run: links, run log and pipeline held together, one step at a time; the screen and `record` drive it.

The order for every arrival: into the log, through the pipeline, then its alarm changes into the log. Whatever changes
the engine's state besides lines (a person's word, a lost link, a failing record) is an event that takes the same way,
so a replay of the log repeats the run to the last bit.
"""

import threading
import time
from collections.abc import Callable, Sequence
from dataclasses import replace
from functools import partial
from types import MappingProxyType
from typing import Protocol, Self

from eastfall.io.arrivals import Arrival, LineBlock, RunEvent
from eastfall.io.errors import LinkError
from eastfall.io.health import Health, LinkHealth, RunUpdate
from eastfall.io.links import Cancelled, Link, open_link
from eastfall.io.pipeline import Pipeline
from eastfall.io.reader import Clock, Inbox, Item, LinkNews, Reader
from eastfall.io.recorder import Recorder
from eastfall.io.runlog import RunLogWriter
from eastfall.io.safetext import safe
from eastfall.io.sitefile import HAND, LinkSettings, SiteFile
from eastfall.physics.findings import Findings
from eastfall.physics.verdict import worst

__all__ = ["Health", "LinkHealth", "Run", "RunUpdate"]

RECORD_FAILING = "record failing"
LINK_LOST = "link lost"
STOP_WITHIN = 0.3
"""Longest wait for a reader thread to leave [s]."""
_MOST = 256
"""Arrivals taken in one step."""


class Opener(Protocol):
    """Opens a link; `io.links.open_link` by default."""

    def __call__(
        self,
        settings: LinkSettings,
        site: SiteFile | None,
        index: int,
        *,
        clock: Callable[[], float],
        cancelled: Cancelled,
    ) -> Link:
        """Open the link that the settings describe."""
        ...


class Run:
    """A live run.

    `step`, and what a person says, may be called from different threads; each call is whole.

    Parameters
    ----------
    site : SiteFile
        Links and assumptions.
    links : sequence of str, optional
        URLs in place of the site's, in its order.
    log : RunLogWriter, optional
        Where everything is recorded; None records nothing.
    clock : callable
        Monotonic seconds; the run's time is 0 now.
    armed : bool, optional
        True lets the readings of a `drop` run count from the start instead of from `arm` on; other runs always do.
    opener : callable
        Opens a link.
    wait : callable, optional
        How a reader waits before it tries a lost link again; for tests.

    Raises
    ------
    LinkError
        The site has no link.
    """

    def __init__(
        self,
        site: SiteFile,
        *,
        links: Sequence[str] | None = None,
        log: RunLogWriter | None = None,
        clock: Clock = time.monotonic,
        armed: bool | None = None,
        opener: Opener = open_link,
        wait: Callable[[float], bool] | None = None,
    ) -> None:
        self.site = _with_urls(site, links)
        self.pipeline = Pipeline(self.site)
        self._armed_at_start = bool(armed) and not self.pipeline.armed
        self._recorder = Recorder(log)
        self._clock = clock
        self._opener = opener
        self._wait = wait
        self._inbox = Inbox(clock)
        self._readers: list[Reader] = []
        self._findings: list[Findings] = []
        self._engine = threading.RLock()
        self._record_failing = False
        self._stopped = False

    # -- start and stop --------------------------------------------------------------------------------------------

    def start(self) -> None:
        """Open every link and start reading; a second call changes nothing.

        Raises
        ------
        LinkError
            A link cannot be opened; those that were are closed again.
        """
        if self._readers:
            return
        opened: list[Link] = []
        try:
            for index in range(len(self.site.links)):
                opened.append(self._open(index, lambda: False))  # noqa: PERF401 (kept when the next one fails)
        except LinkError:
            for link in opened:
                link.close()
            raise
        if self._armed_at_start:
            self.arm("")
        for index, link in enumerate(opened):
            reader = Reader(link, partial(self._reopen, index), self._inbox, index, wait=self._wait)
            self._readers.append(reader)
        for reader in self._readers:
            reader.start()

    def _open(self, index: int, cancelled: Cancelled) -> Link:
        settings = self.site.links[index]
        return self._opener(settings, self.site, index, clock=self._clock, cancelled=cancelled)

    def _reopen(self, index: int) -> Link:
        reader = self._readers[index]
        return self._open(index, lambda: reader.stopping)

    @property
    def log_path(self) -> str:
        """Where the run is recorded; empty if it is not."""
        return str(self._recorder.log.path) if self._recorder.log else ""

    @property
    def ended(self) -> bool:
        """Whether every link has come to its end and everything has been taken."""
        return (
            bool(self._readers) and all(one.state == "ended" for one in self._readers) and self._inbox.empty
        )

    def stop(self) -> RunUpdate:
        """Stop reading, take what has come, end the run and close the log; a second call changes nothing."""
        with self._engine:
            if not self._stopped:
                self._stopped = True
                self._shut_down()
            return self._update(self._inbox.now())

    def _shut_down(self) -> None:
        cuts = [reader.stop(0.0) for reader in self._readers]
        cuts = [cut or reader.stop(STOP_WITHIN) for cut, reader in zip(cuts, self._readers, strict=True)]
        now = self._take_all()
        for index, cut in enumerate(cuts):
            if cut:
                self._event(RunEvent(time=now, name="link", fields=_link_fields(index, "closed", "", cut)))
        self._event(RunEvent(time=now, name="end"))
        self._event(RunEvent(time=now, name="summary", fields=self._summary()))
        self._recorder.close(now)

    def _summary(self) -> dict[str, object]:
        """Return what a list of many runs shows of this one, so that it need not be worked through for that."""
        stations = self.pipeline.survey.result().stations
        return {
            "verdict": worst(one.verdict for one in stations) or "",
            "deepest_m": max((one.depth for one in stations), default=None),
        }

    def __enter__(self) -> Self:
        self.start()
        return self

    def __exit__(self, *_: object) -> None:
        self.stop()

    # -- steps -----------------------------------------------------------------------------------------------------

    def step(self, timeout: float) -> RunUpdate:
        """Wait for arrivals, take them, and let time pass.

        Parameters
        ----------
        timeout : float
            Longest wait [s].

        Returns
        -------
        RunUpdate
            With everything found since the last one.
        """
        self._inbox.wait(timeout)
        with self._engine:
            if not self._stopped:
                self._take_some()
            return self._update(self._inbox.now())

    def _take_some(self) -> float | None:
        """Take what has come, up to a bound, and tick; return the time if that was all that was stamped before it."""
        items, now, all_of_it = self._inbox.take(_MOST)
        arrivals = [arrival for item in items for arrival in self._arrivals(item)]
        for one in arrivals:  # all of them first: whatever happens below, what has come is in the log
            self._recorder.put(one)
        newest = _stamp(arrivals[-1]) if arrivals else now
        for one in arrivals:
            self._found(self.pipeline.take(one), newest)
        if all_of_it:  # else something still in the queue was stamped before `now`
            self._found(self.pipeline.tick(now), now)
        self._recorder.tick(now)
        self._watch_record(now)
        return now if all_of_it else None

    def _take_all(self) -> float:
        now = None
        while now is None:
            now = self._take_some()
        return now

    def _arrivals(self, item: Item) -> list[Arrival]:
        if isinstance(item, LineBlock):
            return [item]
        fields = _link_fields(item.link, item.state, item.message, item.cut)
        news: list[Arrival] = [RunEvent(time=item.time, name="link", fields=fields)]
        if item.state in ("open", "lost"):
            lost = item.state == "lost"
            news.append(_condition(item.time, self._lost_name(item), on=lost, message=item.message))
        return news

    def _lost_name(self, news: LinkNews) -> str:
        return LINK_LOST if len(self._readers) == 1 else f"{LINK_LOST} {news.link + 1}"

    def _event(self, event: RunEvent) -> None:
        self._recorder.put(event)
        self._found(self.pipeline.take(event), event.time)

    def _found(self, findings: Findings, now: float) -> None:
        """Keep findings for the next update; a change of an alarm goes to the log, stamped by the host's clock.

        Its instants by the readings' clock and the host's are fields: in the place of the stamp one of them would hold
        up a replay.
        """
        for one in findings.alarms:
            fields: dict[str, object] = {
                "name": one.name,
                "at": one.time,
                "host_at": one.host_time,
                "from": one.old,
                "to": one.new,
                "depth": one.depth,
                "message": one.message,
            }
            self._recorder.put(RunEvent(time=now, name="alarm", fields=fields))
        if len(findings.rows) or findings.stations or findings.alarms:
            self._findings.append(findings)

    def _watch_record(self, now: float) -> None:
        failing = bool(self._recorder.trouble)
        if failing != self._record_failing:
            self._record_failing = failing
            self._event(_condition(now, RECORD_FAILING, on=failing, message=self._recorder.trouble))

    # -- what a person says ----------------------------------------------------------------------------------------

    def acknowledge(self, name: str, who: str = "") -> None:
        """Acknowledge an alarm by its name."""
        self._said("acknowledge", name=name, who=who)

    def shelve(self, name: str, seconds: float, reason: str, who: str = "") -> None:
        """Put an alarm aside for some seconds, with a reason."""
        self._said("shelve", name=name, seconds=seconds, reason=reason, who=who)

    def note(self, text: str, who: str = "") -> None:
        """Write a note into the record."""
        self._said("note", text=text, who=who)

    def arm(self, who: str = "") -> None:
        """Say that the shaft is clear: from now on the readings of a `drop` run count."""
        self._said("armed", who=who)

    def mark(self, depth: float, east: float, north: float, who: str = "") -> None:
        """Take an offset [m] that a person read and typed in, such as where a body landed; it is recorded first."""
        self._said("mark", depth_m=depth, east_m=east, north_m=north, who=who)

    def _said(self, event: str, **fields: object) -> None:
        """Let the word take effect after everything that was stamped before it."""
        with self._engine:
            if not self._stopped:
                self._event(RunEvent(time=self._take_all(), name=event, fields=fields))

    # -- how things stand ------------------------------------------------------------------------------------------

    def _update(self, now: float) -> RunUpdate:
        findings, self._findings = tuple(self._findings), []
        survey = self.pipeline.survey
        return RunUpdate(
            findings=findings,
            standing=survey.standing(),
            alarms=survey.alarms(),
            health=self._health(now),
            time=now,
            armed=self.pipeline.armed,
        )

    def _health(self, now: float) -> Health:
        log = self._recorder.log
        return Health(
            links=tuple(self._link_health(index, now) for index in range(len(self._readers))),
            frames=self.pipeline.frames,
            rejected=self.pipeline.rejected,
            faults=MappingProxyType(dict(self.pipeline.faults)),
            log_path=self.log_path,
            log_bytes=log.bytes_written if log else 0,
            log_state=self._recorder.trouble or (log.state if log else "not recording"),
            log_lost=self._recorder.lost,
            set_aside=self.pipeline.set_aside,
        )

    def _link_health(self, index: int, now: float) -> LinkHealth:
        reader = self._readers[index]
        url = safe(self.site.links[index].url, 80)
        retry_at = reader.retry_at
        return LinkHealth(
            name=url,
            url=url,
            state=reader.state,
            retry_in=None if retry_at is None else max(retry_at - now, 0.0),
            lines=reader.lines,
            rate=reader.rate(now),
            silent_for=max(now - reader.latest, 0.0),
            last_fault=reader.message if reader.state == "lost" else self._last_fault(index),
            queue_dropped=reader.dropped,
        )

    def _last_fault(self, index: int) -> str:
        last = self.pipeline.last_faults.get(index)
        if last is None:
            return ""
        number, kind, text, expected = last
        return f"line {number}: {kind}: {text}; expected {expected}"


def _stamp(arrival: Arrival) -> float:
    return arrival.time if isinstance(arrival, RunEvent) else float(arrival.times[-1])


def _condition(now: float, name: str, *, on: bool, message: str) -> RunEvent:
    return RunEvent(time=now, name="condition", fields={"name": name, "on": on, "message": message})


def _link_fields(link: int, state: str, message: str, cut: bytes) -> dict[str, object]:
    fields: dict[str, object] = {"link": link, "state": state, "message": message}
    if cut:
        fields["cut"] = cut.decode("latin-1")
    return fields


def _with_urls(site: SiteFile, urls: Sequence[str] | None) -> SiteFile:
    """Return the site with other URLs for its links."""
    if urls is None:
        if not site.links:
            raise LinkError(f"{site.path}: no [[link]] in it; expected one, or --link URL")
        return site
    links = site.links or (LinkSettings(url="-"),)
    if len(urls) != len(links):
        raise LinkError(
            f"{len(urls)} link URLs given; expected {len(links)}, one for each [[link]] of the site file"
        )
    found = replace(site, links=tuple(replace(one, url=url) for one, url in zip(links, urls, strict=True)))
    if found.by_hand != site.by_hand:
        # A replay knows the site file alone, and must know whether silence is a fault.
        raise LinkError(f"{' '.join(urls)}: expected {HAND} in the site file and here, or in neither")
    return found
