"""The program itself in a pseudo-terminal: from the demo to its record and replay, and what signals leave behind."""

import importlib.util
import os
import re
import signal
import subprocess
import sys
from collections.abc import Callable
from pathlib import Path
from typing import Any

import pytest

pytestmark = [
    pytest.mark.invariant,
    pytest.mark.skipif(os.name != "posix", reason="pseudo-terminals are POSIX"),
]
COLOUR = re.compile(rb"\x1b\[[0-9;]*\b(?:3[0-7]|4[0-7]|38|48|9[0-7]|10[0-7])(?:;[0-9;]*)?m")


def _harness() -> Any:
    """Return the harness module, which stands beside this file and in no package."""
    spec = importlib.util.spec_from_file_location(
        "terminal_harness", Path(__file__).with_name("terminal_harness.py")
    )
    assert spec is not None
    assert spec.loader is not None
    module = importlib.util.module_from_spec(spec)
    spec.loader.exec_module(module)
    return module


HARNESS = _harness()
Open = Callable[..., Any]


@pytest.fixture
def opened() -> Any:
    """Open programs in terminals, and close what is left."""
    terminals: list[Any] = []

    def build(arguments: list[str], columns: int = 80, rows: int = 24, **environment: str) -> Any:
        terminal = HARNESS.Terminal([*HARNESS.EASTFALL, *arguments], columns, rows, **environment)
        terminals.append(terminal)
        return terminal

    yield build
    for one in terminals:
        one.close()


def restored(raw: bytes) -> bool:
    """Tell whether the last word on alternate screen, cursor and mouse was to put them back."""
    pairs = ((b"?1049h", b"?1049l"), (b"?25l", b"?25h"), (b"?1000h", b"?1000l"))
    return all(raw.rfind(off) > raw.rfind(on) for on, off in pairs)


def record_of(folder: Path) -> Path:
    """Return the one run log in a folder."""
    (log,) = folder.glob("*.eastfall.jsonl")
    return log


def test_demo_is_watched_by_keys_recorded_and_replayed(opened: Open, tmp_path: Path) -> None:
    """One whole run: colour at 80x24, every main key, a clean end; then its record at 120x40 without colour."""
    live = opened(["demo", "--into", str(tmp_path)])
    live.wait(lambda text: "WITHIN" in text and "lines/s" in text)
    live.wait(lambda text: "Station" not in text and "guided run from straight vertical" in text)
    live.press("s")
    live.wait("stations: ")
    live.press("\x1b")
    live.wait("LIVE")
    live.press("?")
    live.wait("Acknowledge the alarm that is shown first")
    live.press("\x1b")
    live.wait("LIVE")
    live.press(" ")
    live.wait("PICTURE HELD")
    live.press("f")
    live.wait(lambda text: "PICTURE HELD" not in text)
    live.press("q")
    live.wait("Stop recording and leave?")
    live.press("n")
    live.wait("LIVE")
    live.press("q")
    live.wait("Stop recording and leave?")
    live.press("y")
    assert live.ended() == 0
    assert restored(live.raw)
    assert COLOUR.search(live.raw)
    log = record_of(tmp_path)
    assert '"event":"end"' in log.read_text()

    again = opened(["replay", str(log), "--speed", "8"], 120, 40, NO_COLOR="1", COLORTERM="")
    again.wait("REPLAY")
    again.wait(lambda text: "WITHIN" in text)
    again.wait("END")
    again.press("\x1b[D")
    again.press(" ")
    again.wait(lambda text: "PAUSED" in text or "END" in text)
    again.press("q")
    assert again.ended() == 0
    assert restored(again.raw)
    assert not COLOUR.search(again.raw)


