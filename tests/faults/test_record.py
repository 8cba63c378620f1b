"""Faults of the record made for real: the recorder killed, the disk full, the folder closed, the log deleted."""

import errno
import os
import random
import resource
import signal
import subprocess
import sys
import threading
import time
from collections.abc import Callable, Iterator
from pathlib import Path

import numpy as np
import pytest

from eastfall.io.arrivals import LineBlock, RunEvent
from eastfall.io.errors import OutputError
from eastfall.io.reduce import reduce_file
from eastfall.io.runlog import LogPolicy, RunLogWriter, read_log, verify_log
from eastfall.io.sitefile import parse_site

IO_TESTS = Path(__file__).parents[1] / "io"
RECORDER = f"""
import sys
import threading
import time
sys.path.insert(0, {str(IO_TESTS)!r})
from pathlib import Path
from record_help import block, writer
log = writer(Path(sys.argv[1]), roll_bytes=20_000, seal_every=0.05, sync_every=0.02)
print(log.path, flush=True)
for number in range(1_000_000):
    log.raw(block(b"%d" % number, time=number / 1000))
    sys.stdout.write(f"{{number}}\\n")
    sys.stdout.flush()
"""


def _start(folder: Path, script: str = RECORDER) -> "subprocess.Popen[str]":
    return subprocess.Popen(
        [sys.executable, "-c", script, str(folder)], stdout=subprocess.PIPE, text=True, bufsize=1
    )


def _acknowledged(process: "subprocess.Popen[str]", lines: int) -> list[str]:
    """Read `lines` acknowledgements, kill the recorder without warning, and read what else it had said."""
    assert process.stdout is not None
    said = [process.stdout.readline() for _ in range(lines)]
    os.kill(process.pid, signal.SIGKILL)
    said += process.stdout.readlines()
    process.stdout.close()
    process.wait()
    return [one.strip() for one in said if one.endswith("\n")]


def _numbers(path: Path) -> list[int]:
    with read_log(path) as reader:
        return [int(line) for one in reader if isinstance(one, LineBlock) for line in one.lines()]


def _kill_many(folder: Path, times: int, rng: random.Random) -> None:
    for attempt in range(times):
        said = _acknowledged(_start(folder / str(attempt)), 2 + int(3 ** rng.uniform(0, 7)))
        first = Path(said[0])
        recorded = _numbers(first)
        assert recorded == list(range(len(recorded)))
        assert len(recorded) >= len(said) - 1
        assert verify_log(first).state == "cut short"


@pytest.mark.skipif(sys.platform == "win32", reason="kills by POSIX signal")
def test_no_acknowledged_line_is_lost_when_the_recorder_is_killed(tmp_path: Path) -> None:
    """Killed at random moments, also while it rolls and seals: all it acknowledged is in the log, in order."""
    _kill_many(tmp_path, 6, random.Random(11))  # noqa: S311 - a test, not a secret


@pytest.mark.soak
@pytest.mark.skipif(sys.platform == "win32", reason="kills by POSIX signal")
def test_no_acknowledged_line_is_lost_in_two_hundred_kills(tmp_path: Path) -> None:
    """The same, two hundred times."""
    _kill_many(tmp_path, 200, random.Random(12))  # noqa: S311 - a test, not a secret


def _writer(folder: Path, **policy: float) -> RunLogWriter:
    sample = IO_TESTS / "samples" / "schema-1.eastfall.jsonl"
    with read_log(sample) as reader:
        site, started = parse_site(reader.header.site, "kestrel.toml"), reader.started_at
    return RunLogWriter.create(folder, site, started_at=started, policy=LogPolicy(**policy))  # type: ignore[arg-type]


def _block(number: int, lines: int = 1) -> LineBlock:
    data = b"".join(b"%d\n" % n for n in range(number, number + lines))
    return LineBlock(data=data, times=np.full(lines, number / 100), first_line=number + 1)


def _record_until_refused(log: RunLogWriter, start: int = 0) -> int:
    """Record lines until one is refused, check how it is refused, and return its number."""
    number = start
    refused: OutputError | None = None
    while refused is None and number < start + 100_000:
        try:
            log.raw(_block(number))
            number += 1
        except OutputError as error:
            refused = error
    assert refused is not None
    assert str(log.path) in str(refused)
    assert refused.errno in {errno.ENOSPC, errno.EFBIG}
    assert log.state.startswith("not recording: ")
    return number


