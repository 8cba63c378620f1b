"""The shared view: who is let in, what passes, and that nothing is left listening or running; loopback only."""

import asyncio
import contextlib
import os
import re
import signal
import subprocess
import sys
import threading
from collections.abc import AsyncIterator
from contextlib import asynccontextmanager
from ipaddress import ip_address
from pathlib import Path
from typing import Any

import aiohttp
import pytest
from click.testing import CliRunner
from share_help import COLUMNS, EASTFALL, PATIENCE, ROWS, connect, runs, until

from eastfall.io.errors import LinkError
from eastfall.tui.main import cli
from eastfall.tui.sharing import child
from eastfall.tui.sharing.server import ShareServer, listen, own_names
from eastfall.tui.sharing.viewer import Viewer, leave_with_parent
from eastfall.tui.verbs.sharing import viewer_of

pytestmark = pytest.mark.invariant
LOG = next((Path(__file__).parents[2] / "replay_logs").glob("sandrigg*.jsonl"))
LOOPBACK = ip_address("127.0.0.1")

# In place of a viewer: greets, shows a word and its process number, then shows every packet that reaches it.
STAND_IN = """
import os, sys, time
def show(data):
    os.write(1, b"D" + len(data).to_bytes(4, "big") + data)
os.write(1, b"__GANGLION__\\n")
show(b"picture %d" % os.getpid())
os.write(1, b"M" + (15).to_bytes(4, "big") + b'{"type":"open"}')
while head := sys.stdin.buffer.read(5):
    body = sys.stdin.buffer.read(int.from_bytes(head[1:], "big"))
    if b'"quit"' in body and "deaf" not in sys.argv:
        break
    show(head[:1] + b" " + body)
while "deaf" in sys.argv:
    time.sleep(1)
"""


def stand_in(*arguments: str) -> list[str]:
    """Return the command of the stand-in."""
    return [sys.executable, "-c", STAND_IN, *arguments]


@asynccontextmanager
async def serving(*, most: int = 4, viewer: list[str] | None = None, name: str = "") -> AsyncIterator[str]:
    """Serve in this process; give `host:port`."""
    listener = listen(LOOPBACK, 0)
    names = own_names(LOOPBACK, listener.getsockname()[1])
    known = [*names, name] if name else names
    server = ShareServer(viewer or stand_in(), listener, names=known, title="Brackwater North", most=most)
    ready = asyncio.Event()
    task = asyncio.create_task(server.run(ready.set))
    await asyncio.wait([task, waiting := asyncio.create_task(ready.wait())], return_when="FIRST_COMPLETED")
    waiting.cancel()
    try:
        if task.done():
            task.result()
        yield names[0]
    finally:
        task.cancel()
        with contextlib.suppress(asyncio.CancelledError):
            await task


@pytest.fixture
async def client() -> AsyncIterator[aiohttp.ClientSession]:
    """Give a client that keeps nothing."""
    async with aiohttp.ClientSession() as session:
        yield session


async def refusal(client: aiohttp.ClientSession, at: str, **headers: str) -> int:
    """Return the status with which a view is refused."""
    with pytest.raises(aiohttp.WSServerHandshakeError) as refused:
        await connect(client, at, **headers)
    return refused.value.status


async def process_of(view: aiohttp.ClientWebSocketResponse) -> int:
    """Return the process behind a view of the stand-in."""
    return int((await view.receive_bytes(timeout=PATIENCE)).split()[1])


# Who is let in.


@pytest.mark.parametrize(
    "host", ["evil.example", "evil.example:8421", "127.0.0.1:1", "127.0.0.1", "[::1]:8421"]
)
@pytest.mark.parametrize("path", ["/", "/ws", "/static/js/textual.js"])
async def test_request_by_a_foreign_name_is_forbidden(client: Any, host: str, path: str) -> None:
    """A name that somebody made point to this machine is not one of ours: 403 for page, script and picture alike."""
    async with serving() as at, client.get(f"http://{at}{path}", headers={"Host": host}) as answer:
        assert answer.status == 403


@pytest.mark.parametrize(
    "origin",
    [
        "http://evil.example",
        "null",
        "",
        "http://127.0.0.1",
        "http://127.0.0.1:1",
        "https://{at}",
        "http://{at}/",
        "http://{at}.evil.example",
        "http://localhost:{port}",
    ],
)
async def test_view_for_a_page_of_another_origin_is_forbidden(client: Any, origin: str) -> None:
    """Scheme, name and port of the Origin must be those that were asked for: 403 otherwise, and nothing starts."""
    async with serving(viewer=["/no/such/program"]) as at:
        foreign = origin.format(at=at, port=at.split(":")[1])
        assert await refusal(client, at, Origin=foreign) == 403


async def test_view_without_an_origin_is_forbidden(client: Any) -> None:
    """Every browser tells the Origin of a WebSocket: who does not is none, and gets 403."""
    upgrade = {
        "Connection": "Upgrade",
        "Upgrade": "websocket",
        "Sec-WebSocket-Version": "13",
        "Sec-WebSocket-Key": "AAAAAAAAAAAAAAAAAAAAAA==",
    }
    async with serving() as at, client.get(f"http://{at}/ws", headers=upgrade) as answer:
        assert answer.status == 403


