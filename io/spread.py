"""Work on many files: one after the other, over the cores of this machine, or on a Dask cluster that stands already.

What is done with a file is the caller's function, the same wherever it runs; the results come in the files' order.
"""

import importlib
import os
from collections.abc import Callable, Iterator, Sequence
from contextlib import closing
from pathlib import Path
from typing import Any, TypeVar

from eastfall.io.errors import InputError, LinkError

Made = TypeVar("Made")

WORTH_A_POOL = 64
"""Files from which on other processes are worth their start."""
_PATIENCE = 10.0
"""Longest wait for a scheduler to answer [s]."""


def spread(
    make: Callable[[Path], Made],
    files: Sequence[Path],
    *,
    lost: Callable[[Path, str], Made],
    workers: int | None = None,
    scheduler: str | None = None,
) -> Iterator[Made]:
    """Do something with every file.

    Parameters
    ----------
    make : callable
        A function of a module (or a `functools.partial` of one), so that other processes find it; what it returns can
        be pickled.
    files : sequence of Path
    lost : callable
        Gives the result of a file over which something unforeseen happened, or whose worker was lost, from the file and
        what happened; the others are done all the same.
    workers : int, optional
        Processes of this machine; by default as many as there are cores if there are many files. 1 stays in this one.
    scheduler : str, optional
        Address of a Dask scheduler, such as tcp://host:8786; its workers must see the files under the same paths and
        have this program installed.

    Yields
    ------
    Made
        One result a file, in the order of the files.

    Raises
    ------
    LinkError
        No scheduler answers at that address.
    InputError
        Dask is not installed here.
    """
    if scheduler is not None:
        yield from _on_cluster(make, files, lost, scheduler)
        return
    count = workers or ((os.cpu_count() or 1) if len(files) >= WORTH_A_POOL else 1)
    if count == 1:
        for path in files:
            yield _here(make, path, lost)
        return
    # Only where other processes are started: the import takes a tenth of a second.
    from eastfall.io.crew import each  # noqa: PLC0415

    yield from each(make, files, lambda path, why: lost(path, f"{path}: {why}"), count)


def _here(make: Callable[[Path], Made], path: Path, lost: Callable[[Path, str], Made]) -> Made:
    try:
        return make(path)
    except Exception as error:  # noqa: BLE001 - whatever happens over a file belongs to that file
        return lost(path, f"{path}: {type(error).__name__}: {error}")


def _on_cluster(
    make: Callable[[Path], Made], files: Sequence[Path], lost: Callable[[Path, str], Made], scheduler: str
) -> Iterator[Made]:
    """Let the cluster's workers do it; a worker that dies has its files done by another (Dask sees to that)."""
    with closing(_client(scheduler)) as client:
        asked = client.map(make, files, pure=False)
        for path in files:
            future = asked.pop(0)
            try:
                yield future.result()
            except Exception as error:  # noqa: BLE001 - whatever the cluster met with this file belongs to this file
                yield lost(path, f"{path}: not done on the cluster: {type(error).__name__}: {error}")


def _client(scheduler: str) -> Any:
    try:
        dask: Any = importlib.import_module("distributed")  # an extra, and slow to import
    except ImportError:
        raise InputError(
            "a scheduler needs Dask, which is not installed: pip install 'eastfall[dask]'"
        ) from None
    try:
        return dask.Client(scheduler, timeout=_PATIENCE, set_as_default=False)
    except (OSError, ValueError) as error:
        raise LinkError(
            f"{scheduler}: no Dask scheduler answers there ({error}); expected an address such as tcp://host:8786"
        ) from None
