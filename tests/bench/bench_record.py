"""Speed of the record, as ratios in one run: reduce of sealed logs, verify, jumps, the writer's cost, the shelf.

Run with `python tests/bench/bench_record.py [--lines 2000000] [--logs 1000]`; it prints one table. Works of long logs
are processes of their own, timed whole in CPU seconds, so that other work on the machine does not count. Captures and
memory are in `bench_reduce`.
"""

import argparse
import os
import shutil
import subprocess
import sys
import tempfile
import time
from datetime import UTC, datetime
from pathlib import Path

import numpy as np

from eastfall.io.arrivals import LineBlock, RunEvent
from eastfall.io.runlog import RunLogWriter
from eastfall.io.sitefile import SiteFile, parse_site

Row = tuple[str, str, float, float]

SITE_TEXT = """\
[site]
name = "Bench"
latitude_deg = 57.30
[shaft]
depth_m = 940.0
[run]
kind = "guided"
[[link]]
url = "-"
"""
RATE = 200
LINES = 2_000_000
LOGS = 1000
A_FEW = 5.0
"""Seconds in which a folder of so many logs is to be listed."""
LOADTXT = """
import sys, numpy as np
depth, a, b = np.loadtxt(sys.argv[1], delimiter=",", unpack=True)
step = np.diff(depth)
print(np.sum(step * np.sin(np.radians(a[1:]))), np.sum(step * np.sin(np.radians(b[1:]))))
"""
TWO_LINKS = """\
[[link]]
url = "winch"
columns = ["depth_m"]
[[link]]
url = "probe"
columns = ["tilt_a_deg", "tilt_b_deg"]
"""
LOADTXT_OF_TWO = """
import sys, numpy as np
time, depth = np.loadtxt(sys.argv[1], delimiter=",", unpack=True)
when, a, b = np.loadtxt(sys.argv[2], delimiter=",", unpack=True)
step = np.diff(np.interp(when, time, depth))
print(np.sum(step * np.sin(np.radians(a[1:]))), np.sum(step * np.sin(np.radians(b[1:]))))
"""
JUMP = """
import sys
from pathlib import Path
from eastfall.io.replay import Replay
replay = Replay(Path(sys.argv[1]))
standing = replay.seek(0.9 * replay.duration).standing
assert standing is not None and abs(replay.time - 0.9 * replay.duration) < 1.0
"""
REDUCE = """
import sys
from pathlib import Path
from eastfall.io.reduce import reduce_file
found = reduce_file(Path(sys.argv[1]))
assert found.seal_state == "intact", found.verification
status = Path("/proc/self/status")
lines = status.read_text().splitlines() if status.exists() else ["VmHWM: 0"]
print(next(line.split()[1] for line in lines if line.startswith("VmHWM")))
"""
VERIFY = """
import sys
from pathlib import Path
from eastfall.io.seal import verify_log
assert verify_log(Path(sys.argv[1])).state == "intact"
"""
SHELF = """
import sys
from pathlib import Path
from eastfall.io.shelf import list_runs
if __name__ == "__main__":
    cards = list_runs(Path(sys.argv[1]), judged=sys.argv[2] == "judged")
    assert {one.state for one in cards} == {"intact"}
    print(len(cards))
"""


def bench_site() -> SiteFile:
    """Return the site of the benchmark."""
    return parse_site(SITE_TEXT, "bench.toml")


def make_lines(count: int) -> list[bytes]:
    """Return lines of a probe that goes down and up once."""
    rng = np.random.default_rng(7)
    depth = 470.0 - 470.0 * np.cos(np.arange(count) * (2.0 * np.pi / count))
    tilt = rng.normal(0.0, 0.02, (2, count))
    return [b"%.3f,%.4f,%.4f" % row for row in zip(depth, tilt[0], tilt[1], strict=True)]


def write_log(folder: Path, lines: list[bytes], batch: int) -> tuple[Path, float]:
    """Record lines in batches as they would arrive; return the log and the CPU time of writing [s]."""
    log = RunLogWriter.create(folder, bench_site(), started_at=datetime(2026, 1, 14, tzinfo=UTC))
    begun = time.process_time()
    for first in range(0, len(lines), batch):
        some = lines[first : first + batch]
        now = round(first / RATE, 6)
        log.raw(LineBlock(data=b"\n".join(some) + b"\n", times=np.full(len(some), now), first_line=first + 1))
        log.tick(now)
    end = len(lines) / RATE
    log.event(RunEvent(time=end, name="end"))
    log.close(end)
    return log.path, time.process_time() - begun