@pytest.mark.parametrize("number", [signal.SIGTERM, signal.SIGHUP])
def test_signal_ends_the_run_cleanly_and_restores_the_terminal(
    opened: Open, tmp_path: Path, number: signal.Signals
) -> None:
    """SIGTERM and a closed window leave the terminal as it was and the record closed."""
    live = opened(["demo", "--into", str(tmp_path)])
    live.wait("WITHIN")
    live.process.send_signal(number)
    live.ended()
    assert restored(live.raw)
    assert '"end":"closed"' in record_of(tmp_path).read_text()


def test_resize_storm_leaves_a_whole_picture(opened: Open, tmp_path: Path) -> None:
    """Windows from 200x60 down to 20x5 and back, as fast as they come, end in a full screen."""
    live = opened(["demo", "--into", str(tmp_path)], 120, 40)
    live.wait("shaft, ")
    for columns, rows in [(20, 5), (200, 60), (60, 10), (20, 5), (33, 30), (80, 24)] * 3:
        live.resize(columns, rows)
        live.read(0.02)
    text = live.wait(lambda text: all(words in text for words in ("WITHIN", "plan, ", "? help", "lines/s")))
    assert len(text.splitlines()) == 24
    live.press("q")
    live.wait("Stop recording")
    live.press("y")
    assert live.ended() == 0


def test_drop_waits_for_a_name_before_bodies_count(opened: Open, tmp_path: Path) -> None:
    """The demo drop says that it is not armed, asks who declares the shaft clear, and writes the name down."""
    live = opened(["demo", "--kind", "drop", "--into", str(tmp_path)])
    live.wait("Not armed. Clear the shaft")
    live.press("g")
    live.wait("Is the shaft clear")
    live.press("Ada Moor\r")
    live.wait(lambda text: "Not armed" not in text and "LIVE" in text)
    live.process.send_signal(signal.SIGTERM)
    live.ended()
    assert '"who":"Ada Moor"' in record_of(tmp_path).read_text()


def test_where_one_types_is_seen_without_colour(opened: Open, tmp_path: Path) -> None:
    """With NO_COLOR the place of the next letter is reversed, also in a dialog."""
    live = opened(["demo", "--into", str(tmp_path)], NO_COLOR="1")
    live.wait("WITHIN")
    live.press("n")
    live.wait("Note for the record")
    live.press("fan")

    def marked(text: str) -> bool:
        rows = text.splitlines()
        row = next((at for at, line in enumerate(rows) if "fan" in line), None)
        return row is not None and bool(live.screen.buffer[row][rows[row].index("fan") + 3].reverse)

    live.wait(marked)
    live.process.send_signal(signal.SIGTERM)
    live.ended()
    assert not COLOUR.search(live.raw)


@pytest.mark.parametrize("arguments", [[], ["replay", "LOG"]])
def test_dumb_terminal_is_refused_in_one_line(opened: Open, arguments: list[str]) -> None:
    """TERM=dumb gets exit status 2 and one line that names the way without a screen; nothing is drawn."""
    log = next(Path(__file__).parents[2].glob("replay_logs/*.eastfall.jsonl"), None)
    if arguments and log is None:
        pytest.skip("no sample record in this checkout")
    named = [str(log) if one == "LOG" else one for one in arguments]
    refused = opened(named, TERM="dumb")
    assert refused.ended() == 2
    said = [line for line in refused.text.splitlines() if line.strip()]
    assert "TERM is dumb" in " ".join(said)
    assert b"?1049h" not in refused.raw


def test_start_screen_without_a_terminal_is_refused_in_one_line(tmp_path: Path) -> None:
    """Into a pipe the start screen says what to use instead."""
    done = subprocess.run(
        [sys.executable, "-c", "from eastfall.tui.main import main; main()"],
        capture_output=True,
        text=True,
        stdin=subprocess.DEVNULL,
        cwd=tmp_path,
        timeout=30,
        check=False,
    )
    assert done.returncode == 2
    assert done.stdout == ""
    assert len(done.stderr.splitlines()) == 1
    assert "needs a terminal" in done.stderr
