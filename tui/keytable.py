"""Every key of the program in one table: what it does, where, and in what words; how keys are written is `keys`."""

from dataclasses import dataclass


@dataclass(frozen=True, slots=True)
class Key:
    """One thing that a key does."""

    id: str
    keys: str
    """Textual's names, the one that is told first."""
    action: str
    """Empty where a part of the library acts on it: then it is only told."""
    name: str
    """One or two words for the key line; empty keeps it to the help page."""
    help: str
    where: str = "watch"
    mate: str = ""
    """The other key of a pair, which is told along with it: the id of one in the same place."""
    fixed: bool = False
    """No setting moves it: it is what is printed on the key, or the way out."""

    @property
    def full_id(self) -> str:
        """How settings name it."""
        return f"{self.where}.{self.id}"


def _fixed(id: str, keys: str, action: str, name: str, help: str, where: str, mate: str = "") -> Key:  # noqa: A002 (as the fields)
    return Key(id, keys, action, name, help, where, mate, fixed=True)


_WATCH = (
    Key("acknowledge", "a", "acknowledge", "seen", "Acknowledge the alarm that is shown first"),
    Key("acknowledge-all", "A", "acknowledge_all", "", "Acknowledge every alarm"),
    Key(
        "pause",
        "space",
        "pause",
        "pause",
        "Hold the picture while recording goes on; stop or play a replay",
    ),
    Key("mark", "x", "mark", "mark", "Drop or hung run: type in where a body landed or a bob hangs"),
    Key("arm", "g", "arm", "", "Drop run: declare the shaft clear and arm"),
    Key("planner", "p", "planner", "plan", "Drop run: plan the release: wall, spread, best point"),
    Key("steer", "d", "steer", "steer", "Direction and distance in large figures, with a sound"),
    Key("stations", "s", "stations", "stations", "The table of stations"),
    Key("alarms", "l", "alarms", "alarms", "The list of alarms, each whole, with its history; shelve one"),
    Key("layout", "v", "layout", "view", "Change the view: all, depth, plan, time"),
    Key(
        "up",
        "up,k",
        "look(-1)",
        "look back",
        "Look back, station by station, up or down the shaft",
        mate="down",
    ),
    Key("down", "down", "look(1)", "", "Look back, station by station: down"),
    Key("page-up", "pageup", "look(-10)", "", "Ten stations up or down", mate="page-down"),
    Key("page-down", "pagedown", "look(10)", "", "Ten stations down"),
    Key("follow", "f,end", "follow", "follow", "Follow the newest reading again"),
    _fixed("now", "escape", "now", "", "Back from looking back, or from a held picture", "watch"),
    Key(
        "closer", "plus,equals_sign", "zoom(0.5)", "zoom", "Half or twice as much depth in view", mate="wider"
    ),
    Key("wider", "minus", "zoom(2)", "", "Twice as much depth in view"),
    Key("whole", "0", "whole", "", "The whole shaft in view"),
    Key("residual", "r", "residual", "residual", "Draw the residual, or measured and expected"),
    Key("wall", "w", "wall", "wall", "Plan at the scale of the wall, or close by"),
    Key("extras", "b", "extras", "", "Show or hide where a bob would hang and a dropped body would be"),
    Key("passes", "c", "passes", "passes", "Compare the passes of this run by depth"),
    Key("whatif", "i", "what_if", "what if", "Replay: other settings, and what follows from them"),
    Key("who", "u", "who", "", "Your name, as it goes into the record"),
    Key("note", "n", "note", "note", "Write a note into the record"),
    Key("jump", "j", "jump", "jump", "Jump to a depth; in a replay also to a time"),
    Key("back", "left", "skip(-10)", "10 s", "Replay: ten seconds back or on", mate="on"),
    Key("on", "right", "skip(10)", "", "Replay: ten seconds on"),
    Key("step", "full_stop", "step", "step", "Replay: one block of lines further"),
    Key(
        "slower",
        "less_than_sign,comma",
        "speed(0.5)",
        "speed",
        "Replay: half or twice the speed",
        mate="faster",
    ),
    Key("faster", "greater_than_sign", "speed(2)", "", "Replay: twice the speed"),
    Key("next", "e", "event(1)", "event", "Replay: next or previous event", mate="previous"),
    Key("previous", "E", "event(-1)", "", "Replay: previous event"),
)
_EVERYWHERE = (
    Key("theme", "t", "theme", "", "Colours: dark, light, none", "all"),
    Key("mute", "m", "mute", "", "Sound of new alarms on or off", "all"),
    Key("help", "question_mark,f1,h", "keys", "help", "This page", "all"),
    Key("settings", "f2", "settings", "", "Settings: units, glyphs, sound, colours", "all"),
    Key("quit", "q,ctrl+c", "leave", "quit", "Leave; a recording is asked about first", "all"),
    Key("close", "escape,q", "close", "back", "Back to the screen before", "page"),
)
_LISTS = (
    _fixed("up", "up,k", "move(-1)", "", "The line above or below", "list", mate="down"),
    _fixed("down", "down", "move(1)", "", "", "list"),
    _fixed("page-up", "pageup", "move(-20)", "", "Twenty lines up or down", "list", mate="page-down"),
    _fixed("page-down", "pagedown", "move(20)", "", "", "list"),
    _fixed("first", "home", "move(-1000000000)", "", "The first or the last line", "list", mate="last"),
    _fixed("last", "end", "move(1000000000)", "", "", "list"),
    _fixed("open", "enter", "open", "", "", "list"),
    _fixed(
        "open",
        "enter",
        "",
        "open",
        "Open the station under the cursor: its answer and its budget",
        "stations",
    ),
    Key("sort", "o", "sort", "order", "Order by depth, by residual, by time", "stations"),
    Key("filter", "f", "filter", "filter", "Show all, or only what is over or undecided", "stations"),
    _fixed("look", "enter", "look", "look at it", "Look at it in the picture", "station"),
    Key("seen", "a", "seen", "seen", "Acknowledge the alarm under the cursor", "alarms"),
    Key("shelve", "z", "shelve", "shelve", "Put it aside for some minutes, with a reason", "alarms"),
    _fixed("open", "enter", "", "replay", "Replay the run under the cursor", "shelf"),
    Key("sort", "o", "sort", "order", "Order by date, site, verdict, depth, state", "shelf"),
    Key("filter", "f", "filter", "filter", "All, over, undecided, or not intact", "shelf"),
    Key("pick", "c", "pick", "compare", "Compare: this run, then another", "shelf"),
    Key("report", "r", "report", "report", "Write the report to a new file", "shelf"),
    Key("export", "x", "export", "export", "Write a CSV, JSON or LAS file", "shelf"),
    Key("other", "right", "other(1)", "other pair", "Another pair of passes", "compare", mate="other-back"),
    Key("other-back", "left", "other(-1)", "", "The pair of passes before", "compare"),
    Key("sort", "o", "sort", "order", "Order by depth, or by how much moved", "compare"),
    Key("filter", "f", "filter", "filter", "All depths, or only where it moved", "compare"),
    Key("turn", "v", "turn", "plot or table", "Table or plot, where both do not fit", "compare"),
    _fixed("up", "up", "", "move", "The setting above or below", "settings", mate="down"),
    _fixed("down", "down", "", "", "", "settings"),
    _fixed("less", "left", "turn(-1)", "change", "Change the setting", "settings", mate="more"),
    _fixed("more", "right", "turn(1)", "", "", "settings"),
    _fixed("open", "enter", "", "change", "Change the setting, or type it", "settings"),
)
_STEER = (Key("seen", "a", "seen", "seen", "Acknowledge the alarm that is shown", "steer"),)
_INPUTS = tuple(
    key
    for where in ("explorer", "planner", "whatif")
    for key in (
        Key("up", "up", "move(-1)", "input", "The input above or below", where, mate="down"),
        Key("down", "down", "move(1)", "", "The input below", where),
        Key(
            "less",
            "left",
            "step(-1)",
            "less, more",
            "A step less or more, or another choice",
            where,
            mate="more",
        ),
        Key("more", "right", "step(1)", "", "A step more", where),
        Key("restore", "r", "restore", "as in file", "The input in view as in the site file", where),
        Key("restore-all", "R", "restore_all", "", "All inputs as in the site file", where),
    )
)
_PREDICTIONS = (
    Key("keep", "k", "keep", "keep as B", "Keep this prediction as B, to compare with", "explorer"),
    Key("swap", "x", "swap", "", "Change over A and B", "explorer"),
    Key("alone", "n", "alone", "", "Forget B", "explorer"),
    Key("compare", "v", "compare", "table", "Table of: expected, hanging bob, dropped body", "explorer"),
    Key("depths", "d", "depths", "depths", "Depths of the table", "explorer"),
    Key("extras", "b", "extras", "", "Show or hide the bob's and the dropped body's curve", "explorer"),
    Key("budget", "u", "budget", "budget", "Where the uncertainty comes from", "explorer"),
    Key("plan", "p", "plan", "drop", "Plan a drop with these inputs", "explorer"),
    Key("best", "g", "best", "best point", "Release where the body keeps farthest from the wall", "planner"),
    Key("scope", "w", "scope", "wall", "Plan at the scale of the wall, or close by", "planner"),
    _fixed("use", "enter", "use", "play with these", "Play the record on with these settings", "whatif"),
    Key("site", "o", "other_site", "other file", "Another site file instead", "whatif"),
)
_BEFORE_A_RUN = (
    _fixed("up", "up", "", "move", "The line above or below", "start", mate="down"),
    _fixed("down", "down", "", "", "", "start"),
    _fixed("open", "enter", "", "choose", "Do what the line under the cursor says", "start"),
    Key("edit", "e", "edit", "edit", "Edit the site file under the cursor", "start"),
    _fixed("help", "f1", "", "help", "This page", "form"),
    Key("up", "up", "move(-1)", "key", "The key above or below", "form", mate="down"),
    Key("down", "down", "move(1)", "", "The key below", "form"),
    Key(
        "before",
        "pageup,shift+tab",
        "page(-1)",
        "section",
        "The section before or after",
        "form",
        mate="after",
    ),
    Key("after", "pagedown,tab", "page(1)", "", "The section after", "form"),
    _fixed("less", "left", "", "", "Where there is a choice: the one before or after", "form", mate="more"),
    _fixed("more", "right", "", "", "", "form"),
    _fixed("open", "enter", "", "", "Open the rows of a table, add a link, or take the next key", "form"),
    Key("mend", "f7", "next_fault", "to mend", "Go to the next key that is wrong or missing", "form"),
    Key("save", "f3,ctrl+s", "save", "save", "Save; asks before it writes over a file", "form"),
    Key("port", "f4", "port", "try port", "Listen to the link's port and have its form proposed", "form"),
    Key("add", "f5", "add_link", "", "Add a link", "form"),
    Key("remove", "f8", "remove_link", "", "Take the link in view out; asks first", "form"),
    Key("save-as", "f9", "save_as", "", "Save under another name", "form"),
    Key("close", "escape", "close", "back", "Leave the form; asks when something is not saved", "form"),
    _fixed("help", "f1", "", "help", "This page", "trial"),
    Key("speed", "plus,equals_sign", "speed(1)", "speed", "Another serial speed", "trial", mate="speed-down"),
    Key("speed-down", "minus", "speed(-1)", "", "A lower serial speed", "trial"),
    Key("up", "up", "move(-1)", "choose", "The port or the speed above or below", "trial", mate="down"),
    Key("down", "down", "move(1)", "", "The port or the speed below", "trial"),
    _fixed("other", "tab", "", "port or speed", "Type the port, or its speed", "trial"),
    _fixed("listen", "enter", "", "listen", "Open the port and listen", "trial"),
    Key("use", "u", "use", "form", "Read the lines by the form given, or by the one proposed", "trial"),
    Key("hold", "space", "hold", "hold", "Hold the lines while more come", "trial"),
    Key("take", "o", "take", "take over", "Take the proposed form over into a site file", "trial"),
    Key("close", "escape", "close", "let go", "Let go of the port; again: leave", "trial"),
)
_DIALOGS = (
    _fixed("yes", "y", "answer(True)", "yes", "", "confirm"),
    _fixed("no", "n,escape,q,enter,ctrl+c", "answer(False)", "no", "", "confirm"),
    _fixed("take", "enter", "", "", "", "dialog"),
    _fixed("leave", "escape,ctrl+c", "leave", "", "", "dialog"),
    _fixed("take", "f3,ctrl+s,f10", "take", "", "", "rows"),
    _fixed("leave", "escape", "leave", "", "", "rows"),
)
TABLE = (
    *_WATCH,
    *_EVERYWHERE,
    *_LISTS,
    *_STEER,
    *_INPUTS,
    *_PREDICTIONS,
    *_BEFORE_A_RUN,
    *_DIALOGS,
)

