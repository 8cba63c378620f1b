"""How fast lines become readings, and bytes become findings, as ratios within one run; run by itself, it is no test.

The yardstick of clean captures is numpy.loadtxt over the same file and nothing else: from one machine to another it
gains more than array operations do: it took 3.8 times as long as decoding on one and 1.2 times on another. Broken and
checked lines are held against clean ones for that reason. The yardstick of the live path is one core at 200 lines a
second.
"""

import tempfile
import time
from collections.abc import Callable, Iterator
from pathlib import Path

import numpy as np

from eastfall.io.arrivals import LineBlock
from eastfall.io.checksum import Checksum, with_checksum
from eastfall.io.forms import decoder_for
from eastfall.io.framing import Splitter
from eastfall.io.pipeline import Pipeline
from eastfall.io.sitefile import LinkSettings, parse_site
from eastfall.io.wording import LineWriter

Row = tuple[str, str, float, float]

COLUMNS = ("depth_m", "tilt_a_deg", "tilt_b_deg", "temperature_c")
SITE = """\
[site]
latitude_deg = 57.3
[shaft]
depth_m = 940.0
[run]
kind = "guided"
[[link]]
url = "-"
columns = ["depth_m", "tilt_a_deg", "tilt_b_deg", "temperature_c"]
"""
LINES = 500_000
CLEAN = "as many clean lines"
LIVE_LINES = 200.0
"""Lines a second of the live yardstick."""


def best(work: Callable[[], object], repeats: int) -> float:
    """Processor time of the shortest of several runs [s], the one least disturbed by what else the machine does."""
    spans = []
    for _ in range(repeats):
        start = time.process_time()
        work()
        spans.append(time.process_time() - start)
    return min(spans)


def capture(count: int) -> bytes:
    """Return lines of a probe that goes down 940 m, about 29 bytes each."""
    rng = np.random.default_rng(1)
    depth = np.linspace(0.0, 940.0, count)
    tilts = rng.normal(0.0, 0.3, (2, count))
    warmth = 12.0 + 0.01 * depth
    rows = zip(depth.tolist(), *tilts.tolist(), warmth.tolist(), strict=True)
    return b"".join(b"%.3f,%.4f,%.4f,%.2f\n" % row for row in rows)


def pieces(data: bytes, size: int) -> Iterator[LineBlock]:
    """Yield blocks of whole lines as a streamed file gives them."""
    splitter, first = Splitter(), 1
    for begin in range(0, len(data), size):
        lines = splitter.feed(data[begin : begin + size])
        count = lines.count(b"\n")
        yield LineBlock(data=lines, times=np.arange(first, first + count) / 50.0, first_line=first)
        first += count


def _decode_all(settings: LinkSettings, data: bytes) -> None:
    decoder = decoder_for(settings)
    for block in pieces(data, 1 << 20):
        decoder.decode(block)


def capture_rows() -> list[Row]:
    """Decode a long capture: clean, with one broken line in twenty, with checksums."""
    data = capture(LINES)
    plain = LinkSettings(url="-", columns=COLUMNS)
    with tempfile.TemporaryDirectory() as folder:
        path = Path(folder) / "capture.txt"
        path.write_bytes(data)
        yardstick = best(lambda: np.loadtxt(path, delimiter=","), 3) / LINES
    lines = data.splitlines(keepends=True)
    lines[::20] = [b"512.3,0.0\x00,0.1\n"] * len(lines[::20])
    clean = _a_line(plain, data)
    found: list[Row] = [
        ("decode, clean", "numpy.loadtxt of the same lines", yardstick / clean, 0.9),
        ("decode, one line in twenty broken", CLEAN, clean / _a_line(plain, b"".join(lines)), 0.25),
    ]
    kinds: tuple[tuple[Checksum, float], ...] = (("xor", 0.25), ("crc16-modbus", 0.12))
    for kind, least in kinds:
        checked = b"".join(
            with_checksum(kind, one) + b"\n" for one in data[: len(data) // 10].split(b"\n")[:-1]
        )
        settings = LinkSettings(url="-", columns=COLUMNS, checksum=kind)
        found.append((f"decode, {kind}", CLEAN, clean / _a_line(settings, checked), least))
    return found


def _a_line(settings: LinkSettings, text: bytes) -> float:
    """Return the time that one line takes [s]."""
    return best(lambda: _decode_all(settings, text), 3) / text.count(b"\n")


def sentence_row() -> Row:
    """Sentences, pair by pair, against the live yardstick: they come from a port, not from files of millions."""
    settings = LinkSettings(url="-", form="iec61162")
    writer = LineWriter(settings)
    bodies = [
        body
        for number in range(1000)
        for body in writer.bodies({"depth": 0.1 * number, "tilt_a": 0.001, "tilt_b": -0.002})
    ]
    data = b"".join(one + b"\n" for one in bodies)
    spent = best(lambda: _decode_all(settings, data), 5) / len(bodies)
    wanted = 0.01 / (2.0 * LIVE_LINES)
    return "decode, sentences: one sentence", "1 % of a core at 2 x 200 a second", wanted / spent, 1.0


def live_rows() -> list[Row]:
    """Blocks of ten lines: bytes to readings, and bytes to findings, each block timed over a whole run of them."""
    blocks = list(pieces(capture(20_000), 290))
    count = sum(len(one) for one in blocks)
    decoder = decoder_for(LinkSettings(url="-", columns=COLUMNS))
    decoding = best(lambda: [decoder.decode(one) for one in blocks], 5) / count
    site = parse_site(SITE, "bench.toml")

    def run() -> None:
        pipeline = Pipeline(site)
        for one in blocks:
            pipeline.take(one)

    whole = best(run, 2) / count
    return [
        ("live: ten lines from bytes to readings", "100 µs", 1e-4 / (10.0 * decoding), 1.0),
        (
            "live: one line from bytes to findings",
            "2 % of a core at 200 a second",
            0.02 / LIVE_LINES / whole,
            1.0,
        ),
    ]


def rows() -> list[Row]:
    """Work, yardstick, how many times faster, and how many are wanted."""
    return [*capture_rows(), sentence_row(), *live_rows()]


def main() -> int:
    """Print the table; 1 if a ratio falls short."""
    found = rows()
    for work, yardstick, ratio, at_least in found:
        print(f"{work:40} {ratio:8.2f} x  (at least {at_least:g}) against {yardstick}")
    return int(any(ratio < at_least for _, _, ratio, at_least in found))


if __name__ == "__main__":
    raise SystemExit(main())
