"""A whole emulated run recorded by the real program on a simulated clock: seconds of work, the same log every time.

Use it as `python -m eastfall.io.rehearsal SITE --into DIR`; seed, rate and the rest stand in the site's `emulate:` URL.
"""

import argparse
import sys
import threading
from collections.abc import Callable
from dataclasses import replace
from datetime import UTC, datetime
from pathlib import Path

from eastfall.io.emulator import EmulateOptions, Emulator, emulator_for, options_of
from eastfall.io.errors import InputError, LinkError
from eastfall.io.links import Cancelled, Link
from eastfall.io.run import Run
from eastfall.io.runlog import RunLogWriter
from eastfall.io.sitefile import LinkSettings, SiteFile, load_site

_PATIENCE = 0.2
"""How long a read waits for its turn before it says that nothing has come [s]."""
_STUCK = 60.0
"""How long the reader may take to come back from one arrival [s]."""


class LockstepLink:
    """An emulated link that hands over one arrival at a time, when told to, and moves the clock to it.

    Parameters
    ----------
    emulator : Emulator
        With one link.
    """

    name = "emulate:"

    def __init__(self, emulator: Emulator) -> None:
        self._emulator = emulator
        self._turn = threading.Semaphore(0)
        self._back = threading.Semaphore(0)
        self._coming = True
        self._now = 0.0

    def clock(self) -> float:
        """Return the simulated time [s]."""
        return self._now

    def read(self, timeout: float) -> bytes | None:
        """Return the next arrival once it is its turn."""
        if self._coming:
            self._coming = False
            self._back.release()
        if not self._turn.acquire(timeout=max(timeout, _PATIENCE)):
            return b""
        self._coming = True
        due = self._emulator.due(0)
        if due is None:
            return None
        self._now = due
        return b"".join(one.data for one in self._emulator.take(0, due + 1e-9))

    def wait_until_taken(self) -> None:
        """Wait until the reader has queued what it was given and reads again."""
        if not self._back.acquire(timeout=_STUCK):
            raise LinkError("emulate: the reader has not come back from a line; expected it within a minute")

    def give_turn(self) -> bool:
        """Let the next arrival through; return whether there is one."""
        more = self._emulator.due(0) is not None
        self._turn.release()
        return more

    def close(self) -> None:
        """Do nothing: there is nothing to give back."""


def rehearse(
    site: SiteFile,
    folder: Path,
    *,
    started_at: datetime,
    options: EmulateOptions | None = None,
    watch: Callable[[object], None] | None = None,
) -> Path:
    """Record a whole emulated run.

    Parameters
    ----------
    site : SiteFile
        With one link.
    folder : Path
        Where the log goes.
    started_at : datetime
        Start of the run for the log's header, aware.
    options : EmulateOptions, optional
        By default those of the link's `emulate:` URL; the feed always ends when everything has been shown.
    watch : callable, optional
        Called with every `io.run.RunUpdate`.

    Returns
    -------
    Path
        The log.

    Raises
    ------
    LinkError
        If the site has not one link, or its URL cannot be read.
    OutputError
        If the log cannot be written.
    """
    if len(site.links) != 1:
        raise LinkError(f"{site.path}: {len(site.links)} links; expected one, an emulate: URL")
    asked = options or options_of(site.links[0].url)
    link = LockstepLink(emulator_for(site, replace(asked, once=True)))

    def opener(
        settings: LinkSettings,
        site: SiteFile | None,
        index: int,
        *,
        clock: Callable[[], float],
        cancelled: Cancelled,
    ) -> Link:
        del settings, site, index, clock, cancelled
        return link

    log = RunLogWriter.create(folder, site, started_at=started_at)
    with Run(site, log=log, clock=link.clock, armed=True, opener=opener) as run:
        _drive(run, link, watch or (lambda _update: None))
    return log.path


def _drive(run: Run, link: LockstepLink, watch: Callable[[object], None]) -> None:
    """Let reader and run take turns: every arrival is recorded and judged before the clock moves on."""
    more = True
    while more:
        link.wait_until_taken()
        watch(run.step(0.0))
        more = link.give_turn()
    while not run.ended:
        watch(run.step(0.05))


def main(arguments: list[str] | None = None) -> int:
    """Record the run of a site file; print the log's path."""
    parser = argparse.ArgumentParser(prog="python -m eastfall.io.rehearsal", description=__doc__)
    parser.add_argument("site", type=Path, help="site file with one link, an emulate: URL")
    parser.add_argument(
        "--into", type=Path, default=Path(), metavar="DIR", help="folder of the log; default here"
    )
    parser.add_argument(
        "--started", type=datetime.fromisoformat, metavar="TIME", help="start of the run, ISO 8601"
    )
    given = parser.parse_args(arguments)
    started = given.started or datetime.now(UTC)
    try:
        site = replace(load_site(given.site), path=given.site.name)
        path = rehearse(
            site, given.into, started_at=started if started.tzinfo else started.replace(tzinfo=UTC)
        )
    except InputError as error:
        print(error, file=sys.stderr)  # noqa: T201 (a command's answer)
        return 2
    print(path)  # noqa: T201 (as above)
    return 0


if __name__ == "__main__":
    sys.exit(main())
