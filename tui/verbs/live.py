"""The verbs of a live run: `demo`, `watch` and `record`."""

import getpass
import os
import signal
import sys
import time
from collections.abc import Callable, Iterator, Sequence
from contextlib import contextmanager, suppress
from datetime import UTC, datetime
from pathlib import Path
from types import FrameType
from typing import TYPE_CHECKING

import click

from eastfall.physics.errors import EastfallError
from eastfall.tui.patient import HOLD, PatientLines
from eastfall.tui.verbs.options import above_nothing, an_input, into, readers_units

if TYPE_CHECKING:
    from eastfall.io.run import Health, Run, RunUpdate
    from eastfall.io.sitefile import SiteFile

_STEP = 0.1
"""Longest wait for a line before looking whether to stop [s]."""

link = click.option(
    "--link", "links", metavar="URL", multiple=True, help="Instead of the site's links, in its order."
)
plain = click.option("--plain", is_flag=True, help="Lines of text instead of the dashboard.")
shaft_clear = click.option(
    "--shaft-clear", metavar="NAME", help="Who has checked that the shaft is clear; a drop needs it."
)
a_while = click.option(
    "--for",
    "seconds",
    type=above_nothing,
    metavar="SECONDS",
    help="End after so long.",
)


@click.command()
@click.option("--kind", type=click.Choice(["guided", "hung", "drop"]), default="guided", show_default=True)
@into
@plain
@a_while
def demo(kind: str, into: Path, plain: bool, seconds: float | None) -> None:
    """Run the whole job on a built-in emulated instrument: no hardware, an invented shaft, everything else real."""
    from eastfall.io.emulator import demo_site  # noqa: PLC0415 (the engine only where it runs)

    site = demo_site(kind)  # type: ignore[arg-type]  # click has checked the choice
    if plain or not _screen_there():
        _plainly(site, (), into, seconds or 150.0, "nobody: it is an emulated shaft")
        return
    watch_live(site, (), into, seconds)


@click.command()
@click.argument("site", type=an_input)
@link
@into
@plain
@shaft_clear
def watch(site: Path, links: tuple[str, ...], into: Path, plain: bool, shaft_clear: str | None) -> None:
    """Watch measured against expected live; everything is recorded.

    The path of the run log is printed when the run ends.
    """
    from eastfall.io.sitefile import load_site  # noqa: PLC0415

    loaded = load_site(site)
    if plain:
        _plainly(loaded, links, into, None, shaft_clear)
    else:
        watch_live(loaded, links, into)


@click.command()
@click.argument("site", type=an_input)
@link
@into
@shaft_clear
@a_while
def record(
    site: Path, links: tuple[str, ...], into: Path, shaft_clear: str | None, seconds: float | None
) -> None:
    """Record without a screen, until SIGINT, SIGTERM or --for.

    The path of the run log is the one line on standard output.
    """
    from eastfall.io.sitefile import load_site  # noqa: PLC0415

    loaded = load_site(site)
    _leave_typing_to_screen(loaded)
    out, told = PatientLines(sys.stdout), PatientLines(sys.stderr)
    with _recorded(loaded, links, into, _cleared(loaded, shaft_clear)) as run, _signals() as stopped, run:
        out.path(run.log_path)
        end = _end_of(seconds)
        while not (stopped() or run.ended or time.monotonic() >= end):
            _tell(run.step(_STEP), told)
        last = run.stop()
    told.keep_all()
    told.line(f"{last.health.frames} readings used, {last.health.rejected} lines refused")
    finish(last.health, out, told, hurried=stopped())


def watch_live(site: "SiteFile", links: tuple[str, ...], folder: Path, seconds: float | None = None) -> None:
    """Open the dashboard on a new run, and print the log's path when it has ended."""
    from eastfall.tui.opening import run_live  # noqa: PLC0415 (the screen library only where a screen opens)
    from eastfall.tui.terminal import refuse_unless_screen  # noqa: PLC0415

    refuse_unless_screen(os.environ, is_terminal=_screen_there())
    _leave_keys_to_screen(links or tuple(one.url for one in site.links))
    # The links are opened before the screen: one that cannot be had is told in one line, here and now.
    with _recorded(site, links, folder, None) as run, run:
        status = run_live(site, run=run, seconds=seconds)
    out = PatientLines(sys.stdout)
    out.path(run.log_path)
    out.end()
    click.get_current_context().exit(status)


