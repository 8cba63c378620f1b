"""The web server of a shared view: who may look, and that looking is all; each picture is a viewer process's.

The page, its script and its font come from textual-serve. What that server would let through is closed here: a page
of another origin, a request by a foreign host name (a name made to point here), keys and mouse, any number of viewers,
listings of folders, requests of the page to anywhere else.
"""

import asyncio
import json
import os
import signal
import socket
from collections.abc import Awaitable, Callable, Sequence
from ipaddress import IPv4Address, IPv6Address
from pathlib import Path
from typing import Any

import aiohttp_jinja2
import jinja2
from aiohttp import WSMessage, WSMsgType, web
from textual_serve.app_service import AppService
from textual_serve.server import Server

from eastfall.io.errors import LinkError
from eastfall.tui.sharing.child import ViewerProcess

Address = IPv4Address | IPv6Address
Handler = Callable[[web.Request], Awaitable[web.StreamResponse]]

MOST_VIEWERS = 4
"""Each costs a process that draws ten pictures a second."""
_LARGEST_MESSAGE = 4096  # bytes; a resize or a ping has a few dozen
_LONGEST_PING = 32
_COLUMNS, _ROWS = (20, 400), (5, 200)
_FONT = (8, 48)  # px
_HEARTBEAT = 15.0  # s; a browser that is gone without a word is noticed by it
_CLOSING, _SHUTDOWN = 2.0, 10.0  # s
_HEADERS = {
    "Cache-Control": "no-store",
    "Cross-Origin-Resource-Policy": "same-origin",
    "Referrer-Policy": "no-referrer",
    "X-Content-Type-Options": "nosniff",
}


def listen(address: Address, port: int) -> socket.socket:
    """Take a port.

    Parameters
    ----------
    address : IPv4Address or IPv6Address
        To listen on.
    port : int
        0 takes a free one.

    Returns
    -------
    socket
        Listening, so that its port is known and its own.

    Raises
    ------
    LinkError
        The port is taken, or may not be had.
    """
    family = socket.AF_INET6 if address.version == 6 else socket.AF_INET
    try:
        return socket.create_server((str(address), port), family=family)
    except OSError as error:
        reason = os.strerror(error.errno) if error.errno else str(error)
        raise LinkError(f"port {port} of {address}: {reason}; another one by --port, any by 0") from error


def own_names(address: Address, port: int) -> tuple[str, ...]:
    """Return how a browser may name this server in its Host header; the first is the one to tell people."""
    names = [f"[{address}]" if address.version == 6 else str(address)]
    if address.is_loopback:
        names.append("localhost")
    return tuple(names) if port == 80 else tuple(f"{name}:{port}" for name in names)


