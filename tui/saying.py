"""How the command line speaks: text in the letters that whoever listens can read, paths to the last byte.

Whatever stands in a text, such as the name of an alarm in someone's log, it does nothing to a terminal.
"""

import os
import shutil
import sys
from pathlib import Path
from typing import TextIO

import click

from eastfall.io.safetext import safe
from eastfall.tui.letters import in_ascii, is_plain
from eastfall.tui.printed import prose


def say(text: str, *, err: bool = False) -> None:
    """Write a line of text for a person."""
    click.echo(_told(text, sys.stderr if err else sys.stdout), err=err)


def _told(text: str, stream: TextIO) -> str:
    return in_ascii(safe(text)) if plain(stream) else safe(text)


def say_sentence(text: str, *, err: bool = False) -> None:
    """Write a sentence about a table, parted between words where it is too long for the window."""
    for line in prose(_told(text, sys.stderr if err else sys.stdout), window()):
        click.echo(line, err=err)


def window() -> int | None:
    """Return how many columns a reader has; None where the output goes elsewhere and nobody said."""
    if not (sys.stdout.isatty() or os.environ.get("COLUMNS")):
        return None
    return shutil.get_terminal_size().columns


def say_path(path: Path | str) -> None:
    """Write the path of a file as it is, for another program or a shell to take up."""
    if sys.stdout.isatty() or os.name != "posix":
        click.echo(str(path))
    else:
        click.echo(os.fsencode(path))


def plain(stream: TextIO) -> bool:
    """Tell whether a stream should be given ASCII alone."""
    return is_plain(os.environ, getattr(stream, "encoding", None))


def never_fail() -> None:
    """Have both streams write an escape for a letter that they lack, in place of an error."""
    for stream in (sys.stdout, sys.stderr):
        reconfigure = getattr(stream, "reconfigure", None)
        if reconfigure is not None and stream.errors in {"strict", "surrogateescape"}:
            reconfigure(errors="backslashreplace")
