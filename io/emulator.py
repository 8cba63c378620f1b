"""An emulated instrument: lines on a simulated time axis, in the form of each of a site's links, good and broken.

What it measures comes from `io.scenes`; how it is reached over a port is `io.serve`.
"""

import threading
import time
from collections import Counter, deque
from collections.abc import Callable
from dataclasses import dataclass, replace
from importlib.resources import files
from urllib.parse import parse_qsl, urlsplit

import numpy as np

from eastfall.io.broken import broken_kinds, broken_line
from eastfall.io.errors import LinkError
from eastfall.io.journey import Winch
from eastfall.io.scenes import Scene, scene_for
from eastfall.io.sitefile import LinkSettings, SiteFile, parse_site
from eastfall.io.siteplace import refusals_of
from eastfall.io.truth import Truth, draw_truth
from eastfall.io.wording import LineWriter
from eastfall.physics.errors import ParameterError
from eastfall.physics.settings import Kind

_CHUNK = 64
"""Readings drawn at a time; each chunk has a random generator of its own, so that polling changes nothing."""


@dataclass(frozen=True, slots=True)
class EmulatedLine:
    """A line as it leaves the instrument."""

    time: float
    """Of arrival, on the simulated axis [s]."""
    data: bytes
    """With its end."""
    fault: str = ""
    """The kind of damage; empty for a good line."""


def _refuse_unless(ok: bool, name: str, value: object, unit: str, expected: str) -> None:
    if not ok:
        raise ParameterError(name, value, unit, expected)


class Emulator:
    """The instruments of every link of a site, at one emulated shaft.

    Parameters
    ----------
    site : SiteFile
        What stands in the shaft and how each link words its lines; without a link, one with the usual columns.
    seed : int
        Everything random follows from it.
    rate : float
        Readings per simulated second [1/s]; a drop goes at the pace of its bodies.
    truth : Truth, optional
        What is really so; drawn from the site and the seed if it is not given.
    broken : float
        Broken lines in between, as a fraction of the good ones, 0 to 1.
    winch : Winch, optional
        How a guided probe is driven.
    until : float, optional
        Simulated time after which the instrument is silent [s]; None: it goes on, standing at the collar.
    """

    def __init__(
        self,
        site: SiteFile,
        *,
        seed: int = 1,
        rate: float = 10.0,
        truth: Truth | None = None,
        broken: float = 0.0,
        winch: Winch | None = None,
        until: float | None = None,
    ) -> None:
        _refuse_unless(0.0 < rate <= 1e5, "rate", rate, "1/s", "more than 0, to 100000")
        _refuse_unless(0.0 <= broken <= 1.0, "broken", broken, "", "0 to 1")
        _refuse_unless(until is None or until >= 0.0, "until", until, "s", "0 or more")
        links = site.links or (LinkSettings(url="emulate:"),)
        self.site = replace(site, links=links)
        self.seed = seed
        self.truth = truth or draw_truth(site.assumptions, seed)
        faces = any("face_deg" in one.columns for one in links)
        self.scene: Scene = scene_for(
            site.assumptions, self.truth, rate=rate, seed=seed, winch=winch, faces=faces
        )
        self._streams = [
            _Stream(self.scene, one, seed=(seed, 2, number), broken=broken, until=until)
            for number, one in enumerate(links)
        ]

    @property
    def duration(self) -> float:
        """When everything has been shown once, in simulated time [s]."""
        return self.scene.duration

    @property
    def links(self) -> int:
        """How many links there are."""
        return len(self._streams)

    def take(self, link: int, until: float) -> list[EmulatedLine]:
        """Return the lines of a link that arrive before a simulated time [s] and were not taken yet."""
        return self._streams[link].take(until)

    def lines(self, link: int, until: float) -> list[tuple[float, bytes]]:
        """Return the same as pairs of arrival time [s] and bytes."""
        return [(one.time, one.data) for one in self.take(link, until)]

    def due(self, link: int) -> float | None:
        """Return when the next line of a link arrives [s]; None when there are no more."""
        return self._streams[link].due()

    def counts(self, link: int) -> dict[str, int]:
        """Return how many lines of a link were taken so far: `good`, and the broken ones by kind."""
        return dict(self._streams[link].counts)


