"""Coverage-guided fuzzing of everything that comes from outside, on demand; no test, and not run with them.

    python tests/faults/fuzz_inputs.py TARGET [FOLDER] [-max_total_time=60] [-timeout=10] …

TARGET is one of
    lines    instrument lines, decoded whole and in pieces
    propose  lines heard in a port trial
    site     the text of a site file
    values   site files whose keys are known: every key with values in and out of its range, and what follows from them
    log      the bytes of a run log
    events   run logs that are whole, sealed and hold anything a log can say
    capture  plain-text captures

It needs atheris (`pip install atheris`; CPython on Linux or macOS), which is no dependency of the program. What is
found to widen the coverage is kept in FOLDER, if one is given. Whatever comes in, the outcome is a result, or the
program's own error in one printable line; another exception, a hang (-timeout) or unbounded memory (-rss_limit_mb)
stops it with the input written to a file.
"""

import json
import sys
import tempfile
import warnings
from collections.abc import Callable
from pathlib import Path

import atheris

with atheris.instrument_imports(include=["eastfall"]):
    import numpy as np
    from fuzz_shapes import SITE, any_run, any_site

    from eastfall.io.arrivals import LineBlock
    from eastfall.io.forms import decoder_for
    from eastfall.io.framing import Splitter
    from eastfall.io.propose import propose
    from eastfall.io.reduce import reduce_file
    from eastfall.io.runlog import read_log, verify_log
    from eastfall.io.safetext import safe
    from eastfall.io.sitefile import LinkSettings, parse_site
    from eastfall.io.tables import reduce_table
    from eastfall.physics.errors import EastfallError
    from eastfall.physics.expected import expected_curve

ROOT = Path(__file__).parents[2]
TIMED = ("time_s", "depth_m", "tilt_a_deg", "tilt_b_deg", "azimuth_deg", "face_deg")
SIDEWAYS = ("depth_m", "east_mm", "north_mm", "-", "temperature_c", "supply_v")
SETTINGS = (
    LinkSettings(url="-"),
    LinkSettings(url="-", columns=TIMED, delimiter=";"),
    LinkSettings(url="-", columns=SIDEWAYS, checksum="xor"),
    LinkSettings(url="-", checksum="crc16-modbus"),
    LinkSettings(url="-", form="iec61162"),
)
CAPTURE_SITE = parse_site(SITE, "fuzz.toml")
CURVE = expected_curve(CAPTURE_SITE.assumptions)
FOLDER = Path(tempfile.mkdtemp(dir="/dev/shm" if Path("/dev/shm").is_dir() else None))  # noqa: S108


def decoded(settings: LinkSettings, data: bytes, piece: int) -> tuple[bytes, dict[str, int]]:
    """Return the readings and faults of bytes that come in pieces."""
    splitter, decoder = Splitter(), decoder_for(settings)
    found, faults, first = [], {}, 1
    for begin in range(0, len(data), piece):
        lines = splitter.feed(data[begin : begin + piece])
        count = lines.count(b"\n")
        if not count:
            continue
        block = LineBlock(data=lines, times=np.arange(first, first + count) / 8.0, first_line=first)
        out = decoder.decode(block)
        first += count
        found.append(out.readings.data)
        for name, number in out.faults.items():
            faults[name] = faults.get(name, 0) + number
        assert all(safe(text) == text for _, _, text, _ in out.examples)
    return (np.concatenate(found, axis=1).tobytes() if found else b""), faults


def lines(data: bytes) -> None:
    """Decode: the same however the bytes are cut."""
    how = SETTINGS[data[0] % len(SETTINGS)] if data else SETTINGS[0]
    piece = 1 + (data[1] if len(data) > 1 else 0)
    assert decoded(how, data[2:], piece) == decoded(how, data[2:], len(data) + 1)


def site(data: bytes) -> None:
    """Check a site file."""
    parse_site(data.decode("utf-8", "replace"), "fuzz.toml")


