"""The verbs beside the job: `emulate`, `ports` and `selfcheck`."""

from pathlib import Path
from typing import Any

import click

from eastfall.tui.saying import say
from eastfall.tui.verbs.options import Number, above_nothing, an_input, as_format, print_json, print_rows


@click.command()
@click.argument("site", type=an_input)
@click.option(
    "--tcp", type=click.IntRange(0, 65535), metavar="PORT", help="Serve on this TCP port; 0 takes a free one."
)
@click.option("--host", default="127.0.0.1", show_default=True, help="Address to listen on with --tcp.")
@click.option(
    "--pty",
    "link_path",
    type=click.Path(path_type=Path),
    metavar="NAME",
    help="A name for the pseudo-terminal.",
)
@click.option(
    "--rate",
    type=above_nothing,
    default=10.0,
    show_default=True,
    help="Readings a second.",
)
@click.option(
    "--pace",
    type=above_nothing,
    default=1.0,
    show_default=True,
    help="Emulated seconds a second.",
)
@click.option("--seed", type=int, default=1, show_default=True, help="Everything random follows from it.")
@click.option(
    "--broken",
    type=Number(0.0, 1.0),
    default=0.0,
    show_default=True,
    help="Share of broken lines in between.",
)
@click.option("--errors", is_flag=True, help="Let the instrument err beyond what the site states.")
@click.option("--until", type=Number(min=0.0), metavar="S", help="Emulated time after which it falls silent.")
@click.option("--once", is_flag=True, help="Show everything once; end when nobody listens any more.")
@click.option(
    "--report", type=click.Path(path_type=Path), help="At the end: what was sent and what is true (JSON)."
)
def emulate(
    site: Path,
    tcp: int | None,
    host: str,
    link_path: Path | None,
    rate: float,
    pace: float,
    seed: int,
    broken: float,
    errors: bool,
    until: float | None,
    once: bool,
    report: Path | None,
) -> None:
    """Serve an emulated instrument of SITE on a pseudo-terminal, or on a TCP port with --tcp.

    The device or address to use is printed on standard output. It ends on SIGINT or SIGTERM.
    """
    from eastfall.io.emulator import EmulateOptions, emulator_for  # noqa: PLC0415 (the engine only where it runs)
    from eastfall.io.serve import serve_pty, serve_tcp  # noqa: PLC0415
    from eastfall.io.sitefile import load_site  # noqa: PLC0415

    if tcp is not None and link_path is not None:
        raise click.UsageError("--tcp and --pty are two ways to serve; give one of them")
    options = EmulateOptions(
        seed=seed, rate=rate, pace=pace, broken=broken, until=until, once=once, errors=errors
    )
    emulator = emulator_for(load_site(site), options)
    if tcp is None:
        serve_pty(emulator, link_path=link_path, pace=pace, report=report)
    else:
        serve_tcp(emulator, host=host, port=tcp, pace=pace, report=report)


@click.command()
@as_format
def ports(form: str) -> None:
    """List the serial ports of this machine."""
    rows = serial_ports()
    if form == "json":
        print_json({"ports": [{"device": device, "what": what} for device, what in rows]})
        return
    if not rows and form == "table":
        say("no serial port found", err=True)
        return
    print_rows((["device", "what"], [list(one) for one in rows]), form)


def serial_ports() -> list[tuple[str, str]]:
    """Return device and description of every serial port, as safe text."""
    from serial.tools import list_ports  # noqa: PLC0415 (looks at the machine's buses)

    from eastfall.io.safetext import safe  # noqa: PLC0415

    return [(safe(one.device), safe(one.description or "")) for one in sorted(list_ports.comports())]


@click.command()
@as_format
def selfcheck(form: str) -> None:
    """Compute the published check values now, each with its source; exit status 1 if one is off."""
    from eastfall.physics.published import published_checks  # noqa: PLC0415 (computes with the whole physics)

    rows: list[list[Any]] = []
    for one in published_checks():
        value = one.compute()
        off = abs(value - one.expected)
        rows.append(
            [
                one.name,
                one.mark,
                one.source,
                one.unit,
                one.expected,
                value,
                value - one.expected,
                off <= one.tolerance,
            ]
        )
    bad = sum(not row[-1] for row in rows)
    names = ["name", "mark", "source", "unit", "expected", "computed", "difference", "ok"]
    if form == "json":
        print_json({"checks": [dict(zip(names, row, strict=True)) for row in rows], "failed": bad})
    elif form == "csv":
        print_rows((names, rows), form)
    else:
        for name, mark, source, unit, expected, value, difference, ok in rows:
            head = "ok " if ok else "OFF"
            say(f"{head} {name}: {value:.9g} {unit}, {mark} {expected:.9g} ({difference:+.1e}); {source}")
        say(f"{len(rows)} checks, {bad} off")
    click.get_current_context().exit(1 if bad else 0)
