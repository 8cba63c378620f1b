"""The verb that lets others look on: `share`."""

import asyncio
import os
import sys
from collections.abc import Sequence
from ipaddress import IPv4Address, IPv6Address, ip_address
from pathlib import Path
from typing import TYPE_CHECKING

import click

from eastfall.tui.saying import say
from eastfall.tui.verbs.options import an_input

if TYPE_CHECKING:
    from eastfall.tui.sharing.server import ShareServer

_PORT = 8421
_MOST = 4


@click.command()
@click.argument("log", type=an_input)
@click.option(
    "--port", type=click.IntRange(0, 65535), default=_PORT, show_default=True, help="0 takes a free one."
)
@click.option("--host", default="127.0.0.1", show_default=True, help="Address of this machine to listen on.")
@click.option(
    "--viewers", type=click.IntRange(1, 16), default=_MOST, show_default=True, help="Browsers at a time."
)
@click.option(
    "--name",
    "names",
    metavar="HOST:PORT",
    multiple=True,
    help="What else may stand in the browser's address line, as localhost:9000 where a tunnel begins.",
)
@click.option("--theme", type=click.Choice(["dark", "light"]), default="dark", show_default=True)
@click.option("--open-to-network", is_flag=True, help="Serve other machines. There is no password.")
def share(
    log: Path,
    port: int,
    host: str,
    viewers: int,
    names: tuple[str, ...],
    theme: str,
    open_to_network: bool,
) -> None:
    """Serve a view of a run to browsers on this machine: to look at, nothing else.

    LOG is a run log, also one that is being recorded. The address to open is the one line on standard output; the
    view ends, and the port is free again, on SIGINT or SIGTERM. From another machine, forward the port over SSH, as
    ssh -L 8421:127.0.0.1:8421 USER@MACHINE, and open the same address there.
    """
    from eastfall.io.replay import Replay  # noqa: PLC0415 (the engine and the web server only where they run)
    from eastfall.io.safetext import safe  # noqa: PLC0415
    from eastfall.tui.sharing.server import ShareServer, listen, own_names  # noqa: PLC0415

    address = _address(host, names, open_to_network=open_to_network)
    replay = Replay(log, follow=True)  # a log that cannot be read is refused before anything listens
    replay.close()
    site = safe(replay.site.assumptions.site.name)
    listener = listen(address, port)
    known = own_names(address, listener.getsockname()[1])
    _serve(
        ShareServer(
            viewer_of(log, theme),
            listener,
            names=[*names, *known] if address.is_unspecified else [*known, *names],
            title=f"{site} (view only)",
            most=viewers,
            theme=theme,
        )
    )


def viewer_of(log: Path, theme: str) -> Sequence[str]:
    """Return program and arguments of the process behind one view; -P keeps the working folder's modules out."""
    module = "eastfall.tui.sharing.viewer"
    given = [str(log.resolve()), "--theme", theme, "--parent", str(os.getpid())]
    return [sys.executable, "-P", "-m", module, *given]


def _address(host: str, names: tuple[str, ...], *, open_to_network: bool) -> IPv4Address | IPv6Address:
    """Return the address to listen on, or refuse one that reaches beyond this machine unasked."""
    try:
        address = ip_address("127.0.0.1" if host == "localhost" else host)
    except ValueError:
        raise click.UsageError(f"--host {host}: expected an address, as 127.0.0.1") from None
    if not (address.is_loopback or open_to_network):
        raise click.UsageError(
            f"--host {host} is reached from other machines, and a view has no password: leave it out and forward the "
            "port over SSH, or add --open-to-network"
        )
    if address.is_unspecified and not names:
        raise click.UsageError(
            f"--host {host} has no name: say by --name HOST:PORT what browsers will ask for"
        )
    return address


def _serve(server: "ShareServer") -> None:
    def ready() -> None:
        say(f"{server.public_url}/")
        sys.stdout.flush()
        say("view only; ends on Ctrl+C", err=True)

    asyncio.run(server.run(ready))
