"""Windows with the program in them, for tests of what may happen to a terminal."""

from collections.abc import Callable, Iterator
from pathlib import Path
from typing import TYPE_CHECKING

import pytest

if TYPE_CHECKING:
    from window_help import Instrument, Window


@pytest.fixture
def instrument() -> Iterator["Instrument"]:
    """Yield a server of numbered lines."""
    from window_help import Instrument

    one = Instrument()
    one.start()
    yield one
    one.close()


@pytest.fixture
def tarn(tmp_path: Path) -> Path:
    """Return a site file."""
    from window_help import SITE

    path = tmp_path / "tarn.toml"
    path.write_text(SITE, encoding="utf-8")
    return path


@pytest.fixture
def window(instrument: "Instrument", tarn: Path, tmp_path: Path) -> Iterator[Callable[..., "Window"]]:
    """Open windows in which the instrument is watched, and close what is left."""
    from window_help import Window

    opened: list[Window] = []

    def build(folder: Path | None = None, **environment: str) -> Window:
        into = folder or tmp_path / "runs"
        into.mkdir(exist_ok=True)
        arguments = ("watch", str(tarn), "--link", instrument.url, "--into", str(into))
        opened.append(Window(into, *arguments, **environment))
        return opened[-1]

    yield build
    for one in opened:
        one.close()
