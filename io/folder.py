"""Every run log of a folder reduced to one summary each, whatever state the file is in; on cores or a cluster."""

from collections.abc import Callable
from functools import partial
from pathlib import Path
from typing import Any

from eastfall.io.errors import InputError
from eastfall.io.reduce import reduce_file
from eastfall.io.safetext import safe
from eastfall.io.shelf import curve_of, log_files
from eastfall.io.sitefile import SiteFile
from eastfall.io.spread import spread
from eastfall.io.tables import number, reduce_table
from eastfall.physics.errors import EastfallError

SUMMARY_KEYS = (
    "path",
    "site",
    "started_at",
    "kind",
    "depth_m",
    "frames",
    "rejected",
    "verdict",
    "exceeded",
    "state",
    "error",
)


def summary(path: Path, *, site: SiteFile | None = None) -> dict[str, Any]:
    """Reduce one log.

    Parameters
    ----------
    path : Path
        The first part of a log.
    site : SiteFile, optional
        Settings to use instead of the recorded ones.

    Returns
    -------
    dict
        By `SUMMARY_KEYS`, followed by all that `reduce` says of a single log; of one that cannot be used, path and
        error alone are not None.
    """
    try:
        found = reduce_file(path, site=site, curve_for=curve_of)
    except (EastfallError, OSError) as error:
        return unusable(path, str(error))
    table = reduce_table(found)
    return {
        "path": str(path),
        "site": table["site"],
        "started_at": found.started_at.isoformat() if found.started_at else None,
        "kind": table["kind"],
        "depth_m": number(max((one.depth for one in found.result.stations), default=None)),
        "frames": table["frames"],
        "rejected": table["rejected"],
        "verdict": found.verdict,
        "exceeded": found.exceeded,
        "state": found.seal_state,
        "error": None,
        **{name: value for name, value in table.items() if name not in SUMMARY_KEYS},
    }


def unusable(path: Path, why: str) -> dict[str, Any]:
    """Return the summary of a log that cannot be used."""
    return {**dict.fromkeys(SUMMARY_KEYS), "path": str(path), "error": safe(why, 300)}


def reduce_folder(
    folder: Path,
    *,
    site: SiteFile | None = None,
    progress: Callable[[int, int], None] | None = None,
    workers: int | None = None,
    scheduler: str | None = None,
) -> list[dict[str, Any]]:
    """Reduce every run log of a folder; folders inside it are not entered.

    Parameters
    ----------
    folder : Path
        Where run logs stand.
    site : SiteFile, optional
        Settings to use instead of the recorded ones.
    progress : callable, optional
        Called with the number done and the number there is.
    workers, scheduler
        Where it is done: see `spread`.

    Returns
    -------
    list of dict
        One `summary` a log, by name.

    Raises
    ------
    InputError
        There is no run log in the folder, or nothing to spread over.
    OSError
        The folder cannot be read.
    """
    files = log_files(folder.absolute() if scheduler else folder)  # workers stand in a folder of their own
    if not files:
        raise InputError(f"{folder}: no run log in it; expected files that end in .eastfall.jsonl")
    found = []
    work = partial(summary, site=site)
    if progress is not None:
        progress(0, len(files))
    for one in spread(work, files, lost=unusable, workers=workers, scheduler=scheduler):
        found.append(one)
        if progress is not None:
            progress(len(found), len(files))
    return found
