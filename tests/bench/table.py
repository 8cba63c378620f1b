"""Print the ratios of every benchmark beside what is wanted of them: `python tests/bench/table.py [NAME ...]`.

Each file `bench_NAME.py` beside this one has a function `rows` that measures a work and its yardstick in the same
run. Exit status 1 if a ratio falls short.
"""

import importlib.util
import os
import sys
from pathlib import Path

HERE = Path(__file__).parent


def rows_of(path: Path) -> list[tuple[str, str, float, float]]:
    """Run one file's measurements."""
    spec = importlib.util.spec_from_file_location(path.stem, path)
    module = importlib.util.module_from_spec(spec)
    spec.loader.exec_module(module)
    return module.rows()


def main() -> int:
    """Measure and print."""
    wanted = sys.argv[1:]
    print(f"load {os.getloadavg()[0]:.1f} on {os.cpu_count()} cores")
    short = 0
    for path in sorted(HERE.glob("bench_*.py")):
        if wanted and path.stem.removeprefix("bench_") not in wanted:
            continue
        print(f"-- {path.stem.removeprefix('bench_')}", flush=True)
        for work, yardstick, ratio, at_least in rows_of(path):
            short += ratio < at_least
            mark = "  " if ratio >= at_least else "! "
            print(f"{mark}{work:58} {ratio:10.4g} (at least {at_least:g}) against {yardstick}", flush=True)
    return int(short > 0)


if __name__ == "__main__":
    raise SystemExit(main())