class _Stream:
    """The lines of one link, made chunk by chunk."""

    def __init__(
        self,
        scene: Scene,
        settings: LinkSettings,
        *,
        seed: tuple[int, int, int],
        broken: float,
        until: float | None,
    ) -> None:
        self.counts: Counter[str] = Counter(good=0)
        self._scene = scene
        self._settings = settings
        self._writer = LineWriter(settings)
        self._kinds = broken_kinds(settings)
        self._seed = seed
        self._broken = broken
        self._until = np.inf if until is None else until
        self._next = 0
        self._ready: deque[EmulatedLine] = deque()

    def take(self, until: float) -> list[EmulatedLine]:
        taken = []
        while (due := self.due()) is not None and due < until:
            taken.append(self._ready.popleft())
        self.counts.update(one.fault or "good" for one in taken)
        return taken

    def due(self) -> float | None:
        while not self._ready and not self._ended:
            self._make_chunk()
        return self._ready[0].time if self._ready else None

    @property
    def _ended(self) -> bool:
        count = self._scene.count
        over = self._next * self._scene.interval >= self._until
        return over or (count is not None and self._next >= count)

    def _make_chunk(self) -> None:
        rng = np.random.default_rng([*self._seed, self._next])
        at = np.arange(self._next, self._next + _CHUNK, dtype=np.float64) * self._scene.interval
        self._next += _CHUNK
        said = self._scene.sample(at, rng)
        spoiled = rng.random(_CHUNK) < self._broken
        count = self._scene.count
        for number, sampled in enumerate(at):
            beyond = count is not None and self._next - _CHUNK + number >= count
            if beyond or sampled >= self._until:
                break
            self._make_lines(number, float(sampled), said, rng if spoiled[number] else None)

    def _make_lines(
        self, number: int, sampled: float, said: dict[str, np.ndarray], rng: np.random.Generator | None
    ) -> None:
        bodies = self._writer.bodies({name: float(column[number]) for name, column in said.items()})
        arrival = sampled + self._settings.latency
        self._ready.extend(EmulatedLine(arrival, body + b"\r\n") for body in bodies)
        if rng is not None:
            kind = self._kinds[int(rng.integers(len(self._kinds)))]
            which = bodies[int(rng.integers(len(bodies)))]
            damaged = broken_line(kind, which, self._settings, rng)
            later = arrival + 0.5 * self._scene.interval
            self._ready.append(EmulatedLine(later, damaged + b"\r\n", kind))


class EmulatedLink:
    """A link (`io.links.Link`) over an emulator, for a demonstration without a port.

    Parameters
    ----------
    emulator : Emulator
        The instrument.
    link : int
        Which of its links.
    pace : float
        Simulated seconds that pass in one second of the clock.
    clock : callable
        Monotonic time [s].
    wait : callable, optional
        Waits for at most so many seconds; by default until the link is closed, at the latest.
    name : str
        What it is called on the screen.
    """

    def __init__(
        self,
        emulator: Emulator,
        link: int = 0,
        *,
        pace: float = 1.0,
        clock: Callable[[], float] = time.monotonic,
        wait: Callable[[float], object] | None = None,
        name: str = "emulate:",
    ) -> None:
        _refuse_unless(0.0 < pace < np.inf, "pace", pace, "", "more than 0")
        self.name = name
        self.emulator = emulator
        self._link = link
        self._pace = pace
        self._clock = clock
        self._closed = threading.Event()
        self._wait = wait or self._closed.wait
        self._start = clock()

    def read(self, timeout: float) -> bytes | None:
        """Return what has arrived, after at most `timeout` seconds; b"" for nothing yet, None for the end."""
        data = self._arrived()
        if data or self._closed.is_set():
            return data or None
        due = self.emulator.due(self._link)
        if due is None:
            return None
        self._wait(min(timeout, max(due / self._pace - (self._clock() - self._start), 0.0) + 1e-3))
        return self._arrived()

    def _arrived(self) -> bytes:
        now = (self._clock() - self._start) * self._pace
        return b"".join(one.data for one in self.emulator.take(self._link, now))

    def close(self) -> None:
        """End it; a `read` that waits in another thread returns at once."""
        self._closed.set()


