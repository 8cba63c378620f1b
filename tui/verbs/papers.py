"""The verbs on what has been recorded: `report`, `verify`, `export`, `compare` and `runs`."""

from pathlib import Path
from typing import Any

import click

from eastfall.tui.saying import say, say_path, say_sentence
from eastfall.tui.verbs.options import (
    above_nothing,
    an_input,
    as_format,
    counted,
    over_cores,
    print_json,
    print_list,
    print_rows,
    with_options,
)

another_site = click.option(
    "--site", type=an_input, help="Another site file: what if? The log is not changed."
)
interval = click.option(
    "--interval",
    type=above_nothing,
    metavar="S",
    help="Between the lines of a capture without time_s.",
)
force = click.option("--force", is_flag=True, help="Write over a file that stands already.")


@click.command()
@click.argument("log", type=an_input)
@click.option(
    "--out",
    type=click.Path(path_type=Path, dir_okay=False),
    help="The HTML file; without it, text is printed.",
)
@click.option("--against", type=an_input, metavar="LOG", help="Another run of this shaft to compare with.")
@with_options(another_site, interval, force)
def report(
    log: Path, out: Path | None, against: Path | None, site: Path | None, interval: float | None, force: bool
) -> None:
    """Write the report of a run: one self-contained HTML file that prints well on A4 and Letter."""
    from eastfall.io import report as writer  # noqa: PLC0415 (the engine only where it runs)
    from eastfall.io.compare import compare_runs  # noqa: PLC0415
    from eastfall.io.reduce import reduce_file  # noqa: PLC0415
    from eastfall.io.sitefile import load_site  # noqa: PLC0415

    found = reduce_file(log, site=load_site(site) if site else None, interval=interval)
    if out is None:
        for line in writer.report_text(found).split("\n"):
            say(line)
        return
    beside = writer.compared(compare_runs(reduce_file(against), found)) if against else None
    writer.write_report(found, out, compared=beside, force=force)
    say_path(out)


@click.command()
@click.argument("log", type=an_input)
@as_format
def verify(log: Path, form: str) -> None:
    """Say whether a log is intact, cut short (and how much is good) or changed (and where first).

    Exit status 1 unless it is intact.
    """
    from eastfall.io.runlog import verify_log  # noqa: PLC0415
    from eastfall.io.safetext import safe  # noqa: PLC0415

    found = verify_log(log)
    row = {
        "path": found.path,
        "state": found.state,
        "good_lines": found.good_lines,
        "good_until_s": found.good_until_time,
        "first_bad_line": found.first_bad_line,
        "sealed": found.sealed,
        "seal": found.seal,
        "reason": found.reason,
    }
    if form == "json":
        print_json(row)
    elif form == "csv":
        print_rows((list(row), [list(row.values())]), form)
    else:
        say(f"{safe(str(found.path))}: {found.state}; {found.reason}")
        say(f"{found.good_lines} good lines, to {found.good_until_time:.1f} s; seal {found.seal or 'none'}")
    click.get_current_context().exit(0 if found.state == "intact" else 1)


@click.command()
@click.argument("log", type=an_input)
@click.argument("file", type=click.Path(path_type=Path, dir_okay=False))
@with_options(another_site, interval, force)
def export(log: Path, file: Path, site: Path | None, interval: float | None, force: bool) -> None:
    """Write the stations of a run to FILE; its suffix picks csv, json or las."""
    from eastfall.io.export import export as write  # noqa: PLC0415
    from eastfall.io.reduce import reduce_file  # noqa: PLC0415
    from eastfall.io.safetext import safe  # noqa: PLC0415
    from eastfall.io.sitefile import load_site  # noqa: PLC0415

    found = reduce_file(log, site=load_site(site) if site else None, interval=interval)
    write(found, file, force=force)
    if found.verification is not None and found.seal_state == "changed":
        # A spreadsheet has no place for it.
        say(f"note: {safe(str(log))}: the record is changed: {found.verification.reason}", err=True)
    say_path(file)


