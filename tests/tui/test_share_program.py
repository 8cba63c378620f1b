"""The shared view as the program serves it: followed by a terminal emulator and a real browser, ended by signals."""

import asyncio
import contextlib
import os
import socket
import subprocess
import time
from collections.abc import AsyncIterator, Iterator
from datetime import UTC, datetime
from io import BytesIO
from ipaddress import ip_address
from pathlib import Path
from typing import Any

import aiohttp
import numpy as np
import pyte
import pytest
from chromium_harness import BINARY, Chromium
from share_help import COLUMNS, EASTFALL, PATIENCE, ROWS, connect, runs, until

from eastfall.io.arrivals import LineBlock
from eastfall.io.errors import LinkError
from eastfall.io.runlog import RunLogWriter
from eastfall.io.sitefile import parse_site
from eastfall.tui.sharing.server import listen

LOOPBACK = ip_address("127.0.0.1")
pytestmark = [
    pytest.mark.invariant,
    pytest.mark.skipif(os.name != "posix", reason="signals and process numbers are POSIX"),
]
SITE = """
[site]
name = "Kestrel Hollow No. 2"
latitude_deg = 57.30
[shaft]
depth_m = 940.0
diameter_m = 6.0
[run]
kind = "guided"
[[link]]
url = "socket://127.0.0.1:{port}"
"""


@pytest.fixture
async def client() -> AsyncIterator[aiohttp.ClientSession]:
    """Give a client that keeps nothing."""
    async with aiohttp.ClientSession() as session:
        yield session


class Recorded:
    """A run that is being recorded: its log, and the port of its instrument, on which nobody is to call."""

    def __init__(self, folder: Path) -> None:
        self.instrument = socket.create_server(("127.0.0.1", 0))
        self.instrument.setblocking(False)
        site = parse_site(SITE.format(port=self.instrument.getsockname()[1]), "kestrel.toml")
        self._began = time.monotonic()
        self.log = RunLogWriter.create(folder, site, started_at=datetime.now(UTC))
        self._lines = 0

    def go_to(self, depth: float) -> None:
        """Record the way down to a depth [m], a reading every half metre."""
        lines = [b"%.2f,0.01,-0.02\n" % (0.5 * at) for at in range(self._lines, round(2 * depth) + 1)]
        now = round(time.monotonic() - self._began, 6)
        self.log.raw(
            LineBlock(data=b"".join(lines), times=np.full(len(lines), now), first_line=self._lines + 1)
        )
        self._lines += len(lines)

    def called(self) -> bool:
        """Tell whether anybody has opened the instrument's port."""
        try:
            self.instrument.accept()[0].close()
        except BlockingIOError:
            return False
        return True


@pytest.fixture
def recorded(tmp_path: Path) -> Iterator[Recorded]:
    """Give a run that is being recorded and has come to 20 m."""
    run = Recorded(tmp_path)
    run.go_to(20.0)
    yield run
    run.log.close(time.monotonic())
    run.instrument.close()


class Shared:
    """The verb in a process of its own."""

    def __init__(self, log: Path, *options: str) -> None:
        self.process = subprocess.Popen(
            [*EASTFALL, "share", str(log), "--port", "0", *options],
            stdout=subprocess.PIPE,
            stderr=subprocess.PIPE,
            text=True,
        )
        assert self.process.stdout is not None
        self.url = self.process.stdout.readline().strip()
        self.at = self.url.removeprefix("http://").removesuffix("/")

    def viewers(self) -> list[int]:
        """Return the processes of its views."""
        listing = ["ps", "-ww", "-eo", "pid=,args="]
        found = subprocess.run(listing, capture_output=True, text=True, check=True).stdout
        mine = f"--parent {self.process.pid}"
        return [int(line.split()[0]) for line in found.splitlines() if line.endswith(mine)]

    def free(self) -> bool:
        """Tell whether its port can be had again."""
        with contextlib.suppress(LinkError):
            listen(LOOPBACK, int(self.at.split(":")[1])).close()
            return True
        return False

    def end(self) -> tuple[str, str]:
        """End it if it still runs; return what else it said."""
        if self.process.poll() is None:
            self.process.kill()
        return self.process.communicate(timeout=PATIENCE)


@pytest.fixture
def shared(recorded: Recorded) -> Iterator[Shared]:
    """Share the run that is being recorded."""
    one = Shared(recorded.log.path)
    yield one
    one.end()


