"""The runs of some folders as a list: orders, filters, lines, names for what is written from one; draws nothing."""

from collections.abc import Callable, Iterable, Sequence
from functools import partial
from pathlib import Path
from typing import Any

from eastfall.io.errors import OutputError
from eastfall.io.logformat import SUFFIX
from eastfall.io.outputs import refuse_existing
from eastfall.io.safetext import safe
from eastfall.io.shelf import RunCard, list_runs, log_files
from eastfall.tui.roles import Role
from eastfall.tui.units import METRIC, Units
from eastfall.tui.widgets.table import fitting

ORDERS = ("date", "site", "verdict", "depth", "state")
FILTERS = ("all", "over", "undecided", "not intact")
EXPORTS = (".csv", ".json", ".las")
Progress = Callable[[int, int], None]
_WORST = ("over", "undecided", "within", "")
_ROLES = {"over": Role.ACTION, "undecided": Role.WARNING}
_SITE = 24


def folders(*wanted: Path) -> tuple[Path, ...]:
    """Return those folders that hold run logs, each once, in the order given."""
    found: dict[Path, Path] = {}
    for one in wanted:
        try:
            holds = one.is_dir() and bool(log_files(one))
        except OSError:
            holds = False
        if holds:
            found.setdefault(one.resolve(), one)
    return tuple(found.values())


def cards(where: Sequence[Path], progress: Progress, *, judged: bool) -> tuple[RunCard, ...]:
    """Return the cards of all runs in some folders, the newest first.

    Raises
    ------
    OSError
        A folder cannot be read.
    """
    total = sum(len(log_files(one)) for one in where)
    found: list[RunCard] = []
    for folder in where:
        found += list_runs(folder, partial(_onward, progress, len(found), total), judged=judged)
    return tuple(found)


def _onward(progress: Progress, before: int, total: int, done: int, _: int) -> None:
    """Tell how far it is over all folders."""
    progress(before + done, total)


def chosen(found: Iterable[RunCard], order: str, only: str) -> list[RunCard]:
    """Return the cards of a filter in an order."""
    kept = [one for one in found if _passes(one, only)]
    keys: dict[str, Callable[[RunCard], Any]] = {
        "date": lambda one: -age(one),
        "site": lambda one: one.site.casefold(),
        "verdict": lambda one: _WORST.index(one.verdict),
        "depth": lambda one: -(one.depth or 0.0),
        "state": lambda one: (one.state == "intact", one.state),
    }
    return sorted(kept, key=keys[order])


def age(one: RunCard) -> float:
    """Return when a run began [s since 1970]; 0 where that is not known."""
    try:
        return one.started_at.timestamp() if one.started_at else 0.0
    except (OverflowError, ValueError):  # a date that no clock of this machine reaches
        return 0.0


def _passes(one: RunCard, only: str) -> bool:
    if only == "not intact":
        return one.state != "intact"
    return only in ("all", one.verdict)


_WIDTHS = (1, 16, _SITE, 6, 7, 9, 9)
_RANKS = (0, 3, 0, 5, 4, 1, 2)
"""What stays the longest in a narrow window: the site, its verdict, the state of the record."""


def head(units: Units = METRIC, room: int = 80) -> str:
    """Return the line over the list, as far as there is room."""
    return _line(("", "started, UTC", "site", "run", units.depth_head, "verdict", "record"), room)


def _line(cells: Sequence[str], room: int) -> str:
    site = max(8, min(_SITE, room - 2))
    widths = [site if width == _SITE else width for width in _WIDTHS]
    shown = fitting(widths, _RANKS, room)
    set_right = cells[_DEPTH].rjust(widths[_DEPTH])
    told = [set_right if at == _DEPTH else cells[at][: widths[at]].ljust(widths[at]) for at in shown]
    return " ".join(told).rstrip()


_DEPTH = 4


def line(one: RunCard, *, picked: bool, units: Units = METRIC, room: int = 80) -> tuple[str, Role]:
    """Return a card as a line; a file that cannot be read tells why."""
    mark = "*" if picked else " "
    if one.error:
        why = one.error.removeprefix(safe(str(one.path), 300)).lstrip(",: ")
        return f"{mark} {safe(one.path.name, 40)}: {why}", Role.WARNING
    cells = (
        mark,
        f"{one.started_at:%Y-%m-%d %H:%M}" if one.started_at else "",
        one.site or one.path.name,
        one.kind,
        units.depth(one.depth) if one.depth is not None else "",
        one.verdict.upper(),
        one.state if one.state == "intact" else one.state.upper(),
    )
    role = Role.ACTION if one.state == "changed" else _ROLES.get(one.verdict, Role.TEXT)
    return _line(cells, room), role


def beside(log: Path, suffix: str) -> str:
    """Return a name for what is written from a run: as the log, in the same folder, with another suffix."""
    return str(log.with_name(log.name.removesuffix(SUFFIX) + suffix))


def new_file(text: str, suffixes: Sequence[str]) -> Path:
    """Read the name of a file to write.

    Raises
    ------
    ValueError
        With one line: it stands already, its folder does not, or its suffix is another.
    """
    path = Path(text.strip()).expanduser()
    if path.suffix.lower() not in suffixes:
        raise ValueError(f"The name ends in {', '.join(suffixes)}: what to write goes by it.")
    if not path.parent.is_dir():
        raise ValueError("There is no such folder.")
    try:
        refuse_existing(path)
    except OutputError:
        raise ValueError("It stands already, and nothing is written over. Another name?") from None
    return path