@dataclass(frozen=True, slots=True, kw_only=True)
class EmulateOptions:
    """What an `emulate:` URL, or the command line, asks of the emulator."""

    seed: int = 1
    rate: float = 10.0
    """Readings per simulated second [1/s]."""
    pace: float = 1.0
    """Simulated seconds that pass in one real second."""
    broken: float = 0.0
    """Broken lines in between, as a fraction of the good ones."""
    until: float | None = None
    """Simulated time after which the feed ends [s]."""
    once: bool = False
    """Whether it ends when everything has been shown."""
    errors: bool = False
    """Whether the instrument errs beyond what the site states, by draws from its stated uncertainties."""


_CASTS: dict[str, Callable[[str], object]] = {
    "seed": int,
    "rate": float,
    "pace": float,
    "broken": float,
    "until": float,
    "once": lambda text: bool(int(text)),
    "errors": lambda text: bool(int(text)),
}


def options_of(url: str) -> EmulateOptions:
    """Read an `emulate:` URL, as `emulate:?seed=1&rate=10&pace=20&broken=0.01`; `until`, `once=1`, `errors=1` too.

    Raises
    ------
    LinkError
        For an unknown option, or one that is not a number.
    """
    options: dict[str, object] = {}
    for name, text in parse_qsl(urlsplit(url).query, keep_blank_values=True):
        if name not in _CASTS:
            raise LinkError(f"{url}: unknown option {name!r}; expected {', '.join(_CASTS)}")
        try:
            options[name] = _CASTS[name](text)
        except ValueError as error:
            raise LinkError(f"{url}: {name} is {text!r}; expected a number") from error
    return replace(EmulateOptions(), **options)  # type: ignore[arg-type]  # each was cast to its field's own type


def emulator_for(site: SiteFile, options: EmulateOptions, truth: Truth | None = None) -> Emulator:
    """Return the emulator that the options ask for; a truth that is not given is drawn from the seed."""
    real = truth or draw_truth(site.assumptions, options.seed, errors=options.errors)
    with refusals_of(site):
        emulator = Emulator(
            site, seed=options.seed, rate=options.rate, truth=real, broken=options.broken, until=options.until
        )
    if options.once and options.until is None:
        return emulator_for(site, replace(options, until=emulator.duration), real)
    return emulator


def emulated_link(
    url: str, site: SiteFile, index: int = 0, clock: Callable[[], float] = time.monotonic
) -> EmulatedLink:
    """Open an `emulate:` URL.

    Parameters
    ----------
    url : str
        See `options_of`.
    site : SiteFile
        The site whose instrument it is.
    index : int
        Which of its links.
    clock : callable
        Monotonic time [s].

    Raises
    ------
    LinkError
        For an unknown or unusable option, a link that the site does not have, or a pace other than 1 where the lines
        do not carry their own time.
    """
    options = options_of(url)
    refuse_pace(site, _settings(site, index, url), options.pace, url)
    try:
        return EmulatedLink(emulator_for(site, options), index, pace=options.pace, clock=clock, name=url)
    except ParameterError as error:
        raise LinkError(f"{url}: {error}") from error


def refuse_pace(site: SiteFile, settings: LinkSettings, pace: float, where: str) -> None:
    """Refuse a pace at which the lines of a link would tell of another speed than the true one.

    Raises
    ------
    LinkError
        If the pace is not 1 and the lines do not carry their own time; a drop has no speed to tell of.
    """
    timed = settings.form == "columns" and "time_s" in settings.columns
    if pace != 1.0 and not timed and site.assumptions.run.kind != "drop":
        raise LinkError(
            f"{where}: pace is {pace:g}; expected 1, because the lines do not carry their own time"
        )


def _settings(site: SiteFile, index: int, url: str) -> LinkSettings:
    if not 0 <= index < len(site.links):
        raise LinkError(f"{url}: the site has no link {index}; expected a [[link]] section for it")
    return site.links[index]


def demo_site(kind: Kind = "guided") -> SiteFile:
    """Return the built-in invented site of a kind of run; its first link is an `emulate:` URL."""
    name = f"demo_{kind}.toml"
    return parse_site((files("eastfall.io") / name).read_text(encoding="utf-8"), name)
