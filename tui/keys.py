"""Every key of the program in one table; bindings, the key line and the help page are made from it."""

from collections.abc import Mapping
from dataclasses import dataclass

from textual.binding import Binding
from textual.keys import Keys as NamedKeys
from textual.keys import _character_to_key


@dataclass(frozen=True, slots=True)
class Key:
    """One thing that a key does."""

    id: str
    keys: str
    action: str
    shown: str
    """How the key is written for a reader."""
    name: str
    """One or two words for the key line; empty keeps it to the help page."""
    help: str
    where: str = "watch"

    @property
    def full_id(self) -> str:
        """How settings name it."""
        return f"{self.where}.{self.id}"

    def binding(self) -> Binding:
        """Return Textual's binding; its id lets a user's keymap move it."""
        return Binding(
            self.keys,
            self.action,
            self.name or self.help,
            show=False,
            id=self.full_id,
            tooltip=self.help,
        )


TABLE = (
    Key("acknowledge", "a", "acknowledge", "a", "seen", "Acknowledge the alarm that is shown first"),
    Key("acknowledge-all", "A", "acknowledge_all", "A", "", "Acknowledge every alarm"),
    Key(
        "pause",
        "space",
        "pause",
        "space",
        "pause",
        "Hold the picture while recording goes on; stop or play a replay",
    ),
    Key("up", "up,k", "look(-1)", "↑ ↓", "look back", "Look back, station by station, up or down the shaft"),
    Key("down", "down", "look(1)", "", "", "Look back station by station: down"),
    Key("page-up", "pageup", "look(-10)", "PgUp PgDn", "", "Ten stations up or down"),
    Key("page-down", "pagedown", "look(10)", "", "", "Ten stations down"),
    Key("follow", "f,end", "follow", "f", "follow", "Follow the newest reading again"),
    Key("closer", "plus,equals_sign", "zoom(0.5)", "+ -", "zoom", "Half or twice as much depth in view"),
    Key("wider", "minus", "zoom(2)", "", "", "Twice as much depth in view"),
    Key("whole", "0", "whole", "0", "", "The whole shaft in view"),
    Key("layout", "v", "layout", "v", "view", "Change the view: all, depth, plan, time"),
    Key("residual", "r", "residual", "r", "residual", "Draw the residual, or measured and expected"),
    Key("wall", "w", "wall", "w", "wall", "Plan at the scale of the wall, or close by"),
    Key("extras", "b", "extras", "b", "", "Show or hide where a bob would hang and a dropped body would be"),
    Key("stations", "s", "stations", "s", "stations", "The table of stations"),
    Key("alarms", "l", "alarms", "l", "alarms", "The list of alarms with its history; shelve one"),
    Key("steer", "d", "steer", "d", "steer", "Direction and distance in large figures, with a sound"),
    Key("passes", "c", "passes", "c", "passes", "Compare the passes of this run by depth"),
    Key("whatif", "i", "what_if", "i", "what if", "Replay: other settings, and what follows from them"),
    Key("who", "u", "who", "u", "", "Your name, as it goes into the record"),
    Key("note", "n", "note", "n", "note", "Write a note into the record"),
    Key("mark", "x", "mark", "x", "", "Drop run: type in where a body landed"),
    Key("arm", "g", "arm", "g", "", "Drop run: declare the shaft clear and arm"),
    Key("jump", "j", "jump", "j", "jump", "Jump to a depth; in a replay also to a time"),
    Key("back", "left", "skip(-10)", "← →", "10 s", "Replay: ten seconds back or on"),
    Key("on", "right", "skip(10)", "", "", "Replay: ten seconds on"),
    Key("step", "full_stop", "step", ".", "step", "Replay: one block of lines further"),
    Key("slower", "less_than_sign,comma", "speed(0.5)", "< >", "speed", "Replay: half or twice the speed"),
    Key("faster", "greater_than_sign", "speed(2)", "", "", "Replay: twice the speed"),
    Key("next", "e", "event(1)", "e E", "event", "Replay: next or previous event"),
    Key("previous", "E", "event(-1)", "", "", "Replay: previous event"),
    Key("theme", "t", "theme", "t", "", "Colours: dark, light, none", "all"),
    Key("mute", "m", "mute", "m", "", "Sound of new alarms on or off", "all"),
    Key("help", "question_mark,f1,h", "keys", "?", "help", "This page", "all"),
    Key("settings", "f2", "settings", "F2", "", "Settings: units, glyphs, sound, colours", "all"),
    Key("quit", "q,ctrl+c", "leave", "q", "quit", "Leave; a recording is asked about first", "all"),
    Key("close", "escape,q", "close", "esc", "close", "Back to the picture", "page"),
    Key("seen", "a", "seen", "a", "seen", "Acknowledge the alarm under the cursor", "alarms"),
    Key("shelve", "z", "shelve", "z", "shelve", "Put it aside for some minutes, with a reason", "alarms"),
    Key("other", "right", "other(1)", "← →", "other pair", "Another pair of passes", "compare"),
    Key("other-back", "left", "other(-1)", "", "", "The pair of passes before", "compare"),
    Key("sort", "o", "sort", "o", "order", "Order by depth, or by how much moved", "compare"),
    Key("filter", "f", "filter", "f", "filter", "All depths, or only where it moved", "compare"),
    Key("turn", "v", "turn", "v", "plot", "Table or plot, where both do not fit", "compare"),
    Key("planner", "p", "planner", "p", "", "Drop run: plan the release: wall, spread, best point"),
    Key("sort", "o", "sort", "o", "order", "Order by depth, by residual, by time", "stations"),
    Key("filter", "f", "filter", "f", "filter", "Show all, or only what is over or undecided", "stations"),
    Key("site", "o", "other_site", "o", "other file", "Another site file instead", "whatif"),
    *(
        key
        for where in ("explorer", "planner", "whatif")
        for key in (
            Key("up", "up", "move(-1)", "↑ ↓", "input", "The input above or below", where),
            Key("down", "down", "move(1)", "", "", "The input below", where),
            Key(
                "less",
                "left",
                "step(-1)",
                "← →",
                "less, more",
                "A step less or more, or another choice",
                where,
            ),
            Key("more", "right", "step(1)", "", "", "A step more", where),
            Key("restore", "r", "restore", "r", "as in file", "The input in view as in the site file", where),
            Key("restore-all", "R", "restore_all", "R", "", "All inputs as in the site file", where),
        )
    ),
    Key("keep", "k", "keep", "k", "keep as B", "Keep this prediction as B, to compare with", "explorer"),
    Key("swap", "x", "swap", "x", "", "Change over A and B", "explorer"),
    Key("alone", "n", "alone", "n", "", "Forget B", "explorer"),
    Key("compare", "v", "compare", "v", "table", "Table of: expected, hanging bob, dropped body", "explorer"),
    Key("depths", "d", "depths", "d", "depths", "Depths of the table", "explorer"),
    Key("extras", "b", "extras", "b", "", "Show or hide the bob's and the dropped body's curve", "explorer"),
    Key("budget", "u", "budget", "u", "budget", "Where the uncertainty comes from", "explorer"),
    Key("plan", "p", "plan", "p", "drop", "Plan a drop with these inputs", "explorer"),
    Key(
        "best",
        "g",
        "best",
        "g",
        "best point",
        "Release where the body keeps farthest from the wall",
        "planner",
    ),
    Key("scope", "w", "scope", "w", "wall", "Plan at the scale of the wall, or close by", "planner"),
    Key("sort", "o", "sort", "o", "order", "Order by date, site, verdict, depth, state", "shelf"),
    Key("filter", "f", "filter", "f", "filter", "All, over, undecided, or not intact", "shelf"),
    Key("pick", "c", "pick", "c", "compare", "Compare: this run, then another", "shelf"),
    Key("report", "r", "report", "r", "report", "Write the report to a new file", "shelf"),
    Key("export", "x", "export", "x", "export", "Write a CSV, JSON or LAS file", "shelf"),
    Key("edit", "e", "edit", "e", "edit", "Edit the site file under the cursor", "start"),
    Key("up", "up", "move(-1)", "↑ ↓", "key", "The key above or below", "form"),
    Key("down", "down", "move(1)", "", "", "The key below", "form"),
    Key(
        "before",
        "pageup,shift+tab",
        "page(-1)",
        "PgUp PgDn",
        "section",
        "The section before or after",
        "form",
    ),
    Key("after", "pagedown,tab", "page(1)", "", "", "The section after", "form"),
    Key("mend", "f7", "next_fault", "F7", "to mend", "Go to the next key that is wrong or missing", "form"),
    Key("save", "ctrl+s", "save", "^S", "save", "Save; asks before it writes over a file", "form"),
    Key(
        "port", "f4", "port", "F4", "try port", "Listen to the link's port and have its form proposed", "form"
    ),
    Key("add", "f5", "add_link", "F5", "", "Add a link", "form"),
    Key("remove", "f8", "remove_link", "F8", "", "Take the link in view out", "form"),
    Key("save-as", "f9", "save_as", "F9", "", "Save under another name", "form"),
    Key(
        "close", "escape", "close", "esc", "leave", "Leave the form; asks when something is not saved", "form"
    ),
    Key("speed", "plus,equals_sign", "speed(1)", "+ -", "speed", "Another serial speed", "trial"),
    Key("speed-down", "minus", "speed(-1)", "", "", "A lower serial speed", "trial"),
    Key("up", "up", "move(-1)", "↑ ↓", "choose", "The port or the speed above or below", "trial"),
    Key("down", "down", "move(1)", "", "", "The port or the speed below", "trial"),
    Key("use", "u", "use", "u", "form", "Read the lines by the form given, or by the one proposed", "trial"),
    Key("hold", "space", "hold", "space", "hold", "Hold the lines while more come", "trial"),
    Key("take", "o", "take", "o", "take over", "Take the proposed form over into a site file", "trial"),
    Key("close", "escape", "close", "esc", "let go", "Let go of the port; again: leave", "trial"),
)

