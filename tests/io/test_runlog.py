"""The run log's writer and reader: what goes in comes out, to the byte, whatever the bytes."""

import json
from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from record_help import SITE_TEXT, STARTED, block, site, writer, written

from eastfall.io.arrivals import Arrival, LineBlock, RunEvent
from eastfall.io.errors import LogError, OutputError
from eastfall.io.logformat import file_name
from eastfall.io.logtail import last_time
from eastfall.io.rawlines import plain_lines
from eastfall.io.reduce import reduce_file
from eastfall.io.runlog import RunLogWriter, read_log, verify_log

SAMPLE = Path(__file__).parent / "samples" / "schema-1.eastfall.jsonl"


def _flat(arrivals: list[Arrival]) -> list[tuple[object, ...]]:
    """Return lines and events one by one, free of how they were cut into blocks."""
    flat: list[tuple[object, ...]] = []
    for one in arrivals:
        if isinstance(one, LineBlock):
            rows = zip(one.lines(), one.times.tolist(), strict=True)
            flat += [(one.link, one.first_line + i, line, time) for i, (line, time) in enumerate(rows)]
        else:
            flat.append((one.time, one.name, one.fields))
    return flat


@pytest.mark.invariant
@pytest.mark.parametrize("merge", [True, False])
@given(
    batches=st.lists(
        st.tuples(
            st.lists(st.binary(max_size=12).map(lambda b: b.replace(b"\n", b"~")), max_size=4),
            st.integers(0, 2),
        ),
        max_size=12,
    )
)
def test_any_bytes_on_any_link_come_back_with_their_times(
    tmp_path_factory: pytest.TempPathFactory,
    batches: list[tuple[list[bytes], int]],
    merge: bool,
) -> None:
    """Lines of arbitrary bytes on three links are read back to the byte, in order, with time, link and number."""
    log = writer(tmp_path_factory.mktemp("log"), seal_every=0.5)
    put: list[Arrival] = []
    numbers = [1, 1, 1]
    for index, (lines, link) in enumerate(batches):
        one = block(*lines, time=index / 7, step=0.01 * (index % 2), link=link, first=numbers[link])
        numbers[link] += len(lines)
        log.raw(one)
        put.append(one)
    log.close(3.0)
    with read_log(log.path, merge=merge) as reader:
        got = list(reader)
    in_order = [_flat(got), _flat(put)]
    if merge:  # links are apart then; within one, the order is that of the file
        in_order = [sorted(one, key=lambda row: str(row[0])) for one in in_order]
    assert in_order[0] == in_order[1]
    assert reader.verification().state == "intact"


def test_usual_records_are_read_as_one_block_with_events_in_place(tmp_path: Path) -> None:
    """A plain log is two blocks around its one event, and seals in between do not cut it."""
    with read_log(written(tmp_path)) as reader:
        first, note, second = reader
    assert isinstance(first, LineBlock)
    assert isinstance(second, LineBlock)
    assert note == RunEvent(time=15.0, name="note", fields={"text": "water at 12 m", "who": "R. Vane"})
    assert (len(first), len(second), second.first_line) == (61, 59, 62)
    assert reader.ended


def test_what_was_told_of_alarms_does_not_cut_blocks_and_stands_behind_them(tmp_path: Path) -> None:
    """An alarm that chatters leaves one block of lines, its events behind it, and both before the note."""
    log = writer(tmp_path)
    told = RunEvent(time=0.0, name="alarm", fields={"name": "warning limit", "to": "active"})
    for number in range(60):
        log.raw(block(b"1,0,0", time=number / 4, first=number + 1))
        log.event(replace(told, time=number / 4))
        if number == 40:
            log.event(RunEvent(time=10.0, name="note", fields={"text": "wet"}))
    log.close(15.0)
    with read_log(log.path) as reader:
        found = list(reader)
    blocks = [(place, len(one)) for place, one in enumerate(found) if isinstance(one, LineBlock)]
    assert blocks == [(0, 41), (43, 19)]
    events = [one for one in found if isinstance(one, RunEvent)]
    assert [one.time for one in events if one.name == "alarm"] == [number / 4 for number in range(60)]
    assert found[42] == RunEvent(time=10.0, name="note", fields={"text": "wet"})
    with read_log(log.path, merge=False) as reader:
        assert [type(one) for one in reader][:4] == [LineBlock, RunEvent, LineBlock, RunEvent]


