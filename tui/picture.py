"""A picture of the watch screen as SVG, from the demo at a set moment; the README shows it.

``python -m eastfall.tui.picture OUT.svg [--kind KIND] [--at SECONDS] [--size COLUMNSxROWS] [--theme THEME]``
"""

import argparse
import asyncio
import time
from pathlib import Path
from typing import TYPE_CHECKING, get_args

import numpy as np

from eastfall.io.emulator import demo_site, emulator_for, options_of
from eastfall.io.pipeline import Pipeline
from eastfall.io.run import Health, LinkHealth
from eastfall.physics.settings import Kind
from eastfall.tui.app import watch_app
from eastfall.tui.session import Session, curves_of
from eastfall.tui.store import History, Snapshot
from eastfall.tui.themes import DARK, THEMES

if TYPE_CHECKING:
    from eastfall.io.sitefile import SiteFile


def demo_snapshot(site: "SiteFile", at: float) -> tuple[Pipeline, Snapshot]:
    """Run the demo's instrument up to a moment, without waiting, and freeze what the screen would show.

    Parameters
    ----------
    site : SiteFile
        Of the demo; its first link emulates the instrument.
    at : float
        Seconds of the instrument's own clock.
    """
    from eastfall.io.arrivals import LineBlock  # noqa: PLC0415 (a few lines of the edge, used here alone)

    pipeline, history = Pipeline(site, armed=True), History("live")
    lines = emulator_for(site, options_of(site.links[0].url)).lines(0, at)
    block = LineBlock(
        data=b"".join(line for _, line in lines).replace(b"\r\n", b"\n"),
        times=np.array([moment for moment, _ in lines]),
        first_line=1,
    )
    history.add([pipeline.take(block)], at)
    health = Health(
        links=(
            LinkHealth(
                name="emulate",
                url=site.links[0].url,
                state="open",
                retry_in=None,
                lines=len(lines),
                rate=len(lines) / at,
                silent_for=0.0,
                last_fault="",
                queue_dropped=0,
            ),
        ),
        frames=pipeline.frames,
        rejected=pipeline.rejected,
        faults=pipeline.faults,
        log_path="demo.eastfall.jsonl",
        log_bytes=sum(len(line) for _, line in lines),
        log_state="recording",
    )
    return pipeline, history.snapshot(
        time=at, standing=pipeline.survey.standing(), alarms=pipeline.survey.alarms(), health=health
    )


async def picture(kind: Kind, at: float, size: tuple[int, int], theme: str) -> str:
    """Return the watch screen of the demo as SVG."""
    site = demo_site(kind)
    pipeline, snapshot = demo_snapshot(site, at)
    bob, fall = curves_of(pipeline.survey.curve)
    session = Session(
        assumptions=site.assumptions, mode="live", title=site.assumptions.site.name, bob=bob, fall=fall
    )
    app = watch_app(session, theme=theme)
    async with app.run_test(size=size) as pilot:
        app.take(snapshot)
        await pilot.pause()
        return app.export_screenshot(title="eastfall")


def main() -> None:
    """Write the picture."""
    parser = argparse.ArgumentParser(
        prog="python -m eastfall.tui.picture", description=__doc__.splitlines()[0]
    )
    parser.add_argument("out", type=Path)
    parser.add_argument("--kind", choices=get_args(Kind), default="guided")
    parser.add_argument("--at", type=float, default=225.0, help="seconds of the instrument's clock")
    parser.add_argument("--size", default="120x40")
    parser.add_argument("--theme", choices=[one.name for one in THEMES], default=DARK.name)
    given = parser.parse_args()
    columns, rows = map(int, given.size.split("x"))
    began = time.monotonic()
    svg = asyncio.run(picture(given.kind, given.at, (columns, rows), given.theme))
    given.out.parent.mkdir(parents=True, exist_ok=True)
    given.out.write_text(svg, encoding="utf-8")
    print(f"{given.out}: {len(svg) // 1000} kB after {time.monotonic() - began:.1f} s")  # noqa: T201


if __name__ == "__main__":
    main()
