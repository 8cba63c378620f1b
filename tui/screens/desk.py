"""What the start screen opens beside runs: a new site file, one to edit, a port to listen to; and what follows."""

from collections.abc import Callable, Sequence
from pathlib import Path
from typing import TYPE_CHECKING

from eastfall.io.errors import SiteFileError
from eastfall.io.safetext import safe
from eastfall.io.siteedit import take_link
from eastfall.tui.screens.formdialogs import AskName
from eastfall.tui.screens.porttrial import PortTrial
from eastfall.tui.screens.siteform import SiteForm

if TYPE_CHECKING:
    from textual.app import App

    from eastfall.io.sitefile import LinkSettings

Ports = Callable[[], Sequence[str]] | None
After = Callable[[Path | None], None]
"""Takes the path of the site file that was saved, if any."""


def new_site(app: "App[int]", folder: Path, ports: Ports, after: After) -> None:
    """Open the form over a new site file."""
    app.push_screen(SiteForm.new(folder, ports=ports), after)


def edit_site(app: "App[int]", path: Path, ports: Ports, after: After) -> None:
    """Open the form over a site file, or say why it cannot be opened."""
    try:
        form = SiteForm.over(path, ports=ports)
    except SiteFileError as error:
        app.notify(safe(str(error), 300), severity="error", markup=False)
        return
    app.push_screen(form, after)


def ask_site(app: "App[int]", folder: Path, newest: str, ports: Ports, after: After) -> None:
    """Ask which site file to edit, and open the form over it."""

    def path_of(name: str) -> Path:
        path = folder / Path(name.strip()).expanduser()
        if not path.is_file():
            raise ValueError("There is no file of this name.")
        return path

    def named(name: str | None) -> None:
        if name:
            edit_site(app, path_of(name), ports, after)

    app.push_screen(AskName("Edit which site file?", "opens it", newest, path_of), named)


def try_port(app: "App[int]", folder: Path, ports: Ports, after: After) -> None:
    """Open the port trial; a form that is taken over goes into a new site file."""

    def heard(settings: "LinkSettings | None") -> None:
        if settings is None:
            return
        form = SiteForm.new(folder, ports=ports)
        form.draft.add_link()
        take_link(form.draft, 0, settings)
        app.push_screen(form, after)

    app.push_screen(PortTrial(ports=ports), heard)