@pytest.mark.parametrize(
    "line",
    [
        b'{"t":1.5,"raw":["a","b"],"link":0,"crc":"00000000"}\n',
        b'{"t":1.5,"raw":["a","b"],"link":12,"crc":"00000000"}\n',
        b'{"t":1.5,"raw":["a","b"],"link":-1,"crc":"00000000"}\n',
        b'{"t":1.5,"raw":["a","b"],"lunk":1,"crc":"00000000"}\n',
        b'{"t":1.5,"raw":["a","b"]"link":1,"crc":"00000000"}\n',
        b'{"t":1.5,"raw":["a","b"],"link":1 "crc":"00000000"}\n',
        b'{"t":1.5,"raw":[],"link":1,"crc":"00000000"}\n',
        b'{"t":1.5,"raw":["a";"b"],"link":1,"crc":"00000000"}\n',
        b'{"t":1.5,"raw":["a\\u0000"],"crc":"00000000"}\n',
        b'{"t":1.5,"raw":["\xc2\xb5"],"crc":"00000000"}\n',
        b'{"t":1e-06,"raw":["a"],"crc":"00000000"}\n',
        b'{"t":1.5,"raw":[],"crc":"00000000"}\n',
        b'{"t":1.5,"raw":["a";"b"],"crc":"00000000"}\n',
        b'{"t":1.5,"raw":["a""b"],"crc":"00000000"}\n',
        b'{"t":1.5 ,"raw":["a"],"crc":"00000000"}\n',
        b'{"x":1.5,"raw":["a"],"crc":"00000000"}\n',
        b'{"t":1.5,"raw":["a"],"crc":"0000000"}\n',
        b'{"t":,"raw":["a"],"crc":"00000000"}\n',
        b"\n",
        b"x" * 30 + b"\n",
        b"",
    ],
)
def test_unusual_records_are_left_to_json_by_the_array_reader(line: bytes) -> None:
    """The fast way refuses everything but the usual form, also when it stands behind a usual record."""
    usual = b'{"t":1.25,"raw":["1,2","3,4"],"crc":"00000000"}\n'
    assert plain_lines(line) is None
    found = plain_lines(usual)
    assert found is not None
    ((link, lines, times),) = found
    assert (link, lines, times.tolist()) == (0, b"1,2\n3,4\n", [1.25, 1.25])
    if line:
        assert plain_lines(usual + line) is None


def test_usual_records_of_several_links_are_one_block_for_each_link() -> None:
    """Brackets, numbers of lines and order of links as they come: nothing of it goes through JSON."""
    records = [
        b'{"t":1.0,"raw":["a"],"link":1,"crc":"00000000"}\n',
        b'{"t":1.5,"raw":["[b]","c],"],"crc":"00000000"}\n',
        b'{"t":2.0,"raw":["d","","e"],"link":1,"crc":"00000000"}\n',
        b'{"t":2.5,"raw":["],link:1"],"link":9,"crc":"00000000"}\n',
    ]
    for some in (records, records[:1], records[::2], records[3:]):
        found = plain_lines(b"".join(some))
        assert found is not None
        wanted: dict[int, list[tuple[bytes, float]]] = {}
        for one in map(json.loads, some):
            wanted.setdefault(one.get("link", 0), []).extend((line.encode(), one["t"]) for line in one["raw"])
        assert [
            (link, list(zip(data.split(b"\n"), times.tolist(), strict=False))) for link, data, times in found
        ] == [(link, wanted[link]) for link in sorted(wanted)]


@pytest.mark.independent
@given(st.lists(st.integers(0, 10**11), min_size=1, max_size=30))
def test_array_reader_times_equal_those_of_the_json_module(microseconds: list[int]) -> None:
    """Times read by arrays equal, to the last bit, those that Python's own JSON reader makes of the same text."""
    data = b"".join(b'{"t":%s,"raw":["x"],"crc":"00000000"}\n' % repr(n / 1e6).encode() for n in microseconds)
    found = plain_lines(data)
    if found is not None:
        assert found[0][2].tolist() == [json.loads(line)["t"] for line in data.splitlines()]
    else:
        assert any("e" in repr(n / 1e6) for n in microseconds)


