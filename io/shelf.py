"""The runs in a folder as a list of cards: where, when, what kind, how deep, the verdict, and whether intact."""

import os
import tomllib
from collections.abc import Callable
from dataclasses import dataclass, replace
from datetime import datetime
from functools import lru_cache, partial
from importlib.metadata import version
from math import inf
from pathlib import Path
from typing import Any

from eastfall.io.arrivals import RunEvent
from eastfall.io.logformat import SUFFIX
from eastfall.io.logtail import last_event
from eastfall.io.reduce import reduce_file
from eastfall.io.safetext import safe
from eastfall.io.seal import header_of, verify_log
from eastfall.io.spread import spread
from eastfall.io.tables import number
from eastfall.physics.errors import EastfallError
from eastfall.physics.expected import ExpectedCurve, expected_curve
from eastfall.physics.settings import Assumptions

CARD_KEYS = ("path", "site", "started_at", "kind", "depth_m", "verdict", "state", "error")


@dataclass(frozen=True, slots=True, kw_only=True)
class RunCard:
    """One run, at a glance; all text is safe to show."""

    path: Path
    site: str = ""
    started_at: datetime | None = None
    kind: str = ""
    depth: float | None = None
    """Deepest station [m]."""
    verdict: str = ""
    """The worst of any station; empty without stations or where it was not asked for."""
    state: str = ""
    """intact, cut short, or changed."""
    error: str = ""
    """Why the file cannot be read; empty if it can."""


@lru_cache(maxsize=32)
def curve_of(assumptions: Assumptions) -> ExpectedCurve:
    """Return the curve of a site; runs in one folder are often of few sites."""
    return expected_curve(assumptions)


def log_files(folder: Path) -> list[Path]:
    """Return the first part of every run log in a folder, by name."""
    with os.scandir(folder) as entries:
        names = [one.name for one in entries if one.name.endswith(SUFFIX) and ".part-" not in one.name]
    return [folder / name for name in sorted(names)]


def card(path: Path, *, judged: bool = True) -> RunCard:
    """Return the card of one run.

    Parameters
    ----------
    path : Path
        The first part of a log.
    judged : bool
        Whether to reduce it for depth and verdict; else only the header and the seals are read.
    """
    site, started, kind = "", None, ""
    try:
        header = header_of(path)
        kind, started = safe(header.kind, 20), _instant(header.started_at)
        site = _site_name(header.site)
        known = RunCard(path=path, site=site, started_at=started, kind=kind, state=verify_log(path).state)
        if not judged:
            return known
        if known.state == "intact" and header.program == version("eastfall"):
            told = last_event(path, "summary")
            if told is not None:
                # Sealed with the run, and by this very program: working through the run would say the same.
                depth, verdict = _told(told)
                return replace(known, depth=depth, verdict=verdict)
        reduction = reduce_file(path, curve_for=curve_of)
    except (EastfallError, OSError) as error:
        return RunCard(path=path, site=site, started_at=started, kind=kind, error=safe(str(error), 300))
    return replace(
        known,
        site=safe(reduction.site.assumptions.site.name, 200),
        depth=max((one.depth for one in reduction.result.stations), default=None),
        verdict=reduction.verdict or "",
        state=reduction.seal_state,
    )


def _told(summary: RunEvent) -> tuple[float | None, str]:
    """Return depth [m] and verdict of a summary; what is not of their kind counts as absent."""
    depth, verdict = summary.fields.get("deepest_m"), summary.fields.get("verdict")
    return (
        float(depth) if isinstance(depth, int | float) else None,
        verdict if verdict in {"within", "over", "undecided"} else "",
    )


def _site_name(text: str) -> str:
    """Return the shaft's name from a site file without checking the rest of it."""
    try:
        return safe(str(tomllib.loads(text)["site"].get("name", "")), 200)
    except (tomllib.TOMLDecodeError, KeyError, AttributeError, TypeError):
        return ""


def _instant(text: str) -> datetime | None:
    try:
        return datetime.fromisoformat(text)
    except ValueError:
        return None


def list_runs(
    folder: Path,
    progress: Callable[[int, int], None] | None = None,
    workers: int | None = None,
    *,
    judged: bool = True,
    scheduler: str | None = None,
) -> tuple[RunCard, ...]:
    """List the runs in a folder.

    Parameters
    ----------
    folder : Path
        Where run logs stand; folders inside it are not entered.
    progress : callable, optional
        Called with the number done and the number there is.
    workers, scheduler
        Where it is done: see `io.spread`.
    judged : bool
        Whether to reduce each run for depth and verdict; else only headers and seals are read, which takes a tenth.

    Returns
    -------
    tuple of RunCard
        The newest first; a file that cannot be read has its error on its card.

    Raises
    ------
    OSError
        The folder cannot be read.
    InputError
        No scheduler answers, or Dask is not installed.
    """
    files = log_files(folder.absolute() if scheduler else folder)  # workers stand in a folder of their own
    found = []
    work = partial(card, judged=judged)
    if progress is not None:
        progress(0, len(files))
    for one in spread(work, files, lost=_lost, workers=workers, scheduler=scheduler):
        found.append(one)
        if progress is not None:
            progress(len(found), len(files))
    return tuple(sorted(found, key=_age, reverse=True))


def _age(one: RunCard) -> float:
    try:
        return one.started_at.timestamp() if one.started_at else -inf
    except (OverflowError, ValueError):  # a date that no clock of this machine reaches
        return -inf


def _lost(path: Path, why: str) -> RunCard:
    return RunCard(path=path, error=safe(why, 300))


def card_row(one: RunCard) -> dict[str, Any]:
    """Return a card as a plain dict by `CARD_KEYS`."""
    return {
        "path": str(one.path),
        "site": one.site,
        "started_at": one.started_at.isoformat() if one.started_at else None,
        "kind": one.kind,
        "depth_m": number(one.depth),
        "verdict": one.verdict or None,
        "state": one.state or None,
        "error": one.error or None,
    }