async def test_both_names_of_this_machine_give_a_picture(client: Any) -> None:
    """The address and localhost are two names of one server; each serves pages of its own origin."""
    async with serving() as at:
        for name in (at, f"localhost:{at.split(':')[1]}"):
            async with connect(client, at, Host=name, Origin=f"http://{name}") as view:
                assert (await view.receive_bytes(timeout=PATIENCE)).startswith(b"picture")


async def test_name_at_the_other_end_of_a_tunnel_is_let_in_once_told(client: Any) -> None:
    """A tunnel that begins at another port shows in Host and Origin: 403 until that name was given, then a picture."""
    far = {"Host": "localhost:9000", "Origin": "http://localhost:9000"}
    async with serving() as at:
        assert await refusal(client, at, **far) == 403
    async with serving(name="localhost:9000") as at, connect(client, at, **far) as view:
        assert (await view.receive_bytes(timeout=PATIENCE)).startswith(b"picture")


async def test_number_of_views_is_bounded(client: Any) -> None:
    """The third of two places is refused with 503; it is free as soon as the process of one who left has ended."""
    async with serving(most=2) as at, connect(client, at) as first:
        second = await connect(client, at)
        processes = [await process_of(first), await process_of(second)]
        assert await refusal(client, at) == 503
        await second.close()
        await until(lambda: not runs(processes[1]), "process of the view that was closed")

        async def place_is_free() -> bool:
            with contextlib.suppress(aiohttp.WSServerHandshakeError):
                async with connect(client, at):
                    return True
            return False

        await until(place_is_free, "place")
        assert runs(processes[0])


# What passes.


async def test_only_sizes_and_pings_pass(client: Any) -> None:
    """Keys, mouse, focus, commands and rubbish stop at the server; a size passes, within bounds; a ping is answered."""
    async with serving() as at, connect(client, at) as view:
        await view.receive_bytes(timeout=PATIENCE)
        for said in (
            '["stdin", "q"]',
            '["stdin", "\\u001b[<0;3;3M"]',
            '["focus"]',
            '["blur"]',
            '["quit"]',
            '["deliver_chunk_request", {"key": "x", "size": 9}]',
            '["resize", {"width": "90", "height": 30}]',
            '["resize", {"width": 90}]',
            '["resize"]',
            '{"type": "quit"}',
            "[]",
            "1",
            "q",
            "[" * 2000,
        ):
            await view.send_str(said)
        await view.send_bytes(b"M\x00\x00\x00\x0f" + b'{"type":"quit"}')
        await view.send_str('["ping", "17"]')
        assert await view.receive_json(timeout=PATIENCE) == ["pong", "17"]
        await view.send_str('["resize", {"width": 90, "height": 30}]')
        await view.send_str('["resize", {"width": 1000000, "height": -1}]')
        passed = [await view.receive_bytes(timeout=PATIENCE) for _ in range(2)]
    assert passed == [
        b'M {"type": "resize", "width": 90, "height": 30}',
        b'M {"type": "resize", "width": 400, "height": 5}',
    ]


async def test_message_beyond_any_size_ends_the_view(client: Any) -> None:
    """What is longer than a resize could be is not gathered: the connection ends, and its process with it."""
    async with serving() as at, connect(client, at) as view:
        process = await process_of(view)
        await view.send_str('["stdin", "' + "q" * 10_000 + '"]')
        assert (await view.receive(timeout=PATIENCE)).type is aiohttp.WSMsgType.CLOSE
        await until(lambda: not runs(process), "process")


async def test_page_asks_for_nothing_elsewhere(client: Any) -> None:
    """The page names no other place, shows the site and not the command, and forbids itself everything foreign."""
    async with serving() as at, client.get(f"http://{at}/?fontsize=999") as answer:
        page, policy = await answer.text(), answer.headers["Content-Security-Policy"]
    assert set(re.findall(r"(?:https?|wss?):?//[^\s\"']*", page)) == {f"ws://{at}/ws"}
    assert "<title>Brackwater North</title>" in page
    assert sys.executable not in page
    assert 'data-font-size="48"' in page
    assert "default-src 'none'" in policy
    assert set(re.findall(r"(?:https?|wss?):?//[^\s;]*", policy)) == {f"ws://{at}"}


@pytest.mark.parametrize(
    ("path", "status"),
    [
        ("/static/", 403),
        ("/static/js/", 403),
        ("/static/%2e%2e/server.py", 404),
        ("/download/x", 404),
        ("/static/fonts/RobotoMono-VariableFont_wght.ttf", 200),
    ],
)
async def test_folders_are_not_listed(client: Any, path: str, status: int) -> None:
    """The files of the page can be had; lists of files, files beside them and downloads cannot."""
    async with serving() as at, client.get(f"http://{at}{path}") as answer:
        assert answer.status == status


# What ends.


