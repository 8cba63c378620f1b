"""Where in a site file a key stands, for what is said of it; also of a value that only the models refuse."""

import math
import re
import tomllib
from collections.abc import Iterator
from contextlib import contextmanager
from dataclasses import dataclass
from datetime import date, time
from typing import TYPE_CHECKING, Any

from eastfall.io import sitekeys
from eastfall.io.errors import SiteFileError
from eastfall.physics.errors import ParameterError

if TYPE_CHECKING:
    from eastfall.io.sitefile import SiteFile
    from eastfall.physics.settings import Assumptions


@dataclass(frozen=True, slots=True)
class Place:
    """The text of a site file, and what it is called in messages."""

    source: str
    text: str

    def line_of(self, path: str) -> int | None:
        """Return the line of a dotted key path, as well as it can be found in the text."""
        section, _, key = path.rpartition(".")
        name = re.escape(re.sub(r"\[\d+\]", "", key))
        inside = section == ""
        for number, line in enumerate(self.text.splitlines(), start=1):
            if heading := re.match(r"\s*\[+\s*([\w-]+)\s*\]+", line):
                inside = heading[1] == re.sub(r"\[\d+\]", "", section)
                if section == "" and heading[1] == key:
                    return number
            elif inside and re.match(rf"\s*\"?{name}\"?\s*=", line):
                return number
        return None

    def error(self, path: str, value: object, expected: str) -> SiteFileError:
        """Return the one clear line."""
        line = self.line_of(path)
        where = f"{self.source}, line {line}" if line else self.source
        return SiteFileError(f"{where}: {path} is {_shown(value)}; expected {expected}", key=path)


def _shown(value: object) -> str:
    """Return a value much as it stands in the file."""
    if value is None:
        return "missing"
    text = str(value).lower() if isinstance(value, bool) else repr(value)
    text = value.isoformat() if isinstance(value, date | time) else text
    return text if len(text) <= 60 else text[:57] + "..."


@contextmanager
def refusals_of(site: "SiteFile") -> Iterator[None]:
    """Have what the models refuse of a site's numbers say where they stand in its file.

    Raises
    ------
    SiteFileError
        In place of a ParameterError that speaks of a key, with file, line and key.
    """
    try:
        yield
    except ParameterError as error:
        found = _keys(site.assumptions, error)
        if not found:
            raise
        raise _refused(site, next((one for one in found if one in site.given), found[0]), error) from error


def _refused(site: "SiteFile", path: str, error: ParameterError) -> SiteFileError:
    section, _, name = path.partition(".")
    if path in site.given:
        value = tomllib.loads(site.text)[section][name]
        return Place(site.path, site.text).error(path, value, error.expected)
    value = sitekeys.from_si(name, getattr(getattr(site.assumptions, section), sitekeys.si_name(name)))
    return SiteFileError(
        f"{site.path}: {path} is {_shown(value)} by default; expected {error.expected}", key=path
    )


def _keys(assumptions: "Assumptions", error: ParameterError) -> list[str]:
    """Return the keys that an error may speak of: of its name and value, or the only one of its name."""
    names = {one.strip() for one in error.name.split(",")}
    named, same = [], []
    for section in sitekeys.RECORDS:
        record = getattr(assumptions, section)
        for key in sitekeys.names_in(section) if record is not None else ():
            field = sitekeys.si_name(key)
            if field in names:
                named.append(f"{section}.{key}")
                if _equal(getattr(record, field), error.value):
                    same.append(f"{section}.{key}")
    return same or (named if len(named) == 1 else [])


def _equal(here: Any, said: Any) -> bool:
    if isinstance(said, tuple):
        return any(_equal(here, one) for one in said)
    if isinstance(here, int | float) and isinstance(said, int | float):
        return math.isclose(here, said, rel_tol=1e-9)
    return isinstance(said, str) and bool(here == said)
