"""Standard streams that are closed, or that two would read; a dashboard that ends by itself."""

import os
import subprocess
import sys
from pathlib import Path

import pytest
from click.testing import CliRunner

from eastfall.tui.main import cli
from eastfall.tui.verbs import live

pty_only = pytest.mark.skipif(os.name != "posix", reason="pseudo-terminals and closing a stream are POSIX")

SITE = """
[site]
latitude_deg = 57.3
[shaft]
depth_m = 60.0
[run]
kind = "{kind}"
[[link]]
url = "-"
columns = ["depth_m", "east_mm", "north_mm"]
"""


@pytest.fixture
def hung(tmp_path):
    """Give the path of a site file that reads standard input."""
    path = tmp_path / "hung.toml"
    path.write_text(SITE.format(kind="hung"), encoding="utf-8")
    return path


def test_the_dashboard_does_not_share_its_keys_with_a_link(hung, tmp_path, monkeypatch):
    """A link on standard input would take every key: the dashboard could not even be left."""
    monkeypatch.setattr(live, "_screen_there", lambda: True)
    monkeypatch.setenv("TERM", "xterm-256color")
    for words in ([str(hung)], [str(hung), "--link", "emulate:", "--link", "-"]):
        outcome = CliRunner().invoke(cli, ["watch", *words, "--into", str(tmp_path / "runs")])
        assert outcome.exit_code == 2, outcome.output
        assert "the dashboard takes its keys from there" in outcome.output
    assert not (tmp_path / "runs").exists()


@pytest.mark.parametrize("words", [["record"], ["watch", "--plain"]])
def test_what_is_typed_on_the_dashboard_needs_it(hung, tmp_path, words):
    """A run without an instrument and without a screen would wait for nothing."""
    hung.write_text(hung.read_text(encoding="utf-8").replace('"-"', '"hand:"'), encoding="utf-8")
    outcome = CliRunner().invoke(cli, [*words, str(hung), "--into", str(tmp_path / "runs")])
    assert outcome.exit_code == 2, outcome.output
    assert "readings are typed on the dashboard" in outcome.output
    assert not (tmp_path / "runs").exists()


@pytest.mark.parametrize(
    ("words", "closed", "status"),
    [
        ("", "<&-", 2),
        ("expect {site} --at 50", "<&- >&- 2>&-", 0),
        ("record {site} --into {runs} --for 5", "<&-", 0),
        ("record {site} --into {runs} --for 5", ">&-", 0),
        ("watch {site} --plain --into {runs}", "<&- >&- 2>&-", 0),
        ("record {drop} --into {runs}", "<&-", 2),
    ],
)
@pty_only
def test_a_closed_stream_is_like_an_empty_one(hung, tmp_path, words, closed, status):
    """Python has None in place of such a stream, and the next file opened, a run log, would take its number."""
    drop = tmp_path / "drop.toml"
    drop.write_text(SITE.format(kind="drop"), encoding="utf-8")
    program = f"'{sys.executable}' -c 'from eastfall.tui.main import main; main()'"
    line = f"{program} {words.format(site=hung, drop=drop, runs=tmp_path / 'runs')} {closed}"
    outcome = subprocess.run(
        ["/bin/sh", "-c", line],
        stdin=subprocess.DEVNULL,
        capture_output=True,
        timeout=60,
        check=False,
    )
    assert outcome.returncode == status, outcome
    assert b"Traceback" not in outcome.stderr


@pty_only
def test_a_demo_for_some_seconds_ends_also_on_the_screen(tmp_path):
    """--for was heeded without a screen alone."""
    sys.path.insert(0, str(Path(__file__).parent))
    from terminal_harness import EASTFALL, Terminal

    with Terminal([*EASTFALL, "demo", "--for", "1.5", "--into", str(tmp_path)], 80, 24) as terminal:
        terminal.wait("LIVE")
        assert terminal.ended() == 0
    assert len(list(tmp_path.glob("*.eastfall.jsonl"))) == 1
