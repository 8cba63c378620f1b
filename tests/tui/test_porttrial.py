"""The port trial driven by keys on the real screen: what comes, how it reads, what is proposed, and letting go."""

import asyncio
import os
import socket
import threading
from collections.abc import Callable, Iterator
from pathlib import Path

import pytest
from screen_harness import text_of
from textual.pilot import Pilot
from textual.widgets import Input

from eastfall.io.emulator import demo_site
from eastfall.io.sitefile import LinkSettings
from eastfall.tui.app import Dashboard
from eastfall.tui.screens.porttrial import PortTrial
from eastfall.tui.screens.siteform import SiteForm
from eastfall.tui.screens.start import StartScreen
from eastfall.tui.widgets.trial import TrialLines

pytestmark = pytest.mark.invariant
PATIENCE = 10.0
PORTS = ["/dev/ttyUSB0  USB [serial]", "/dev/ttyACM1  probe"]
LINES = [b"%.2f;%.4f;%.4f" % (100 + 0.5 * row, 0.01 + 0.001 * (row % 3), -0.02) for row in range(40)]
FLICKER = [line.replace(b"-0.0200", b"-0.0%d" % (199 + 3 * row % 7)) for row, line in enumerate(LINES)]


class Instrument:
    """A device server on loopback that sends what it is told to."""

    def __init__(self) -> None:
        self.server = socket.create_server(("127.0.0.1", 0))
        self.server.settimeout(PATIENCE)
        self.url = f"socket://127.0.0.1:{self.server.getsockname()[1]}"
        self.there: socket.socket | None = None

    def send(self, data: bytes) -> None:
        """Send to whoever has connected."""
        if self.there is None:
            self.there, _ = self.server.accept()
            self.there.settimeout(PATIENCE)
        self.there.sendall(data)

    def close(self) -> None:
        """Let go of everything."""
        self.server.close()
        if self.there is not None:
            self.there.close()


@pytest.fixture
def instrument() -> Iterator[Instrument]:
    """Start a device server."""
    one = Instrument()
    yield one
    one.close()


@pytest.fixture(autouse=True)
def no_thread_is_left() -> Iterator[None]:
    """After every test the thread that listens is gone."""
    yield
    assert not [one for one in threading.enumerate() if one.name == "port trial" and one.is_alive()]


async def see(pilot: Pilot[int], wanted: str | Callable[[str], bool]) -> str:
    """Return the screen as soon as it shows what is wanted."""
    test = wanted if callable(wanted) else (lambda text: wanted in text)
    for _ in range(int(PATIENCE / 0.05)):
        await pilot.pause(0.05)
        if test(text_of(pilot.app)):  # type: ignore[arg-type]  # the application under test
            return text_of(pilot.app)  # type: ignore[arg-type]  # as above
    raise AssertionError(f"{wanted} is not on the screen:\n{text_of(pilot.app)}")  # type: ignore[arg-type]


def app_of(screen: PortTrial) -> Dashboard:
    """Return the application over the trial."""
    return Dashboard(screen)  # type: ignore[arg-type]  # a trial closes with a line form


async def test_ports_are_chosen_with_the_arrows_and_nothing_is_recorded() -> None:
    """Up and down bring a port into the line; the screen says from the start that nothing is recorded."""
    app = app_of(PortTrial(ports=lambda: PORTS))
    async with app.run_test(size=(80, 24)) as pilot:
        shown = await see(pilot, "USB [serial]")
        assert "nothing is recorded here" in shown
        await pilot.press("down")
        first = app.screen.query_one("#url", Input).value
        await pilot.press("down")
        assert (first, app.screen.query_one("#url", Input).value) == ("/dev/ttyUSB0", "/dev/ttyACM1")
        await pilot.press("tab", "up")
        assert app.screen.query_one("#baud", Input).value == "19200"


@pytest.mark.parametrize("found", [[], OSError("not allowed")])
async def test_machine_without_ports_says_so(found: list[str] | OSError) -> None:
    """No port, or a list that cannot be had, leaves the address to type."""

    def ports() -> list[str]:
        if isinstance(found, OSError):
            raise found
        return found

    async with app_of(PortTrial(ports=ports)).run_test(size=(80, 24)) as pilot:
        await see(pilot, "type an address")