@pytest.mark.skipif(sys.platform == "win32", reason="POSIX limits")
def test_a_file_that_can_grow_no_further_loses_nothing_when_there_is_room_again(tmp_path: Path) -> None:
    """With the file size limited by the system: one error a call, no half record, and the kept batch goes in later."""
    log = _writer(tmp_path, seal_every=0.3)
    old = resource.getrlimit(resource.RLIMIT_FSIZE)
    ignored = signal.signal(signal.SIGXFSZ, signal.SIG_IGN)
    try:
        resource.setrlimit(resource.RLIMIT_FSIZE, (20_000, old[1]))
        number = _record_until_refused(log)
        assert log.path.stat().st_size == log.bytes_written <= 20_000
        assert verify_log(log.path).state == "cut short"
        assert _record_until_refused(log, number) == number
    finally:
        resource.setrlimit(resource.RLIMIT_FSIZE, old)
        signal.signal(signal.SIGXFSZ, ignored)
    for later in range(number, number + 50):
        log.raw(_block(later))
    assert log.state == "recording"
    log.close(99.0)
    assert _numbers(log.path) == list(range(number + 50))
    assert verify_log(log.path).state == "intact"


@pytest.fixture
def small_disk(tmp_path: Path) -> Iterator[Path]:
    """Return a file system of 256 kB; skipped where the test may not mount one."""
    folder = tmp_path / "disk"
    folder.mkdir()
    done = subprocess.run(
        ["mount", "-t", "tmpfs", "-o", "size=256k", "eastfall-test", str(folder)],
        check=False,
        capture_output=True,
    )
    if done.returncode != 0:
        pytest.skip("may not mount a small disk here")
    yield folder
    subprocess.run(["umount", str(folder)], check=True)


def test_a_full_disk_is_survived_and_the_log_goes_on_when_space_is_made(small_disk: Path) -> None:
    """On a disk that fills up while rolling and recording: whole records only, and none lost once space is made."""
    ballast = small_disk / "ballast"
    ballast.write_bytes(bytes(100_000))
    log = _writer(small_disk, roll_bytes=40_000, seal_every=0.5)
    first = log.path
    number = _record_until_refused(log)
    assert verify_log(first).state == "cut short"
    ballast.unlink()
    for later in range(number, number + 500):
        log.raw(_block(later))
    log.close(99.0)
    assert _numbers(first) == list(range(number + 500))
    assert verify_log(first).state == "intact"
    assert len(list(small_disk.iterdir())) > 3


@pytest.mark.parametrize("fail", ["write", "truncate"])
def test_nothing_is_written_behind_half_a_record(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch, fail: str
) -> None:
    """A device that takes half a record, and even refuses to cut it off, gets nothing more until it is cut off."""
    log = _writer(tmp_path)
    log.raw(_block(0))
    file = log._part._file
    broken = _HalfFile(file, cuts=fail == "write")
    monkeypatch.setattr(log._part, "_file", broken)
    for _ in range(3):
        with pytest.raises(OutputError):
            log.raw(_block(1))
    monkeypatch.setattr(log._part, "_file", file)
    log.raw(_block(1))
    log.close(1.0)
    assert _numbers(log.path) == [0, 1]
    assert verify_log(log.path).state == "intact"


class _HalfFile:
    """A file on a device that takes a few bytes of each write and then fails."""

    def __init__(self, file: object, *, cuts: bool) -> None:
        self._file = file
        self._full = False
        self._cuts = cuts

    def write(self, data: memoryview) -> int:
        if self._full:
            self._full = False
            raise OSError(errno.ENOSPC, os.strerror(errno.ENOSPC))
        self._full = True
        return self._file.write(data[:7])  # type: ignore[attr-defined, no-any-return]

    def truncate(self, size: int) -> int:
        if not self._cuts:
            raise OSError(errno.EIO, os.strerror(errno.EIO))
        return self._file.truncate(size)  # type: ignore[attr-defined, no-any-return]

    def __getattr__(self, name: str) -> object:
        return getattr(self._file, name)


def _deleted(path: Path) -> None:
    path.unlink()


def _moved(path: Path) -> None:
    path.rename(path.with_name("elsewhere"))


def _replaced(path: Path) -> None:
    path.unlink()
    path.write_text("someone else's")


def _folder_gone(path: Path) -> None:
    path.unlink()
    path.parent.rmdir()


