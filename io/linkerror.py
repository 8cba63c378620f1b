"""What the operating system says of a link that cannot be opened, as one clear line with the next step."""

import errno
import re
import socket

from eastfall.io.errors import LinkError
from eastfall.io.safetext import safe

_WHAT = {
    errno.ENOENT: "no such device or file; `eastfall ports` lists the serial ports",
    errno.ENXIO: "no such device; `eastfall ports` lists the serial ports",
    errno.ENODEV: "no such device; `eastfall ports` lists the serial ports",
    errno.EACCES: "permission denied; may this user read it? (on Linux often: the group dialout)",
    errno.EPERM: "permission denied; may this user read it? (on Linux often: the group dialout)",
    errno.EBUSY: "busy: another program holds it; close that one first",
    errno.EAGAIN: "busy: another program holds it; close that one first",
    errno.EISDIR: "a folder; expected a device or a file",
    errno.ECONNREFUSED: "connection refused: nothing listens there; is the device server on, is the port right?",
    errno.ETIMEDOUT: "no answer; is the device server on, is the address right?",
    errno.EHOSTUNREACH: "host not reachable; is the network up, is the address right?",
    errno.ENETUNREACH: "network not reachable; is the network up, is the address right?",
}


def link_error(url: str, error: BaseException) -> LinkError:
    """Return the one clear line for a link that cannot be opened."""
    text = str(error)
    number = _number(error)
    if isinstance(error, socket.gaierror):
        return LinkError(
            f"{safe(url, 80)}: the host's name cannot be resolved; expected a name or an address"
        )
    if "FileNotFoundError" in text:  # as pyserial words it on Windows
        number = errno.ENOENT
    elif "PermissionError" in text:  # there, this is a port that is open elsewhere
        number = errno.EBUSY
    what = _WHAT.get(number, "") if number is not None else ""
    return LinkError(f"{safe(url, 80)}: {what or 'cannot be opened: ' + safe(text, 160)}")


def lost_error(name: str, error: BaseException) -> LinkError:
    """Return the one clear line for a link that worked and is gone."""
    text = str(error)
    # The second is how pyserial words it; neither would tell a person at the collar what to look at.
    if _number(error) in (errno.EIO, errno.ENODEV, errno.ENXIO) or "returned no data" in text:
        text = "unplugged, or another program reads it"
    return LinkError(f"{safe(name, 80)}: lost: {safe(text, 120)}")


def _number(error: BaseException) -> int | None:
    """Return the operating system's number of an error, also from the text of one that pyserial wrapped."""
    number: int | None = getattr(error, "errno", None)
    found = re.search(r"\[Errno (\d+)\]|\((\d+), '", str(error)) if number is None else None
    return int(found[1] or found[2]) if found else number
