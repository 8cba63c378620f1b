"""How keys are bound, written for a reader and moved by one; which there are stands in `keytable`."""

from collections.abc import Mapping
from dataclasses import dataclass, field
from types import MappingProxyType

from textual.binding import Binding
from textual.keys import Keys as NamedKeys
from textual.keys import _character_to_key

from eastfall.tui.keytable import KINDS, LIVE_ONLY, REPLAY_ONLY, STAYS, TABLE, TOGETHER, TYPING, Key

_NAMED = {one.full_id: one for one in TABLE}
_MATES = frozenset(f"{one.where}.{one.mate}" for one in TABLE if one.mate)
_WRITTEN = {
    "up": "↑",
    "down": "↓",
    "left": "←",
    "right": "→",
    "escape": "esc",
    "pageup": "PgUp",
    "pagedown": "PgDn",
    "home": "Home",
    "end": "End",
    "space": "space",
}
_FIRST = ("help", "quit", "pause", "open", "use", "close")
"""Shown before all others: who knows the first two finds the rest, and on a page how to go on and back."""


def bindings(*places: str) -> list[Binding]:
    """Return Textual's bindings of some places; their ids let a user's keymap move them."""
    return [_bound(one, one.action) for one in TABLE if one.where in places and one.action]


def again(name: str, action: str) -> Binding:
    """Return a binding of a key, named "place.id", to another action: what opened a page closes it again."""
    return _bound(_NAMED[name], action)


def _bound(one: Key, action: str) -> Binding:
    return Binding(one.keys, action, one.name or one.help, show=False, id=one.full_id, tooltip=one.help)


def written(key: str) -> str:
    """Return how a key, by Textual's name of it, is written for a reader."""
    if key in _WRITTEN:
        return _WRITTEN[key]
    letter = next((chr(code) for code in range(33, 127) if _character_to_key(chr(code)) == key), "")
    if letter:
        return letter
    held, _, base = key.rpartition("+")
    if held == "ctrl":
        return f"^{base.upper()}"
    return key.upper() if key[:1] == "f" and key[1:].isdigit() else key


@dataclass(frozen=True, slots=True)
class Keymap:
    """The table after what a person moved: what every line and sentence that mentions a key asks.

    Parameters
    ----------
    changes : mapping
        As `moved` returns them.
    """

    changes: Mapping[str, str] = field(default_factory=lambda: MappingProxyType({}))

    def __getitem__(self, name: str) -> str:
        """Return how the key named "place.id" is written."""
        return written(self.changes.get(name, _NAMED[name].keys).split(",", maxsplit=1)[0])

    def told(self, one: Key) -> str:
        """Return how a key is written, and its mate behind it."""
        mate = f" {self[f'{one.where}.{one.mate}']}" if one.mate else ""
        return self[one.full_id] + mate

    def line(
        self, *places: str, replay: bool = False, kind: str = "guided", without: tuple[str, ...] = ()
    ) -> list[tuple[str, str]]:
        """Return key and name for the key line: help, quit and pause, then those of a replay, then the others.

        Parameters
        ----------
        places : str
            Where the keys hold.
        replay : bool
            Leave out what means nothing for a record, or for a live run.
        kind : str
            Leave out what this kind of run does not have.
        without : tuple of str
            Ids that mean nothing just now.
        """
        named = [
            one
            for one in usable(places, replay=replay, kind=kind)
            if one.name and one.id not in without and one.full_id not in _MATES
        ]
        named.sort(key=lambda one: _FIRST.index(one.id) if one.id in _FIRST else 9 - (one.id in REPLAY_ONLY))
        return [(self.told(one), one.name) for one in named]

    def page(self, *places: str, replay: bool = False, kind: str = "guided") -> list[tuple[str, str]]:
        """Return key and help for the help page; the second key of a pair is told with the first."""
        shown = usable(places, replay=replay, kind=kind)
        return [(self.told(one), one.help) for one in shown if one.help and one.full_id not in _MATES]

    def names(self) -> list[tuple[str, str, str]]:
        """Return name, key and help of every key that a setting can move."""
        return [(one.full_id, self[one.full_id], one.help) for one in TABLE if not one.fixed]


def keymap_of(app: object) -> Keymap:
    """Return the keymap of an application; the table as it was made for any other."""
    found: Keymap = getattr(app, "keys_now", AS_MADE)
    return found


AS_MADE = Keymap()


def usable(places: tuple[str, ...], *, replay: bool, kind: str) -> list[Key]:
    """Return the keys of some places that mean something for a replay or a live run of that kind.

    On a page the key that quits is one of those that close.
    """
    hidden = (LIVE_ONLY if replay else REPLAY_ONLY) | {
        name for name, kinds in KINDS.items() if kind not in kinds
    }
    hidden |= {"quit"} if "page" in places else frozenset()
    return [one for one in TABLE if one.where in places and one.id not in hidden]


# Keys that a person moved.


def moved(wanted: Mapping[str, str]) -> tuple[dict[str, str], list[str]]:
    """Check which keys a person wants elsewhere.

    Parameters
    ----------
    wanted : mapping
        From "place.id" of the table to one key: a letter or sign, or a name such as "f5" or "ctrl+n".

    Returns
    -------
    tuple
        What holds, from the same names to Textual's names of keys; and a line for each wish that does not.
    """
    holds: dict[str, str] = {}
    refused = []
    for name, key in wanted.items():
        named = _named(key)
        if name not in _NAMED:
            refused.append(f"keys: there is no {name!r}; the names stand in the settings screen, under keys")
        elif _NAMED[name].fixed:
            refused.append(f"keys: {name} stays where it is; it cannot be moved")
        elif named is None:
            refused.append(f"keys: {name} is {key!r}; expected one key such as N, f5 or ctrl+n")
        else:
            holds[name] = ",".join(filter(None, (named, STAYS.get(name))))
    for name in list(holds):
        other = _clash(_NAMED[name], holds)
        if other is not None:
            refused.append(f"keys: {name} stays as it is: {wanted[name]} is already {other.full_id}")
            del holds[name]
    return holds, refused


def _named(key: str) -> str | None:
    """Return Textual's name of a key; None for what is no single key."""
    if len(key) == 1 and key.isprintable():
        return _character_to_key(key)
    plain = key.lower()
    base = plain.removeprefix("ctrl+").removeprefix("shift+")
    known = {one.value for one in NamedKeys if not one.value.startswith("<")}
    modified = base != plain and len(base) == 1 and base.isalnum()
    return plain if plain in known or modified else None


def _clash(one: Key, holds: Mapping[str, str]) -> Key | None:
    """Return another key of the same places that is the same after all moves."""
    mine = set(holds[one.full_id].split(","))
    if one.where in {"explorer", "planner", "whatif", "all"} and mine & set(TYPING):
        return _NAMED["explorer.up"]
    beside = {place for places in TOGETHER if one.where in places for place in places}
    for other in TABLE:
        if other is one or other.where not in beside:
            continue
        if mine & set(holds.get(other.full_id, other.keys).split(",")):
            return other
    return None
