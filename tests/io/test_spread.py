"""Many runs at once: one process, several, or a Dask cluster of two workers give the same, also when a worker dies."""

import json
import os
import shutil
import signal
import subprocess
import sys
import time
from collections.abc import Callable, Iterator
from pathlib import Path

import pytest
from record_help import written

from eastfall.io.errors import InputError, LinkError
from eastfall.io.folder import SUMMARY_KEYS, reduce_folder
from eastfall.io.shelf import list_runs
from eastfall.io.spread import spread

LOGS = Path(__file__).parents[2] / "replay_logs"
LONG_ENOUGH = 40.0


@pytest.fixture
def shelf(tmp_path: Path) -> Path:
    """Return a folder of twelve logs, one of them rubbish."""
    folder = tmp_path / "shelf"
    folder.mkdir()
    for log in LOGS.glob("*.eastfall.jsonl"):
        shutil.copy(log, folder)
    for number in range(8):
        (tmp_path / str(number)).mkdir()
        written(tmp_path / str(number), seconds=20 + number).rename(folder / f"run-{number}.eastfall.jsonl")
    (folder / "rubbish.eastfall.jsonl").write_bytes(b"\x1b[2J\xff")
    return folder


def test_a_folder_is_reduced_to_one_summary_a_log(shelf: Path) -> None:
    """By name, each with all that `reduce` says of it alone; what cannot be used has its error and nothing else."""
    found = reduce_folder(shelf, workers=1)
    assert [one["path"] for one in found] == sorted(one["path"] for one in found)
    assert len(found) == 12
    guided = next(one for one in found if "sandrigg" in one["path"])
    assert (guided["site"], guided["kind"], guided["depth_m"], guided["verdict"], guided["exceeded"]) == (
        *("Sandrigg East", "guided", 360.211, "within", False),
    )
    assert guided["state"] == "intact"
    assert len(guided["stations"]) > 10
    rubbish = next(one for one in found if "rubbish" in one["path"])
    assert {name for name, value in rubbish.items() if value is not None} == {"path", "error"}
    assert rubbish["error"].isprintable()
    assert all(tuple(one)[: len(SUMMARY_KEYS)] == SUMMARY_KEYS for one in found)
    json.dumps(found, allow_nan=False)


def test_two_processes_reduce_to_the_same_as_one(shelf: Path) -> None:
    """Spread over processes, the numbers are the same in the same order."""
    done: list[tuple[int, int]] = []
    assert reduce_folder(shelf, workers=2, progress=lambda now, of: done.append((now, of))) == reduce_folder(
        shelf, workers=1
    )
    assert done == [(number, 12) for number in range(13)]


def test_a_folder_without_logs_is_one_clear_line(tmp_path: Path) -> None:
    """An empty folder is unusable input, not an empty answer."""
    with pytest.raises(InputError, match="no run log in it"):
        reduce_folder(tmp_path)


def test_a_scheduler_without_dask_names_the_extra(monkeypatch: pytest.MonkeyPatch) -> None:
    """Where Dask is not installed the error says how to get it."""
    monkeypatch.setitem(sys.modules, "distributed", None)
    with pytest.raises(InputError, match=r"pip install 'eastfall\[dask\]'"):
        list(spread(str, [Path("x")], lost=lambda path, _: str(path), scheduler="tcp://127.0.0.1:1"))


def _dask(*words: str, folder: Path) -> "subprocess.Popen[bytes]":
    with (folder / "dask.log").open("ab") as said:
        return subprocess.Popen(
            [sys.executable, "-m", "dask", *words, "--scheduler-file", str(folder / "scheduler.json")],
            stdout=said,
            stderr=said,
            cwd=folder,
        )


class Cluster:
    """A scheduler and two workers on the loopback, processes of their own that stand already."""

    def __init__(self, folder: Path) -> None:
        host = ("--host", "127.0.0.1")
        self.processes = [_dask("scheduler", *host, "--port", "0", "--no-dashboard", folder=folder)]
        worker = ("worker", *host, "--nthreads", "1", "--no-nanny", "--no-dashboard")
        self.workers = [_dask(*worker, folder=folder) for _ in range(2)]
        self.processes += self.workers
        self._said = folder / "dask.log"
        self._file = folder / "scheduler.json"
        self.address = ""

    def wait(self) -> None:
        """Wait until both workers are there."""
        self._until(lambda: self._said.read_text().count("Registered to:") == 2)
        self.address = json.loads(self._file.read_text())["address"]

    def _until(self, done: Callable[[], bool]) -> None:
        end = time.monotonic() + LONG_ENOUGH
        while not done():
            assert time.monotonic() < end, self._said.read_text()
            assert all(one.poll() is None for one in self.processes), self._said.read_text()
            time.sleep(0.05)

    def close(self) -> None:
        """End what still runs."""
        for one in self.processes:
            one.kill()
        for one in self.processes:
            one.wait(LONG_ENOUGH)


@pytest.fixture
def cluster(tmp_path: Path) -> Iterator[Cluster]:
    """Yield a cluster of two workers."""
    pytest.importorskip("distributed", reason="the extra `dask` is not installed")
    one = Cluster(tmp_path)
    try:
        one.wait()
        yield one
    finally:
        one.close()


@pytest.mark.skipif(os.name != "posix", reason="kills by POSIX signal")
def test_a_cluster_gives_the_same_and_survives_a_failed_worker(shelf: Path, cluster: Cluster) -> None:
    """On two workers, and with one of them killed in the middle, cards and summaries are those of one process."""
    alone = reduce_folder(shelf, workers=1)
    assert reduce_folder(shelf, scheduler=cluster.address) == alone
    assert list_runs(shelf, scheduler=cluster.address) == list_runs(shelf, workers=1)

    def kill_one(done: int, _of: int) -> None:
        if done == 1:
            cluster.workers[0].send_signal(signal.SIGKILL)
            cluster.processes.remove(cluster.workers[0])

    assert reduce_folder(shelf, scheduler=cluster.address, progress=kill_one) == alone
    assert cluster.workers[0].wait(LONG_ENOUGH) == -signal.SIGKILL
    assert cluster.workers[1].poll() is None


def test_no_scheduler_at_an_address_is_one_clear_line(monkeypatch: pytest.MonkeyPatch, shelf: Path) -> None:
    """An address where nobody answers is refused with the address and what was expected."""
    pytest.importorskip("distributed", reason="the extra `dask` is not installed")
    monkeypatch.setattr("eastfall.io.spread._PATIENCE", 0.3)
    with pytest.raises(LinkError, match=r"127\.0\.0\.1:1: no Dask scheduler answers there"):
        reduce_folder(shelf, scheduler="tcp://127.0.0.1:1")