def test_every_line_of_a_log_is_json_with_the_header_first(tmp_path: Path) -> None:
    """Any JSON reader reads every line; the first carries schema, start and the site file's text whole."""
    records = [json.loads(line) for line in written(tmp_path).read_text(encoding="utf-8").splitlines()]
    head = records[0]
    assert (head["eastfall"], head["schema"], head["started_at"]) == ("run log", 1, "2026-01-14T08:30:05Z")
    assert head["site"] == SITE_TEXT
    assert records[-1]["end"] == "closed"
    seals = [one["t"] for one in records if "seal" in one]
    assert max(np.diff([0.0, *seals])) <= 5.0 + 0.25  # one line interval late at most


def test_a_second_log_of_the_same_second_gets_a_name_of_its_own(tmp_path: Path) -> None:
    """Nothing is written over: the same site and start make another file."""
    first, second = written(tmp_path), written(tmp_path, seconds=1)
    assert first.name == "kestrel-hollow-no-2_20260114T083005Z.eastfall.jsonl"
    assert second.name == "kestrel-hollow-no-2_20260114T083005Z-2.eastfall.jsonl"
    assert verify_log(first).good_lines > verify_log(second).good_lines


@pytest.mark.parametrize(
    ("name", "slug"),
    [
        ("../../etc/passwd", "etc-passwd"),
        ("C:\\x\0\n", "c-x"),
        ("竪坑", "site"),
        ("", "site"),
        ("Ö" * 500, "o" * 60),
        ("-", "site"),
        ("CON", "con"),
    ],
)
def test_file_names_are_path_safe_whatever_the_site_is_called(name: str, slug: str) -> None:
    """The name keeps plain letters and digits only."""
    assert file_name(name, "20260114T083005Z") == f"{slug}_20260114T083005Z.eastfall.jsonl"


@pytest.mark.parametrize("merge", [True, False])
def test_a_log_rolled_by_size_is_one_log_without_a_line_lost(tmp_path: Path, merge: bool) -> None:
    """Parts of 2 kB read from any of them give every line in order, numbered through, and hang together by seals."""
    first = written(tmp_path, roll_bytes=2000)
    parts = sorted(tmp_path.iterdir())
    assert len(parts) > 3
    for part in parts:
        with read_log(part, merge=merge) as reader:
            got = _flat(list(reader))
        lines = [one for one in got if len(one) == 4]
        assert [one[1] for one in lines] == list(range(1, 121))
        assert lines[77][2:] == (b"38.50,0.077,-0.010", 19.25)
    found = verify_log(first)
    assert found.state == "intact"
    assert found.good_lines == sum(part.read_bytes().count(b"\n") for part in parts)


def test_a_missing_part_is_named(tmp_path: Path) -> None:
    """Without its last part a log is cut short; without its first it cannot be read; the message names the file."""
    written(tmp_path, roll_bytes=2000)
    parts = sorted(tmp_path.iterdir(), key=lambda one: (".part-" in one.name, one.name))
    parts[-1].unlink()
    found = verify_log(parts[0])
    assert (found.state, found.sealed) == ("cut short", False)
    assert parts[-1].name in found.reason
    parts[0].unlink()
    with pytest.raises(LogError, match=parts[0].name.replace(".", r"\.")):
        read_log(parts[1])


def test_reader_follows_a_log_that_is_being_written(tmp_path: Path) -> None:
    """Each line is there for a reader as soon as the writer has taken it, over a roll to the next part too."""
    log = writer(tmp_path, roll_bytes=1200)
    reader = read_log(log.path)
    assert reader.more() is None
    for number in range(60):
        log.raw(block(b"%d" % number, time=float(number)))
        got = _flat(list(reader))
        assert [one[2] for one in got] == [b"%d" % number]
    log.close(60.0)
    assert list(reader) == []
    assert reader.ended
    assert reader.verification().state == "intact"
    assert len(list(tmp_path.iterdir())) > 2
    reader.close()