@pytest.mark.skipif(sys.platform == "win32", reason="an open file cannot be deleted there")
@pytest.mark.parametrize("harm", [_deleted, _moved, _replaced, _folder_gone])
def test_a_log_deleted_under_the_writer_is_made_again_whole(
    tmp_path: Path, harm: Callable[[Path], None]
) -> None:
    """Deleted, moved, replaced, or with its folder gone: all that was recorded stands in a file again."""
    log = _writer(tmp_path / "logs", sync_every=0.0)
    for number in range(20):
        log.raw(_block(number))
    harm(log.path)
    for number in range(20, 40):
        log.raw(_block(number))
    log.close(1.0)
    assert _numbers(log.path) == list(range(40))
    assert verify_log(log.path).state == "intact"
    if harm is _replaced:
        assert (tmp_path / "logs" / log.path.name.removeprefix("rescued-1_")).read_text() == "someone else's"


def test_a_follower_keeps_reading_a_log_that_was_made_again(tmp_path: Path) -> None:
    """Who watches a log that is deleted under its writer sees every line once."""
    log = _writer(tmp_path, sync_every=0.0)
    log.raw(_block(0))
    with read_log(log.path) as reader:
        seen = list(reader)
        log.path.unlink()
        log.raw(_block(1))
        for _ in range(3):
            seen += list(reader)
    log.close(1.0)
    assert [one.data for one in seen if isinstance(one, LineBlock)] == [b"0\n", b"1\n"]


@pytest.mark.parametrize("where", ["/proc/nowhere/logs", "/dev/null/logs"])
@pytest.mark.skipif(not sys.platform.startswith("linux"), reason="Linux paths")
def test_a_folder_that_cannot_be_written_is_one_clear_line(where: str) -> None:
    """A folder that nobody can make ends in the program's own error with the path in it."""
    with pytest.raises(OutputError, match=where) as caught:
        _writer(Path(where))
    assert "\n" not in str(caught.value)


@pytest.mark.skipif(sys.platform == "win32", reason="POSIX permissions")
def test_a_read_only_folder_is_one_clear_line(tmp_path: Path) -> None:
    """Run by a user who may not write there: one clear line, exit by the program's own error, nothing made."""
    tmp_path.chmod(0o555)
    script = RECORDER.replace("log = writer", "import os; os.getuid() or os.setuid(65534)\nlog = writer")
    blocked = subprocess.run(
        [sys.executable, "-c", script, str(tmp_path)], check=False, capture_output=True, text=True
    )
    tmp_path.chmod(0o755)
    if (
        "Permission denied" not in blocked.stderr.splitlines()[-1]
        or "PermissionError" in blocked.stderr.splitlines()[-1]
    ):
        pytest.skip("the other user cannot read the program here")
    assert f"eastfall.io.errors.OutputError: {tmp_path}" in blocked.stderr.splitlines()[-1]
    assert list(tmp_path.iterdir()) == []


