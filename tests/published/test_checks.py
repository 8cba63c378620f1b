"""Every named check value against what the program computes now."""

import pytest

from eastfall.physics.published import PublishedCheck, published_checks


@pytest.mark.published
@pytest.mark.parametrize("check", published_checks(), ids=lambda check: check.name)
def test_computed_value_agrees_with_its_source(check: PublishedCheck) -> None:
    """The value is within the tolerance of the printed one; the mark tells print, memory and arithmetic apart."""
    assert abs(check.difference()) <= check.tolerance


@pytest.mark.invariant
def test_every_check_names_its_source_and_a_tight_tolerance() -> None:
    """Each check has a source, a name of its own and a tolerance below its value, so that none can pass by chance."""
    checks = published_checks()
    assert len({check.name for check in checks}) == len(checks)
    assert all(check.source and 0.0 < check.tolerance < 0.12 * abs(check.expected) for check in checks)
