"""Keys of the site file as a person types them: from text to TOML data and back; nothing is judged here."""

import re
from functools import cache
from typing import Any, Literal, Self

from msgspec import inspect

from eastfall.io import sitekeys
from eastfall.io.errors import SiteFileError

Shape = Literal["number", "text", "choice", "rows", "names"]
"""How a key is typed: rows are lines of numbers, names are words with commas between."""

_SPELLED = {" ": "blank", "\t": "tab"}
"""Delimiters that nobody sees, by name."""


def parts(path: str) -> tuple[str, int | None, str]:
    """Return section, index of a link, and name of a key path such as "link[0].url"."""
    found = re.fullmatch(r"([\w-]+)(?:\[(\d+)\])?(?:\.([^\[]+).*)?", path, re.DOTALL)
    if found is None:
        raise SiteFileError(f"{path!r} is no key; expected section.key", key=path)
    return found[1], int(found[2]) if found[2] else None, found[3] or ""


def joined(section: str, index: int | None, name: str) -> str:
    """Return the path of a key."""
    return f"{section}.{name}" if index is None else f"{section}[{index}].{name}"


def key_of(path: str) -> sitekeys.Key | None:
    """Return what is known of a key; None for a stray."""
    section, _, name = parts(path)
    return sitekeys.key(f"{section}.{name}")


class Typed(float):
    """A number that remembers how it was typed."""

    __slots__ = ("digits",)

    digits: str

    def __new__(cls, digits: str) -> Self:
        """Make one of digits that TOML accepts."""
        self = super().__new__(cls, float(digits.replace("_", "")))
        self.digits = digits
        return self


TOML_NUMBER = re.compile(r"[+-]?(0|[1-9]\d{0,17})(\.\d+)?([eE][+-]?\d+)?")


def number(text: str) -> Any:
    """Return a number as typed, or the text itself where it is none: then `parse_site` says so."""
    plain = text.strip()
    if TOML_NUMBER.fullmatch(plain):
        return int(plain) if plain.lstrip("+-").isdigit() else Typed(plain)
    try:
        return float(plain) if plain.isascii() and "_" not in plain else plain
    except ValueError:
        return plain


@cache
def shape(path: str) -> Shape:
    """Return how a key is typed."""
    section, _, name = parts(path)
    struct = sitekeys.SECTIONS.get(section)
    fields: tuple[Any, ...] = inspect.type_info(struct).fields if struct else ()  # type: ignore[attr-defined]
    kind: Any = next((one.type for one in fields if one.name == name), None)
    while isinstance(kind, inspect.Metadata):
        kind = kind.type
    match kind:
        case inspect.LiteralType():
            return "choice"
        case inspect.VarTupleType(item_type=inspect.TupleType()):
            return "rows"
        case inspect.VarTupleType():
            return "names"
        case inspect.FloatType() | inspect.IntType() | inspect.UnionType():
            return "number"
    return "text"


def typed(path: str, value: Any) -> str:
    """Return a value as a person would type it; empty for None."""
    if value is None:
        return ""
    match shape(path):
        case "rows" if _is_rows(value):
            return "\n".join("  ".join(_figure(one) for one in row) for row in value)
        case "names" if isinstance(value, list | tuple):
            return ", ".join(str(one) for one in value)
        case "text" if isinstance(value, str):
            return _SPELLED.get(value, value) if path.endswith(".delimiter") else value
    return value if isinstance(value, str) else _figure(value)


def understood(path: str, text: str) -> Any:
    """Return what was typed as TOML data, right or wrong; None for nothing.

    Parameters
    ----------
    path : str
        The key.
    text : str
        Rows of numbers have a line each, or semicolons between, and blanks or commas between the numbers of a row;
        names have commas between.
    """
    if not text.strip() and not (text and path.endswith(".delimiter")):
        return None
    match shape(path):
        case "number":
            return number(text)
        case "rows":
            lines = [re.split(r"[\s,]+", line.strip(" \t,[]")) for line in re.split(r"[;\n]", text)]
            return [[number(one) for one in row] for row in lines if row != [""]]
        case "names":
            return [one.strip() for one in text.split(",") if one.strip()]
    plain = text.strip()
    if shape(path) == "choice":
        return plain
    spelled = {name: sign for sign, name in _SPELLED.items()}
    return spelled.get(plain, text) if path.endswith(".delimiter") else text


def headings(path: str) -> tuple[str, ...]:
    """Return what the numbers of a row mean, from the brackets in the key's help; empty for other keys."""
    key = key_of(path)
    found = re.search(r"\[(.*?)\]", key.help) if key is not None and shape(path) == "rows" else None
    return tuple(one.strip() for one in found[1].split(",")) if found else ()


def _is_rows(value: Any) -> bool:
    return isinstance(value, list | tuple) and all(isinstance(row, list | tuple) for row in value)


def _figure(value: Any) -> str:
    if isinstance(value, Typed):
        return value.digits
    if isinstance(value, bool) or not isinstance(value, int | float):
        return str(value)
    return repr(value)
