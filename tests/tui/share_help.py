"""What the tests of the shared view have in common: opening a view, waiting, and looking for processes."""

import asyncio
import os
import sys
import time
from collections.abc import Awaitable, Callable
from typing import Any

import aiohttp

PATIENCE = 30.0
COLUMNS, ROWS = 100, 30
EASTFALL = (sys.executable, "-c", "from eastfall.tui.main import main; main()")


def connect(client: aiohttp.ClientSession, at: str, **headers: str) -> Any:
    """Open a view as the page does, with other headers where given."""
    sent = {"Origin": f"http://{at}"} | headers
    return client.ws_connect(f"http://{at}/ws?width={COLUMNS}&height={ROWS}", headers=sent)


async def until(test: Callable[[], bool | Awaitable[bool]], what: str) -> None:
    """Wait for a condition."""
    end = time.monotonic() + PATIENCE
    while True:
        found = test()
        if found is True or (not isinstance(found, bool) and await found):
            return
        assert time.monotonic() < end, f"waited in vain: {what}"
        await asyncio.sleep(0.02)


def runs(process: int) -> bool:
    """Tell whether a process is there."""
    try:
        os.kill(process, 0)
    except ProcessLookupError:
        return False
    return True
