"""A headless Chromium driven over its debugging protocol: opens a page, types, and takes its picture."""

import asyncio
import base64
import itertools
import os
import shutil
import subprocess
import time
from collections.abc import Callable
from pathlib import Path
from typing import Any, Self

import aiohttp

PATIENCE = 30.0
BINARY = shutil.which("chromium") or shutil.which("chromium-browser") or shutil.which("google-chrome")
# The browser's own errands (updates, sync, field trials) are off: what is left on the wire is the page's.
FLAGS = (
    "--headless=new",
    "--disable-gpu",
    "--disable-quic",
    "--no-first-run",
    "--disable-background-networking",
    "--disable-component-update",
    "--disable-sync",
    "--hide-scrollbars",
    "--remote-debugging-port=0",
)


async def wait_for(test: Callable[[], Any], seconds: float = PATIENCE) -> Any:
    """Return what a test returns as soon as that is true."""
    end = time.monotonic() + seconds
    while not (found := test()):
        assert time.monotonic() < end, "waited in vain"
        await asyncio.sleep(0.05)
    return found


class Chromium:
    """One browser with one page.

    Parameters
    ----------
    profile : Path
        An empty folder.
    width, height : int
        Of the window [px].
    """

    def __init__(self, profile: Path, width: int = 1200, height: int = 800) -> None:
        self.events: list[dict[str, Any]] = []
        self._profile = profile
        # Chromium refuses its sandbox to root, as in most containers.
        sandbox = ["--no-sandbox"] if os.geteuid() == 0 else []
        self._process = subprocess.Popen(
            [
                str(BINARY),
                *FLAGS,
                *sandbox,
                f"--user-data-dir={profile}",
                f"--window-size={width},{height}",
                "about:blank",
            ],
            stdout=subprocess.DEVNULL,
            stderr=subprocess.DEVNULL,
        )
        self._numbers = itertools.count(1)
        self._answers: dict[int, asyncio.Future[dict[str, Any]]] = {}

    async def __aenter__(self) -> Self:
        self._session = aiohttp.ClientSession(timeout=aiohttp.ClientTimeout(total=PATIENCE))
        try:
            await self._attach()
        except BaseException:
            await self._session.close()
            self._end()
            raise
        return self

    async def _attach(self) -> None:
        """Find the one page, and listen to what goes on in it."""
        port_file = self._profile / "DevToolsActivePort"
        await wait_for(lambda: port_file.exists() and len(port_file.read_text().splitlines()) == 2)
        address = f"http://127.0.0.1:{port_file.read_text().split()[0]}"
        end = time.monotonic() + PATIENCE
        pages: list[dict[str, Any]] = []
        while not pages:
            assert time.monotonic() < end, "no page"
            async with self._session.get(f"{address}/json/list") as answer:
                pages = [one for one in await answer.json() if one["type"] == "page"]
        self._socket = await self._session.ws_connect(pages[0]["webSocketDebuggerUrl"], max_msg_size=1 << 26)
        self._reader = asyncio.create_task(self._read())
        for domain in ("Page", "Network", "Runtime", "Log"):
            await self.call(f"{domain}.enable")

    async def __aexit__(self, *_: object) -> None:
        await self._socket.close()
        await self._reader
        await self._session.close()
        await asyncio.to_thread(self._end)

    def _end(self) -> None:
        self._process.terminate()
        try:
            self._process.wait(PATIENCE)
        except subprocess.TimeoutExpired:
            self._process.kill()
            self._process.wait(PATIENCE)

    async def _read(self) -> None:
        async for message in self._socket:
            said = message.json()
            if "id" in said:
                self._answers.pop(said["id"]).set_result(said)
            else:
                self.events.append(said)

    async def call(self, method: str, **parameters: Any) -> dict[str, Any]:
        """Ask the browser for something, and return its answer."""
        number = next(self._numbers)
        answer = self._answers[number] = asyncio.get_running_loop().create_future()
        await self._socket.send_json({"id": number, "method": method, "params": parameters})
        said = await asyncio.wait_for(answer, PATIENCE)
        assert "error" not in said, said
        return said["result"]

    async def open(self, url: str) -> None:
        """Open a page."""
        await self.call("Page.navigate", url=url)

    async def value(self, script: str) -> Any:
        """Return the value of an expression in the page."""
        return (await self.call("Runtime.evaluate", expression=script, returnByValue=True))["result"].get(
            "value"
        )

    async def until(self, script: str) -> None:
        """Wait until an expression in the page is true."""
        end = time.monotonic() + PATIENCE
        while not await self.value(script):
            assert time.monotonic() < end, f"{script} did not come true"
            await asyncio.sleep(0.05)

    async def type(self, *keys: str) -> None:
        """Press and let go of keys, each one letter."""
        for key in keys:
            code = {"key": key, "windowsVirtualKeyCode": ord(key.upper())}
            await self.call("Input.dispatchKeyEvent", type="keyDown", text=key, **code)
            await self.call("Input.dispatchKeyEvent", type="keyUp", **code)

    async def click(self, x: float, y: float) -> None:
        """Click at a place of the window [px]."""
        for kind in ("mousePressed", "mouseReleased"):
            await self.call("Input.dispatchMouseEvent", type=kind, x=x, y=y, button="left", clickCount=1)

    async def picture(self) -> bytes:
        """Return what the window shows, as PNG."""
        return base64.b64decode((await self.call("Page.captureScreenshot", format="png"))["data"])

    def told(self, method: str) -> list[dict[str, Any]]:
        """Return what was told of one kind of event."""
        return [one["params"] for one in self.events if one["method"] == method]