async def test_lines_are_read_by_the_form_that_is_proposed(instrument: Instrument) -> None:
    """From the start: raw lines come, a form is proposed with reasons, and beneath each line stands what it says."""
    screen = PortTrial(ports=list)
    app = app_of(screen)
    async with app.run_test(size=(80, 24)) as pilot:
        screen.query_one("#url", Input).value = instrument.url
        await pilot.press("enter")
        await asyncio.to_thread(instrument.send, b"".join(line + b"\r\n" for line in FLICKER))
        shown = await see(pilot, "tilt_a_deg, tilt_b_deg; delimiter ;; checksum none")
        assert "good 40" in shown
        assert FLICKER[-1].decode() in shown
        assert "= depth 119.500 m  A 0.0100°  B" in shown
        assert "field 1: depth_m, moves smoothly over 19.5" in shown
        await pilot.press("o")
        await pilot.pause()
    assert app.choice == LinkSettings(
        url=instrument.url, columns=("depth_m", "tilt_a_deg", "tilt_b_deg"), delimiter=";"
    )


async def test_given_form_tells_each_fault_in_words_and_can_be_changed_for_the_proposed(
    instrument: Instrument,
) -> None:
    """A site's form that does not fit says why under each line; `u` reads the same lines by the proposal."""
    given = LinkSettings(url=instrument.url)
    app = app_of(PortTrial(given))
    async with app.run_test(size=(80, 24)) as pilot:
        await pilot.press("enter")
        await asyncio.to_thread(instrument.send, b"".join(line + b"\n" for line in FLICKER))
        shown = await see(pilot, "bad 40 (wrong number of fields 40)")
        assert "! wrong number of fields; expected as many fields as the site file names" in shown
        await see(pilot, "delimiter ;")
        await pilot.press("u")
        shown = await see(pilot, "good 40")
        assert "Read by the proposed form" in shown


async def test_control_characters_of_an_instrument_never_reach_the_terminal(instrument: Instrument) -> None:
    """Escape sequences are shown as text."""
    app = app_of(PortTrial(LinkSettings(url=instrument.url)))
    async with app.run_test(size=(80, 24)) as pilot:
        await pilot.press("enter")
        await asyncio.to_thread(instrument.send, b"\x1b[2J\x07boo\n")
        shown = await see(pilot, r"\x1b[2J\x07boo")
        assert "\x1b" not in shown
        assert "\x07" not in shown


async def test_rubbish_hints_at_the_speed_and_what_has_no_end_is_shown(instrument: Instrument) -> None:
    """Bytes that are no text and never end a line: they are shown, and another speed is advised."""
    app = app_of(PortTrial(LinkSettings(url=instrument.url)))
    async with app.run_test(size=(80, 24)) as pilot:
        await pilot.press("enter")
        await asyncio.to_thread(instrument.send, b"\xff\x80\xfe" * 20)
        shown = await see(pilot, "try another serial speed")
        assert r"no line end yet: ÿ\x80þ" in shown


async def test_held_lines_stay_while_more_come(instrument: Instrument) -> None:
    """Space holds the picture of the lines; the count goes on; space again lets it run."""
    screen = PortTrial(LinkSettings(url=instrument.url))
    app = app_of(screen)
    async with app.run_test(size=(80, 24)) as pilot:
        await pilot.press("enter")
        await asyncio.to_thread(instrument.send, b"1,0,0\n")
        await see(pilot, "1 lines")
        await pilot.press("space")
        await asyncio.to_thread(instrument.send, b"2,0,0\n")
        shown = await see(pilot, "2 lines")
        assert "held" in shown
        assert len(screen.query_one(TrialLines).lines) == 1
        await pilot.press("space")
        await see(pilot, "depth 2.000 m")


async def test_escape_lets_go_of_the_port_and_then_leaves(instrument: Instrument) -> None:
    """The first escape closes the connection, as the other side sees; the second leaves without a form."""
    app = app_of(PortTrial(LinkSettings(url=instrument.url)))
    async with app.run_test(size=(80, 24)) as pilot:
        await pilot.press("enter")
        await asyncio.to_thread(instrument.send, b"1,0,0\n")
        await see(pilot, "good 1")
        await pilot.press("escape")
        await see(pilot, "the port is free again")
        assert instrument.there is not None
        assert await asyncio.to_thread(instrument.there.recv, 10) == b""
        await pilot.press("escape")
        await pilot.pause()
    assert app.choice is None
    assert app.return_value == 0