async def test_process_that_does_not_leave_is_ended(client: Any, monkeypatch: pytest.MonkeyPatch) -> None:
    """A viewer that is deaf to the word to leave is ended, and its place is free."""
    monkeypatch.setattr(child, "_PATIENCE", 0.2)
    async with serving(viewer=stand_in("deaf"), most=1) as at:
        view = await connect(client, at)
        process = await process_of(view)
        await view.close()
        await until(lambda: not runs(process), "process")


async def test_view_is_closed_when_its_process_ends(client: Any) -> None:
    """A process that falls over, or that is no viewer, does not leave a browser waiting."""
    async with serving() as at, connect(client, at) as view:
        os.kill(await process_of(view), signal.SIGKILL)
        assert (await view.receive(timeout=PATIENCE)).type is aiohttp.WSMsgType.CLOSE
    async with (
        serving(viewer=[sys.executable, "-c", "print('no viewer')"]) as at,
        connect(client, at) as view,
    ):
        assert (await view.receive(timeout=PATIENCE)).type is aiohttp.WSMsgType.CLOSE


def test_viewer_leaves_when_its_parent_is_another() -> None:
    """The watch for the parent ends the process once the parent's number has changed, and not before."""
    if os.name != "posix":
        pytest.skip("a process keeps the number of its parent there")
    parents, left, looked = [7, 7, 7, 1], [], threading.Event()

    def parent_now() -> int:
        looked.set()
        return parents.pop(0)

    thread = leave_with_parent(7, leave=left.append, parent_now=parent_now, period=0.001)
    assert thread is not None
    thread.join(PATIENCE)
    assert (left, parents) == ([0], [])


# The viewer.


async def test_keys_and_mouse_do_nothing_in_a_viewer(session: Any, snapshot: Any) -> None:
    """Even a key that reaches the viewer changes neither picture nor process."""
    app = Viewer(session(mode="replay"))
    async with app.run_test(size=(COLUMNS, ROWS)) as pilot:
        app.take(snapshot())
        await pilot.pause()
        before = app.first.sight  # type: ignore[attr-defined]
        for key in ("v", "r", "w", "down", "t", "question_mark", "s", "space", "ctrl+q", "q"):
            await pilot.press(key)
        await pilot.click("#plan")
        await pilot.pause()
        assert app.is_running
        assert app.first.sight is before  # type: ignore[attr-defined]
        assert app.screen is app.first
        assert app.return_code is None


# The verb.


def test_an_address_beyond_this_machine_is_refused_unless_asked_for() -> None:
    """Nothing listens for other machines by accident: exit status 2, with the safe way in words."""
    for host in ("0.0.0.0", "192.0.2.7", "::"):  # noqa: S104 (it is refused)
        result = CliRunner().invoke(cli, ["share", str(LOG), "--host", host])
        assert result.exit_code == 2
        assert "SSH" in result.stderr
    nameless = CliRunner().invoke(cli, ["share", str(LOG), "--host", "::", "--open-to-network"])
    assert nameless.exit_code == 2
    assert "--name" in nameless.stderr
    word = CliRunner().invoke(cli, ["share", str(LOG), "--host", "shaft.example"])
    assert word.exit_code == 2


def test_a_port_that_is_taken_is_refused_in_one_line() -> None:
    """The port, the reason and the way out are in the message."""
    with listen(LOOPBACK, 0) as taken, pytest.raises(LinkError, match="in use; another one by --port"):
        listen(LOOPBACK, taken.getsockname()[1])


def test_own_names_follow_the_address_and_the_port() -> None:
    """A browser leaves port 80 out of the Host header and puts an IPv6 address in brackets (RFC 3986, 3.2.2)."""
    assert own_names(LOOPBACK, 8421) == ("127.0.0.1:8421", "localhost:8421")
    assert own_names(ip_address("::1"), 80) == ("[::1]", "localhost")
    assert own_names(ip_address("192.0.2.7"), 8421) == ("192.0.2.7:8421",)


def test_a_log_that_cannot_be_read_is_refused(tmp_path: Path) -> None:
    """Before anything listens: exit status 2 with one line."""
    done = subprocess.run(
        [*EASTFALL, "share", str(tmp_path / "none.jsonl")],
        check=False,
        capture_output=True,
        text=True,
        timeout=PATIENCE,
    )
    assert done.returncode == 2
    assert done.stdout == ""
    assert done.stderr.count("\n") == 1
    assert "none.jsonl" in done.stderr


def test_the_web_server_is_imported_only_to_share() -> None:
    """The command line, its verb and the dashboard do without it."""
    script = (
        "import sys, eastfall.tui.main, eastfall.tui.verbs.sharing, eastfall.tui.app;"
        "sys.exit(any(name.startswith(('aiohttp', 'textual_serve')) for name in sys.modules))"
    )
    assert subprocess.run([sys.executable, "-c", script], check=False, timeout=PATIENCE).returncode == 0


def test_viewer_is_started_without_a_shell_and_apart_from_the_working_folder() -> None:
    """A path with blanks and signs stays one argument; modules that lie about in the folder are not imported."""
    command = viewer_of(Path("/a b/$(x);.jsonl"), "dark")
    assert "/a b/$(x);.jsonl" in command
    assert command[:2] == [sys.executable, "-P"]