REPLAY_ONLY = frozenset({"back", "on", "step", "slower", "faster", "next", "previous", "whatif"})
LIVE_ONLY = frozenset({"note", "arm", "acknowledge", "acknowledge-all", "who", "seen", "shelve"})


def bindings(*places: str) -> list[Binding]:
    """Return the bindings of some places."""
    return [one.binding() for one in TABLE if one.where in places]


_FIRST = ("help", "quit", "pause")
"""Shown before all others: who knows the first two finds the rest."""


def usable(places: tuple[str, ...], *, replay: bool) -> list[Key]:
    """Return the keys of some places that mean something for a replay, or for a live run."""
    hidden = LIVE_ONLY if replay else REPLAY_ONLY
    return [one for one in TABLE if one.where in places and one.id not in hidden]


def line(
    places: tuple[str, ...], *, replay: bool, changes: Mapping[str, str] | None = None
) -> list[tuple[str, str]]:
    """Return key and name for the key line: help, quit and pause, then those of a replay, then the others.

    Parameters
    ----------
    places : tuple of str
        Where the keys hold.
    replay : bool
        Leave out what a record does not do, or what only a record does.
    changes : mapping, optional
        As `moved` returns them.
    """
    named = [one for one in usable(places, replay=replay) if one.name]
    named.sort(key=lambda one: _FIRST.index(one.id) if one.id in _FIRST else 9 - (one.id in REPLAY_ONLY))
    return [(shown(one, changes), one.name) for one in named]


