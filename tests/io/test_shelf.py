"""The shelf: every run of a folder on a card, whatever state its file is in, worked on by several processes."""

import shutil
from pathlib import Path

from record_help import written

from eastfall.io.logtail import last_event
from eastfall.io.reduce import reduce_file
from eastfall.io.shelf import CARD_KEYS, card, card_row, list_runs, log_files

LOGS = Path(__file__).parents[2] / "replay_logs"


def test_cards_say_what_when_how_deep_and_whether_intact(tmp_path: Path) -> None:
    """Good, cut, changed and unreadable logs each have their card, newest first, and other files have none."""
    for log in LOGS.glob("*.eastfall.jsonl"):
        shutil.copy(log, tmp_path)
    first = written(tmp_path, seconds=60)
    data = first.read_bytes()
    first.with_name("cut.eastfall.jsonl").write_bytes(data[:-200])
    first.with_name("changed.eastfall.jsonl").write_bytes(data.replace(b"0.011,", b"0.012,", 1))
    (tmp_path / "rubbish.eastfall.jsonl").write_bytes(b"\x1b[2J\xff")
    (tmp_path / "notes.txt").write_text("x", encoding="ascii")
    done = []
    cards = list_runs(tmp_path, progress=lambda now, of: done.append((now, of)), workers=1)
    assert done == [(number, 7) for number in range(8)]
    assert [one.started_at for one in cards if one.started_at] == sorted(
        (one.started_at for one in cards if one.started_at), reverse=True
    )
    by_name = {one.path.name.split("_")[0].split(".")[0]: one for one in cards}
    guided = by_name["sandrigg-east"]
    assert (guided.site, guided.kind, guided.depth, guided.verdict, guided.state, guided.error) == (
        "Sandrigg East",
        "guided",
        360.211,  # where the probe rested at the bottom, past the last station
        "within",
        "intact",
        "",
    )
    assert by_name["cut"].state == "cut short"
    assert by_name["changed"].state == "changed"
    assert cards[-1].path.name == "rubbish.eastfall.jsonl"
    assert "expected the header" in cards[-1].error
    assert all(tuple(card_row(one)) == CARD_KEYS for one in cards)


def test_two_processes_list_the_same_as_one(tmp_path: Path) -> None:
    """Spread over processes, the cards are the same in the same order."""
    for number in range(6):
        (tmp_path / str(number)).mkdir()
        path = written(tmp_path / str(number), seconds=2 + number)
        path.rename(tmp_path / f"run-{number}.eastfall.jsonl")
    assert list_runs(tmp_path, workers=2) == list_runs(tmp_path, workers=1)


def test_parts_of_one_log_are_one_card(tmp_path: Path) -> None:
    """A log that was rolled into parts is listed once."""
    first = written(tmp_path, roll_bytes=2000)
    assert log_files(tmp_path) == [first]
    assert card(first).state == "intact"


def test_a_card_without_verdict_is_quick_and_still_verified(tmp_path: Path) -> None:
    """Asked for no verdict, the card has header and seals only."""
    quick = card(written(tmp_path), judged=False)
    assert (quick.site, quick.kind, quick.verdict, quick.state) == (
        "Kestrel Hollow No. 2",
        "guided",
        "",
        "intact",
    )


def test_what_a_run_says_of_itself_is_what_working_through_it_says() -> None:
    """The sealed summary of each recorded demonstration gives the depth and verdict that its reduction gives."""
    logs = log_files(Path(__file__).parents[2] / "replay_logs")
    assert len(logs) == 3
    for path in logs:
        told = last_event(path, "summary")
        assert told is not None
        found = reduce_file(path)
        assert told.fields["verdict"] == found.verdict
        assert told.fields["deepest_m"] == max(one.depth for one in found.result.stations)
        assert (card(path).verdict, card(path).depth) == (found.verdict, told.fields["deepest_m"])
