"""Every key of the program in one table; bindings, the key line and the help page are made from it."""

from dataclasses import dataclass

from textual.binding import Binding


@dataclass(frozen=True, slots=True, kw_only=True)
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
    priority: bool = False

    def binding(self) -> Binding:
        """Return Textual's binding; its id lets a user's keymap move it."""
        return Binding(
            self.keys,
            self.action,
            self.name or self.help,
            show=False,
            id=f"{self.where}.{self.id}",
            tooltip=self.help,
            priority=self.priority,
        )


def _key(id: str, keys: str, action: str, shown: str, name: str, help: str, where: str = "watch") -> Key:  # noqa: A002
    return Key(id=id, keys=keys, action=action, shown=shown, name=name, help=help, where=where)


TABLE = (
    _key("acknowledge", "a", "acknowledge", "a", "acknowledge", "Acknowledge the alarm shown first"),
    _key("acknowledge-all", "A", "acknowledge_all", "A", "", "Acknowledge every alarm"),
    _key(
        "pause",
        "space",
        "pause",
        "space",
        "pause",
        "Hold the picture; recording goes on. Replay: stop or play",
    ),
    _key("up", "up,k", "look(-1)", "↑ ↓", "look back", "Look back station by station: up"),
    _key("down", "down", "look(1)", "↓", "", "Look back station by station: down"),
    _key("page-up", "pageup", "look(-10)", "PgUp PgDn", "", "Ten stations up or down"),
    _key("page-down", "pagedown", "look(10)", "PgDn", "", "Ten stations down"),
    _key("follow", "f,end", "follow", "f", "follow", "Follow the newest reading again"),
    _key("closer", "plus,equals_sign", "zoom(0.5)", "+ -", "zoom", "Half as much depth in view"),
    _key("wider", "minus", "zoom(2)", "-", "", "Twice as much depth in view"),
    _key("whole", "0", "whole", "0", "", "The whole shaft in view"),
    _key("layout", "v", "layout", "v", "view", "Change the view: all, depth, plan, time"),
    _key("residual", "r", "residual", "r", "residual", "Draw the residual, or measured and expected"),
    _key("wall", "w", "wall", "w", "wall", "Plan at the scale of the wall, or close by"),
    _key("extras", "b", "extras", "b", "", "Show or hide where a bob would hang and a dropped body would be"),
    _key("stations", "s", "stations", "s", "stations", "The table of stations"),
    _key("note", "n", "note", "n", "note", "Write a note into the record"),
    _key("arm", "g", "arm", "g", "", "Drop run: declare the shaft clear and arm"),
    _key("jump", "j", "jump", "j", "jump", "Jump to a depth; in a replay also to a time"),
    _key("back", "left", "skip(-10)", "← →", "", "Replay: ten seconds back or on"),
    _key("on", "right", "skip(10)", "→", "", "Replay: ten seconds on"),
    _key("step", "full_stop", "step", ".", "", "Replay: one block of lines further"),
    _key("slower", "less_than_sign,comma", "speed(0.5)", "< >", "", "Replay: half or twice the speed"),
    _key("faster", "greater_than_sign", "speed(2)", ">", "", "Replay: twice the speed"),
    _key("next", "e", "event(1)", "e E", "", "Replay: next or previous event"),
    _key("previous", "E", "event(-1)", "E", "", "Replay: previous event"),
    _key("theme", "t", "theme", "t", "", "Colours: dark, light, none", "all"),
    _key("mute", "m", "mute", "m", "", "Sound of new alarms on or off", "all"),
    _key("help", "question_mark,f1,h", "keys", "?", "help", "This page", "all"),
    _key("quit", "q,ctrl+c", "leave", "q", "quit", "Leave; a recording is asked about first", "all"),
    _key("close", "escape,q", "close", "esc", "close", "Back to the picture", "page"),
    _key("sort", "o", "sort", "o", "order", "Order by depth, by residual, by time", "stations"),
    _key("filter", "f", "filter", "f", "filter", "Show all, or only what is over or undecided", "stations"),
)

REPLAY_ONLY = frozenset({"back", "on", "step", "slower", "faster", "next", "previous"})
LIVE_ONLY = frozenset({"note", "arm", "acknowledge", "acknowledge-all"})


def bindings(*places: str) -> list[Binding]:
    """Return the bindings of some places."""
    return [one.binding() for one in TABLE if one.where in places]


def line(places: tuple[str, ...], replay: bool) -> list[tuple[str, str]]:
    """Return key and name for the key line, in the order of the table."""
    hidden = LIVE_ONLY if replay else REPLAY_ONLY
    return [
        (one.shown, one.name) for one in TABLE if one.where in places and one.name and one.id not in hidden
    ]
