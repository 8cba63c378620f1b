"""Printed tables fit the window they are printed in, and are whole anywhere else."""

import csv
import io
import json
import os
import re
import shutil
import subprocess
import sys
from pathlib import Path

import pytest
from terminal_harness import Terminal

from eastfall.tui.printed import listed, printed, prose

pytestmark = pytest.mark.invariant
SAMPLES = Path(__file__).parents[2] / "replay_logs"
HEAD = ("depth_m", "pass", "measured_east_mm", "measured_north_mm", "u_east_mm", "verdict")
ROWS = [
    ("20.000", "down", "-0.963", "0.439", "0.166", "within"),
    ("340.000", "up", "12.5", "-7.25", "2.9", "over"),
]
RUNS = ("started, UTC", "site", "run", "depth_m", "verdict", "record", "file")
RUN = (
    "2026-05-04 07:30",
    "Sandrigg East, old winding shaft",
    "guided",
    "360.211",
    "undecided",
    "intact",
    "a" * 60,
)


def test_table_that_fits_is_a_line_a_row() -> None:
    """Without a window, and in one that is wide enough, cells stand under their whole names."""
    whole = printed(HEAD, ROWS)
    assert whole == printed(HEAD, ROWS, len(whole[0]))
    assert whole[0].split() == list(HEAD)
    assert [line.split() for line in whole[1:]] == [list(row) for row in ROWS]


@pytest.mark.parametrize("width", range(20, 80, 3))
def test_narrow_table_fits_and_keeps_every_cell(width: int) -> None:
    """No line is longer than the window; every part begins with the depth, and no cell is lost."""
    found = printed(HEAD, ROWS, width)
    assert max(map(len, found)) <= width
    assert found[0].strip()
    for number, row in enumerate(ROWS):
        told = [line.split() for line in found if line.split()[:1] == [row[0]]]
        assert [cell for line in told for cell in line[1:]] == list(row[1:]), number
    letters = "".join(found)
    assert all(word in letters for name in HEAD for word in name.split("_"))


@pytest.mark.parametrize("width", [20, 40, 60, 80, 100, 120, 200, None])
def test_list_of_runs_fits_and_names_every_file_whole(width: int | None) -> None:
    """The file stands below where there is no room beside; a site's name gives way before a verdict."""
    found = listed(RUNS, [RUN, RUN], width)
    if width is not None:
        assert max(map(len, found)) <= width
    assert "".join("".join(found).split()).count("a" * 60) == 2
    told = " ".join(" ".join(found).split())
    assert told.count("undecided") == 2
    assert told.count("2026-05-04 07:30") == 2


def test_sentence_is_parted_between_words() -> None:
    """As many lines as it takes, none longer than the window; one without a window."""
    text = "note: masses nearby are not modelled; they are taken to bend the vertical"
    assert prose(text, None) == [text]
    assert " ".join(prose(text, 30)) == text
    assert max(map(len, prose(text, 30))) <= 30


@pytest.fixture
def folder(tmp_path: Path) -> Path:
    """Give a folder of runs, of which one is no log."""
    for log in SAMPLES.glob("*.eastfall.jsonl"):
        shutil.copy(log, tmp_path)
    (tmp_path / "broken.eastfall.jsonl").write_text("{}\n")
    return tmp_path


@pytest.mark.parametrize("columns", [50, 80, 132])
def test_runs_fit_the_terminal(folder: Path, columns: int) -> None:
    """In a real terminal no row of the list is broken by it, whatever its width."""
    command = [str(Path(sys.executable).parent / "eastfall"), "runs", str(folder)]
    with Terminal(command, columns, 60) as terminal:
        assert terminal.ended() == 0
        raw = terminal.raw.decode()
        text = terminal.text
    lines = [line.rstrip("\r") for line in raw.split("\n") if "runs\r" not in line]
    assert max(len(line) for line in lines) <= columns
    for words in ("Sandrigg East", "Hollin Brake", "Carnwick Pit", "unreadable", "expected the header"):
        assert words in " ".join(text.split())
    assert re.search(r"sandrigg-\s*east_20260504T073000Z\.eastfall\.jsonl", text)


def test_runs_are_whole_for_other_programs(folder: Path) -> None:
    """CSV and JSON have every key and the whole path in a window of any width; a list into a pipe has a line a run."""
    program = str(Path(sys.executable).parent / "eastfall")

    def told(*words: str, **environment: str) -> str:
        found = subprocess.run(
            [program, "runs", str(folder), *words],
            env={**{k: v for k, v in os.environ.items() if k != "COLUMNS"}, **environment},
            capture_output=True,
            text=True,
            timeout=60,
            check=True,
        )
        return found.stdout

    rows = list(csv.DictReader(io.StringIO(told("--format", "csv", COLUMNS="40"))))
    cards = json.loads(told("--format", "json", COLUMNS="40"))["runs"]
    assert [one["path"] for one in rows] == [one["path"] for one in cards]
    assert {Path(one["path"]).parent for one in cards} == {folder}
    assert {"started_at", "depth_m", "error"} <= set(cards[0])
    assert len(told().splitlines()) == 1 + len(cards)
    assert max(map(len, told(COLUMNS="80").splitlines())) <= 80
