"""Who says what goes into the record: the name of the person at the screen."""

import getpass

from eastfall.io.safetext import safe

LONGEST = 60


def user_name() -> str:
    """Return the name that this machine knows the user by; empty where it knows none."""
    try:
        return safe(getpass.getuser(), LONGEST)
    except (OSError, KeyError, ImportError):  # no such user, or a system without user names
        return ""


def read_shelving(text: str) -> tuple[float, str]:
    """Read for how long an alarm is put aside, and why: "10 fan being mended".

    Parameters
    ----------
    text : str
        Minutes, then the reason.

    Returns
    -------
    tuple of float and str
        Seconds and reason.

    Raises
    ------
    ValueError
        With one line that says what is expected.
    """
    minutes, _, reason = text.strip().partition(" ")
    reason = reason.strip().removeprefix("min ").strip()
    try:
        number = float(minutes.replace(",", "."))
    except ValueError:
        number = -1.0
    if not 0.0 < number <= _MOST or not reason:
        raise ValueError(f"Minutes from 0.1 to {_MOST:g}, then the reason, as: 10 fan being mended")
    return 60.0 * number, safe(reason, 200)


_MOST = 720.0  # minutes: a shift; nobody puts an alarm aside for good
