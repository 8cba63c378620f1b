"""What a person set once and does not want to set again: a small TOML file in the platform's place for settings.

A file that cannot be read, or says what is not understood, is told in one line; the defaults hold then, and the file
is left as it is. What each setting does is the business of the screens.
"""

import json
import os
import tempfile
import tomllib
from collections.abc import Mapping
from math import isnan
from pathlib import Path
from typing import Annotated, Any, Literal, Self

import msgspec
from msgspec import Meta

from eastfall.io.safetext import safe
from eastfall.tui.units import Name as UnitsName

VARIABLE = "EASTFALL_CONFIG"
"""Environment variable that names another file."""
MOST_RECENT = 8
"""Sites remembered."""
_LARGEST = 100_000
"""Bytes of the file; a larger one is something else."""
_HEADING = "# Settings of eastfall. The program writes this file anew; your own comments are not kept.\n"

Colours = Literal["dark", "light", "none"]
GlyphChoice = Literal["auto", "braille", "half", "ascii"]


class Preferences(msgspec.Struct, frozen=True, kw_only=True, forbid_unknown_fields=True):
    """All settings, each with its default."""

    theme: Colours = "dark"
    units: UnitsName = "metric"
    glyphs: GlyphChoice = "auto"
    sound: bool = True
    cell_aspect: Annotated[float, Meta(ge=1.0, le=4.0, description="a number from 1 to 4")] = 2.0
    """Height of a character cell over its width."""
    runs_folder: Annotated[str, Meta(max_length=4000)] = ""
    """Where runs are recorded; empty is `eastfall-runs` beside the work."""
    recent_sites: Annotated[tuple[Annotated[str, Meta(max_length=4000)], ...], Meta(max_length=100)] = ()
    """Paths of site files, the newest first."""
    keys: dict[str, str] = {}
    """From the name of a key's action, such as "watch.note", to the key that does it now."""


def place(environment: Mapping[str, str]) -> Path:
    """Return where the file is: as EASTFALL_CONFIG says, or in the platform's place for settings."""
    named = environment.get(VARIABLE)
    if named:
        return Path(named)
    from platformdirs import user_config_path  # noqa: PLC0415 (only where it is not overruled)

    return user_config_path("eastfall", appauthor=False) / "settings.toml"


def read(text: str) -> Preferences:
    """Read the text of the file.

    Raises
    ------
    ValueError
        With one line: what stands there, and what was expected.
    """
    if len(text) > _LARGEST:
        raise ValueError(f"more than {_LARGEST} bytes; expected a short file of settings")
    try:
        tree = tomllib.loads(text)
    except (tomllib.TOMLDecodeError, RecursionError) as error:
        raise ValueError(f'not TOML: {error}; expected lines such as theme = "dark"') from error
    try:
        found = msgspec.convert(tree, Preferences)
    except msgspec.ValidationError as error:
        raise ValueError(_complaint(str(error), tree)) from error
    if isnan(found.cell_aspect):
        raise ValueError(f"cell_aspect is nan; expected {_EXPECTED['cell_aspect']}")
    return found


def _complaint(said: str, tree: Mapping[str, Any]) -> str:
    """Return what is wrong as one line that names the setting."""
    what, _, at = said.partition(" - at `$")
    name = at.strip("`.").partition("[")[0].partition(".")[0]
    known = ", ".join(Preferences.__struct_fields__)
    if "unknown field" in what:
        unknown = sorted(set(tree) - set(Preferences.__struct_fields__))
        return f"unknown setting {', '.join(unknown)}; expected some of {known}"
    plain = what.replace("`", "").removeprefix("Expected ")
    return f"{name} is {tree.get(name)!r}; expected {_EXPECTED.get(name, plain)}"


_EXPECTED = {
    "theme": "one of dark, light, none",
    "units": "one of metric, feet",
    "glyphs": "one of auto, braille, half, ascii",
    "sound": "true or false",
    "cell_aspect": "a number from 1 to 4",
    "runs_folder": "a folder, as text",
    "recent_sites": "a list of site files",
    "keys": 'a table such as "watch.note" = "N"',
}


def written(one: Preferences) -> str:
    """Return settings as the text of the file; those that are as they were made are left out."""
    default = Preferences()
    lines = [_HEADING]
    for name in Preferences.__struct_fields__:
        value = getattr(one, name)
        if name != "keys" and value != getattr(default, name):
            lines.append(f"{name} = {_toml(value)}\n")
    if one.keys:
        lines.append("\n[keys]\n")
        lines += [f"{_toml(name)} = {_toml(key)}\n" for name, key in sorted(one.keys.items())]
    return "".join(lines)


def _toml(value: object) -> str:
    """Return a value in TOML; its basic strings have the escapes of JSON, and DEL besides (TOML 1.0, "String")."""
    if isinstance(value, tuple):
        return f"[{', '.join(map(_toml, value))}]"
    return json.dumps(value, ensure_ascii=False).replace("\x7f", "\\u007f")


class Remembered:
    """The settings of this person on this machine, and the file that they are kept in.

    Parameters
    ----------
    path : Path, optional
        The file; without one nothing is kept.
    now : Preferences
        What holds.
    complaint : str
        Why the file could not be used, in one line; nothing is written over it then.
    """

    def __init__(self, path: Path | None = None, now: Preferences | None = None, complaint: str = "") -> None:
        self.path, self.now, self.complaint = path, now or Preferences(), complaint

    @classmethod
    def of(cls, environment: Mapping[str, str]) -> Self:
        """Read the file; one that is not there yet is no fault, a broken one gives defaults and a complaint."""
        path = place(environment)
        try:
            with path.open("rb") as file:
                raw = file.read(_LARGEST + 1)
        except FileNotFoundError:
            return cls(path)
        except OSError as error:
            return cls(path, complaint=_about(path, error.strerror or str(error)))
        try:
            return cls(path, read(raw.decode("utf-8")))
        except UnicodeDecodeError:
            return cls(path, complaint=_about(path, "not UTF-8 text; expected settings in TOML"))
        except ValueError as error:
            return cls(path, complaint=_about(path, str(error)))

    def change(self, **fields: object) -> str:
        """Change settings and keep them.

        Returns
        -------
        str
            Empty, or one line that says why they hold only until the program ends.
        """
        changed = msgspec.structs.replace(self.now, **fields)
        if changed == self.now:
            return ""
        self.now = changed
        if self.path is None:
            return ""
        if self.complaint:
            return "Not kept: the settings file is broken and is left as it is."
        try:
            _put(self.path, written(changed))
        except OSError as error:
            return f"Not kept: {safe(str(self.path), 60)}: {error.strerror or error}"
        except UnicodeEncodeError:
            return "Not kept: a name in the settings is not text."
        return ""

    def used(self, site: Path) -> str:
        """Remember a site file as the newest used; return as `change` does."""
        name = str(site.absolute())
        others = [one for one in self.now.recent_sites if one != name]
        return self.change(recent_sites=(name, *others)[:MOST_RECENT])


def _about(path: Path, what: str) -> str:
    return safe(f"Settings not used, defaults hold: {path}: {what}", 300)


def _put(path: Path, text: str) -> None:
    """Write the file whole or not at all."""
    path.parent.mkdir(parents=True, exist_ok=True)
    number, name = tempfile.mkstemp(dir=path.parent, prefix=".settings-")
    try:
        with os.fdopen(number, "w", encoding="utf-8", newline="\n") as file:
            file.write(text)
        Path(name).replace(path)
    except (OSError, UnicodeEncodeError):
        Path(name).unlink(missing_ok=True)
        raise
