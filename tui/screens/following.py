"""A screen that keeps up with the run while it is in front of the picture."""

from textual.screen import ScreenResultType

from eastfall.tui.store import Snapshot
from eastfall.tui.widgets.cells import PaintedScreen


class FollowingScreen(PaintedScreen[ScreenResultType]):
    """The watch screen hands it every snapshot."""

    def show(self, snapshot: Snapshot) -> None:
        """Show a newer snapshot."""
        raise NotImplementedError