async def test_leaving_the_program_lets_go_of_the_port(instrument: Instrument) -> None:
    """The quit key while listening closes the connection too."""
    app = app_of(PortTrial(LinkSettings(url=instrument.url)))
    async with app.run_test(size=(80, 24)) as pilot:
        await pilot.press("enter")
        await asyncio.to_thread(instrument.send, b"1,0,0\n")
        await see(pilot, "good 1")
        await pilot.press("q")
        await pilot.pause()
    assert instrument.there is not None
    assert instrument.there.recv(10) == b""


@pytest.mark.skipif(os.name != "posix", reason="pseudo-terminals")
async def test_other_speed_opens_the_serial_port_again() -> None:
    """Plus takes the next usual speed of a real serial device, which is opened anew with it."""
    import pty
    import termios
    import tty

    ours, theirs = pty.openpty()
    tty.setraw(theirs)
    screen = PortTrial(LinkSettings(url=os.ttyname(theirs)))
    app = app_of(screen)
    try:
        async with app.run_test(size=(80, 24)) as pilot:
            await pilot.press("enter")
            await see(pilot, "listening")
            assert termios.tcgetattr(theirs)[4] == termios.B9600
            await pilot.press("plus")
            await see(pilot, lambda text: "19200" in text and "listening" in text)
            assert termios.tcgetattr(theirs)[4] == termios.B19200
            os.write(ours, b"1,0,0\n")
            await see(pilot, "good 1")
            await pilot.press("escape", "escape")
    finally:
        os.close(ours)
        os.close(theirs)


@pytest.mark.parametrize(
    ("url", "baud", "says"),
    [
        ("", "9600", "a port or an address is needed"),
        ("COM1", "fast", "expected a whole number from 50 to 4000000"),
        ("/dev/no-such-port", "9600", "no such device"),
        ("-", "9600", "standard input is the keyboard here"),
    ],
)
async def test_what_cannot_be_opened_is_told_in_words(url: str, baud: str, says: str) -> None:
    """Missing and impossible ports and speeds are answered on the screen."""
    screen = PortTrial()
    async with app_of(screen).run_test(size=(80, 24)) as pilot:
        screen.query_one("#url", Input).value = url
        screen.query_one("#baud", Input).value = baud
        await pilot.press("enter")
        await see(pilot, says)


async def test_emulated_link_of_a_site_can_be_tried() -> None:
    """The built-in instrument of the site answers and its own form reads it."""
    site = demo_site("guided")
    async with app_of(PortTrial(site.links[0], site=site)).run_test(size=(120, 40)) as pilot:
        await pilot.press("enter")
        await see(pilot, "checksum xor")
        assert "bad 0" in text_of(pilot.app)  # type: ignore[arg-type]  # the application under test


async def test_form_tried_from_the_start_begins_a_new_site_file(
    instrument: Instrument, tmp_path: Path
) -> None:
    """From the start screen: listen, take the proposal over, and a new site file has the link in it."""
    app = Dashboard(StartScreen(tmp_path, log_suffix=".eastfall.jsonl", ports=list))
    async with app.run_test(size=(80, 24)) as pilot:
        await pilot.press("up", "up", "enter")
        await pilot.pause()
        assert isinstance(app.screen, PortTrial)
        app.screen.query_one("#url", Input).value = instrument.url
        await pilot.press("enter")
        await asyncio.to_thread(instrument.send, b"".join(line + b"\r\n" for line in FLICKER))
        await see(pilot, "delimiter ;")
        await pilot.press("o")
        await pilot.pause()
        assert isinstance(app.screen, SiteForm)
        assert app.screen.draft.value("link[0].delimiter") == ";"
        assert app.screen.draft.value("link[0].url") == instrument.url
        assert app.screen.unsaved
    assert not any(tmp_path.iterdir())  # noqa: ASYNC240 (an empty folder, after all is done)
