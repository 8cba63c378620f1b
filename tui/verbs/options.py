"""Options, and ways of printing, that several verbs share."""

import csv
import json
import os
import sys
from collections.abc import Callable, Sequence
from math import isfinite, nan
from pathlib import Path
from typing import TYPE_CHECKING, Any

import click

from eastfall.io.safetext import guarded, safe, safe_json
from eastfall.tui.letters import in_ascii
from eastfall.tui.printed import listed, printed
from eastfall.tui.saying import plain, say, window

if TYPE_CHECKING:
    from eastfall.tui.preferences import Preferences
    from eastfall.tui.units import Units

RUNS_FOLDER = Path("eastfall-runs")
"""Where runs are recorded unless told otherwise: beside the person's work, in plain sight."""

Table = tuple[Sequence[str], Sequence[Sequence[Any]]]
"""Column names with units, and rows."""

an_input = click.Path(path_type=Path, dir_okay=False)
an_input_or_folder = click.Path(path_type=Path)
a_folder = click.Path(path_type=Path, file_okay=False)


class Number(click.FloatRange):
    """A finite number within bounds; the library's own range lets "nan" through, which no bound holds back."""

    name = "number"

    def convert(self, value: Any, param: click.Parameter | None, ctx: click.Context | None) -> float:
        """Read it."""
        try:
            number = float(value)
        except ValueError:
            number = nan
        if not (isfinite(number) and self._holds(number)):
            self.fail(f"{str(value)!r}; expected {self._expected()}", param, ctx)
        return number

    def _holds(self, number: float) -> bool:
        above = self.min is None or (number > self.min if self.min_open else number >= self.min)
        return above and (self.max is None or number <= self.max)

    def _expected(self) -> str:
        if self.min is None:
            return "a number"
        if self.max is not None:
            return f"a number from {self.min:g} to {self.max:g}"
        return f"a number more than {self.min:g}" if self.min_open else f"a number of at least {self.min:g}"


above_nothing = Number(min=0.0, min_open=True)

as_format = click.option(
    "--format",
    "form",
    type=click.Choice(["table", "csv", "json"]),
    default="table",
    show_default=True,
    help="How to print.",
)


def runs_folder() -> Path:
    """Return where runs are recorded: as the person's settings say, or beside the work."""
    named = _settings().runs_folder
    return Path(named).expanduser() if named else RUNS_FOLDER


def readers_units() -> "Units":
    """Return what lengths are told in, line by line, as the person's settings say."""
    from eastfall.tui.units import UNITS  # noqa: PLC0415 (as below)

    return UNITS[_settings().units]


def _settings() -> "Preferences":
    from eastfall.tui.preferences import Remembered  # noqa: PLC0415 (only for a run)

    remembered = Remembered.of(os.environ)
    if remembered.complaint:
        say(remembered.complaint, err=True)
    return remembered.now


into = click.option(
    "--into",
    type=a_folder,
    default=runs_folder,
    show_default=f"{RUNS_FOLDER}, or as in the settings",
    help="Folder for the run log.",
)


def with_options(*options: Callable[[Any], Any]) -> Callable[[Any], Any]:
    """Return a decorator that adds options in the order given."""

    def add(command: Any) -> Any:
        for one in reversed(options):
            command = one(command)
        return command

    return add


over_cores = with_options(
    click.option(
        "--workers", type=click.IntRange(min=1), help="Processes for a folder; one a core by default."
    ),
    click.option(
        "--scheduler",
        metavar="tcp://HOST:PORT",
        help="A Dask cluster that works through a folder instead of this machine.",
    ),
)
"""Where a folder of runs is worked through."""


def counted() -> Callable[[int, int], None] | None:
    """Return what shows on standard error how far work on a folder is; None where nobody looks."""
    return _count if sys.stderr.isatty() else None


def _count(done: int, total: int) -> None:
    """Say how far it is, and wipe it when it is done."""
    click.echo(f"\r{done} of {total} runs" if done < total else "\r" + " " * 40 + "\r", nl=False, err=True)


def print_json(value: object) -> None:
    """Write JSON, with a null for what is absent, to standard output alone."""
    click.echo(safe_json(json.dumps(value, ensure_ascii=plain(sys.stdout), allow_nan=False, indent=1)))


def print_rows(table: Table, form: str) -> None:
    """Write rows as CSV or as an aligned table."""
    if form == "csv":
        writer = csv.writer(sys.stdout, lineterminator="\n")
        writer.writerows([_csv_cell(one) for one in row] for row in (table[0], *table[1]))
        return
    rows = [[_cell(one) for one in row] for row in table[1]]
    for line in printed(table[0], rows, window()):
        click.echo(line)


def print_list(head: Sequence[str], rows: Sequence[Sequence[Any]]) -> None:
    """Write rows of text as an aligned list, of which the last column may be long."""
    for line in listed(head, [[_cell(one) for one in row] for row in rows], window()):
        click.echo(line)


def _csv_cell(value: object) -> object:
    return guarded(safe(value) if isinstance(value, str) else value)


def _cell(value: object) -> str:
    if value is None:
        return "-"
    if isinstance(value, float):
        return f"{round(value, 3) + 0.0:.3f}"  # no -0.000
    text = safe(str(value))
    return in_ascii(text) if plain(sys.stdout) else text
