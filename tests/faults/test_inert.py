"""Hostile text in every place that takes text, through every way out of the program: it stays text.

The name of the site, notes and their writers, reasons, links and the instrument's own lines carry escape sequences,
markup of the screen library and of web pages, spreadsheet formulas, path tricks and characters that turn the direction
of reading.
"""

import csv
import json
import os
import subprocess
import sys
from datetime import UTC, datetime
from html.parser import HTMLParser
from pathlib import Path

import numpy as np
import pytest

sys.path.insert(0, str(Path(__file__).parents[1] / "tui"))

pytest.importorskip("termios", reason="pseudo-terminals are POSIX")
from terminal_harness import EASTFALL, PATIENCE, Terminal

from eastfall.io.arrivals import LineBlock, RunEvent
from eastfall.io.runlog import RunLogWriter
from eastfall.io.sitefile import parse_site

pytestmark = pytest.mark.invariant

NASTY = "=1+1\x1b]0;owned\x07\x1b[2J[red]x[/] [@click=app.quit]y[/] <script>z</script> \u202e../../etc\x00\r\n{{7*7}}"
"""What a name, a note or a line may carry at worst."""
SEQUENCES = (b"\x1b]0;", b"owned\x07", b"\x1b[2J[", "\u202e".encode(), b"\x00")
"""What may reach no terminal: the screen itself writes none of it."""
SITE = """\
[site]
name = {name}
latitude_deg = 54.6
[shaft]
depth_m = 90.0
[run]
kind = "guided"
[[link]]
url = {url}
"""


def site_text(url: str) -> str:
    """Return a site file that is hostile where a text may stand."""
    return SITE.format(name=json.dumps(NASTY[:120]), url=json.dumps(url))


