"""Long runs compressed in time, in a process of their own: memory flat, no work that grows, no line lost."""

import json
import subprocess
import sys
from itertools import pairwise
from pathlib import Path

import pytest

from eastfall.io.runlog import verify_log

SCRIPT = Path(__file__).with_name("soak_run.py")
GROWTH = 8_000
"""Memory that a run may gain after its first third [kB]: stations, and what the allocator keeps; a leak of 20 bytes a
line would be 14 MB in an hour."""

pytestmark = [
    pytest.mark.invariant,
    pytest.mark.skipif(not Path("/proc/self/status").exists(), reason="memory is read from /proc"),
]


def _soak(folder: Path, hours: float) -> None:
    done = subprocess.run(
        [sys.executable, str(SCRIPT), str(folder), str(hours)], capture_output=True, text=True, check=False
    )
    assert done.returncode == 0, done.stderr
    told = [json.loads(line) for line in done.stdout.splitlines()]
    last = told[-1]
    assert len(told) >= 10
    assert last["frames"] == round(200 * 3600 * hours)
    assert last["frames"] + last["rejected"] == last["sent"]
    assert "clock stepped back" not in last["faults"]
    assert last["dropped"] == 0
    assert last["rejected"] > 0
    assert told[-1]["resident"] - told[3]["resident"] < GROWTH, [one["resident"] for one in told]
    spent = [after["cpu"] - before["cpu"] for before, after in pairwise(told)]
    early, late = sorted(spent[:4])[1], sorted(spent[-4:])[1]
    assert late < 1.5 * early, spent  # each second of the run costs the same at its end: no lag grows
    assert verify_log(Path(last["log"])).state == "intact"


def test_five_minutes_of_two_hundred_lines_a_second(tmp_path: Path) -> None:
    """The short version: 60,000 lines with one in a hundred broken, all accounted for."""
    _soak(tmp_path, 1.0 / 12.0)


@pytest.mark.soak
def test_two_hours_of_two_hundred_lines_a_second(tmp_path: Path) -> None:
    """1.4 million lines, down 900 m and up again."""
    _soak(tmp_path, 2.0)
