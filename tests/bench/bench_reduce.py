"""Whole processes against their yardsticks: reduce of long files, its memory, the help, the first picture.

Work and yardstick run by turns, each a process of its own, and what counts is the median of the ratios of CPU time, so
that other work on the machine counts for little. Run by hand: `python tests/bench/bench_reduce.py [--lines 2000000]`.
"""

import argparse
import os
import statistics
import subprocess
import sys
import tempfile
import time
from collections.abc import Sequence
from pathlib import Path

from bench_record import LOADTXT, SITE_TEXT, make_lines, write_log

Row = tuple[str, str, float, float]

PROGRAM = "from eastfall.tui.main import main; main()"
PEAK = """
import contextlib, io
from eastfall.tui.main import cli
with contextlib.redirect_stdout(io.StringIO()), contextlib.suppress(SystemExit):
    cli.main(standalone_mode=False)
lines = open("/proc/self/status").read().splitlines()
print(next(line.split()[1] for line in lines if line.startswith("VmHWM")))
"""
LINES = 2_000_000
TURNS = 3
FIRST_PICTURE = 1.0
"""Seconds to the first whole picture."""


def environment(folder: Path) -> dict[str, str]:
    """Return the environment of every process: compiled modules are kept, as where the program is installed."""
    kept = {name: value for name, value in os.environ.items() if name != "PYTHONDONTWRITEBYTECODE"}
    return {**kept, "PYTHONPYCACHEPREFIX": str(folder / "compiled")}


def cost(words: Sequence[str], around: dict[str, str]) -> float:
    """Return the CPU time of a process from its start to its end [s]."""
    process = subprocess.Popen(
        [sys.executable, *words],
        stdout=subprocess.DEVNULL,
        stderr=subprocess.PIPE,
        start_new_session=True,
        env=around,
        text=True,
    )
    assert process.stderr is not None
    with process.stderr as errors:
        said = errors.read()
    _, status, usage = os.wait4(process.pid, 0)
    process.returncode = os.waitstatus_to_exitcode(status)
    assert process.returncode in {0, 1}, (words, said)  # 1: a limit is exceeded
    assert "Traceback" not in said, said
    return usage.ru_utime + usage.ru_stime


def by_turns(
    yardstick: Sequence[str], works: Sequence[Sequence[str]], around: dict[str, str], turns: int = TURNS
) -> list[float]:
    """Return the median over several turns of the yardstick's CPU time over each work's, all run once before."""
    ratios: list[list[float]] = [[] for _ in works]
    for words in (yardstick, *works):
        cost(words, around)
    for _ in range(turns):
        base = cost(yardstick, around)
        for found, work in zip(ratios, works, strict=True):
            found.append(base / cost(work, around))
    return [statistics.median(one) for one in ratios]


def peak(words: Sequence[str]) -> int:
    """Return the largest memory of a verb's process [kB]."""
    done = subprocess.run([sys.executable, "-c", PEAK, *words], capture_output=True, text=True, check=True)
    return int(done.stdout)


def reduce_rows(folder: Path, count: int) -> list[Row]:
    """Reduce a capture, a sealed log of single lines, and files of a tenth."""
    site = folder / "site.toml"
    site.write_text(SITE_TEXT, encoding="utf-8")
    lines = make_lines(count)
    files = {}
    for name, some in (("all", lines), ("tenth", lines[::10])):
        files[name] = folder / f"{name}.csv"
        files[name].write_bytes(b"\n".join(some) + b"\n")
        files[f"{name} log"], _ = write_log(folder / name, some, 1)
    options = ("--site", str(site), "--interval", "0.005", "--format", "json")
    capture = ("reduce", str(files["all"]), *options)
    log = ("reduce", str(files["all log"]), "--format", "json")
    ratios = by_turns(
        ("-c", LOADTXT, str(files["all"])),
        [("-c", PROGRAM, *capture), ("-c", PROGRAM, *log)],
        environment(folder),
    )
    tenth = peak(("reduce", str(files["tenth"]), *options)) / peak(capture)
    tenth_log = peak(("reduce", str(files["tenth log"]), "--format", "json")) / peak(log)
    script = "a script with numpy.loadtxt"
    return [
        (f"reduce a capture of {count:,} lines", script, ratios[0], 1.0 / 1.5),
        ("reduce a sealed log of as many", script, ratios[1], 1.0 / 2.5),
        ("memory for the capture", "that for a tenth of it", tenth, 0.9),
        ("memory for the log", "that for a tenth of it", tenth_log, 0.9),
    ]


def start_rows(folder: Path) -> list[Row]:
    """Help, and the first picture of the demo."""
    around = environment(folder)
    (helped,) = by_turns(("-c", "import numpy"), [("-c", PROGRAM, "--help")], around, 15)
    return [
        ("eastfall --help", 'python -c "import numpy"', helped, 1.0),
        ("first whole picture of the demo", "1 s on the clock", FIRST_PICTURE / first_picture(folder), 1.0),
    ]


def first_picture(folder: Path, turns: int = 7) -> float:
    """Return the median time from the command to the first whole picture of the demo [s]."""
    sys.path.insert(0, str(Path(__file__).parents[1] / "tui"))
    from terminal_harness import EASTFALL, Terminal

    spans = []
    for number in range(turns + 1):
        begun = time.monotonic()
        words = [*EASTFALL, "demo", "--into", str(folder / f"demo-{number}")]
        with Terminal(words, 80, 24, **environment(folder), PYTHONDONTWRITEBYTECODE="") as terminal:
            terminal.wait("? help")
            spans.append(time.monotonic() - begun)
    return statistics.median(spans[1:])


def rows(count: int = LINES) -> list[Row]:
    """Work, yardstick, how many times less it takes, and what is wanted."""
    with tempfile.TemporaryDirectory() as name:
        return [*start_rows(Path(name)), *reduce_rows(Path(name), count)]


def main() -> int:
    """Print the table; 1 if a ratio falls short."""
    parser = argparse.ArgumentParser(description=__doc__)
    parser.add_argument("--lines", type=int, default=LINES)
    before = os.getloadavg()[0]
    found = rows(parser.parse_args().lines)
    for work, yardstick, ratio, at_least in found:
        print(f"{work:40} {ratio:8.2f}  (at least {at_least:.2f}) against {yardstick}")
    print(f"load {before:.1f} before, {os.getloadavg()[0]:.1f} after, on {os.cpu_count()} cores")
    return int(any(ratio < at_least for _, _, ratio, at_least in found))


if __name__ == "__main__":
    raise SystemExit(main())
