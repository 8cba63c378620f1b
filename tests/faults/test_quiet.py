"""Nothing listens by default, and nothing is sent anywhere: what the system says of the program's sockets."""

import os
import signal
import subprocess
import sys
from collections.abc import Callable, Iterator
from pathlib import Path

import pytest

sys.path.insert(0, str(Path(__file__).parents[1] / "tui"))

pytest.importorskip("termios", reason="pseudo-terminals are POSIX")
from terminal_harness import EASTFALL, PATIENCE, Terminal

pytestmark = [
    pytest.mark.invariant,
    pytest.mark.skipif(not Path("/proc/net/tcp").exists(), reason="sockets are read from /proc"),
]

SITE = """\
[site]
name = "Quiet Haven"
latitude_deg = 54.6
[shaft]
depth_m = 300.0
[run]
kind = "guided"
[[link]]
url = "emulate:?rate=20"
"""
LISTENS = "0A"  # TCP_LISTEN in the kernel's table
LOOPBACK = {"0100007F", "00000000000000000000000001000000"}


def family(root: int) -> list[int]:
    """Return a process and all that it started."""
    found = [root]
    for path in Path(f"/proc/{root}/task").glob("*/children"):
        for child in path.read_text().split():
            found += family(int(child))
    return found


def inodes(process: int) -> set[str]:
    """Return the sockets that a process holds."""
    held = set()
    for one in Path(f"/proc/{process}/fd").iterdir():
        target = str(one.readlink()) if one.is_symlink() else ""
        if target.startswith("socket:["):
            held.add(target[len("socket:[") : -1])
    return held


def internet_sockets(root: int) -> list[tuple[str, str, str]]:
    """Return protocol, local address and state of every internet socket of a process and its children."""
    held = set().union(*(inodes(one) for one in family(root)))
    found = []
    for protocol in ("tcp", "tcp6", "udp", "udp6", "raw", "raw6"):
        table = Path(f"/proc/{root}/net/{protocol}")
        for line in table.read_text().splitlines()[1:] if table.exists() else []:
            fields = line.split()
            if fields[9] in held:
                found.append((protocol, fields[1], fields[3]))
    return found


def listening_names(root: int) -> list[str]:
    """Return the sockets of the file system or the abstract kind that a process and its children listen on."""
    held = set().union(*(inodes(one) for one in family(root)))
    lines = [line.split() for line in Path(f"/proc/{root}/net/unix").read_text().splitlines()[1:]]
    accepts = 0x10000  # __SO_ACCEPTCON
    return [" ".join(one[6:]) for one in lines if one[6] in held and int(one[3], 16) & accepts]


@pytest.fixture
def started(tmp_path: Path) -> Iterator[Callable[..., "subprocess.Popen[str]"]]:
    """Start the program with words, and give it once it has printed a line; ended afterwards."""
    running: list[subprocess.Popen[str]] = []
    (tmp_path / "site.toml").write_text(SITE, encoding="utf-8")

    def start(*words: str) -> "subprocess.Popen[str]":
        one = subprocess.Popen(
            [*EASTFALL, *words], stdout=subprocess.PIPE, stdin=subprocess.DEVNULL, text=True, cwd=tmp_path
        )
        running.append(one)
        assert one.stdout is not None
        assert one.stdout.readline()
        return one

    yield start
    for one in running:
        one.send_signal(signal.SIGTERM)
        one.communicate(timeout=PATIENCE)


@pytest.mark.parametrize(
    "words", [("record", "site.toml"), ("demo", "--plain"), ("watch", "site.toml", "--plain")]
)
def test_no_internet_socket_is_open_while_it_runs(
    started: Callable[..., "subprocess.Popen[str]"], words
) -> None:
    """Record, demo and watch on an emulated link hold no internet socket at all, and nothing that listens."""
    running = started(*words)
    assert internet_sockets(running.pid) == []
    assert listening_names(running.pid) == []


def test_no_internet_socket_is_open_while_the_dashboard_runs(tmp_path: Path) -> None:
    """The same with the screen."""
    with Terminal([*EASTFALL, "demo", "--into", str(tmp_path)], 80, 24) as terminal:
        terminal.wait("WITHIN")
        assert internet_sockets(terminal.process.pid) == []
        assert listening_names(terminal.process.pid) == []
        os.kill(terminal.process.pid, signal.SIGTERM)
        terminal.ended()


def test_the_emulators_port_is_on_the_loopback_alone(started: Callable[..., "subprocess.Popen[str]"]) -> None:
    """The one thing that was asked to listen does, and only this machine can reach it."""
    running = started("emulate", "site.toml", "--tcp", "0")
    listening = [address for _, address, state in internet_sockets(running.pid) if state == LISTENS]
    assert len(listening) == 1
    assert {one.split(":")[0] for one in listening} <= LOOPBACK


def test_the_emulators_port_is_elsewhere_only_when_told(
    started: Callable[..., "subprocess.Popen[str]"],
) -> None:
    """Told another address it listens at that one alone (here one more of this machine's own)."""
    running = started("emulate", "site.toml", "--tcp", "0", "--host", "127.0.0.9")
    listening = [address for _, address, state in internet_sockets(running.pid) if state == LISTENS]
    assert [one.split(":")[0] for one in listening] == ["0900007F"]
