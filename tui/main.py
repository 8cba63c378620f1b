"""The command `eastfall`: finds the verb, and turns refusals into one clear line and exit status 2.

Nothing heavier than the command-line library is imported here, so that help is there at once.
"""

import importlib
import os
import sys

import click

from eastfall.io.cautions import CAUTIONS
from eastfall.physics.errors import EastfallError
from eastfall.tui.saying import never_fail, say

VERBS: dict[str, tuple[str, str]] = {
    "demo": ("live", "run the whole job on a built-in emulated instrument"),
    "watch": ("live", "live dashboard of a site's instrument; always records"),
    "record": ("live", "the same without a screen"),
    "replay": ("again", "see a recorded run as it happened"),
    "expect": ("numbers", "what a plumb shaft would show, as a table"),
    "reduce": ("numbers", "a whole log in; stations, verdicts and alarms out"),
    "report": ("papers", "write the report of a run"),
    "verify": ("papers", "is a log intact, cut short or changed?"),
    "export": ("papers", "a run as CSV, JSON or LAS"),
    "compare": ("papers", "two runs of one shaft, or two passes of one run"),
    "runs": ("papers", "the runs in a folder"),
    "share": ("sharing", "a read-only view of a run in a browser on this machine"),
    "emulate": ("tools", "serve an emulated instrument on a pseudo-terminal or TCP port"),
    "ports": ("tools", "list the serial ports of this machine"),
    "selfcheck": ("tools", "compute the published check values now"),
}
"""Each verb: the module that holds it, and a line of help."""


class _Verbs(click.Group):
    """A group whose verbs are imported when called, and listed without importing any."""

    def list_commands(self, ctx: click.Context) -> list[str]:  # noqa: ARG002
        """Return the verbs in the order of use."""
        return list(VERBS)

    def get_command(self, ctx: click.Context, cmd_name: str) -> click.Command | None:  # noqa: ARG002
        """Import and return one verb."""
        if cmd_name not in VERBS:
            return None
        module = importlib.import_module(f"eastfall.tui.verbs.{VERBS[cmd_name][0]}")
        command: click.Command = getattr(module, cmd_name)
        return command

    def format_commands(self, ctx: click.Context, formatter: click.HelpFormatter) -> None:  # noqa: ARG002
        """Write the list of verbs."""
        with formatter.section("Verbs"):
            formatter.write_dl([(name, line) for name, (_, line) in VERBS.items()])


@click.group(
    cls=_Verbs,
    invoke_without_command=True,
    epilog=" ".join(CAUTIONS),
    context_settings={"max_content_width": 100},
)
@click.version_option(package_name="eastfall", message="%(prog)s %(version)s")
@click.pass_context
def cli(ctx: click.Context) -> None:
    """Measured against expected offset in a deep shaft on a turning Earth.

    Without a verb the start screen opens. Every verb has its own --help.
    """
    if ctx.invoked_subcommand is None:
        from eastfall.tui.opening import run_start  # noqa: PLC0415 (the screen library only where a screen opens)

        ctx.exit(run_start())


def main() -> None:
    """Run the command line and end the process with its exit status."""
    _open_missing_streams()
    never_fail()
    # Nothing here multiplies large matrices: threads that wait for it took 50 ms of a core at every start.
    os.environ.setdefault("OPENBLAS_NUM_THREADS", "1")
    try:
        status = cli.main(standalone_mode=False)
    except click.exceptions.Abort:
        status = 130
    except click.ClickException as error:
        say(f"eastfall: {_one_line(error.format_message())}{_where_help_is(error)}", err=True)
        status = 2
    except EastfallError as error:
        say(f"eastfall: {_one_line(str(error))}", err=True)
        status = 2
    except SystemExit:
        # The command-line library ends the process itself when whoever read the output has gone.
        status = 0
    except BrokenPipeError:
        # Whoever read the output has gone; leaving quietly also keeps the interpreter from complaining at exit.
        os.dup2(os.open(os.devnull, os.O_WRONLY), sys.stdout.fileno())
        status = 0
    except OSError as error:
        # What the verbs expect to fail they word themselves; this is the rest, as a full disk behind a pipe.
        where = f"{error.filename}: " if error.filename else ""
        say(f"eastfall: {_one_line(f'{where}{error.strerror or error}')}", err=True)
        status = 2
    sys.exit(status if isinstance(status, int) else 0)


def _open_missing_streams() -> None:
    """Open nothing in place of a stream that was closed, as by a service or `<&-`: the lowest first, so in its place.

    Otherwise the stream is None, and the next file that is opened, the run log, takes its number.
    """
    for name, mode in (("stdin", "r"), ("stdout", "w"), ("stderr", "w")):
        if getattr(sys, name) is None:
            setattr(sys, name, open(os.devnull, mode, encoding="utf-8"))  # noqa: PTH123, SIM115 (open as long as the program)


def _where_help_is(error: click.ClickException) -> str:
    """Return where to read on after a wrong call."""
    context = getattr(error, "ctx", None)
    return f" (see {context.command_path} --help)" if context else ""


def _one_line(text: str) -> str:
    from eastfall.io.safetext import safe  # noqa: PLC0415 (only when something went wrong)

    return safe(text)