def log(data: bytes) -> None:
    """Verify, read and reduce a run log."""
    path = FOLDER / "fuzz.eastfall.jsonl"
    path.write_bytes(data)
    verify_log(path)
    with read_log(path) as reader:
        for _ in reader:
            pass
    json.dumps(reduce_table(reduce_file(path, site=CAPTURE_SITE, curve_for=lambda _: CURVE)), allow_nan=False)


def capture(data: bytes) -> None:
    """Reduce a capture."""
    path = FOLDER / "fuzz.txt"
    path.write_bytes(data)
    found = reduce_file(path, site=CAPTURE_SITE, interval=0.1, curve_for=lambda _: CURVE)
    json.dumps(reduce_table(found), allow_nan=False)


def heard(data: bytes) -> None:
    """Propose settings for lines, and read them by what is proposed."""
    lines = data.split(b"\n")
    found = propose(lines)
    link = found.link("-", 9600)
    assert all(safe(one) == one for one in found.reasons)
    if link is not None:
        decoded(link, data, len(data) + 1)


class Provided:
    """Whole numbers and others, out of the fuzzer's bytes."""

    def __init__(self, data: bytes) -> None:
        self._data = atheris.FuzzedDataProvider(data)

    def whole(self, low: int, high: int) -> int:
        """Return a whole number from `low` to `high`."""
        return self._data.ConsumeIntInRange(low, high)

    def number(self, low: float, high: float) -> float:
        """Return a number from `low` to `high`."""
        return self._data.ConsumeFloatInRange(low, high)


def values(data: bytes) -> None:
    """Give known keys values."""
    any_site(Provided(data))


def events(data: bytes) -> None:
    """Write a log of lines and events, and look at it in every way."""
    any_run(Provided(data), FOLDER)


def seeds(target: str) -> list[bytes]:
    """Return inputs to begin with."""
    row = b"1.0,0.01,-0.02\r\n2.0,0.01,nan\n"
    logs = [one.read_bytes()[:20_000] for one in sorted(ROOT.glob("replay_logs/*.eastfall.jsonl"))]
    sites = [one.read_bytes() for one in sorted(ROOT.glob("replay_logs/*.toml"))]
    sentences = b"$SDDPT,12.3,0.0*57\n$YXXDR,A,0.1,D,TILTA,A,0.2,D,TILTB*5C\n"
    return {
        "lines": [bytes([number, 7]) + row for number in range(4)] + [b"\x04\x20" + sentences],
        "site": [SITE.encode(), *sites],
        "log": logs,
        "capture": [row, b"1,0,0\n" * 40],
        "propose": [row * 20, sentences * 9, b"D 12.3 A 0.1 B -0.2\r\n" * 20],
        "values": [bytes(range(60)), bytes(200)],
        "events": [bytes(range(90)), bytes(200)],
    }[target]


def guarded(target: Callable[[bytes], None]) -> Callable[[bytes], None]:
    """Let the program's own error pass, if its text is safe to print."""

    def run(data: bytes) -> None:
        try:
            target(data)
        except EastfallError as error:
            assert "\x1b" not in str(error)

    return run


def main() -> None:
    """Fuzz what the first argument names."""
    targets = {
        "lines": lines,
        "propose": heard,
        "site": site,
        "values": values,
        "log": log,
        "events": events,
        "capture": capture,
    }
    if len(sys.argv) < 2 or sys.argv[1] not in targets:
        sys.exit(__doc__)
    name = sys.argv.pop(1)
    warnings.simplefilter("error", RuntimeWarning)  # the program would print it across its answers
    start = FOLDER / "seeds"
    start.mkdir()
    for number, seed in enumerate(seeds(name)):
        (start / str(number)).write_bytes(seed)
    atheris.Setup([*sys.argv, str(start)], guarded(targets[name]))
    atheris.Fuzz()


if __name__ == "__main__":
    main()
