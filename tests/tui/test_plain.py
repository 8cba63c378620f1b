"""The plain text mode, update by update."""

from types import SimpleNamespace

from eastfall.tui.plain import PlainLines


def update(time: float, rejected: int, fault: str = "", **changes: object) -> SimpleNamespace:
    """Return what a step brought: nothing but so many refused lines."""
    health = SimpleNamespace(rejected=rejected, frames=0, links=[SimpleNamespace(last_fault=fault)])
    return SimpleNamespace(findings=(), standing=None, health=health, time=time, **changes)


def test_a_refused_line_is_told_at_once_and_many_are_not_told_one_by_one() -> None:
    """Whoever types readings hears what is wrong with the last; a noisy feed says so every few seconds."""
    told: list[str] = []
    lines = PlainLines(told.append, "hung", every=5.0)
    lines.take(update(0.0, 0))
    lines.take(update(1.0, 1, "line 1: 10 1.0: wrong number of fields; expected three"))
    assert told[1:] == ["refused line 1: 10 1.0: wrong number of fields; expected three"]
    for tenth in range(11, 61):
        lines.take(update(tenth / 10.0, tenth, f"line {tenth}: x: not a number; expected decimal numbers"))
    assert [one for one in told[2:] if one.startswith("refused")] == [
        "refused line 60: x: not a number; expected decimal numbers"
    ]
