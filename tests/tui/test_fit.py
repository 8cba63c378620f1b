"""How a window's rows are shared out."""

import pytest

from eastfall.tui.fit import FIGURES, LEAST_EVIDENCE, shared

pytestmark = pytest.mark.invariant
WANTS = [("answer", 2), ("steer", 1), ("title", 1), ("keys", 1), ("notes", 3)]


@pytest.mark.parametrize("height", range(60))
def test_no_more_rows_are_given_than_there_are(height: int) -> None:
    """Lines, figures and pictures fit in the window; pictures are not shown where they would show nothing."""
    found = shared(height, WANTS)
    used = sum(found.lines.values()) + FIGURES * found.figures + LEAST_EVIDENCE * found.evidence
    assert used <= height
    assert set(found.lines) == {name for name, _ in WANTS}


def test_what_matters_most_keeps_its_rows_to_the_last() -> None:
    """A line gives way only when all behind it have none."""
    before = shared(60, WANTS).lines
    for height in range(59, -1, -1):
        found = shared(height, WANTS).lines
        for place, (name, _) in enumerate(WANTS):
            if found[name] < before[name]:
                assert all(found[later] == 0 for later, _ in WANTS[place + 1 :])
        before = found


def test_line_that_half_of_would_mislead_is_whole_or_not_there() -> None:
    """Of two rows wanted one is none; what comes behind it gets the row."""
    wants = [("answer", 4), ("steer", 2), ("title", 1)]
    assert shared(5, wants, whole=frozenset({"steer"})).lines == {"answer": 4, "steer": 0, "title": 1}
    assert shared(6, wants, whole=frozenset({"steer"})).lines == {"answer": 4, "steer": 2, "title": 0}


@pytest.mark.parametrize(
    ("height", "figures", "evidence"),
    [(10, False, False), (11, True, False), (14, False, True), (18, False, True), (19, True, True)],
)
def test_figures_stand_in_for_pictures_that_have_no_room(height: int, figures: bool, evidence: bool) -> None:
    """Three to five rows left are figures, six to ten the pictures, more are both."""
    found = shared(height, WANTS)
    assert (found.figures, found.evidence) == (figures, evidence)