def write_two_links(folder: Path, count: int) -> tuple[Path, Path, Path]:
    """Record winch and probe in turn, a line a record, `count` lines in all; return the log, and each as a table."""
    site = parse_site(SITE_TEXT.replace('[[link]]\nurl = "-"\n', TWO_LINKS), "bench.toml")
    log = RunLogWriter.create(folder, site, started_at=datetime(2026, 1, 14, tzinfo=UTC))
    tables: tuple[list[bytes], list[bytes]] = ([], [])
    for number, line in enumerate(make_lines(count)):
        link, now = number % 2, round(number / RATE, 6)
        said = line.split(b",", 1)[link]
        tables[link].append(b"%.3f,%s\n" % (now, said))
        block = LineBlock(data=said + b"\n", times=np.array([now]), first_line=number // 2 + 1, link=link)
        log.raw(block)
        log.tick(now)
    log.event(RunEvent(time=count / RATE, name="end"))
    log.close(count / RATE)
    winch, probe = folder / "winch.csv", folder / "probe.csv"
    winch.write_bytes(b"".join(tables[0]))
    probe.write_bytes(b"".join(tables[1]))
    return log.path, winch, probe


def cost(script: str, *arguments: str) -> tuple[float, float, str]:
    """Run a script; return its CPU time [s], the time on the clock [s], and what it said."""
    begun = time.perf_counter()
    process = subprocess.Popen(
        [sys.executable, "-c", script, *arguments], stdout=subprocess.PIPE, text=True, start_new_session=True
    )
    assert process.stdout is not None
    with process.stdout as out:
        said = out.read()
    _, status, usage = os.wait4(process.pid, 0)
    process.returncode = status
    assert status == 0, (arguments, status)
    return usage.ru_utime + usage.ru_stime, time.perf_counter() - begun, said


def rows(count: int = LINES, logs: int = LOGS) -> list[Row]:
    """Work, yardstick, how many times less it takes, and what is wanted."""
    with tempfile.TemporaryDirectory() as name:
        folder = Path(name)
        lines = make_lines(count)
        bare = folder / "bare.csv"
        bare.write_bytes(b"\n".join(lines) + b"\n")
        single, spent = write_log(folder / "single", lines, 1)
        batched, _ = write_log(folder / "batched", lines, 4)
        return [
            *_reductions(bare, single, batched),
            *_of_two_links(*write_two_links(folder / "two", count), single),
            ("record one line", f"2 % of a core at {RATE} a second", 0.02 * count / (RATE * spent), 1.0),
            *_shelf(folder, lines, logs),
        ]


def _best(script: str, *arguments: str) -> tuple[float, float, str]:
    return min((cost(script, *arguments) for _ in range(3)), key=lambda one: one[0])


def _reductions(bare: Path, single: Path, batched: Path) -> list[Row]:
    script = _best(LOADTXT, str(bare))[0]
    reduced = _best(REDUCE, str(single))[0]
    in_fours = _best(REDUCE, str(batched))[0]
    verified = _best(VERIFY, str(single))[0]
    return [
        ("reduce a sealed log, 1 line a record", "a script with numpy.loadtxt", script / reduced, 1.0 / 2.5),
        (
            "reduce a sealed log, 4 lines a record",
            "a script with numpy.loadtxt",
            script / in_fours,
            1.0 / 2.5,
        ),
        ("verify a sealed log", "reduce of it", reduced / verified, 1.0),
    ]


def _of_two_links(log: Path, winch: Path, probe: Path, of_one: Path) -> list[Row]:
    """Reduce and jump in a log of two links; work and yardsticks by turns, the median of the ratios."""
    turns = [
        [
            cost(*one)[0]
            for one in (
                (LOADTXT_OF_TWO, str(winch), str(probe)),
                (REDUCE, str(of_one)),
                (REDUCE, str(log)),
                (JUMP, str(log)),
            )
        ]
        for _ in range(4)
    ][1:]  # the first warms up
    script, one, two, jump = np.array(turns).T
    return [
        (
            "reduce a sealed log of two links",
            "a script with numpy.loadtxt",
            np.median(script / two),
            1.0 / 2.5,
        ),
        ("reduce a sealed log of two links", "reduce of one of one link", np.median(one / two), 0.8),
        ("jump to nine tenths of it in a replay", "reduce of it", np.median(two / jump), 0.5),
    ]


def _shelf(folder: Path, lines: list[bytes], logs: int) -> list[Row]:
    shelf = folder / "shelf"
    first, _ = write_log(shelf, lines[:: max(1, len(lines) // 2400)], 1)
    for number in range(logs - 1):
        shutil.copy(first, shelf / f"run-{number:04d}.eastfall.jsonl")
    found, cores = [], os.cpu_count() or 1
    for how in ("plain", "judged"):
        script = folder / "shelf.py"  # other processes are started from a file, not from a command line
        script.write_text(SHELF, encoding="utf-8")
        spent, _, _ = cost(
            f"import runpy; runpy.run_path({str(script)!r}, run_name='__main__')", str(shelf), how
        )
        found.append((f"list {logs} logs, {how}", f"{A_FEW:g} s, all cores free", cores * A_FEW / spent, 1.0))
    return found


def test_a_sealed_log_is_reduced_within_its_ratio() -> None:
    """A short version: the ratios of the table hold for 200,000 lines, start-up of the process left out of both."""
    with tempfile.TemporaryDirectory() as name:
        folder = Path(name)
        lines = make_lines(200_000)
        bare = folder / "bare.csv"
        bare.write_bytes(b"\n".join(lines) + b"\n")
        log, _ = write_log(folder / "log", lines, 1)
        empty, _ = write_log(folder / "empty", lines[:200], 1)
        few = folder / "few.csv"
        few.write_bytes(b"\n".join(lines[:200]) + b"\n")
        script = _best(LOADTXT, str(bare))[0] - _best(LOADTXT, str(few))[0]
        reduced = _best(REDUCE, str(log))[0] - _best(REDUCE, str(empty))[0]
    assert reduced < 2.5 * script, (reduced, script)


def main() -> int:
    """Print the table; 1 if a ratio falls short."""
    parser = argparse.ArgumentParser(description=__doc__)
    parser.add_argument("--lines", type=int, default=LINES)
    parser.add_argument("--logs", type=int, default=LOGS)
    options = parser.parse_args()
    found = rows(options.lines, options.logs)
    for work, yardstick, ratio, at_least in found:
        print(f"{work:40} {ratio:8.2f}  (at least {at_least:.2f}) against {yardstick}")
    return int(any(ratio < at_least for _, _, ratio, at_least in found))


if __name__ == "__main__":
    raise SystemExit(main())