def page(
    places: tuple[str, ...], *, replay: bool, changes: Mapping[str, str] | None = None
) -> list[tuple[str, str]]:
    """Return key and help for the help page; the second key of a pair is told with the first, unless it was moved."""
    told = [(shown(one, changes), one.help) for one in usable(places, replay=replay)]
    return [(key, what) for key, what in told if key]


# Keys that a person moved.

_TOGETHER = (
    ("watch", "all"),
    ("stations", "page", "all"),
    ("alarms", "page", "all"),
    ("compare", "page", "all"),
    ("shelf", "page", "all"),
    ("explorer", "page", "all"),
    ("planner", "page", "all"),
    ("whatif", "page", "all"),
    ("start", "all"),
    ("form", "all"),
    ("trial", "all"),
)
"""Places whose keys hold at the same time."""
_STAYS = {"all.quit": "ctrl+c", "page.close": "escape"}
"""Keys that no setting takes away: there is always a way out."""
TYPING = (*"0123456789", "full_stop", "comma", "minus", "backspace", "delete")
"""Keys that type a number where inputs are changed."""
_SHOWN = {"space": "space", "escape": "esc", "pageup": "PgUp", "pagedown": "PgDn"}


def shown(one: Key, changes: Mapping[str, str] | None) -> str:
    """Return how a key is written for a reader, after what was moved."""
    moved_to = (changes or {}).get(one.full_id, "").split(",", maxsplit=1)[0]
    if not moved_to:
        return one.shown
    letter = next((chr(code) for code in range(33, 127) if _character_to_key(chr(code)) == moved_to), "")
    return letter or _SHOWN.get(moved_to, moved_to)


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
    table = {one.full_id: one for one in TABLE}
    holds: dict[str, str] = {}
    refused = []
    for name, key in wanted.items():
        named = _named(key)
        if name not in table:
            refused.append(f"keys: there is no {name!r}; the names stand in the settings screen")
        elif named is None:
            refused.append(f"keys: {name} is {key!r}; expected one key such as N, f5 or ctrl+n")
        else:
            holds[name] = ",".join(filter(None, (named, _STAYS.get(name))))
    for name in list(holds):
        other = _clash(table[name], holds, table)
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


def _clash(one: Key, holds: Mapping[str, str], table: Mapping[str, Key]) -> Key | None:
    """Return another key of the same places that is the same after all moves."""
    mine = set(holds[one.full_id].split(","))
    if one.where in {"explorer", "planner", "whatif", "all"} and mine & set(TYPING):
        return next(key for key in table.values() if key.full_id == "explorer.up")
    beside = {place for places in _TOGETHER if one.where in places for place in places}
    for other in table.values():
        if other is one or other.where not in beside:
            continue
        if mine & set(holds.get(other.full_id, other.keys).split(",")):
            return other
    return None
