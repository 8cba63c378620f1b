"""`reduce` and `runs` over a folder, as the command line shows them: rows, list, exit status, one line of refusal."""

import json
import re
import shutil
from pathlib import Path

import pytest
from click.testing import CliRunner, Result

from eastfall.tui.main import cli

pytestmark = pytest.mark.invariant

LOGS = sorted((Path(__file__).parents[2] / "replay_logs").glob("*.eastfall.jsonl"))


@pytest.fixture
def shelf(tmp_path: Path) -> Path:
    """Return a folder with the recorded demonstrations."""
    for log in LOGS:
        shutil.copy(log, tmp_path)
    return tmp_path


def called(*words: object) -> Result:
    """Call a verb."""
    return CliRunner().invoke(cli, [str(one) for one in words], standalone_mode=False)


def test_reduce_of_a_folder_is_a_row_for_each_log(shelf: Path) -> None:
    """The table names each log with its verdict, and the status is that of limits kept."""
    done = called("reduce", shelf, "--workers", 1)
    assert done.return_value == 0
    rows = done.stdout.splitlines()
    assert len(rows) == 1 + len(LOGS)
    for log, row in zip(LOGS, rows[1:], strict=True):
        assert log.name in row
        assert "within" in row
        assert "intact" in row


def test_reduce_of_a_folder_as_json_is_a_list_with_what_each_comes_to(shelf: Path) -> None:
    """Each entry holds the summary, and the stations and alarms that `reduce` gives of that log alone."""
    found = json.loads(called("reduce", shelf, "--workers", 1, "--format", "json").stdout)
    for one, log in zip(found, LOGS, strict=True):
        alone = json.loads(called("reduce", log, "--format", "json").stdout)
        assert {name: one[name] for name in ("stations", "alarms", "closure", "rest_point", "frames")} == {
            name: alone[name] for name in ("stations", "alarms", "closure", "rest_point", "frames")
        }


def test_a_log_that_cannot_be_used_is_named_and_the_status_is_2(shelf: Path) -> None:
    """The others are worked through all the same."""
    (shelf / "rubbish.eastfall.jsonl").write_bytes(b"\xff")
    done = called("reduce", shelf, "--workers", 1, "--format", "csv")
    assert done.return_value == 2
    assert len(done.stdout.splitlines()) == 2 + len(LOGS)
    assert "rubbish.eastfall.jsonl" in done.stderr
    assert len(done.stderr.splitlines()) == 1


def test_an_interval_is_refused_for_a_folder_and_a_folder_without_logs_too(tmp_path: Path) -> None:
    """What makes no sense is said in one line."""
    assert "for a capture" in str(called("reduce", tmp_path, "--interval", 1).exception)
    assert "no run log in it" in str(called("reduce", tmp_path).exception)


def test_runs_and_reduce_agree_on_verdict_and_depth(shelf: Path) -> None:
    """The list of runs and the reduced folder say the same of each log."""
    cards = json.loads(called("runs", shelf, "--format", "json").stdout)["runs"]
    found = json.loads(called("reduce", shelf, "--format", "json").stdout)
    names = ("path", "site", "started_at", "kind", "depth_m", "verdict", "state", "error")
    assert sorted([[one[name] for name in names] for one in found]) == sorted(
        [[one[name] for name in names] for one in cards]
    )


def _changed(log: Path) -> Path:
    """Return a copy of a log in which one digit of one reading is another."""
    copy = log.with_name("tampered.eastfall.jsonl")
    lines = log.read_text(encoding="utf-8").splitlines(keepends=True)
    at = next(n for n, one in enumerate(lines) if n > len(lines) // 2 and '"raw":["' in one)
    head, mark, rest = lines[at].partition('"raw":["')
    lines[at] = head + mark + ("8" if rest[0] != "8" else "9") + rest[1:]
    copy.write_text("".join(lines), encoding="utf-8")
    return copy


def test_a_changed_log_is_told_by_every_verb_that_makes_something_of_it(shelf: Path) -> None:
    """Status 1 of a folder as of the log alone; a note of a comparison in every form; a line beside an export."""
    log = next(shelf.glob("sandrigg*"))
    copy = _changed(log)
    assert called("reduce", copy).return_value == 1
    assert called("reduce", shelf, "--workers", 1).return_value == 1
    said = "the record tampered.eastfall.jsonl is changed: line"
    assert said in " ".join(called("compare", log, copy).stdout.split())
    assert said in " ".join(called("compare", log, copy, "--format", "csv").stderr.split())
    assert any(
        said in one for one in json.loads(called("compare", log, copy, "--format", "json").stdout)["notes"]
    )
    assert "RECORD CHANGED: line" in called("replay", copy, "--plain").stdout
    assert "CHANGED" not in called("replay", log, "--plain").stdout
    exported = called("export", copy, shelf / "out.csv")
    assert "the record is changed: line" in exported.stderr
    assert called("export", log, shelf / "sound.csv").stderr == ""


def test_records_that_cannot_be_read_are_told_by_reduce_replay_and_report(shelf: Path) -> None:
    """Two lines of rubbish in the middle of a log: a line on standard error, a key, a row, and beside the replay."""
    log = next(shelf.glob("sandrigg*"))
    lines = log.read_bytes().splitlines(keepends=True)
    at = len(lines) // 2
    copy = log.with_name("rubbish.eastfall.jsonl")
    copy.write_bytes(b"".join([*lines[:at], b"\xff\xfe{\n", b'{"t":1}\n', *lines[at:]]))
    said = "2 records cannot be read and were passed over"
    reduced = called("reduce", copy, "--format", "json")
    assert reduced.stderr.splitlines() == [
        f"eastfall: {copy}: {said} (line {at + 1} is not as it was written)"
    ]
    assert json.loads(reduced.stdout)["unreadable_records"] == 2
    together = called("reduce", shelf, "--workers", 1, "--format", "json")
    assert together.stderr.count(said) == together.stderr.count("cannot be read") == 1
    assert f"; {said}" in called("replay", copy, "--plain").stdout
    for words, count in ((copy, "2"), (log, "0")):
        text = " ".join(called("report", words).stdout.split())
        assert re.search(rf"Records passed over, unreadable:? +{count} ", text), text[-2000:]
    sound = called("reduce", log, "--format", "json")
    assert (sound.stderr, json.loads(sound.stdout)["unreadable_records"]) == ("", 0)
