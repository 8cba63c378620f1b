"""A site file while it is being edited: its text with comments and order kept, and what is wrong with each key.

What a key may be stands in `io.sitekeys`, and only `io.sitefile.parse_site` judges; this module changes the text.
"""

import re
from collections.abc import Mapping
from pathlib import Path
from typing import Any

import tomlkit
from tomlkit.exceptions import TOMLKitError
from tomlkit.items import AoT, Array, Comment, Float, Item, Table, Whitespace

from eastfall.io import sitekeys
from eastfall.io.errors import SiteFileError
from eastfall.io.sitefile import LinkSettings, decoded, load_site, parse_site
from eastfall.io.sitevalues import TOML_NUMBER, Typed, joined, key_of, parts, shape, typed, understood

NEW_SITE = """\
# A site file of eastfall: what the shaft is, what reads it, what is tolerated. Only three keys are required.
[site]

[shaft]

[run]
kind = "guided"
"""
REQUIRED = ("site.latitude_deg", "shaft.depth_m", "run.kind")
"""The keys without which no site file can be used."""
_MOST_FAULTS = 12


class SiteDraft:
    """The text of a site file and the changes that wait to go into it.

    Parameters
    ----------
    text : str
        TOML.
    source : str
        What to call it in messages.

    Raises
    ------
    SiteFileError
        The text is no TOML, or a section is something else than a section.
    """

    def __init__(self, text: str, source: str) -> None:
        self.source = source
        self._text = text
        self._now: str | None = text
        self._changes: dict[str, Any] = {}
        try:
            self._base = _plain(tomlkit.parse(text))
        except (TOMLKitError, RecursionError, ValueError) as error:
            parse_site(text, source)  # says it in the file's own words, with the line
            raise SiteFileError(f"{source}: not TOML: {error}; expected a site file") from error
        if not _is_editable(self._base):
            parse_site(text, source)

    @property
    def text(self) -> str:
        """The text with all changes in it."""
        if self._now is None:
            self._now = edited(self._text, self._changes) if self._changes else self._text
        return self._now

    @property
    def links(self) -> int:
        """How many links there are."""
        return len(self._base.get("link", ()))

    def value(self, path: str) -> Any:
        """Return what stands at a key, as plain TOML data; None where it is not given."""
        if path in self._changes:
            return self._changes[path]
        section, index, name = parts(path)
        table = self._base.get(section, {})
        if index is not None:
            table = table[index] if index < len(table) else {}
        return table.get(name)

    def put(self, path: str, value: Any) -> None:
        """Set a key; None takes it out. What equals the text as it was is no change."""
        self._changes.pop(path, None)
        self._now = None
        before = self.value(path)
        if type(before) is not type(value) or typed(path, before) != typed(path, value):
            self._changes[path] = value

    def put_typed(self, path: str, text: str) -> None:
        """Set a key to what a person typed; nothing takes it out."""
        self.put(path, understood(path, text))

    def add_link(self) -> None:
        """Append a link without anything in it."""
        document = tomlkit.parse(self.text)
        link = tomlkit.table()
        link.trivia.indent = "\n"
        if "link" in document:
            links: Any = document["link"]
            links.append(link)
        else:
            document.append("link", AoT([link]))
        self._rebase(tomlkit.dumps(document))

    def remove_link(self, index: int) -> None:
        """Take a link out."""
        document = tomlkit.parse(self.text)
        links: Any = document["link"]
        del links[index]
        if not links:
            document.remove("link")
        self._rebase(tomlkit.dumps(document))

    def _rebase(self, text: str) -> None:
        self._text, self._now, self._changes = text, text, {}
        self._base = _plain(tomlkit.parse(text))

    def strays(self, section: str, index: int | None = None) -> list[str]:
        """Return the keys of a section that no site file has."""
        table = self._base.get(section, {})
        if index is not None:
            table = table[index]
        return [name for name in table if name not in sitekeys.names_in(section)]

    def given(self, section: str, index: int | None = None) -> int:
        """Return how many keys of a section are given."""
        names = [*sitekeys.names_in(section), *self.strays(section, index)]
        return sum(self.value(joined(section, index, name)) is not None for name in names)

    def faults(self) -> dict[str, str]:
        """Return what is wrong, by key, in the words of `parse_site`; the file as a whole is "".

        `parse_site` names one fault; to find the next, the key at fault is taken out, or filled where it is required.
        """
        found: dict[str, str] = {}
        text = edited(self.text, {}, sections=("site", "shaft", "run"))
        while len(found) < _MOST_FAULTS:
            try:
                parse_site(text, self.source)
            except SiteFileError as error:
                path = _whole(error.key)
                if path in found:
                    break
                found[path] = str(error).removeprefix(self.source).partition(": ")[2]
                try:
                    text = edited(text, {path: _filler(path)})
                except SiteFileError:
                    break
            else:
                break
        return found


def _is_editable(tree: Mapping[str, Any]) -> bool:
    links = tree.get("link", [])
    tables = [tree.get(name, {}) for name in sitekeys.SECTIONS if name != "link"]
    return isinstance(links, list) and all(isinstance(one, dict) for one in (*tables, *links))


def _whole(path: str) -> str:
    """Return the path of the key, for one that leads to an element of its value, or to the links' columns together."""
    if "." not in path:
        return path
    return joined(*parts(re.sub(r"^link\.", "link[0].", path)))


