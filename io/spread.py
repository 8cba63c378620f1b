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
_BATCH = 8
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
        Gives the result of a file whose worker was lost again and again, from the file and what happened.
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
        yield from map(make, files)
        return
    # Only where other processes are started: the import takes a tenth of a second.
    import multiprocessing  # noqa: PLC0415
    from concurrent.futures import ProcessPoolExecutor  # noqa: PLC0415

    # A fork would carry over a screen's threads and locks; a fresh interpreter takes nothing along.
    context = multiprocessing.get_context("spawn")
    with ProcessPoolExecutor(max_workers=count, mp_context=context) as pool:
        yield from pool.map(make, files, chunksize=_BATCH)


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
                yield lost(path, f"not done on the cluster: {type(error).__name__}: {error}")


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
