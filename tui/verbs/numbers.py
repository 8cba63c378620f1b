"""The verbs that print numbers: `expect` and `reduce`."""

import re
from pathlib import Path
from typing import Any

import click

from eastfall.tui.verbs.options import an_input, as_format, print_json, print_rows


class _Depths(click.ParamType):
    """Depths in metres, separated by commas."""

    name = "m,m,…"

    def convert(
        self, value: Any, param: click.Parameter | None, ctx: click.Context | None
    ) -> tuple[float, ...]:
        """Read them."""
        if isinstance(value, tuple):
            return value
        if not re.fullmatch(r"\s*\d+(\.\d*)?\s*(,\s*\d+(\.\d*)?\s*)*", str(value)):
            self.fail(f"{value!r}; expected depths in metres such as 100,250,940", param, ctx)
        return tuple(float(one) for one in str(value).split(","))


@click.command()
@click.argument("site", type=an_input)
@click.option("--every", type=click.FloatRange(min=0.001), metavar="M", help="A row every so many metres.")
@click.option("--at", type=_Depths(), help="Rows at these depths.")
@click.option("--budget", is_flag=True, help="What each input contributes to the uncertainty, instead.")
@as_format
def expect(site: Path, every: float | None, at: tuple[float, ...] | None, budget: bool, form: str) -> None:
    """Print what a perfectly plumb shaft would show, with its uncertainty.

    Without --every or --at a row is printed for every station of the site file.
    """
    from eastfall.io import prediction  # noqa: PLC0415 (the numerical library only where numbers are made)
    from eastfall.io.sitefile import load_site  # noqa: PLC0415

    assumptions = load_site(site).assumptions
    depths = prediction.depths(assumptions, every=every, at=at)
    if budget:
        rows = prediction.budget(assumptions, depths)
        if form == "json":
            print_json(rows)
        else:
            print_rows(prediction.budget_rows(rows), form)
        return
    found = prediction.predict(assumptions, depths)
    if form == "json":
        print_json(found.shape)
        return
    if form == "table":
        click.echo(found.heading)
    print_rows(found.rows, form)
    for line in found.notes if form == "table" else ():
        click.echo(line)


@click.command()
@click.argument("log", type=an_input)
@click.option("--site", type=an_input, help="Another site file; needed for a plain-text capture.")
@click.option(
    "--interval",
    type=click.FloatRange(min=0.0, min_open=True),
    metavar="S",
    help="Between the lines of a capture without time_s.",
)
@as_format
def reduce(log: Path, site: Path | None, interval: float | None, form: str) -> None:
    """Work through a whole log: stations, verdicts, alarms, closure, rest point.

    LOG is a run log, or a plain-text capture (with --site). Exit status 1 if a limit is exceeded.
    """
    from eastfall.io import tables  # noqa: PLC0415
    from eastfall.io.reduce import reduce_file  # noqa: PLC0415
    from eastfall.io.sitefile import load_site  # noqa: PLC0415

    found = reduce_file(log, site=load_site(site) if site else None, interval=interval)
    shape = tables.reduction(found)
    if form == "json":
        print_json(shape)
    else:
        if form == "table":
            click.echo(tables.heading(found))
        print_rows(tables.station_rows(shape), form)
        for line in tables.footing(found) if form == "table" else ():
            click.echo(line)
    click.get_current_context().exit(1 if tables.exceeded(found.result) else 0)