REPLAY_ONLY = frozenset({"back", "on", "step", "slower", "faster", "next", "previous", "whatif"})
LIVE_ONLY = frozenset({"note", "arm", "mark", "acknowledge", "acknowledge-all", "who", "seen", "shelve"})
KINDS = {"arm": ("drop",), "planner": ("drop",), "mark": ("drop", "hung")}
"""Keys that only some kinds of run have."""
TOGETHER = (
    ("watch", "all"),
    ("stations", "list", "page", "all"),
    ("station", "page", "all"),
    ("alarms", "list", "page", "all"),
    ("compare", "list", "page", "all"),
    ("shelf", "list", "page", "all"),
    ("settings", "list", "page", "all"),
    ("steer", "page", "all"),
    ("explorer", "page", "all"),
    ("planner", "page", "all"),
    ("whatif", "page", "all"),
    ("start", "all"),
    ("form", "all"),
    ("trial", "all"),
)
"""Places whose keys hold at the same time."""
STAYS = {"all.quit": "ctrl+c", "page.close": "escape", "all.help": "f1"}
"""Keys that no setting takes away: there is always a way out, and a page that tells all others."""
TYPING = (*"0123456789", "full_stop", "comma", "minus", "backspace", "delete")
"""Keys that type a number where inputs are changed."""
