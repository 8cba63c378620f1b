"""A folder on another device than everything else: logs are rolled and made again there, results written there."""

import tempfile
from collections.abc import Iterator
from datetime import UTC, datetime
from pathlib import Path

import numpy as np
import pytest

from eastfall.io.arrivals import LineBlock, RunEvent
from eastfall.io.export import export
from eastfall.io.reduce import reduce_file
from eastfall.io.runlog import LogPolicy, RunLogWriter, read_log, verify_log
from eastfall.io.sitefile import parse_site

MEMORY = Path("/dev/shm")  # noqa: S108 - the device is the point
SITE = """\
[site]
name = "Far Side"
latitude_deg = 57.3
[shaft]
depth_m = 300.0
[run]
kind = "guided"
[[link]]
url = "-"
"""


@pytest.fixture
def elsewhere(tmp_path: Path) -> Iterator[Path]:
    """Yield a folder on another device than the test's own."""
    if not MEMORY.is_dir() or MEMORY.stat().st_dev == tmp_path.stat().st_dev:
        pytest.skip("no second device here")
    with tempfile.TemporaryDirectory(dir=MEMORY) as folder:
        yield Path(folder)


def _record(log: RunLogWriter, first: int, count: int) -> None:
    for number in range(first, first + count):
        line = b"%.1f,0.01,-0.01\n" % (0.5 * number)
        log.raw(LineBlock(data=line, times=np.array([0.25 * number]), first_line=number + 1))
        log.tick(0.25 * number)


def test_a_log_on_another_device_rolls_and_is_made_again_when_deleted(elsewhere: Path) -> None:
    """Several parts, one of them deleted under the writer: every line is there in the end, and it is intact."""
    site = parse_site(SITE, "far.toml")
    policy = LogPolicy(roll_bytes=4000, seal_every=0.5, sync_every=0.0)
    log = RunLogWriter.create(elsewhere, site, started_at=datetime(2026, 1, 2, tzinfo=UTC), policy=policy)
    first = log.path
    _record(log, 0, 300)
    log.path.unlink()
    _record(log, 300, 300)
    log.event(RunEvent(time=150.0, name="end"))
    log.close(150.0)
    assert len(list(elsewhere.iterdir())) > 3
    with read_log(first) as reader:
        lines = [line for one in reader if isinstance(one, LineBlock) for line in one.lines()]
    assert [float(one.split(b",")[0]) for one in lines] == [0.5 * number for number in range(600)]
    assert verify_log(first).state == "intact"


def test_results_of_a_log_here_are_written_there(elsewhere: Path, tmp_path: Path) -> None:
    """An export to another device than the log's is whole, and leaves nothing else behind."""
    log = RunLogWriter.create(
        tmp_path, parse_site(SITE, "far.toml"), started_at=datetime(2026, 1, 2, tzinfo=UTC)
    )
    _record(log, 0, 200)
    log.close(60.0)
    export(reduce_file(log.path), elsewhere / "out.csv")
    assert [one.name for one in elsewhere.iterdir()] == ["out.csv"]
    assert len((elsewhere / "out.csv").read_text().splitlines()) > 9
