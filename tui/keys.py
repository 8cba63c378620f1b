"""Every key of the program in one table; bindings, the key line and the help page are made from it."""

from dataclasses import dataclass

from textual.binding import Binding


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

    def binding(self) -> Binding:
        """Return Textual's binding; its id lets a user's keymap move it."""
        return Binding(
            self.keys,
            self.action,
            self.name or self.help,
            show=False,
            id=f"{self.where}.{self.id}",
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
    Key("note", "n", "note", "n", "note", "Write a note into the record"),
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
    Key("quit", "q,ctrl+c", "leave", "q", "quit", "Leave; a recording is asked about first", "all"),
    Key("close", "escape,q", "close", "esc", "close", "Back to the picture", "page"),
    Key("sort", "o", "sort", "o", "order", "Order by depth, by residual, by time", "stations"),
    Key("filter", "f", "filter", "f", "filter", "Show all, or only what is over or undecided", "stations"),
)

REPLAY_ONLY = frozenset({"back", "on", "step", "slower", "faster", "next", "previous"})
LIVE_ONLY = frozenset({"note", "arm", "acknowledge", "acknowledge-all"})


def bindings(*places: str) -> list[Binding]:
    """Return the bindings of some places."""
    return [one.binding() for one in TABLE if one.where in places]


_FIRST = ("help", "quit", "pause")
"""Shown before all others: who knows the first two finds the rest."""


def usable(places: tuple[str, ...], *, replay: bool) -> list[Key]:
    """Return the keys of some places that mean something for a replay, or for a live run."""
    hidden = LIVE_ONLY if replay else REPLAY_ONLY
    return [one for one in TABLE if one.where in places and one.id not in hidden]


def line(places: tuple[str, ...], *, replay: bool) -> list[tuple[str, str]]:
    """Return key and name for the key line: help, quit and pause, then those of a replay, then the others."""
    named = [one for one in usable(places, replay=replay) if one.name]
    named.sort(key=lambda one: _FIRST.index(one.id) if one.id in _FIRST else 9 - (one.id in REPLAY_ONLY))
    return [(one.shown, one.name) for one in named]


def page(places: tuple[str, ...], *, replay: bool) -> list[tuple[str, str]]:
    """Return key and help for the help page; the second key of a pair is told with the first."""
    return [(one.shown, one.help) for one in usable(places, replay=replay) if one.shown]