def _filler(path: str) -> Any:
    """Return a value that stands in for a required key while others are judged; None for one that can go."""
    section, _, name = parts(path)
    key = sitekeys.key(f"{section}.{name}")
    if key is None or not key.required:
        return None
    if key.choices:
        return key.choices[0]
    return "-" if shape(path) == "text" else 1.0


# Changing the text.


def edited(text: str, changes: Mapping[str, Any], *, sections: tuple[str, ...] = ()) -> str:
    """Return the text of a site file with some keys changed, and everything else as it was.

    Parameters
    ----------
    text : str
        TOML.
    changes : mapping
        By key path: a plain value, or None to take the key out.
    sections : tuple of str
        To be there in any case, even empty.

    Raises
    ------
    SiteFileError
        A path that leads nowhere.
    """
    document = tomlkit.parse(text + "\n" * (not text.endswith("\n")))
    for section in sections:
        if section not in document:
            document.append(section, tomlkit.table())
    for path, value in changes.items():
        _change(document, path, value)
    return tomlkit.dumps(document)


def _change(document: tomlkit.TOMLDocument, path: str, value: Any) -> None:
    section, index, name = parts(path)
    if not name:
        if section not in document:
            raise SiteFileError(f"{path} is not in the file", key=path)
        document.remove(section)
        return
    table: Any = document.get(section)
    if table is None and index is None:
        if value is None:
            return
        table = tomlkit.table()
        table.trivia.indent = "" if tomlkit.dumps(document).endswith("\n\n") else "\n"
        document.append(section, table)
        table = document[section]
    if index is not None:
        table = table[index] if isinstance(table, list) and index < len(table) else None
    if not isinstance(table, dict):
        raise SiteFileError(f"{path} cannot be reached", key=path)
    if value is None:
        table.pop(name, None)
    elif name in table:
        _replace(table, name, value)
    else:
        _add(table, name, value)


def _replace(table: Any, name: str, value: Any) -> None:
    old = table[name]
    if isinstance(old, Array) and isinstance(value, list):
        _fit(old, value)
    else:
        table[name] = _item(value)


def _fit(array: Any, rows: list[Any]) -> None:
    """Change an array element by element, so that the comments between its lines stay."""
    for place, (old, new) in enumerate(zip(list(array), rows, strict=False)):
        if isinstance(old, list) and isinstance(new, list):
            _fit(array[place], new)
        elif old != new:
            array[place] = _item(new)
    while len(array) > len(rows):
        del array[len(array) - 1]
    for new in rows[len(array) :]:
        array.append(_item(new))


def _add(table: Any, name: str, value: Any) -> None:
    """Put a new key behind the last one, ahead of the blank lines and comments that lead to the next section."""
    body = table.value.body if isinstance(table, Table) else []
    last = max((place for place, (key, _) in enumerate(body) if key is not None), default=-1) + 1
    while last < len(body) and isinstance(body[last][1], Comment):
        last += 1
    tail = body[last:] if all(isinstance(one, Whitespace | Comment) for _, one in body[last:]) else []
    if tail:
        del body[last:]
    table[name] = _item(value)
    body.extend(tail)


def _item(value: Any) -> Any:
    """Return a value as TOML writes it; the digits that a person typed stay as they were."""
    if isinstance(value, Typed):
        return tomlkit.value(value.digits)
    if isinstance(value, list):
        array = tomlkit.array()
        array.extend([_item(one) for one in value])
        return array
    return tomlkit.item(value)


def _plain(item: Any) -> Any:
    """Return what stands in the file as plain data; its numbers remember how they are written."""
    if isinstance(item, Mapping):
        return {str(name): _plain(one) for name, one in item.items()}
    if isinstance(item, list):
        return [_plain(one) for one in item]
    if isinstance(item, Float) and TOML_NUMBER.fullmatch(item.as_string()):
        return Typed(item.as_string())
    return item.unwrap() if isinstance(item, Item) else item


# Whole files and whole links.


def open_draft(path: Path) -> SiteDraft:
    """Read a site file to edit it, whether it has faults or not.

    Raises
    ------
    SiteFileError
        It cannot be read, or is no TOML.
    """
    try:
        return SiteDraft(decoded(path.read_bytes()), str(path))
    except (OSError, UnicodeDecodeError) as error:
        load_site(path)  # says it in the file's own words
        raise SiteFileError(f"{path}: {error}; expected a site file (TOML)") from error


def take_link(draft: SiteDraft, index: int, settings: LinkSettings) -> None:
    """Write the port and line form of `settings` into a link; what is as by default and not given stays out."""
    for name in ("url", "baud", "form", "columns", "delimiter", "checksum", "decimal"):
        value = getattr(settings, name)
        path = joined("link", index, name)
        key = key_of(path)
        default = key.default if key is not None else None
        if draft.value(path) is not None or value != default:
            draft.put(path, list(value) if isinstance(value, tuple) else value)


def changed_since(path: Path, text: str) -> str:
    """Return a warning if a file is no longer what it was when it was opened; empty if it is."""
    try:
        same = decoded(path.read_bytes()) == text
    except (OSError, UnicodeDecodeError):
        return "It cannot be read any more; it is written anew."
    return "" if same else "Another program changed it since it was opened: that change is lost."