@pytest.mark.parametrize(
    ("content", "expected"),
    [
        (b"", "line 1: expected the header"),
        (b"\x00\xff\x1b[2J" * 50, "line 1: expected the header"),
        (b'{"eastfall":"run log"}\n', "line 1: expected the header"),
        (b'{"eastfall":"run log","schema":99,"program":"9.0"}\n', "schema 99 comes from a newer eastfall"),
        (
            b'{"eastfall":"run log","schema":1,"part":2,"previous":{"name":"../x","seal":""}}\n',
            "expected a plain file name",
        ),
    ],
)
def test_what_is_no_run_log_is_refused_in_one_clear_line(
    tmp_path: Path, content: bytes, expected: str
) -> None:
    """Rubbish, a newer schema and a part name that leaves the folder end in the program's own error."""
    path = tmp_path / "x.eastfall.jsonl"
    path.write_bytes(content)
    for use in (read_log, verify_log):
        with pytest.raises(LogError, match=expected) as caught:
            use(path)
        assert "\n" not in str(caught.value)


def test_unreadable_records_are_passed_over_and_counted(tmp_path: Path) -> None:
    """Rubbish lines in the middle cost themselves alone when reading; that they are there is the seals' to say."""
    path = written(tmp_path, seconds=3)
    lines = path.read_bytes().splitlines(keepends=True)
    rubbish = [
        b"\xff\xfe{\n",
        b'{"t":1}\n',
        b'{"t":1e308,"raw":["9,0,0"]}\n',
        b'{"t":-1e300,"event":"end","fields":{}}\n',
    ]
    path.write_bytes(b"".join([*lines[:5], *rubbish, *lines[5:], b'{"seal":"","t":1e99,"lines":3}\n']))
    with read_log(path) as reader:
        assert sum(len(one) for one in reader if isinstance(one, LineBlock)) == 12
    assert (reader.bad_lines, reader.last_time) == (5, 3.0)
    assert reader.verification().state == "changed"
    assert last_time(path) == 3.0
    assert reduce_file(path).duration == 3.0


def test_a_closed_writer_takes_nothing_more(tmp_path: Path) -> None:
    """After close, a record is refused with the file's name and a second close does nothing."""
    log = writer(tmp_path)
    log.close(1.0)
    log.close(2.0)
    log.tick(9.0)
    assert log.state == "closed"
    with pytest.raises(OutputError, match="is closed"):
        log.raw(block(b"x"))
    assert verify_log(log.path).good_lines == 2


def test_event_fields_of_any_kind_are_kept_as_json(tmp_path: Path) -> None:
    """Numbers of numpy, NaN, paths and undecodable text in an event do not stop the recording."""
    log = writer(tmp_path)
    fields = {
        "n": np.float64(1.5),
        "bad": float("nan"),
        "at": Path("x"),
        "text": "a\udcffb",
        "esc": "\x1b[2J",
    }
    log.event(RunEvent(time=np.float64(1.0), name="note", fields=fields))
    log.close(np.float64(2.0))
    with read_log(log.path) as reader:
        (event,) = reader
    assert isinstance(event, RunEvent)
    assert event.fields == {"n": 1.5, "bad": None, "at": "x", "text": "a\\udcffb", "esc": "\x1b[2J"}


def test_bytes_are_synced_within_the_stated_second(tmp_path: Path) -> None:
    """With a clock in hand: what was written is forced to the device once a second has passed, not before."""
    now = [0.0]
    log = RunLogWriter.create(tmp_path, site(), started_at=STARTED, clock=lambda: now[0])
    log.raw(block(b"1"))
    before = log.bytes_synced
    now[0] = 0.99
    log.tick(0.99)
    assert log.bytes_synced == before < log.bytes_written
    now[0] = 1.0
    log.tick(1.0)
    assert log.bytes_synced == log.bytes_written
    log.close(1.0)


def test_the_kept_sample_of_schema_1_still_reads() -> None:
    """A log written by the first schema is intact and gives the same lines and events as when it was kept."""
    with read_log(SAMPLE) as reader:
        flat = _flat(list(reader))
        assert reader.site().assumptions.site.name == "Kestrel Hollow No. 2"
    assert reader.verification().state == "intact"
    assert reader.verification().seal == "928e5228d60602b9133b214cdedcd66c342b2a2d73d2ae08b6177fd3da1c2b1a"
    assert [one[1] for one in flat if len(one) == 3] == ["start", "note", "acknowledge", "end"]
    assert sum(len(one) == 4 for one in flat) == 40
    assert flat[5] == (0, 5, b"2.00,0.0040,-0.0100\x07\xff", 1.0)
