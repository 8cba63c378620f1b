"""What the tests of the live path share: a site, a clock moved by hand, links fed by hand, a waiting loop."""

import threading
import time
from collections import deque
from collections.abc import Callable

from eastfall.io.errors import LinkError
from eastfall.io.run import Run, RunUpdate
from eastfall.io.sitefile import SiteFile, parse_site

GUIDED = """\
[site]
name = "Sallow Cross, east shaft"
latitude_deg = 51.20
[shaft]
depth_m = 600.0
[run]
kind = "guided"
[limits]
warning_mm = 5.0
action_mm = 9.0
feed_silent_s = 2.0
"""
ONE_LINK = '[[link]]\nurl = "test"\n'
TWO_LINKS = """\
[[link]]
url = "winch"
columns = ["depth_m"]
latency_s = 0.25
[[link]]
url = "probe"
columns = ["tilt_a_deg", "tilt_b_deg"]
"""
LONG_ENOUGH = 10.0
"""Seconds after which a test that waits for something has failed."""


def site(links: str = ONE_LINK, text: str = GUIDED) -> SiteFile:
    """Return the site with these links."""
    return parse_site(text + links, "sallow.toml")


class HandClock:
    """A clock that stands until the test moves it."""

    def __init__(self) -> None:
        self.time = 1000.0

    def __call__(self) -> float:
        """Return the time."""
        return self.time


class FedLink:
    """A link that gives what the test puts in: bytes, None for the end, an exception to raise."""

    patient = False

    def __init__(self, name: str = "test", items: tuple[object, ...] = ()) -> None:
        self.name = name
        self.closed = False
        self._items: deque[object] = deque(items)
        self._put = threading.Event()

    def put(self, item: object) -> None:
        """Let the next read give `item`."""
        self._items.append(item)
        self._put.set()

    def read(self, timeout: float) -> bytes | None:
        """Give the next item, or nothing."""
        if not self._items:
            self._put.wait(min(timeout, 0.01))
            self._put.clear()
            return b""
        item = self._items.popleft()
        if isinstance(item, Exception):
            raise item
        assert item is None or isinstance(item, bytes)
        return item

    def close(self) -> None:
        """Note it."""
        self.closed = True


class Openers:
    """Opens the links that the test prepared, by index; refuses when none is ready."""

    def __init__(self, *links: FedLink) -> None:
        self.ready: dict[int, deque[FedLink]] = {i: deque([one]) for i, one in enumerate(links)}
        self.tries = 0

    def __call__(self, _settings: object, _site: object, index: int, **_more: object) -> FedLink:
        """Open, or raise."""
        self.tries += 1
        waiting = self.ready.get(index)
        if not waiting:
            raise LinkError(f"link {index}: no such device")
        return waiting.popleft()


def until(run: Run, done: Callable[[RunUpdate], bool]) -> list[RunUpdate]:
    """Step a run until an update satisfies `done`; return all updates."""
    updates = []
    deadline = time.monotonic() + LONG_ENOUGH
    while time.monotonic() < deadline:
        updates.append(run.step(0.01))
        if done(updates[-1]):
            return updates
    raise AssertionError(f"not within {LONG_ENOUGH} s; last: {updates[-1].health}")


def live_threads() -> list[str]:
    """Return the names of threads that read links."""
    return [one.name for one in threading.enumerate() if one.name.startswith("link ")]
