"""The seals: every changed byte is found, every cut is told from a change, and the place is named."""

import hashlib
import json
import random
import shutil
from pathlib import Path

import pytest
from record_help import block, writer, written

from eastfall.io.arrivals import RunEvent
from eastfall.io.logformat import CHECK_LENGTH, checked
from eastfall.io.runlog import read_log, verify_log


@pytest.fixture(scope="module")
def log(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """Return a closed log of 14 s with seals every 2 s, small enough to try every byte."""
    return written(tmp_path_factory.mktemp("sealed"), seconds=14, rate=1, seal_every=2.0)


def _line_of(data: bytes, place: int) -> int:
    return data.count(b"\n", 0, place) + 1


@pytest.mark.invariant
def test_a_flip_of_any_byte_is_found_in_its_line(log: Path, tmp_path: Path) -> None:
    """Each byte of a closed log changed in one random bit, one after the other: never intact, and the line is named."""
    data, path = log.read_bytes(), tmp_path / log.name
    rng = random.Random(5)  # noqa: S311 - a test, not a secret
    for place in range(data.index(b"\n") + 1, len(data)):
        changed = bytearray(data)
        changed[place] ^= 1 << rng.randrange(8)
        path.write_bytes(changed)
        found = verify_log(path)
        assert found.state == "changed", (place, found)
        assert found.first_bad_line is not None
        assert found.good_lines == found.first_bad_line - 1
        # a changed line end, or one put into a line, may show in the line before or behind
        assert abs(found.first_bad_line - _line_of(data, place)) <= (
            data[place] == 10 or changed[place] == 10
        )


@pytest.mark.invariant
def test_a_flip_in_the_header_is_found_or_refused(log: Path, tmp_path: Path) -> None:
    """A byte of the site text, time or version changed in the header is line 1; a header beyond reading is refused."""
    data, path = log.read_bytes(), tmp_path / log.name
    end = data.index(b"\n")
    refused = 0
    for place in range(0, end, 3):
        changed = bytearray(data)
        changed[place] ^= 1
        path.write_bytes(changed)
        try:
            found = verify_log(path)
        except ValueError:
            refused += 1
            continue
        assert (found.state, found.first_bad_line) == ("changed", 1)
    assert 0 < refused < end / 3 / 2


@pytest.mark.invariant
def test_every_cut_is_cut_short_with_what_is_good(log: Path, tmp_path: Path) -> None:
    """Cut anywhere behind the header, a log is cut short, not changed, and all whole lines are good."""
    data, path = log.read_bytes(), tmp_path / log.name
    for size in range(data.index(b"\n") + 1, len(data), 3):
        path.write_bytes(data[:size])
        found = verify_log(path)
        assert (found.state, found.first_bad_line) == ("cut short", None)
        assert found.good_lines == data.count(b"\n", 0, size)
        with read_log(path) as reader:
            list(reader)
            assert reader.verification() == found


@pytest.mark.parametrize("chunk", [1, 7, 100, 1000])
def test_the_finding_does_not_depend_on_how_the_bytes_are_cut(
    log: Path, monkeypatch: pytest.MonkeyPatch, chunk: int
) -> None:
    """Read in pieces of any size, the chain gives the same finding."""
    whole = verify_log(log)
    monkeypatch.setattr("eastfall.io.seal.CHUNK", chunk)
    assert verify_log(log) == whole


def test_lines_taken_out_put_in_or_swapped_are_found(log: Path, tmp_path: Path) -> None:
    """Careless edits that leave every line well formed are found at the line where they begin."""
    lines = log.read_bytes().splitlines(keepends=True)
    path = tmp_path / log.name
    for edited, line in (
        ([*lines[:9], *lines[10:]], 10),
        ([*lines[:9], lines[8], *lines[9:]], 10),
        ([*lines[:9], lines[10], lines[9], *lines[11:]], 10),
        ([*lines, lines[-2]], len(lines) + 1),
        ([*lines, b"\n"], len(lines) + 1),
    ):
        path.write_bytes(b"".join(edited))
        found = verify_log(path)
        assert (found.state, found.first_bad_line) == ("changed", line)


def test_an_edit_with_checks_made_anew_is_still_found_by_the_chain(log: Path, tmp_path: Path) -> None:
    """Who repairs every line's check but not the seals is found: the stretch is named from its first line."""
    path = tmp_path / log.name
    crc, edited = 0, []
    for number, line in enumerate(log.read_bytes().splitlines(keepends=True), start=1):
        body = (
            line[:-CHECK_LENGTH].replace(b",-0.010", b",-0.011")
            if number in {11, 12}
            else line[:-CHECK_LENGTH]
        )
        new, crc = checked(body, crc)
        edited.append(new)
    path.write_bytes(b"".join(edited))
    found = verify_log(path)
    seals = [n for n, line in enumerate(edited, start=1) if line.startswith(b'{"seal"')]
    assert found.state == "changed"
    assert found.first_bad_line == max(n for n in seals if n < 11)
    assert "something in lines" in found.reason


@pytest.mark.independent
def test_the_chain_is_plain_sha256_that_another_program_can_follow(log: Path) -> None:
    """Reckoned anew from the file alone: each seal is SHA-256 of the seal before it and the bytes since."""
    previous, since, seen = "0" * 64, b"", 0
    for line in log.read_bytes().splitlines(keepends=True):
        record = json.loads(line)
        if "seal" in record:
            assert record["seal"] == hashlib.sha256(previous.encode() + since).hexdigest()
            previous, since, seen = record["seal"], b"", seen + 1
        since += line
    assert seen >= 5
    assert verify_log(log).seal == previous


def test_an_open_log_is_cut_short_until_it_is_closed(tmp_path: Path) -> None:
    """A log still being written says cut short, with every line so far good."""
    log = writer(tmp_path)
    for second in range(8):
        log.raw(block(b"%d" % second, time=float(second)))
    found = verify_log(log.path)
    assert (found.state, found.sealed, found.good_until_time) == ("cut short", False, 7.0)
    log.tick(12.0)
    assert verify_log(log.path).good_lines == found.good_lines + 1
    log.close(12.0)
    assert verify_log(log.path).state == "intact"


def test_text_that_looks_like_a_seal_or_an_event_is_only_text(tmp_path: Path) -> None:
    """An instrument that sends seals and events gets them recorded as lines."""
    log = writer(tmp_path)
    nasty = [
        b'{"seal":"00","t":1,"lines":1,"end":"closed"}',
        b',"event":"end"',
        b'"],"crc":"00000000"}',
        b"\\",
    ]
    log.raw(block(*nasty))
    log.event(RunEvent(time=0.5, name="note", fields={"event": '\n{"seal":"x"}', "raw": ["x"]}))
    log.raw(block(*nasty, time=1.0))
    log.close(1.0)
    with read_log(log.path) as reader:
        first, note, second = reader
    assert first.lines() == second.lines() == nasty  # type: ignore[union-attr]
    assert note.fields["event"] == '\n{"seal":"x"}'  # type: ignore[union-attr]
    assert reader.verification().state == "intact"


@pytest.mark.parametrize("which", [0, 1, 2])
def test_a_change_in_any_part_is_found_with_its_file(tmp_path: Path, which: int) -> None:
    """A byte changed in one part of a rolled log names that part, and the lines before it over all parts."""
    written(tmp_path, roll_bytes=3000)
    parts = sorted(tmp_path.iterdir(), key=lambda one: (".part-" in one.name, one.name))
    data = bytearray(parts[which].read_bytes())
    place = data.index(b',-0.010"]')
    data[place + 5] ^= 1
    parts[which].write_bytes(data)
    found = verify_log(parts[0])
    assert (found.state, found.path) == ("changed", str(parts[which]))
    before = sum(part.read_bytes().count(b"\n") for part in parts[:which])
    assert found.good_lines == before + _line_of(bytes(data), place) - 1


def test_a_part_of_another_run_does_not_pass_as_the_next(tmp_path: Path) -> None:
    """A second part exchanged for that of another run is found, though it is well sealed in itself."""
    for name, rate in (("a", 4), ("b", 5)):
        (tmp_path / name).mkdir()
        written(tmp_path / name, roll_bytes=3000, rate=rate)
    second = next(path.name for path in (tmp_path / "a").iterdir() if ".part-0002" in path.name)
    shutil.copy(tmp_path / "b" / second, tmp_path / "a" / second)
    found = verify_log(tmp_path / "a" / second)
    assert (found.state, Path(found.path).name) == ("changed", second)