@click.command()
@click.argument("first", type=an_input)
@click.argument("second", type=an_input, required=False)
@click.option(
    "--passes", nargs=2, type=click.IntRange(min=1), metavar="A B", help="Two passes of the one run, from 1."
)
@as_format
def compare(first: Path, second: Path | None, passes: tuple[int, int] | None, form: str) -> None:
    """Compare two runs of one shaft (has the lining moved?), or two passes of one run.

    With one run and no --passes its first two passes are compared.
    """
    from eastfall.io.compare import DIFFERENCE_KEYS, compare_passes, compare_runs, difference_rows  # noqa: PLC0415
    from eastfall.io.reduce import reduce_file  # noqa: PLC0415

    if second is not None and passes is not None:
        raise click.UsageError("--passes compares two passes of one run; give one run with it")
    run = reduce_file(first)
    if second is not None:
        found = compare_runs(run, reduce_file(second))
    else:
        one, other = passes or (1, 2)
        found = compare_passes(run, one - 1, other - 1)
    rows = difference_rows(found)
    if form == "json":
        print_json(
            {
                "first": found.first,
                "second": found.second,
                "left_out": found.left_out,
                "depths": rows,
                "notes": found.notes,
            }
        )
        return
    if form == "table":
        say(found.second)
        say(f"less {found.first}; offsets in mm, u is the standard uncertainty")
    print_rows((list(DIFFERENCE_KEYS), [[row[name] for name in DIFFERENCE_KEYS] for row in rows]), form)
    for line in found.notes:
        say_sentence(f"note: {line}", err=form == "csv")
    if form == "table":
        say(f"{len(found.moved)} of {len(found.rows)} depths differ by more than their uncertainty explains")


@click.command()
@click.argument("folder", type=click.Path(path_type=Path, exists=True, file_okay=False), metavar="DIR")
@click.option(
    "--sort",
    type=click.Choice(["path", "site", "started_at", "kind", "depth_m", "verdict", "state"]),
    default="started_at",
    show_default=True,
)
@click.option(
    "--only",
    type=click.Choice(["over", "undecided", "within", "not-intact", "unreadable"]),
    help="Only such runs.",
)
@click.option("--quick", is_flag=True, help="Headers and seals alone, without verdicts.")
@over_cores
@as_format
def runs(
    folder: Path,
    sort: str,
    only: str | None,
    quick: bool,
    workers: int | None,
    scheduler: str | None,
    form: str,
) -> None:
    """List the runs in a folder: site, date, kind, depth, verdict, intact or not."""
    from eastfall.io.shelf import CARD_KEYS, card_row, list_runs  # noqa: PLC0415

    cards = list_runs(folder, counted(), workers, judged=not quick, scheduler=scheduler)
    kept = [card_row(one) for one in cards]
    if only == "not-intact":
        kept = [one for one in kept if one["state"] != "intact"]
    elif only == "unreadable":
        kept = [one for one in kept if one["error"]]
    elif only:
        kept = [one for one in kept if one["verdict"] == only]
    kept.sort(key=lambda one: (one[sort] is None, one[sort]))
    if form == "json":
        print_json({"runs": kept})
    elif form == "csv":
        print_rows((list(CARD_KEYS), [[one[name] for name in CARD_KEYS] for one in kept]), form)
    else:
        print_list(("started, UTC", "site", "run", "depth_m", "verdict", "record", "file"), _listed(kept))


def _why(one: dict[str, Any]) -> str:
    """Return why a log cannot be read, without the path that stands before it."""
    why: str = one["error"]
    return why.removeprefix(one["path"]).lstrip(",: ")


def _listed(kept: list[dict[str, Any]]) -> list[list[Any]]:
    """Return runs for a reader: the minute they began, and the name of the file with what hinders reading it."""
    return [
        [
            (one["started_at"] or "-")[:16].replace("T", " "),
            one["site"] or "-",
            one["kind"] or "-",
            one["depth_m"],
            one["verdict"],
            one["state"] or "unreadable",
            Path(one["path"]).name + (f": {_why(one)}" if one["error"] else ""),
        ]
        for one in kept
    ]