class Screen:
    """What a view shows, read back by an independent terminal emulator."""

    def __init__(self, view: aiohttp.ClientWebSocketResponse) -> None:
        self._view = view
        self._screen = pyte.Screen(COLUMNS, ROWS)
        self._stream = pyte.ByteStream(self._screen)

    async def wait(self, wanted: str) -> str:
        """Return the screen as soon as it shows what is wanted."""
        end = time.monotonic() + PATIENCE
        text = ""
        while wanted not in text:
            assert time.monotonic() < end, f"{wanted} is not in the view:\n{text}"
            self._stream.feed(await self._view.receive_bytes(timeout=PATIENCE))
            text = "\n".join(self._screen.display)
        return text


async def test_view_of_a_running_record_is_there_and_goes_with_sigterm(
    client: Any, recorded: Recorded, shared: Shared
) -> None:
    """It follows the record, keys do nothing, the instrument is not called; after SIGTERM port and process are free."""
    async with connect(client, shared.at) as view:
        screen = Screen(view)
        text = await screen.wait("view only")
        assert "Kestrel Hollow No. 2" in text
        await screen.wait("20.0 m")
        for key in ("q", "\x03", "v", "?", "s"):
            await view.send_json(["stdin", key])
        recorded.go_to(31.0)
        assert "Kestrel Hollow No. 2" in await screen.wait("31.0 m")
        viewers = shared.viewers()
        assert len(viewers) == 1
        assert not recorded.called()
        shared.process.terminate()
        assert await asyncio.to_thread(shared.process.wait, PATIENCE) == 0
    assert not any(runs(one) for one in viewers)
    assert shared.free()
    out, err = shared.end()
    assert out == ""
    assert err == "view only; ends on Ctrl+C\n"


async def test_view_ends_when_the_server_is_killed(client: Any, shared: Shared) -> None:
    """After SIGKILL nobody tells the viewer: it finds out by itself and leaves."""
    with contextlib.suppress(aiohttp.ClientError):
        async with connect(client, shared.at) as view:
            await Screen(view).wait("20.0 m")
            viewers = shared.viewers()
            assert len(viewers) == 1
            shared.process.kill()
            shared.process.wait(PATIENCE)
    await until(lambda: not any(runs(one) for one in viewers), "the viewer")
    assert shared.free()


# In a real browser.


def colours(png: bytes) -> dict[int, int]:
    """Return how many pixels have each colour, as 0xRRGGBB."""
    from matplotlib.image import imread

    pixels = np.rint(255 * imread(BytesIO(png), format="png")[..., :3]).astype(np.int64)
    found, counts = np.unique(pixels @ [0x10000, 0x100, 1], return_counts=True)
    return dict(zip(found.tolist(), counts.tolist(), strict=True))


@pytest.mark.skipif(BINARY is None, reason="no Chromium on this machine (chromium, google-chrome)")
async def test_picture_is_seen_in_a_browser(tmp_path: Path, recorded: Recorded, shared: Shared) -> None:
    """Chromium draws the dashboard in its colours, asks nobody else for anything; keys and clicks do nothing."""
    recorded.go_to(300.0)
    async with Chromium(tmp_path / "profile") as browser:
        await browser.open(shared.url)
        await browser.until('document.body.classList.contains("-first-byte")')
        measured, ground = 0x4DA6FF, 0x121212

        async def drawn() -> bool:
            return colours(await browser.picture()).get(measured, 0) > 500

        await until(drawn, "the measured line in its colour")
        seen = colours(await browser.picture())
        assert seen[ground] > 0.5 * sum(seen.values())
        assert len(seen) > 20
        assert await browser.value("document.title") == "Kestrel Hollow No. 2 (view only)"
        assert await browser.value('document.fonts.check("16px Roboto Mono")')
        await browser.click(400, 300)
        await browser.type("v", "q")
        sent = '["stdin","q"]'
        await until(lambda: sent in str(browser.told("Network.webSocketFrameSent")), "the key was sent")
        assert await drawn()
        assert "-closed" not in await browser.value("document.body.className")
        asked = {one["request"]["url"] for one in browser.told("Network.requestWillBeSent")}
        assert {url.removeprefix(shared.url).split("/")[0] for url in asked} == {"", "static"}
        assert not browser.told("Runtime.exceptionThrown")
    await until(lambda: not shared.viewers(), "the view of a browser that is gone")
