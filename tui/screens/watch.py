"""The watch screen, live and replay alike: hands snapshots to the widgets, and keys to the source."""

from contextlib import suppress
from dataclasses import replace
from typing import ClassVar

from textual.app import ComposeResult
from textual.binding import BindingType
from textual.containers import Horizontal
from textual.css.query import NoMatches
from textual.events import Click
from textual.widget import Widget

from eastfall.tui import keys, views, words
from eastfall.tui import sight as look
from eastfall.tui.fit import shared
from eastfall.tui.replayfeed import ReplayFeed
from eastfall.tui.roles import Role
from eastfall.tui.screens.following import FollowingScreen
from eastfall.tui.screens.runkeys import RunScreen
from eastfall.tui.session import Session
from eastfall.tui.sight import Sight
from eastfall.tui.store import Snapshot
from eastfall.tui.widgets.alarms import AlarmList
from eastfall.tui.widgets.figures import Figures
from eastfall.tui.widgets.health import HealthList, health_line, told
from eastfall.tui.widgets.line import KeyLine, TextLine
from eastfall.tui.widgets.panel import ProfileView
from eastfall.tui.widgets.plan import Plan
from eastfall.tui.widgets.profile import Profile
from eastfall.tui.widgets.strip import Strip

_LAYOUTS: tuple[look.Layout, ...] = ("all", "depth", "plan", "time")
_LINES = {"answer": 5, "alarm": 4, "steer": 4, "title": 1, "keys": 1, "health": 1, "swing": 3, "notes": 3}
"""Lines of text, what matters most first, and the most rows that each may take."""
_CALM = {"answer": 5, "steer": 4, "title": 1, "keys": 1, "alarm": 1, "health": 1, "swing": 3, "notes": 3}
"""The same while no alarm waits for an answer."""
_WHOLE = frozenset({"steer"})
"""Half of what to do would mislead."""