@pytest.fixture(scope="module")
def log(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """Return a run log whose every text is hostile, and every tenth line too."""
    folder = tmp_path_factory.mktemp("logs") / "[red]x[/]" / "=1+1"
    site = parse_site(site_text("-"), "site.toml")
    log = RunLogWriter.create(folder, site, started_at=datetime(2026, 1, 2, tzinfo=UTC))
    for number in range(600):  # down and up again
        depth = 0.1 * min(number, 600 - number)
        line = NASTY.replace("\n", " ").encode() if number % 10 == 3 else b"%.1f,0.30,-0.20" % depth
        time = 0.1 * number
        log.raw(LineBlock(data=line + b"\n", times=np.array([time]), first_line=number + 1))
        if number % 100 == 50:
            log.event(RunEvent(time=time, name="note", fields={"text": NASTY, "who": NASTY}))
            log.event(RunEvent(time=time, name="acknowledge", fields={"name": NASTY, "who": NASTY}))
            log.event(
                RunEvent(
                    time=time,
                    name="shelve",
                    fields={"name": "warning limit", "seconds": 1.0, "reason": NASTY, "who": NASTY},
                )
            )
            fields = {"link": 0, "state": "lost", "message": NASTY}
            log.event(RunEvent(time=time, name="link", fields=fields))
            condition = {"name": NASTY, "on": True, "message": NASTY}
            log.event(RunEvent(time=time, name="condition", fields=condition))
    log.event(RunEvent(time=60.0, name="end"))
    log.close(60.0)
    return log.path


def told(*words: str, cwd: Path) -> bytes:
    """Return all that the program prints."""
    done = subprocess.run(
        [*EASTFALL, *words],
        capture_output=True,
        cwd=cwd,
        timeout=3 * PATIENCE,
        stdin=subprocess.DEVNULL,
        check=False,
    )
    assert done.returncode in {0, 1}, done.stderr
    assert b"Traceback" not in done.stderr
    return done.stdout + done.stderr


def assert_inert(data: bytes) -> None:
    """Assert that nothing of it acts on a terminal."""
    assert not {one for one in data.decode() if not one.isprintable() and one not in "\r\n"}


def assert_no_formula(data: bytes) -> None:
    """Assert that a spreadsheet takes every cell for what it is."""
    cells = [cell for row in csv.reader(data.decode().splitlines()) for cell in row]
    assert cells
    assert not [one for one in cells if one.lstrip()[:1] in set("=@\t\r")]


WAYS = [
    ("reduce",),
    ("reduce", "--format", "csv"),
    ("reduce", "--format", "json"),
    ("replay", "--plain"),
    ("verify",),
    ("report",),
    ("compare",),
    ("runs",),
    ("runs", "--format", "csv"),
    ("runs", "--format", "json"),
]


@pytest.mark.parametrize("words", WAYS, ids=" ".join)
def test_what_is_printed_has_no_control_characters(log: Path, tmp_path: Path, words: tuple[str, ...]) -> None:
    """Tables, JSON, CSV and sentences: visible escapes in their place."""
    verb, *options = words
    data = told(verb, str(log.parent if verb == "runs" else log), *options, cwd=tmp_path)
    assert_inert(data)
    if "csv" in options:
        assert_no_formula(data)
    assert list(tmp_path.iterdir()) == []


@pytest.mark.parametrize("suffix", ["csv", "json", "las"])
def test_what_is_exported_has_no_control_characters_and_no_formulas(
    log: Path, tmp_path: Path, suffix: str
) -> None:
    """A file that a spreadsheet or another program opens."""
    file = tmp_path / f"out.{suffix}"
    assert_inert(told("export", str(log), str(file), cwd=tmp_path))
    assert_inert(file.read_bytes())
    if suffix == "csv":
        assert_no_formula(file.read_bytes())


class Tags(HTMLParser):
    """Collects tags and attributes that could act."""

    def __init__(self) -> None:
        super().__init__()
        self.found: list[str] = []

    def handle_starttag(self, tag: str, attributes: list[tuple[str, str | None]]) -> None:
        """Note what could act."""
        if tag in {"script", "img", "iframe", "object", "link"} or any(
            name[:2] == "on" for name, _ in attributes
        ):
            self.found.append(tag)


def test_the_report_has_no_tag_of_theirs(log: Path, tmp_path: Path) -> None:
    """The page runs nothing and fetches nothing, and no template in a name is worked out."""
    file = tmp_path / "report.html"
    assert_inert(told("report", str(log), "--out", str(file), cwd=tmp_path))
    text = file.read_text(encoding="utf-8")
    tags = Tags()
    tags.feed(text)
    assert tags.found == []
    assert "{{7*7}}" in text
    assert_inert(file.read_bytes())


def test_a_live_run_names_its_log_and_shows_all_of_it_inertly(tmp_path: Path) -> None:
    """Letters for markup, escapes for control characters; the log lies in its folder and nowhere else."""
    feed = tmp_path / "feed"
    os.mkfifo(feed)
    (tmp_path / "site.toml").write_text(site_text(str(feed)), encoding="utf-8")
    runs = tmp_path / "deep" / "runs"
    with Terminal(
        [*EASTFALL, "watch", str(tmp_path / "site.toml"), "--into", str(runs)], 120, 40
    ) as terminal:
        with feed.open("wb", buffering=0) as pen:
            for number in range(200):
                pen.write(b"%.1f,0.30,-0.20\n" % (0.1 * number))
                if number % 10 == 3:
                    pen.write(NASTY.replace("\n", " ").encode() + b"\n")
            terminal.wait(lambda text: "[red]x[/]" in text and "19.9" in text)
            terminal.press("n")
            terminal.wait("Note for the record")
            terminal.press("[red]note[/] =1+1")
            terminal.wait("[red]note[/] =1+1")
            terminal.press("\r")
            for key in "sae?":
                terminal.press(key)
                terminal.read(0.3)
                terminal.press("\x1b")
                terminal.read(0.3)
        terminal.process.terminate()
        terminal.ended()
    assert not [one for one in SEQUENCES if one in terminal.raw]
    assert [one.parent for one in tmp_path.rglob("*.eastfall.jsonl")] == [runs]
    assert {one.name for one in tmp_path.iterdir()} == {"feed", "site.toml", "deep"}


def test_a_replay_shows_their_alarms_and_notes_letter_by_letter(log: Path) -> None:
    """Every screen that shows texts of the record: alarms, notes, stations, the run itself."""
    with Terminal([*EASTFALL, "replay", str(log), "--speed", "1000"], 120, 40) as terminal:
        terminal.wait(lambda text: "[red]x[/]" in text and "REPLAY" in text)
        for key in "lnseawt?":
            terminal.press(key)
            terminal.read(0.3)
            terminal.press("\x1b")
            terminal.read(0.3)
        terminal.press("l")
        terminal.wait(lambda text: text.count("[red]x[/]") > 1)
        terminal.process.terminate()
        terminal.ended()
    assert not [one for one in SEQUENCES if one in terminal.raw]
    assert b"Traceback" not in terminal.raw