@pytest.mark.skipif(not sys.platform.startswith("linux"), reason="Linux device")
def test_a_device_that_is_always_full_is_refused(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """Every write to a full device is one error, the state says so, and what follows on a good one is whole."""
    log = _writer(tmp_path)
    with open("/dev/full", "wb", buffering=0) as full:  # noqa: PTH123 - as the writer opens it: without a buffer
        own = log._part._file
        monkeypatch.setattr(log._part, "_file", full)
        with pytest.raises(OutputError, match="No space left"):
            log.raw(_block(0))
        with pytest.raises(OutputError):  # a device cannot be cut back either
            log.raw(_block(0))
        assert log.state.startswith("not recording")
        monkeypatch.setattr(log._part, "_file", own)
    log.raw(_block(0))
    log.close(1.0)
    assert _numbers(log.path) == [0]


SITE = """\
[site]
name = "Full Well"
latitude_deg = 54.6
[shaft]
depth_m = 900.0
[run]
kind = "guided"
[[link]]
url = "{url}"
"""
PROGRAM = (sys.executable, "-c", "from eastfall.tui.main import main; main()")
PATIENCE = 30.0


class Feed:
    """A pipe with the program `record` at its other end."""

    def __init__(self, folder: Path, into: Path) -> None:
        self.sent = 0
        os.mkfifo(folder / "feed")
        (folder / "site.toml").write_text(SITE.format(url=folder / "feed"), encoding="utf-8")
        words = ("record", str(folder / "site.toml"), "--into", str(into))
        self._said = folder / "said"
        with self._said.open("wb") as said:
            self.program = subprocess.Popen(
                [*PROGRAM, *words], stdout=subprocess.PIPE, stderr=said, text=True
            )
        self._pen = (folder / "feed").open("wb", buffering=0)
        assert self.program.stdout is not None
        self.log = Path(self.program.stdout.readline().strip())

    def send(self, lines: int) -> None:
        """Send so many lines of a probe that goes down a millimetre a line."""
        for number in range(self.sent, self.sent + lines):
            self._pen.write(b"%.3f,0.0010,0.0010\r\n" % (0.001 * number))
        self.sent += lines

    def until_told(self, words: str) -> None:
        """Send on until the program says something."""
        end = time.monotonic() + PATIENCE
        while words not in (said := self._said.read_text(encoding="utf-8")):
            assert time.monotonic() < end, said
            self.send(20)
            threading.Event().wait(0.01)

    def end(self) -> int:
        """Close the pipe and wait for the program."""
        self._pen.close()
        return self.program.wait(PATIENCE)

    def close(self) -> None:
        """End what is left."""
        self.program.kill()
        self.program.wait(PATIENCE)
        self._pen.close()
        assert self.program.stdout is not None
        self.program.stdout.close()

    def numbers(self) -> list[int]:
        """Return the numbers of the lines in the log."""
        with read_log(self.log) as reader:
            lines = [line for one in reader if isinstance(one, LineBlock) for line in one.lines()]
        return [round(1000.0 * float(line.split(b",")[0])) for line in lines]


def test_the_program_on_a_full_disk_says_so_measures_on_and_has_all_in_the_log_when_space_is_made(
    small_disk: Path, tmp_path: Path
) -> None:
    """An alarm while it is full, its end when there is room, every line in the log, status 0."""
    ballast = small_disk / "ballast"
    ballast.write_bytes(bytes(200_000))
    feed = Feed(tmp_path, small_disk)
    try:
        feed.until_told("record failing: normal -> active; No space left on device")
        feed.send(500)
        ballast.unlink()
        feed.until_told("record failing: active -> ")
        assert feed.end() == 0
    finally:
        feed.close()
    assert feed.numbers() == list(range(feed.sent))
    assert verify_log(feed.log).state == "intact"


def test_the_program_on_a_disk_that_stays_full_ends_with_status_1_and_a_readable_log(
    small_disk: Path, tmp_path: Path
) -> None:
    """What was recorded is readable and without a gap; the status says that it is not all, and so does the log."""
    (small_disk / "ballast").write_bytes(bytes(200_000))
    feed = Feed(tmp_path, small_disk)
    try:
        feed.until_told("record failing: normal -> active")
        feed.send(500)
        assert feed.end() == 1
    finally:
        feed.close()
    numbers = feed.numbers()
    assert 0 < len(numbers) < feed.sent
    assert numbers == list(range(len(numbers)))
    with read_log(feed.log) as reader:
        told = [one.fields["count"] for one in reader if isinstance(one, RunEvent) and one.name == "lost"]
    # The few bytes that are left may take the words, and even the seal: without the words it is cut short at least.
    assert told or verify_log(feed.log).state == "cut short"
    assert not told or told[0] >= feed.sent - len(numbers)
    assert reduce_file(feed.log).missing == sum(told)


@pytest.mark.parametrize("where", ["/proc/nowhere", "/dev/null/logs", "/sys"])
@pytest.mark.skipif(not sys.platform.startswith("linux"), reason="Linux paths")
def test_the_program_in_a_folder_that_cannot_be_written_ends_with_one_line(
    tmp_path: Path, where: str
) -> None:
    """Status 2, the folder in the line, nothing on standard output."""
    (tmp_path / "site.toml").write_text(SITE.format(url="emulate:"), encoding="utf-8")
    words = ("record", str(tmp_path / "site.toml"), "--into", where)
    done = subprocess.run(
        [*PROGRAM, *words],
        capture_output=True,
        text=True,
        timeout=PATIENCE,
        check=False,
        stdin=subprocess.DEVNULL,
    )
    assert (done.returncode, done.stdout, done.stderr.count("\n")) == (2, "", 1)
    assert done.stderr.startswith(f"eastfall: {where}")
