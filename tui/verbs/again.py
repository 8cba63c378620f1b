"""The verb that shows a recorded run again: `replay`."""

from contextlib import closing
from pathlib import Path
from typing import TYPE_CHECKING

import click

from eastfall.tui.saying import say
from eastfall.tui.verbs.options import Number, an_input, readers_units

if TYPE_CHECKING:
    from eastfall.io.replay import Replay


@click.command()
@click.argument("log", type=an_input)
@click.option("--site", type=an_input, help="Another site file: what if? The log is not changed.")
@click.option("--speed", type=Number(min=0.1), default=1.0, show_default=True, help="Run seconds a second.")
@click.option("--follow", is_flag=True, help="Go on with what another process is recording.")
@click.option("--plain", is_flag=True, help="Lines of text, at once, instead of the dashboard.")
def replay(log: Path, site: Path | None, speed: float, follow: bool, plain: bool) -> None:
    """See a recorded run as it happened: pause, step, speed, jump to a depth, a time or an event."""
    from eastfall.io.replay import Replay  # noqa: PLC0415 (the engine only where it runs)
    from eastfall.io.sitefile import load_site  # noqa: PLC0415

    found = Replay(log, site=load_site(site) if site else None, follow=follow)
    if plain:
        _plainly(found)
        return
    from eastfall.tui.opening import run_replay  # noqa: PLC0415

    click.get_current_context().exit(run_replay(found, speed=speed))


def _plainly(found: "Replay") -> None:
    from eastfall.tui.plain import PlainLines  # noqa: PLC0415

    lines = PlainLines(say, found.site.assumptions.run.kind, units=readers_units())
    with closing(found):
        update = found.step()
        while not found.ended:
            lines.take(update)
            update = found.step()
        lines.take(update)
        changed = found.changed
    lines.end(update)
    if changed:
        say(f"RECORD CHANGED: {changed}")
