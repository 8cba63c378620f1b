"""The verbs that print numbers: `expect` and `reduce`."""

import re
from math import radians
from pathlib import Path
from typing import TYPE_CHECKING, Any

import click

from eastfall.tui import words
from eastfall.tui.saying import say, say_sentence
from eastfall.tui.verbs.options import (
    Number,
    above_nothing,
    an_input,
    an_input_or_folder,
    as_format,
    counted,
    over_cores,
    print_json,
    print_rows,
)

if TYPE_CHECKING:
    from eastfall.io.reduce import Reduction
    from eastfall.io.sitefile import SiteFile
    from eastfall.physics.settings import Assumptions


class _Depths(click.ParamType[tuple[float, ...]]):
    """Depths in metres, separated by commas."""

    name = "m,m,..."

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
@click.option("--every", type=Number(min=0.001), metavar="M", help="A row every so many metres.")
@click.option("--at", type=_Depths(), help="Rows at these depths.")
@click.option("--budget", is_flag=True, help="What each input contributes to the uncertainty, instead.")
@click.option("--explore", is_flag=True, help="A screen to change the inputs and see the curves move.")
@click.option(
    "--line", is_flag=True, help="The plumb line itself, instead: stretch, swing, what the winch leaves."
)
@click.option(
    "--apart",
    type=above_nothing,
    metavar="M",
    help="With --line: a second line this far off.",
)
@click.option("--toward", type=Number(), default=0.0, metavar="DEG", help="With --apart: its azimuth.")
@click.option(
    "--decay",
    type=above_nothing,
    metavar="S",
    help="With --line: a swing falls to 1/e in this time.",
)
@click.option(
    "--small",
    type=above_nothing,
    default=1.0,
    metavar="MM",
    show_default=True,
    help="With --decay: wait for a swing below this.",
)
@as_format
def expect(
    site: Path,
    every: float | None,
    at: tuple[float, ...] | None,
    budget: bool,
    explore: bool,
    line: bool,
    apart: float | None,
    toward: float,
    decay: float | None,
    small: float,
    form: str,
) -> None:
    """Print what a perfectly plumb shaft would show, with its uncertainty.

    Without --every or --at a row is printed for every station of the site file.
    """
    from eastfall.io import prediction  # noqa: PLC0415 (the numerical library only where numbers are made)
    from eastfall.io.sitefile import load_site  # noqa: PLC0415
    from eastfall.io.siteplace import refusals_of  # noqa: PLC0415

    _refuse_what_would_be_left_aside(
        every, at, budget=budget, line=line, of_line={"--apart": apart, "--decay": decay}
    )
    if explore:
        from eastfall.tui.opening import run_explorer  # noqa: PLC0415 (the screen library only where a screen opens)

        click.get_current_context().exit(run_explorer(load_site(site)))
    loaded = load_site(site)
    assumptions = loaded.assumptions
    depths = prediction.depths(assumptions, every=every, at=at)
    if line:
        with refusals_of(loaded):
            found = _line(assumptions, depths, apart=apart, toward=toward, decay=decay, small=small)
        if form == "json":
            print_json(found)
        else:
            print_rows((list(found["line"][0]), [list(one.values()) for one in found["line"]]), form)
        return
    if budget:
        with refusals_of(loaded):
            rows = prediction.budget(assumptions, depths)
        if form == "json":
            print_json(rows)
        else:
            print_rows(prediction.budget_rows(rows), form)
        return
    with refusals_of(loaded):
        predicted = prediction.predict(assumptions, depths)
    if form == "json":
        print_json(predicted.shape)
        return
    if form == "table":
        say_sentence(predicted.heading)
    print_rows(predicted.rows, form)
    for note in predicted.notes if form == "table" else ():
        say_sentence(note)


def _refuse_what_would_be_left_aside(
    every: float | None,
    at: tuple[float, ...] | None,
    *,
    budget: bool,
    line: bool,
    of_line: dict[str, float | None],
) -> None:
    if every is not None and at is not None:
        raise click.UsageError("--every and --at both say the depths; give one of them")
    if budget and line:
        raise click.UsageError("--budget and --line are two tables; give one of them")
    for name, value in of_line.items():
        if value is not None and not line:
            raise click.UsageError(f"{name} speaks of the plumb line; give --line with it")


def _line(
    assumptions: "Assumptions",
    depths: list[float],
    *,
    apart: float | None,
    toward: float,
    decay: float | None,
    small: float,
) -> dict[str, Any]:
    from eastfall.io.lineprediction import line_table  # noqa: PLC0415 (the numerical library only where used)

    return line_table(
        assumptions, depths, apart=apart, toward=radians(toward), decay=decay, small=small / 1000.0
    )