class WatchScreen(RunScreen):
    """One run, live or replayed.

    Parameters
    ----------
    session : Session
        What is known before the first reading.
    """

    PLACES = ("watch",)
    BINDINGS: ClassVar[list[BindingType]] = list(keys.bindings("watch"))
    HORIZONTAL_BREAKPOINTS = [(0, "-slim"), (60, "-small"), (80, "-narrow"), (100, "-normal"), (160, "-wide")]  # noqa: RUF012
    VERTICAL_BREAKPOINTS = [(0, "-tiny"), (10, "-low"), (17, "-mid"), (32, "-tall")]  # noqa: RUF012

    def __init__(self, session: Session) -> None:
        super().__init__(session)
        self.held: Snapshot | None = None
        self._told: tuple[object, ...] | None = None

    def compose(self) -> ComposeResult:
        """Put the parts together; the stylesheet decides which show at which size."""
        for name in ("title", "answer", "steer", "swing", "notes"):
            yield TextLine(id=name)
        yield Figures(id="figures")
        with Horizontal(id="evidence"):
            yield Profile(id="profile")
            yield Plan(id="plan")
            yield Plan(id="shaft")
            yield Strip(id="wide-strip")
        with Horizontal(id="lower"):
            yield Strip(id="strip")
            yield AlarmList(id="alarms")
            yield HealthList(id="feed")
        yield TextLine(id="alarm")
        yield TextLine(id="health")
        yield KeyLine(id="keys")

    def on_mount(self) -> None:
        """Show the empty picture at once."""
        self.paint()

    def on_resize(self) -> None:
        """Share out the rows anew, once all parts have their width."""
        self.call_after_refresh(self.paint)

    def on_screen_resume(self) -> None:
        """Catch up with what came while another screen was in front."""
        self.paint()

    def show(self, snapshot: Snapshot) -> None:
        """Show a newer snapshot; a held picture stays, alarms and health do not wait for it."""
        known = {one.name for one in self.latest.alarms if one.state in words.WANTS_ANSWER}
        waiting = {one.name for one in snapshot.alarms if one.state in words.WANTS_ANSWER}
        if waiting - known and not getattr(self.app, "muted", True):
            self.app.bell()
        if snapshot.trouble and snapshot.trouble != self.latest.trouble:
            self.held = None
        self.latest = snapshot
        if self.is_current or self.app.screen.is_modal:
            self.paint()
        if isinstance(self.app.screen, FollowingScreen):
            self.app.screen.show(snapshot)

    def paint(self) -> None:
        """Hand every part what it shows."""
        if not self.is_mounted:
            return
        shown = self.held or self.latest
        one = look.subject(self.sight, shown)
        # While the application ends, the last pictures find only some of the parts, or none.
        with self.app.batch_update(), suppress(NoMatches):
            self._paint_lines(shown, one)
            self._share()
            self._paint_evidence(shown, one)

    def _line(self, name: str) -> TextLine:
        return self.query_one(f"#{name}", TextLine)

    def _paint_lines(self, shown: Snapshot, one: views.Subject) -> None:
        latest = self.latest
        state = views.state(latest, self.sight, held=self.held is not None)
        self._line("title").show(*views.title(self.session), right=state)
        under = views.answer_ground(shown, one)
        ink = Role.STRONG if under is None else Role.ON_GROUND
        self._line("answer").show((views.answer(shown, one, self.session.units), ink), under=under)
        keymap = keys.keymap_of(self.app)
        self._line("steer").show(*views.steer(self.session, latest, one, keymap))
        self._line("swing").show(*views.swing(self.session, one))
        self._line("notes").show(*views.notes(self.session, shown, one))
        told_first = views.alarm_line(latest, self.session.units, keymap)
        hint = told_first.hint if self.size.width >= _HINTS else ()
        self._line("alarm").show(*told_first.pieces, right=hint, under=told_first.under)
        if told(latest) != self._told:
            self._told = told(latest)
            self._line("health").show(*health_line(latest))
            self.query_one(HealthList).show(latest)
        pairs = keymap.line("watch", "all", replay=latest.mode == "replay", kind=self.kind)
        self.query_one(KeyLine).show(*pairs)
        self.query_one(Figures).show(*views.figures(self.session, one))
        self.query_one(AlarmList).show(latest.alarms, live=latest.mode == "live")

    FOOT = "keys"
    """The line at the bottom."""

    def _share(self) -> None:
        """Give each line the rows that its words need, as far as there are any, and the rest to the pictures."""
        width, height = self.size
        alarmed = any(one.state in words.WANTS_ANSWER for one in self.latest.alarms)
        wants = []
        for name, most in (_LINES if alarmed else _CALM).items():
            rows = 1 if name == "keys" else self._line(name).rows_at(width)
            wants.append((self.FOOT if name == "keys" else name, min(rows, most)))
        shares = shared(height - _LOWER * self.query_one("#lower").display, wants, whole=_WHOLE)
        for name, rows in shares.lines.items():
            found = self.query_one(f"#{name}")
            if isinstance(found, TextLine):
                found.take(rows)
            else:
                _set(found, shown=rows > 0)
        _set(self.query_one("#figures"), shown=shares.figures)
        _set(self.query_one("#evidence"), shown=shares.evidence)

    def _paint_evidence(self, shown: Snapshot, one: views.Subject) -> None:
        session, sight = self.session, self.sight
        evidence = self.query_one("#evidence")
        for name in _LAYOUTS:
            evidence.set_class(name == sight.layout, f"-view-{name}")
        whole = session.assumptions.shaft.depth
        profile = self.query_one(Profile)
        profile.show(
            ProfileView(
                snapshot=shown,
                sight=sight,
                whole=whole,
                bob=session.bob,
                fall=session.fall,
                units=session.units,
                kept=profile.kept,
            )
        )
        plan = views.plan(session, shown, sight, one)
        self.query_one("#plan", Plan).show(plan, "wall" if sight.wall else "close")
        self.query_one("#shaft", Plan).show(plan, "close" if sight.wall else "wall")
        for strip in self.query(Strip):
            strip.show(shown)

    def _look(self, sight: Sight) -> None:
        self.sight = sight
        self.paint()

    # What the keys do: the picture.

    def action_look(self, by: int) -> None:
        """Look back station by station."""
        self._look(look.stepped(self.sight, self.held or self.latest, by))

    def action_follow(self) -> None:
        """Follow the newest reading, and let go of a held picture."""
        self.held = None
        if isinstance(self.feed, ReplayFeed):
            self.feed.newest()
        self._look(replace(self.sight, station=None, top=None))

    def action_now(self) -> None:
        """Go back to the picture as it is now; a replay stays where it is."""
        self.held = None
        self._look(replace(self.sight, station=None, top=None))

    def action_zoom(self, factor: float) -> None:
        """Change how much depth is in view."""
        self._look(look.zoomed(self.sight, self.session.assumptions.shaft.depth, factor))

    def action_whole(self) -> None:
        """Show the whole shaft."""
        self._look(replace(self.sight, span=None))

    def action_layout(self) -> None:
        """Take the next view."""
        following = _LAYOUTS[(_LAYOUTS.index(self.sight.layout) + 1) % len(_LAYOUTS)]
        self._look(replace(self.sight, layout=following))
        self.call_after_refresh(self.paint)

    def action_residual(self) -> None:
        """Change between residual and offsets."""
        self._look(replace(self.sight, residual=not self.sight.residual))

    def action_wall(self) -> None:
        """Change the scale of the plan."""
        self._look(replace(self.sight, wall=not self.sight.wall))

    def action_extras(self) -> None:
        """Show or hide bob and dropped body."""
        self._look(replace(self.sight, extras=not self.sight.extras))

    # What the mouse does.

    def on_profile_pointed(self, event: Profile.Pointed) -> None:
        """Zoom about the pointer, or look at the station nearest to it."""
        if event.factor == 1.0:
            self._look(look.at_depth(self.sight, self.held or self.latest, event.depth))
            return
        whole = self.session.assumptions.shaft.depth
        self._look(look.zoomed_about(self.sight, whole, event.factor, event.window, event.depth))

    def on_alarm_list_clicked(self) -> None:
        """Open the list of alarms."""
        self.action_alarms()

    def on_click(self, event: Click) -> None:
        """Open the list of alarms from the line that shows the first one."""
        if event.widget is self._line("alarm"):
            self.action_alarms()

    def action_pause(self) -> None:
        """Hold the picture of a live run, or stop and play a replay."""
        if isinstance(self.feed, ReplayFeed):
            self.feed.play()
            return
        self.held = None if self.held is not None else self.latest
        self.paint()


_HINTS = 40
"""Columns below which an alarm does not share its line with keys."""
_LOWER = 10
"""Rows of the strip, the alarms and the feed side by side, where the stylesheet shows them."""


def _set(widget: Widget, *, shown: bool) -> None:
    """Show or hide a part, without a new layout where nothing changes."""
    if widget.display is not shown:
        widget.display = shown
