"""One viewer process as the server sees it: its pictures go to one browser; only sizes go the other way.

The stream is that of Textual's web driver: a line of greeting, then packets of one letter, four bytes of length (big
end first) and that many bytes.
"""

import asyncio
from asyncio.subprocess import PIPE, Process
from collections.abc import Sequence
from contextlib import suppress

from aiohttp import web
from textual_serve.app_service import AppService
from textual_serve.download_manager import DownloadManager

_PATIENCE = 3.0  # s that a viewer gets for leaving; it has nothing to save
_GREETING = b"__GANGLION__\n"
_GREETING_LINES = 10
_DEBUGGING = ("TEXTUAL", "TEXTUAL_LOG", "TEXTUAL_DEBUG")


class ViewerProcess(AppService):
    """Starts, reads and ends the process behind one view.

    Parameters
    ----------
    command : sequence of str
        Program and arguments; no shell comes between, so that the server is the parent.
    websocket : WebSocketResponse
        Where pictures go.
    downloads : DownloadManager
        Asked for by the base class; nothing is ever handed out.
    """

    def __init__(
        self, command: Sequence[str], websocket: web.WebSocketResponse, downloads: DownloadManager
    ) -> None:
        super().__init__(
            "",
            write_bytes=websocket.send_bytes,
            write_str=websocket.send_str,
            close=websocket.close,  # type: ignore[arg-type]  # it tells whether it closed; nobody asks
            download_manager=downloads,
        )
        self._argv = tuple(command)

    async def _open_app_process(self, width: int = 80, height: int = 24) -> Process:
        """Start the process; what goes wrong in it is told on the server's standard error."""
        environment = self._build_environment(width=width, height=height)
        for name in _DEBUGGING:
            environment.pop(name, None)
        self._process = await asyncio.create_subprocess_exec(
            *self._argv, stdin=PIPE, stdout=PIPE, env=environment
        )
        self._stdin = self._process.stdin
        return self._process

    async def run(self) -> None:
        """Hand pictures on until the process ends, then close the browser's connection."""
        assert self._process is not None  # noqa: S101 (the base class starts the process before this)
        stream = self._process.stdout
        assert stream is not None  # noqa: S101 (as above)
        try:
            await _greeted(stream)
            await self._hand_on(stream)
        except asyncio.IncompleteReadError:
            pass
        finally:
            await self.remote_close()

    async def _hand_on(self, stream: asyncio.StreamReader) -> None:
        """Pass pictures alone: offers of files and links to open have no place in a view."""
        listening = True
        while True:
            kind = await stream.readexactly(1)
            payload = await stream.readexactly(int.from_bytes(await stream.readexactly(4), "big"))
            if kind == b"D" and listening:
                try:
                    await self.on_data(payload)
                except ConnectionError:
                    # Read on all the same: a process that waits for a reader would not hear that it is to leave.
                    listening = False

    async def stop(self) -> None:
        """Have the process leave, and make sure that it has."""
        task, self._task = self._task, None
        if task is None or self._process is None:
            return
        try:
            async with asyncio.timeout(_PATIENCE):
                await self.send_meta({"type": "quit"})
                await self._process.wait()
        except TimeoutError:
            pass
        finally:
            with suppress(ProcessLookupError):
                self._process.kill()
        await self._process.wait()
        await task


async def _greeted(stream: asyncio.StreamReader) -> None:
    """Wait for the greeting; a process that says something else is not listened to."""
    for _ in range(_GREETING_LINES):
        line = await stream.readline()
        if line == _GREETING:
            return
    raise asyncio.IncompleteReadError(b"", None)
