"""The steering line over the whole screen, with a bell that beats the slower the nearer it is."""

import time
from collections.abc import Callable
from typing import TYPE_CHECKING, ClassVar

from textual.app import ComposeResult
from textual.binding import BindingType

from eastfall.tui import keys, views
from eastfall.tui.roles import Role
from eastfall.tui.screens.following import FollowingScreen
from eastfall.tui.steering import Steer, steer
from eastfall.tui.store import Snapshot
from eastfall.tui.units import METRIC, Units
from eastfall.tui.widgets.bearing import BearingView
from eastfall.tui.widgets.line import KeyLine, TextLine

if TYPE_CHECKING:
    from eastfall.physics.settings import Kind

_TICK = 0.1
_MOST = 3
"""Rows that an alarm may take, and the answer; one in a low window."""
_LOW = 10


class SteerScreen(FollowingScreen[None]):
    """Direction and distance, readable across the collar.

    Parameters
    ----------
    snapshot : Snapshot
        To begin with.
    kind : {"guided", "hung", "drop"}
        Of the run.
    units : Units
        Of the reader.
    clock : callable
        Monotonic seconds, for the beat.
    seen : callable, optional
        Acknowledges the alarm that is shown.
    """

    PLACES = ("steer", "page")
    BINDINGS: ClassVar[list[BindingType]] = list(keys.bindings("steer", "page"))

    def __init__(
        self,
        snapshot: Snapshot,
        kind: "Kind",
        units: Units = METRIC,
        clock: Callable[[], float] = time.monotonic,
        seen: Callable[[], None] | None = None,
    ) -> None:
        super().__init__()
        self._seen = seen
        self._snapshot, self._kind, self._units, self._clock = snapshot, kind, units, clock
        self._rung = float("-inf")

    def compose(self) -> ComposeResult:
        """Show the answer over the large figures."""
        yield TextLine(id="answer")
        yield BearingView(id="bearing")
        yield TextLine(id="alarm")
        yield KeyLine(id="steer-keys")

    def on_mount(self) -> None:
        """Begin to beat."""
        self.query_one(BearingView).aspect = getattr(self.app, "cell_aspect", 2.0)
        self.show(self._snapshot)
        keymap = keys.keymap_of(self.app)
        told = keymap.line(*self.PLACES, "all", replay=self._snapshot.mode == "replay")
        self.query_one(KeyLine).show(*told, (keymap["all.mute"], "sound"))
        self.set_interval(_TICK, self.beat)

    def show(self, snapshot: Snapshot) -> None:
        """Show a newer snapshot."""
        self._snapshot = snapshot
        one = snapshot.standing
        under = views.answer_ground(snapshot, one)
        ink = Role.STRONG if under is None else Role.ON_GROUND
        answer = self.query_one("#answer", TextLine)
        answer.show((views.answer(snapshot, one, self._units), ink), under=under)
        answer.fit(self._most)
        self.query_one(BearingView).show(self._steer())
        told = views.alarm_line(snapshot, self._units, keys.keymap_of(self.app), seen="steer.seen", board="")
        line = self.query_one("#alarm", TextLine)
        line.show(*told.pieces, right=told.hint, under=told.under)
        line.fit(self._most)

    @property
    def _most(self) -> int:
        return _MOST if self.size.height >= _LOW else 1

    def on_resize(self) -> None:
        """Share out the rows anew."""
        self.show(self._snapshot)

    def reckon_in(self, units: Units) -> None:
        """Tell lengths in other units."""
        self._units = units
        self.show(self._snapshot)

    def _steer(self) -> Steer:
        """Return what to do; nothing to go by once the answer is old."""
        one = self._snapshot.standing
        if views.is_old(self._snapshot, one):
            return Steer(line="Do not go by this: wait until the feed is back.")
        return steer(one, self._kind, self._units)

    def beat(self) -> None:
        """Ring when the time for it has come, unless muted or the picture is of the past."""
        pause = self._steer().beat
        now = self._clock()
        if pause is None or now - self._rung < pause or getattr(self.app, "muted", True):
            return
        if self._snapshot.playing and not self._snapshot.ended:
            self._rung = now
            self.app.bell()

    def action_seen(self) -> None:
        """Acknowledge the alarm that is shown."""
        if self._seen is not None:
            self._seen()

    def action_close(self) -> None:
        """Go back."""
        self.dismiss(None)
