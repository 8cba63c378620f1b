"""Text from instruments, logs and site files made harmless for a terminal; what a screen does with it is the screen's.

A control character in an instrument line could move the cursor, retitle the window or set the terminal's keyboard.
Every character that is not plainly printable becomes a visible escape, so that the text can be shown, quoted in a
message and typed again.
"""

import json
import re

_FORMULA = ("=", "+", "-", "@", "\t", "\r", "\n", "\0")
"""What makes a spreadsheet take a text cell for a formula, or hides such a beginning."""
# Besides the two control blocks: formatting characters that reorder or hide text (category Cf: zero width, bidi
# overrides, tags, soft hyphen), line and paragraph separators, lone surrogates, private use and unassigned planes.
_SAFE_ASCII = re.compile(r"[ -~]*\Z")
_ELLIPSIS = "..."


def _escaped(character: str) -> str:
    code = ord(character)
    if code < 0x100:
        return f"\\x{code:02x}"
    return f"\\u{code:04x}" if code < 0x10000 else f"\\U{code:08x}"


def safe(text: str | bytes, width: int | None = None) -> str:
    r"""Return `text` with everything that a terminal could act on shown as an escape.

    Parameters
    ----------
    text : str or bytes
        Bytes are taken as latin-1: one byte, one character, as the run log keeps them.
    width : int, optional
        The longest result [characters], 3 or more; longer text ends in "...".

    Returns
    -------
    str
        Printable characters alone: a control character reads \x1b, a bidirectional override \u202e.
    """
    plain = text.decode("latin-1") if isinstance(text, bytes) else text
    if width is not None:
        plain = plain[: width + 1]  # one more than fits says that something is cut
    if _SAFE_ASCII.match(plain) is None:
        plain = "".join(one if one.isprintable() else _escaped(one) for one in plain)
    if width is not None and len(plain) > width:
        return plain[: max(width - len(_ELLIPSIS), 0)] + _ELLIPSIS
    return plain


def safe_json(text: str) -> str:
    r"""Return JSON with a \u escape for every character that a terminal could act on: it reads as the same.

    JSON itself escapes only the first of the two control blocks.
    """
    if _SAFE_ASCII.match(text.replace("\n", "")):
        return text
    return "".join(one if one.isprintable() or one == "\n" else json.dumps(one)[1:-1] for one in text)


def guarded(cell: object) -> object:
    """Return a CSV cell: numbers as they are, None as empty, text that could start a formula behind an apostrophe."""
    if cell is None:
        return ""
    if isinstance(cell, str):
        return "'" + cell if cell.lstrip(" ").startswith(_FORMULA) else cell
    return cell
