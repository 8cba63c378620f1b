"""Plain letters: whether a terminal or a pipe has more than ASCII, and what stands for the rest where it has not.

Only the standard library is imported here: every message of the command line goes through this module.
"""

import locale
import re
import unicodedata
from collections.abc import Mapping
from functools import lru_cache

_SPELLED = """
±:+- °:_deg –:- —:- −:- …:... ·:- ×:x ÷:/ √:sqrt_ ≤:<= ≥:>= ≈:~ ≠:!= ∞:inf ½:1/2 ²:2 ³:3 ¹:1 ⁰:0 ⁻:-
′:' ″:" ‘:' ’:' “:" ”:" „:" «:" »:" ↑:up ↓:down ←:left →:right ▶:> ●:@ ○:o
─:- ╌:- ┈:- ━:- │:| ┃:| ╎:| ┊:| █:# ▀:# ▄:# ▌:# ▐:#
µ:u μ:u Δ:delta_ Ω:ohm α:alpha β:beta γ:gamma δ:delta ε:epsilon η:eta θ:theta κ:kappa λ:lambda ν:nu
ρ:rho σ:sigma τ:tau φ:phi χ:chi ω:omega π:pi
ß:ss ø:o Ø:O æ:ae Æ:Ae œ:oe Œ:Oe ł:l Ł:L đ:d Đ:D ð:d Ð:D þ:th Þ:Th ı:i
"""
"""What the program and its readers write beyond ASCII, and how it is spelled; a low line stands for a blank."""
_PLAIN = str.maketrans({one[0]: one[2:].replace("_", " ") for one in _SPELLED.split()})
_NEXT_TO_A_DEGREE = re.compile(r"(°)(?=\d)")
_UNKNOWN = "?"
_NEEDED = "±°–²µ″"
"""What nearly every answer is written with; where it is lacking, plain letters stand for all of it."""
_NO_LETTERS = ("dumb", "unknown", "vt")
"""Begins the name of terminals that are not asked for more than ASCII."""
_COERCED = frozenset({"C.UTF-8", "C.utf8", "UTF-8"})
"""What Python itself puts into LC_CTYPE where nothing better than C is set (PEP 538)."""


@lru_cache(maxsize=4096)
def in_ascii(words: str) -> str:
    """Return words in plain letters: signs spelled out, accents left off, a question mark for what has no letters."""
    if words.isascii():
        return words
    spelled = _NEXT_TO_A_DEGREE.sub(r"\1 ", words.replace(" °C", " C").replace("°C", " C"))
    plain = unicodedata.normalize("NFKD", spelled.translate(_PLAIN)).translate(_PLAIN)
    return "".join(one if one.isascii() else "" if unicodedata.combining(one) else _UNKNOWN for one in plain)


def can(encoding: str | None, letters: str) -> bool:
    """Tell whether an encoding has some letters; one that is not known has none beyond ASCII."""
    try:
        letters.encode(encoding or "ascii")
    except (UnicodeEncodeError, LookupError):
        return False
    return True


def is_plain(environment: Mapping[str, str], encoding: str | None) -> bool:
    """Tell whether only ASCII should be written: by the locale, the terminal or the encoding of the stream.

    Parameters
    ----------
    environment : mapping
        EASTFALL_GLYPHS overrules locale and terminal; TERM, LC_ALL, LC_CTYPE, LANG.
    encoding : str or None
        Of the stream; what it lacks cannot be written whatever is asked for.
    """
    if not can(encoding, _NEEDED):
        return True
    asked = environment.get("EASTFALL_GLYPHS")
    if asked in {"braille", "half", "ascii"}:
        return asked == "ascii"
    return environment.get("TERM", "").startswith(_NO_LETTERS) or not speaks_unicode(environment)


def speaks_unicode(environment: Mapping[str, str]) -> bool:
    """Tell whether the locale that a person set, if any, is one of Unicode.

    Python writes UTF-8 also where the locale is C (PEP 538, PEP 540), so its own streams do not tell. A machine without
    any locale set says nothing, and is taken to be one of today.
    """
    named = environment.get("LC_ALL") or environment.get("LC_CTYPE") or environment.get("LANG") or ""
    if not environment.get("LC_ALL") and named in _COERCED and environment.get("LANG"):
        named = environment["LANG"]
    if named in {"", *_COERCED}:
        return True
    codeset = locale.normalize(named).partition(".")[2].partition("@")[0]
    return codeset.lower().replace("-", "") == "utf8"
