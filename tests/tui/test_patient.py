"""Writing to a pipe that nobody reads: who writes is not held up, texts come whole or not at all, and in order."""

import errno
import os
import sys
import threading
from collections.abc import Iterator

import pytest

from eastfall.tui.patient import PatientLines, PatientWriter

pytestmark = [
    pytest.mark.invariant,
    pytest.mark.skipif(sys.platform == "win32", reason="a pipe that holds little is POSIX"),
]

PATIENCE = 20.0
SHORT = 0.05
"""How long a write is held up in these tests [s]."""


class Pipe:
    """A pipe and what was read from it."""

    def __init__(self) -> None:
        self.reads, self.writes = os.pipe()
        self.got = b""

    def read(self, size: int) -> bytes:
        """Read so many bytes, waiting for them."""
        got = b""
        while len(got) < size:
            got += os.read(self.reads, size - len(got))
        return got

    def fill(self) -> int:
        """Write until nothing more fits; return how many bytes did."""
        os.set_blocking(self.writes, False)
        count = 0
        try:
            while True:
                count += os.write(self.writes, b"." * 4096)
        except BlockingIOError:
            pass
        os.set_blocking(self.writes, True)
        return count


@pytest.fixture
def pipe() -> Iterator[Pipe]:
    """Yield a pipe; the writing threads are gone at the end."""
    one = Pipe()
    yield one
    os.close(one.reads)
    for thread in threading.enumerate():
        if thread.name == "eastfall output":
            thread.join(PATIENCE)
            assert not thread.is_alive()
    os.close(one.writes)


def test_what_is_written_comes_out_in_order_and_whole(pipe: Pipe) -> None:
    """Texts of many lengths, shorter and longer than what is written in one go and what may wait."""
    writer = PatientWriter(pipe.writes)
    texts = [bytes([65 + n]) * (1 + n * n * 37) for n in range(20)]
    reader = threading.Thread(target=lambda: setattr(pipe, "got", pipe.read(sum(map(len, texts)))))
    reader.start()
    assert all(writer.write(one) for one in texts)
    assert writer.drain(PATIENCE)
    reader.join(PATIENCE)
    writer.close()
    assert pipe.got == b"".join(texts)


def test_what_does_not_fit_is_left_out_whole_and_that_is_told_when_all_else_is_through(pipe: Pipe) -> None:
    """With a full pipe as much as may wait is kept, the rest refused; read out, it is told, and texts go again."""
    told = threading.Event()
    filled = pipe.fill()
    writer = PatientWriter(pipe.writes, room=300, hold=SHORT, through=told.set)
    taken = [n for n in range(10) if writer.write(b"%d" % n * 100)]
    assert taken == [0, 1, 2]
    assert not writer.drain(SHORT)
    assert not told.is_set()
    pipe.read(filled)
    assert pipe.read(300) == b"0" * 100 + b"1" * 100 + b"2" * 100
    assert told.wait(PATIENCE)
    assert writer.write(b"again")
    assert pipe.read(5) == b"again"
    writer.close()


def test_nothing_is_told_where_nothing_was_left_out(pipe: Pipe) -> None:
    """Texts that waited for long and came through leave no gap."""
    told = threading.Event()
    filled = pipe.fill()
    writer = PatientWriter(pipe.writes, hold=SHORT, through=told.set)
    assert writer.write(b"late")
    assert not writer.drain(SHORT)
    pipe.read(filled)
    assert pipe.read(4) == b"late"
    assert writer.drain(PATIENCE)
    writer.close()
    assert not told.is_set()


def test_dropped_texts_make_room_and_leave_no_gap(pipe: Pipe) -> None:
    """After a drop the next text follows what was under way."""
    told = threading.Event()
    filled = pipe.fill()
    writer = PatientWriter(pipe.writes, room=1000, hold=SHORT, through=told.set)
    while writer.write(b"x" * 200):
        pass
    assert writer.drop()
    assert writer.write(b"the end")
    pipe.read(filled)
    came = pipe.read(7)
    while not came.endswith(b"the end"):
        came += pipe.read(1)
    assert len(came) < 200
    writer.close()
    assert not told.is_set()


def test_a_reader_that_has_gone_is_an_error_that_holds_up_nobody() -> None:
    """A broken pipe: told by `error`, and every later text is left out at once."""
    broken, ours = os.pipe()
    os.close(broken)
    writer = PatientWriter(ours, hold=PATIENCE, room=1)
    writer.write(b"x")
    writer.drain(PATIENCE)
    assert writer.error is not None
    assert writer.error.errno == errno.EPIPE
    assert not writer.write(b"y")
    assert not writer.write(b"y", always=True)
    os.close(ours)


def test_lines_left_out_are_counted_in_the_next_that_is_taken(pipe: Pipe) -> None:
    """Lines that nobody took are told by number; the last ones are kept whatever waits."""
    filled = pipe.fill()
    with os.fdopen(os.dup(pipe.writes), "w", encoding="utf-8") as file:
        lines = PatientLines(file)
        for number in range(500):
            lines.line(f"line {number:03d} " + "-" * 20)
        lines.keep_all()
        lines.line("the last")
        pipe.read(filled)
        text = b""
        while not text.endswith(b"the last\n"):
            text += pipe.read(1)
        lines.end(PATIENCE)
    *whole, gap, last = text.decode().splitlines()
    assert whole == [f"line {number:03d} " + "-" * 20 for number in range(len(whole))]
    assert gap == f"({500 - len(whole)} lines left out: nobody took them)"
    assert last == "the last"
    assert len(whole) > 100


def test_a_file_without_a_descriptor_is_written_as_it_is(capsys: pytest.CaptureFixture[str]) -> None:
    """Where a test or another program has put something in the place of standard output."""
    lines = PatientLines(sys.stdout)
    lines.line("one")
    lines.path("two")
    lines.end()
    assert capsys.readouterr().out == "one\ntwo\n"
