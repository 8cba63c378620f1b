"""The steering line: which way, how far, how fast the bell beats, and how it looks from afar."""

from collections.abc import Callable
from dataclasses import replace
from itertools import pairwise
from math import nan, pi

import numpy as np
import pytest
from screen_harness import AskedLive, built, lines, shown

from eastfall.physics.findings import RestPoint, Standing
from eastfall.tui.glyphs import GLYPHS
from eastfall.tui.screens.steer import SteerScreen
from eastfall.tui.session import Session
from eastfall.tui.steering import IN_WORDS, WINDS, steer
from eastfall.tui.store import Snapshot
from eastfall.tui.widgets.bearing import arrow, fitting

pytestmark = pytest.mark.invariant
Make = Callable[..., Standing]


def off(standing: Make, east: float, north: float, **changes: object) -> Standing:
    """Return a standing answer with that residual [m]."""
    return standing(
        measured_east=east, measured_north=north, expected_east=0.0, expected_north=0.0, **changes
    )


@pytest.mark.parametrize("place", range(8))
def test_the_way_to_move_is_against_the_residual(standing: Make, place: int) -> None:
    """A residual toward each of eight winds is undone toward the opposite one, in letters, degrees and words."""
    turn = place * pi / 4.0
    told = steer(off(standing, 0.02 * np.sin(turn), 0.02 * np.cos(turn)), "guided")
    back = (place + 4) % 8
    assert (told.wind, told.bearing) == (WINDS[back], f"{45 * back:03d}°")
    assert f"toward {45 * back:03d}° ({IN_WORDS[back]}) to meet" in told.line
    # A hung line: the arrow and its wind are the way of the top; the mark goes the other way.
    hung = steer(off(standing, 0.02 * np.sin(turn), 0.02 * np.cos(turn)), "hung")
    assert f"the top of the line 20 mm toward {45 * back:03d}° ({IN_WORDS[back]}), or" in hung.line
    assert hung.line.endswith(f"the mark here toward {45 * place:03d}°.")
    assert hung.angle == told.angle
    assert told.distance == "20.0"
    assert told.angle is not None
    assert np.cos(told.angle - turn) == pytest.approx(-1.0, abs=1e-12)


def test_the_beat_slows_as_it_comes_nearer_and_is_silent_within_the_uncertainty(standing: Make) -> None:
    """Over, past warning, off, and within the uncertainty: ever longer pauses, then none at all."""
    beats = [
        steer(off(standing, east, 0.0, verdict=verdict), "guided").beat
        for east, verdict in ((0.04, "over"), (0.02, "within"), (0.01, "within"), (0.001, "within"))
    ]
    assert beats[3] is None
    assert sorted(beats[:3]) == beats[:3]  # type: ignore[type-var]
    assert steer(off(standing, 0.001, 0.0), "guided").angle is None


def test_without_a_number_there_is_only_a_sentence(standing: Make) -> None:
    """No reading, no offset, a drop, a halt still open, a swing that does not fit: no arrow and no sound."""
    swing = RestPoint(
        east=0.0, north=0.0, u_east=1e-3, u_north=1e-3, covariance_east_north=0.0, period=nan, decay=nan,
        swings=1.0, fits=False, message="half a swing seen",
    )  # fmt: skip
    told = [
        steer(None, "guided"),
        steer(standing(measured_east=nan), "guided"),
        steer(standing(), "drop"),
        steer(standing(hold_still=3.0), "guided"),
        steer(standing(rest_point=swing), "hung"),
    ]
    for one in told:
        assert one.line
        assert (one.distance, one.angle, one.beat) == ("", None, None)


@pytest.mark.parametrize("angle", [0.0, 1.0, 2.5, 4.0])
def test_the_arrow_points_where_it_says(angle: float) -> None:
    """The dots' centre lies toward the head, along the angle from the top, with square and with tall dots."""
    for squash in (1.0, 2.0):
        plane = arrow((60, int(60 * squash)), squash, angle)
        row, column = np.nonzero(plane)
        x = (column + 0.5 - plane.shape[1] / 2.0).mean()
        y = (plane.shape[0] / 2.0 - row - 0.5).mean() * squash
        assert np.arctan2(x, y) % (2.0 * pi) == pytest.approx(angle, abs=0.05)
        assert plane[:, :1].sum() + plane[:1].sum() == 0


def test_figures_are_as_large_as_their_place_allows() -> None:
    """Ten rows and room enough give two rows a dot; a narrow place gives less, and at last plain text."""
    assert len(fitting("8.6", 60, 10)) == 10
    assert len(fitting("8.6", 30, 10)) == 5
    assert len(fitting("8.6", 14, 10)) == 3
    assert fitting("8.6", 4, 10) == ["8.6"]


@pytest.mark.parametrize(
    ("width", "height", "glyphs"),
    [(80, 24, "braille"), (80, 24, "ascii"), (120, 40, "braille"), (40, 12, "ascii")],
)
async def test_it_fills_the_screen_and_says_the_same_in_words(
    session: Callable[..., Session], snapshot: Callable[..., Snapshot], width: int, height: int, glyphs: str
) -> None:
    """On every size and in plain letters: the answer, the sentence with the wind's name, and figures of many rows."""
    app = built(session(), AskedLive(), glyphs=GLYPHS[glyphs])
    async with app.run_test(size=(width, height)) as pilot:
        await shown(pilot, snapshot())
        await pilot.press("d")
        await pilot.pause()
        found = lines(app)
    text = "\n".join(found)
    assert "WITHIN 60.0 m" in text
    assert "toward 265" in text
    assert "(west)" in text
    solid = "#" if glyphs == "ascii" else "█"
    assert sum(solid in row for row in found) >= 5 or width == 40
    assert glyphs != "ascii" or text.isascii()


async def test_the_bell_beats_unless_muted_or_paused(
    session: Callable[..., Session], snapshot: Callable[..., Snapshot], monkeypatch: pytest.MonkeyPatch
) -> None:
    """1.6 s between two bells at 8.6 mm off; none when muted, none while a replay stands still."""
    app = built(session(), AskedLive())
    rung: list[float] = []
    now = [0.0]
    async with app.run_test(size=(80, 24)) as pilot:
        made = snapshot()
        await shown(pilot, made)
        monkeypatch.setattr(app, "bell", lambda: rung.append(now[0]))
        screen = SteerScreen(made, "guided", clock=lambda: now[0])
        await app.push_screen(screen)
        for _ in range(40):
            now[0] += 0.1
            screen.beat()
        assert [round(b - a, 1) for a, b in pairwise(rung)] == [1.6, 1.6]
        for quiet in ("muted", "paused"):
            app.muted = quiet == "muted"
            screen.show(replace(made, playing=quiet != "paused"))
            count = len(rung)
            for _ in range(40):
                now[0] += 0.1
                screen.beat()
            assert len(rung) == count