class ShareServer(Server):
    """Serves views of one record.

    Parameters
    ----------
    viewer : sequence of str
        Program and arguments of the process that draws one view.
    listener : socket
        Where to serve; closed at the end.
    names : sequence of str
        Every `host:port` that a browser may have in its address line.
    title : str
        Of the page.
    most : int
        Views at a time.
    theme : {"dark", "light"}
        Of what shows beside the picture.
    """

    def __init__(
        self,
        viewer: Sequence[str],
        listener: socket.socket,
        *,
        names: Sequence[str],
        title: str,
        most: int = MOST_VIEWERS,
        theme: str = "dark",
    ) -> None:
        super().__init__(
            "", title=title, public_url=f"http://{names[0]}", templates_path=Path(__file__).parent
        )
        self._viewer = tuple(viewer)
        self._listener = listener
        self._names = frozenset(name.lower() for name in names)
        self._most = most
        self._theme = theme
        self._taken = 0
        self._views: set[web.WebSocketResponse] = set()

    async def run(self, ready: Callable[[], None]) -> None:
        """Serve until SIGINT, SIGTERM or SIGHUP; the port is free again after it.

        Parameters
        ----------
        ready : callable
            Called once the server listens.
        """
        runner = web.AppRunner(await self._make_app(), access_log=None, shutdown_timeout=_SHUTDOWN)
        try:
            await runner.setup()
            await web.SockSite(runner, self._listener).start()
            stop = _asked_to_stop()
            ready()
            await stop.wait()
        finally:
            await runner.cleanup()
            self._listener.close()

    async def _make_app(self) -> web.Application:
        app = web.Application(middlewares=[self._admit], client_max_size=_LARGEST_MESSAGE)
        aiohttp_jinja2.setup(app, loader=jinja2.FileSystemLoader(self.templates_path))
        app.add_routes(
            [
                web.get("/", self.handle_index, name="index"),
                web.get("/ws", self.handle_websocket, name="websocket"),
                web.static("/static", self.statics_path, show_index=False, name="static"),
            ]
        )
        app.on_response_prepare.append(_close_off)
        app.on_shutdown.append(self.on_shutdown)
        return app

    @web.middleware
    async def _admit(self, request: web.Request, handler: Handler) -> web.StreamResponse:
        """Refuse a foreign Host and a foreign Origin; to a WebSocket browsers always tell theirs, so none is foreign.

        Cross-origin rules do not hold browsers back from a WebSocket (RFC 6455, 10.2): the server has to.
        """
        hosts = request.headers.getall("Host", [])
        if len(hosts) != 1 or hosts[0].lower() not in self._names:
            raise web.HTTPForbidden(text="this view is not served under that name\n")
        origins = request.headers.getall("Origin", [])
        if origins != [f"http://{hosts[0]}"] and (origins or request.path == "/ws"):
            raise web.HTTPForbidden(text="this view is not for pages of another origin\n")
        return await handler(request)

    @aiohttp_jinja2.template("app_index.html")
    async def handle_index(self, request: web.Request) -> dict[str, Any]:
        """Fill the page in."""
        return {
            "font_size": _number(request, "fontsize", 16, _FONT),
            "websocket": f"ws://{request.host}/ws",
            "title": self.title,
            "most": self._most,
            "theme": self._theme,
        }

    async def handle_websocket(self, request: web.Request) -> web.WebSocketResponse:
        """Show one view; its place is free again when its process has ended."""
        if self._taken >= self._most:
            raise web.HTTPServiceUnavailable(text=f"all {self._most} places are taken\n")
        self._taken += 1
        try:
            return await self._view(request)
        finally:
            self._taken -= 1

    async def _view(self, request: web.Request) -> web.WebSocketResponse:
        size = _number(request, "width", 80, _COLUMNS), _number(request, "height", 24, _ROWS)
        websocket = web.WebSocketResponse(
            timeout=_CLOSING, heartbeat=_HEARTBEAT, max_msg_size=_LARGEST_MESSAGE, compress=False
        )
        await websocket.prepare(request)
        self._views.add(websocket)
        process = ViewerProcess(self._viewer, websocket, self.download_manager)
        try:
            await process.start(*size)
            await self._process_messages(websocket, process)
        finally:
            self._views.discard(websocket)
            await process.stop()
        return websocket

    async def _process_messages(self, websocket: web.WebSocketResponse, app_service: AppService) -> None:
        """Pass on the size of the window and answer pings; whatever else a browser sends goes no further."""
        async for message in websocket:
            match _read(message):
                case ["resize", {"width": int(width), "height": int(height)}]:
                    await app_service.set_terminal_size(_within(width, _COLUMNS), _within(height, _ROWS))
                case ["ping", str(stamp)]:
                    await websocket.send_json(["pong", stamp[:_LONGEST_PING]])

    async def on_shutdown(self, app: web.Application) -> None:  # noqa: ARG002 (aiohttp's signature)
        """Close every view."""
        await asyncio.gather(*(one.close() for one in list(self._views)), return_exceptions=True)


def _read(message: WSMessage) -> object:
    """Return what a message says; None for what is no JSON text."""
    if message.type is not WSMsgType.TEXT:
        return None
    try:
        return json.loads(message.data)
    except (ValueError, RecursionError):
        return None


def _within(value: int, bounds: tuple[int, int]) -> int:
    return min(max(value, bounds[0]), bounds[1])


def _number(request: web.Request, name: str, usual: int, bounds: tuple[int, int]) -> int:
    text = request.query.get(name, "")
    # At most five digits: what is longer is no size, and costs time to convert.
    return _within(int(text), bounds) if text.isascii() and text.isdigit() and len(text) < 6 else usual


async def _close_off(request: web.Request, response: web.StreamResponse) -> None:
    """Tell the browser to let this page ask for nothing elsewhere, and other pages not to frame it."""
    # The terminal's script writes its own style elements; scripts come from the file alone.
    policy = (
        "default-src 'none'; script-src 'self'; style-src 'self' 'unsafe-inline'; font-src 'self'; img-src 'self' "
        f"data:; connect-src 'self' ws://{request.host}; base-uri 'none'; form-action 'none'; frame-ancestors 'none'"
    )
    response.headers.update(_HEADERS | {"Content-Security-Policy": policy})


def _asked_to_stop() -> asyncio.Event:
    """Return an event that is set by SIGINT, SIGTERM and SIGHUP."""
    stop, loop = asyncio.Event(), asyncio.get_running_loop()
    for name in ("SIGINT", "SIGTERM", "SIGHUP"):
        number = getattr(signal, name, None)
        if number is None:
            continue
        try:
            loop.add_signal_handler(number, stop.set)
        except NotImplementedError:  # Windows
            signal.signal(number, lambda *_: loop.call_soon_threadsafe(stop.set))
    return stop
