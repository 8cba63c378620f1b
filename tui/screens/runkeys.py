"""What the keys of the watch screen ask of the run: acknowledge, note, arm, jump, move in a record, other screens."""

from dataclasses import replace
from typing import TYPE_CHECKING, cast

from eastfall.io.safetext import safe
from eastfall.tui import sight as look
from eastfall.tui import typed, words
from eastfall.tui.feed import Feed, LiveFeed
from eastfall.tui.keys import keymap_of
from eastfall.tui.keytable import KINDS
from eastfall.tui.people import LONGEST, user_name
from eastfall.tui.replayfeed import ReplayFeed
from eastfall.tui.screens.alarmboard import AlarmsScreen
from eastfall.tui.screens.dialogs import AskText, ClearShaft, named
from eastfall.tui.screens.start import Choice
from eastfall.tui.screens.stations import StationsScreen
from eastfall.tui.screens.steer import SteerScreen
from eastfall.tui.session import Session, replay_session
from eastfall.tui.sight import Sight
from eastfall.tui.store import Snapshot, in_order
from eastfall.tui.widgets.cells import PaintedScreen

if TYPE_CHECKING:
    from collections.abc import Callable

    from eastfall.io.replay import Replay
    from eastfall.physics.settings import Kind


class RunScreen(PaintedScreen[Choice | None]):
    """A screen over one run, and what can be asked of the run.

    Parameters
    ----------
    session : Session
        What is known before the first reading.
    """

    def __init__(self, session: Session) -> None:
        super().__init__()
        self.session = session
        self.feed: Feed | None = None
        self.latest = Snapshot(mode=session.mode)
        self.sight = Sight(layout="plan" if session.assumptions.run.kind == "hung" else "all")
        self.who = user_name()
        """Whose name goes into the record."""

    def _look(self, sight: Sight) -> None:
        raise NotImplementedError

    @property
    def kind(self) -> "Kind":
        """What is in the shaft."""
        return self.session.assumptions.run.kind

    # What the keys do: the source.

    def action_acknowledge(self) -> None:
        """Acknowledge the alarm shown first."""
        self._acknowledge(1)

    def action_acknowledge_all(self) -> None:
        """Acknowledge every alarm."""
        self._acknowledge(len(self.latest.alarms))

    def _acknowledge(self, most: int) -> None:
        if isinstance(self.feed, LiveFeed):
            waiting = [one for one in in_order(self.latest.alarms) if one.state in words.WANTS_ANSWER]
            for one in waiting[:most]:
                self._see(one.name)

    def action_alarms(self) -> None:
        """Open the list of alarms."""
        live = isinstance(self.feed, LiveFeed)
        board = (
            AlarmsScreen(self.latest, seen=self._see, shelve=self._shelve)
            if live
            else AlarmsScreen(self.latest)
        )
        self.app.push_screen(board)

    def _see(self, name: str) -> None:
        self._named(lambda who: cast("LiveFeed", self.feed).acknowledge(name, who))

    def _shelve(self, name: str, seconds: float, reason: str) -> None:
        self._named(lambda who: cast("LiveFeed", self.feed).shelve(name, seconds, reason, who))

    def action_who(self) -> None:
        """Ask for the name that goes into the record."""
        if isinstance(self.feed, LiveFeed):
            self._ask_name(lambda _: None)

    def _named(self, then: "Callable[[str], None]") -> None:
        """Do something under the person's name; asked for where this machine does not know it."""
        if self.who:
            then(self.who)
        else:
            self._ask_name(then)

    def _ask_name(self, then: "Callable[[str], None]") -> None:
        def asked(text: str | None) -> None:
            if text is not None:
                self.who = safe(text.strip(), LONGEST)
                then(self.who)

        hint = "It goes into the record with all that you acknowledge, note and shelve."
        self.app.push_screen(AskText("Your name", hint, check=named, value=self.who, replaced=True), asked)

    def action_note(self) -> None:
        """Ask for a note and write it into the record."""
        if isinstance(self.feed, LiveFeed):
            change = keymap_of(self.app)["watch.who"]
            hint = f"by {self.who} ({change} changes it)" if self.who else ""
            self.app.push_screen(AskText("Note for the record", hint, does="writes it"), self._noted)

    def _noted(self, text: str | None) -> None:
        if text and text.strip():
            note = safe(text.strip())
            self._named(lambda who: cast("LiveFeed", self.feed).note(note, who))

    def action_mark(self) -> None:
        """Ask where a body landed or a bob hangs; an armed drop and a hung run take marks."""
        if not isinstance(self.feed, LiveFeed) or self.kind not in KINDS["mark"]:
            return
        if not self.latest.armed:
            self.action_arm()
            return
        units, example = self.session.units, typed.example_mark(self._deepest, self.session.units)
        hint = f"depth in {units.long_name}, east and north in {units.short_name}, as {example}"
        question = (
            "Where did the body land?" if self.kind == "drop" else "Where does the bob hang, from its mark?"
        )
        dialog = AskText(question, hint, does="records it", check=self._mark)
        self.app.push_screen(dialog, self._marked)

    @property
    def _deepest(self) -> float:
        return self.session.assumptions.shaft.depth

    def _mark(self, text: str) -> tuple[float, float, float]:
        """Read where a body landed or a bob hangs, in the reader's units."""
        return typed.read_mark(text, self._deepest, self.session.units)

    def _marked(self, text: str | None) -> None:
        if text:
            depth, east, north = self._mark(text)
            self._named(lambda who: cast("LiveFeed", self.feed).mark(depth, east, north, who))

    def action_arm(self) -> None:
        """Ask whether the shaft is clear, and arm the run."""
        if isinstance(self.feed, LiveFeed) and not self.latest.armed:
            self.app.push_screen(ClearShaft(), self._armed)

    def _armed(self, who: str | None) -> None:
        if who:
            cast("LiveFeed", self.feed).arm(safe(who.strip()))

    def action_planner(self) -> None:
        """Open the drop planner for this site; only a drop has one."""
        from eastfall.tui.screens.planner import PlannerScreen  # noqa: PLC0415 (the models only where asked for)

        session = self.session
        if self.kind in KINDS["planner"]:
            self.app.push_screen(PlannerScreen(session.assumptions, name=session.title, units=session.units))

    def action_steer(self) -> None:
        """Open the steering line in large figures."""
        kind = self.session.assumptions.run.kind
        self.app.push_screen(SteerScreen(self.latest, kind, self.session.units, seen=self.action_acknowledge))

    def action_passes(self) -> None:
        """Compare the passes of this run, as far as it went."""
        from eastfall.tui import differences  # noqa: PLC0415 (only where asked for)
        from eastfall.tui.screens.compare import CompareScreen  # noqa: PLC0415

        found = differences.passes(self.latest.stations)
        if found:
            self.app.push_screen(CompareScreen(found, self.session.units))
        else:
            self.app.notify("No two passes have a depth in common yet.", markup=False, timeout=4)

    def action_what_if(self) -> None:
        """Open the settings of a record, to see what would have followed from others."""
        from eastfall.tui.screens.whatif import WhatIfScreen  # noqa: PLC0415 (only where asked for)

        if not isinstance(self.feed, ReplayFeed):
            return
        recording = self.feed.replay.recording
        if recording.recorded is None or self.feed.replay.follow:
            self.app.notify("What if is for a complete run log.", markup=False, timeout=4)
            return
        screen = WhatIfScreen(
            recording.path, recording.recorded, recording.site, self._take_over, self.session.units
        )
        self.app.push_screen(screen)

    def _take_over(self, replay: "Replay") -> None:
        self.session = replay_session(replay, units=self.session.units)
        self._look(replace(self.sight, station=None))
        cast("ReplayFeed", self.feed).change(replay)

    def action_stations(self) -> None:
        """Open the table of stations."""
        kind = self.session.assumptions.run.kind
        self.app.push_screen(StationsScreen(self.latest, self.session.units, kind), self._chosen)

    def _chosen(self, index: int | None) -> None:
        self._look(replace(self.sight, station=index) if index is not None else self.sight)

    def action_jump(self) -> None:
        """Ask for a depth or, in a replay, a time."""
        hint = f"depth: {self._example()}" + (
            "     time: 12:30 or 90 s" if self.session.mode == "replay" else ""
        )
        self.app.push_screen(AskText("Jump to", hint, does="goes there", check=self._moment), self._jumped)

    def _example(self) -> str:
        units = self.session.units
        return f"{typed.example_depth(self._deepest, units)} {units.long}"

    def _moment(self, text: str) -> tuple[str, float]:
        """Read where to jump; a live run has no times to go to."""
        what, value = typed.read_moment(text, self._deepest, self.session.units)
        if what == "time" and self.session.mode == "live":
            raise ValueError(f"A live run goes by its own clock: give a depth, as {self._example()}.")
        if what == "depth" and isinstance(self.feed, ReplayFeed):
            return "time", self._time_of(self.feed, value)
        return what, value

    def _time_of(self, feed: ReplayFeed, depth: float) -> float:
        """Return when a record next reaches a depth after where it stands, or else first reaches it [s]."""
        if feed.index is None:
            raise ValueError("The record is still being read through: a moment, please.")
        moment = feed.index.time_of_depth(depth, after=self.latest.time + 1.0)
        moment = feed.index.time_of_depth(depth) if moment is None else moment
        if moment is None:
            units = self.session.units
            raise ValueError(f"The record does not reach {depth / units.long_size:g} {units.long}.")
        return moment

    def _jumped(self, text: str | None) -> None:
        if text is None:
            return
        _, value = self._moment(text)
        if isinstance(self.feed, ReplayFeed):
            self.feed.seek(value)
            self._look(replace(self.sight, station=None))
        else:
            self._look(look.at_depth(self.sight, self.latest, value))

    def action_skip(self, seconds: float) -> None:
        """Move in a replay."""
        if isinstance(self.feed, ReplayFeed):
            self.feed.skip(seconds)

    def action_step(self) -> None:
        """Take one block of a replay."""
        if isinstance(self.feed, ReplayFeed):
            self.feed.step()

    def action_speed(self, factor: float) -> None:
        """Change the speed of a replay."""
        if isinstance(self.feed, ReplayFeed):
            self.feed.faster(factor)

    def action_event(self, way: int) -> None:
        """Go to the next or previous event of a replay."""
        if isinstance(self.feed, ReplayFeed) and self.feed.index is not None:
            times = [one.time for one in self.feed.index.marks if one.what != "station"]
            now = self.latest.time
            ahead = (
                [t for t in times if t > now + 1e-6] if way > 0 else [t for t in times if t < now - 1.0][::-1]
            )
            if ahead:
                self.feed.seek(ahead[0])