@click.command()
@click.argument("log", type=an_input_or_folder)
@click.option("--site", type=an_input, help="Another site file; needed for a plain-text capture.")
@click.option(
    "--interval",
    type=above_nothing,
    metavar="S",
    help="Between the lines of a capture without time_s.",
)
@over_cores
@as_format
def reduce(
    log: Path,
    site: Path | None,
    interval: float | None,
    workers: int | None,
    scheduler: str | None,
    form: str,
) -> None:
    """Work through a whole log: stations, verdicts, alarms, closure, rest point.

    LOG is a run log, a plain-text capture (with --site), or a folder: then every run log in it is worked through, and
    a row for each is printed (with --format json, a list of all that each comes to). Exit status 1 if a limit is
    exceeded or a log was changed, 2 if something cannot be used.
    """
    from eastfall.io.recording import passed_over  # noqa: PLC0415
    from eastfall.io.reduce import reduce_file  # noqa: PLC0415
    from eastfall.io.safetext import safe  # noqa: PLC0415
    from eastfall.io.sitefile import load_site  # noqa: PLC0415
    from eastfall.io.tables import reduce_table  # noqa: PLC0415

    settings = load_site(site) if site else None
    if log.is_dir():
        if interval is not None:
            raise click.UsageError("--interval is for a capture; a folder is worked through for its run logs")
        _many(log, settings, workers, scheduler, form)
        return
    found = reduce_file(log, site=settings, interval=interval)
    if found.unreadable:
        # On standard error, so that a table or a list of numbers stays one.
        why = f" ({found.verification.reason})" if found.verification is not None else ""
        say(f"eastfall: {safe(str(log))}: {passed_over(found.unreadable)}{why}", err=True)
    shape = reduce_table(found)
    if form == "json":
        print_json(shape)
    else:
        if form == "table":
            say_sentence(_heading(found))
        print_rows(_stations(shape), form)
        for line in _footing(found, shape) if form == "table" else ():
            say_sentence(line)
    click.get_current_context().exit(1 if found.exceeded or found.seal_state == "changed" else 0)


def _many(
    folder: Path, site: "SiteFile | None", workers: int | None, scheduler: str | None, form: str
) -> None:
    """Print what every run log of a folder comes to."""
    from eastfall.io.folder import SUMMARY_KEYS, reduce_folder  # noqa: PLC0415
    from eastfall.io.recording import passed_over  # noqa: PLC0415
    from eastfall.io.safetext import safe  # noqa: PLC0415

    found = reduce_folder(folder, site=site, progress=counted(), workers=workers, scheduler=scheduler)
    if form == "json":
        print_json(found)
    else:
        print_rows((list(SUMMARY_KEYS), [[one[name] for name in SUMMARY_KEYS] for one in found]), form)
    unusable = [one for one in found if one["error"]]
    for one in unusable:
        say(f"eastfall: {one['error']}", err=True)
    for one in found:
        if records := one.get("unreadable_records"):
            say(f"eastfall: {safe(one['path'])}: {passed_over(records)}", err=True)
    bad = any(one["exceeded"] or one["state"] == "changed" for one in found)
    click.get_current_context().exit(2 if unusable else int(bad))


def _stations(shape: dict[str, Any]) -> tuple[list[str], list[list[Any]]]:
    from eastfall.io.tables import STATION_KEYS  # noqa: PLC0415

    return list(STATION_KEYS), [[one[name] for name in STATION_KEYS] for one in shape["stations"]]


def _heading(found: "Reduction") -> str:
    from eastfall.io.prediction import REFERENCE_LINES  # noqa: PLC0415
    from eastfall.io.safetext import safe  # noqa: PLC0415

    name = safe(found.site.assumptions.site.name) or "unnamed site"
    reference = REFERENCE_LINES[found.site.assumptions.run.reference]
    return f"{name}: {found.kind} run; offsets in mm from {reference}; u is the standard uncertainty of the residual"


def _alarms(found: "Reduction") -> list[str]:
    """Return the changes of alarms, and by whose clock they are told."""
    changes = found.result.alarms
    if not changes:
        return []
    if found.is_log:
        whose = "by the clock of the machine that recorded, from the start of the run"
    else:
        whose = "as the lines of the capture state it" if found.own_clock else "by the interval between lines"
    return [f"time of alarms: {whose}"] + [
        f"alarm {words.clock(one.host_time if found.is_log else one.time)} {one.name}: {one.old} -> {one.new}; "
        + one.message
        for one in changes
    ]


def _footing(found: "Reduction", shape: dict[str, Any]) -> list[str]:
    """Return what stands below the table of stations."""
    faults = ", ".join(f"{name}: {count}" for name, count in sorted(found.faults.items()))
    aside = ", ".join(f"{count} {name}" for name, count in sorted(found.unused.items()))
    lines = [
        f"readings used {found.frames}, lines refused {found.rejected}{f' ({faults})' if faults else ''}"
        + (f"; readings left aside: {aside}" if aside else "")
    ]
    if closure := shape["closure"]:
        lines.append(
            f"closure at {closure['depth_m']:.1f} m: east {closure['east_mm']:+.2f} mm (moving line "
            f"{closure['expected_east_mm']:+.2f}), north {closure['north_mm']:+.2f} mm "
            f"({closure['expected_north_mm']:+.2f})"
        )
    if rest := found.result.rest_point:
        lines.append(words.swing(rest))
    lines += _alarms(found)
    lines += [f"note: {one}" for one in (found.standing.notes if found.standing else ())]
    lines += [f"not as recorded: {one.key} {one.recorded} -> {one.used}" for one in found.differences]
    if found.verification is not None:
        lacks = f"; {found.missing} lines or events are missing in it" if found.missing else ""
        lines.append(f"log {found.seal_state}{lacks}")
    return lines