def _screen_there() -> bool:
    return sys.stdin.isatty() and sys.stdout.isatty()


def _leave_keys_to_screen(urls: Sequence[str]) -> None:
    """Refuse to read lines from the terminal that the dashboard reads its keys from: not even `q` would reach it."""
    if "-" in urls:
        raise click.UsageError(
            "a link is '-', standard input, and the dashboard takes its keys from there; expected another link, "
            "or --plain to type or pipe the lines in"
        )


def _leave_typing_to_screen(site: "SiteFile") -> None:
    if site.by_hand:
        raise click.UsageError(
            f"{site.path}: its link is hand:, and readings are typed on the dashboard; expected watch without --plain, "
            "or the link - in the site file"
        )


def _end_of(seconds: float | None) -> float:
    return time.monotonic() + seconds if seconds is not None else float("inf")


def _plainly(
    site: "SiteFile", links: tuple[str, ...], folder: Path, seconds: float | None, shaft_clear: str | None
) -> None:
    from eastfall.tui.plain import PlainLines  # noqa: PLC0415

    _leave_typing_to_screen(site)
    out, told = PatientLines(sys.stdout), PatientLines(sys.stderr)
    lines = PlainLines(out.line, site.assumptions.run.kind, units=readers_units())
    with _recorded(site, links, folder, _cleared(site, shaft_clear)) as run, _signals() as stopped, run:
        end = _end_of(seconds)
        while not (stopped() or run.ended or time.monotonic() >= end):
            lines.take(run.step(_STEP))
            if out.error is not None:  # who read it has gone
                raise out.error
        last = run.stop()
    out.keep_all()
    lines.end(last)
    out.path(run.log_path)
    finish(last.health, out, told, hurried=stopped())


def finish(health: "Health", out: PatientLines, told: PatientLines, *, hurried: bool) -> None:
    """Have the last words written, the record being closed; who told the program to end waits a moment at most.

    The status is 1 where lines that came are not in the log: a full disk, a folder that is gone.
    """
    if health.log_lost:
        told.keep_all()
        told.line(f"eastfall: {health.log_path}: incomplete, {health.log_lost} lines or events lost")
    try:
        for one in (told, out):
            one.end(HOLD if hurried else float("inf"))
    finally:
        if health.log_lost:
            click.get_current_context().exit(1)


@contextmanager
def _recorded(
    site: "SiteFile", links: tuple[str, ...], folder: Path, cleared_by: str | None
) -> Iterator["Run"]:
    """Give a run, not yet started, over a new log; a run that never began leaves no empty log behind."""
    from eastfall.io.run import Run  # noqa: PLC0415
    from eastfall.io.runlog import RunLogWriter  # noqa: PLC0415

    log = RunLogWriter.create(folder, site, started_at=datetime.now(UTC))
    run = None
    try:
        run = Run(site, links=links or None, log=log)
        if cleared_by:
            run.arm(cleared_by)
        yield run
    except EastfallError:
        log.close(0.0)
        if run is None or run.pipeline.frames + run.pipeline.rejected == 0:
            with suppress(OSError):
                log.path.unlink()
        raise


def _cleared(site: "SiteFile", name: str | None) -> str | None:
    """Return who has checked that the shaft is clear, asking if need be; only a drop needs it."""
    if site.assumptions.run.kind != "drop" or name:
        return name
    if not sys.stdin.isatty():
        raise click.UsageError("a drop is armed by a person: give --shaft-clear NAME once the shaft is clear")
    click.confirm("A body will fall. Is the shaft clear, and nobody below?", abort=True, err=True)
    return getpass.getuser()


def _tell(update: "RunUpdate", told: PatientLines) -> None:
    """Write alarm changes to standard error as they come."""
    for one in update.findings:
        for change in one.alarms:
            told.line(f"{change.name}: {change.old} -> {change.new}; {change.message}")


@contextmanager
def _signals() -> Iterator[Callable[[], bool]]:
    """Turn SIGINT and SIGTERM into a flag while a run is on, so that the log is closed and the port released."""
    asked: list[int] = []

    def ask(number: int, _frame: FrameType | None) -> None:
        asked.append(number)

    numbers = [signal.SIGINT, signal.SIGTERM, *([signal.SIGHUP] if hasattr(signal, "SIGHUP") else [])]
    before = {number: signal.signal(number, ask) for number in numbers}
    try:
        yield lambda: bool(asked)
    finally:
        for number, handler in before.items():
            signal.signal(number, handler)
