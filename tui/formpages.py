"""What the site form shows of a draft: its pages, the rows of one page, the words about one key; no screen in it."""

import re
from dataclasses import dataclass

from eastfall.io import sitekeys
from eastfall.io.safetext import safe
from eastfall.io.siteedit import REQUIRED, SiteDraft
from eastfall.io.sitevalues import joined, key_of, parts, shape, typed
from eastfall.tui.keys import AS_MADE, Keymap
from eastfall.tui.widgets.formrow import KeyRow, SectionRow, State

FIRST = "start here"
MORE = "+ link"
_HINTS = {
    "site.name": "e.g. Sandrigg East",
    "site.latitude_deg": "e.g. 57.30, south negative",
    "shaft.depth_m": "e.g. 940",
    "url": "e.g. /dev/ttyUSB0, COM3, socket://10.0.0.7:4001",
}


@dataclass(frozen=True, slots=True, kw_only=True)
class Page:
    """One entry of the section list and its keys."""

    label: str
    section: str = ""
    index: int | None = None
    """Of a link."""
    paths: tuple[str, ...] = ()


def pages(draft: SiteDraft) -> list[Page]:
    """Return the pages of a draft: the required keys, each section, each link, and one to add a link."""
    found = [Page(label=FIRST, paths=("site.name", *REQUIRED))]
    found += [_page(draft, section, section, None) for section in sitekeys.SECTIONS if section != "link"]
    found += [_page(draft, f"link {index + 1}", "link", index) for index in range(draft.links)]
    return [*found, Page(label=MORE)]


def _page(draft: SiteDraft, label: str, section: str, index: int | None) -> Page:
    names = (*sitekeys.names_in(section), *draft.strays(section, index))
    return Page(
        label=label,
        section=section,
        index=index,
        paths=tuple(joined(section, index, one) for one in names),
    )


def section_rows(draft: SiteDraft, shown: list[Page], faults: dict[str, str]) -> tuple[SectionRow, ...]:
    """Return the section list; the keys of the first page are counted where they belong."""
    return tuple(
        SectionRow(
            name=one.label,
            given=draft.given(one.section, one.index) if one.section else 0,
            faults=sum(path in faults for path in one.paths),
        )
        for one in shown
    )


def key_row(draft: SiteDraft, path: str, faults: dict[str, str], *, full: bool = False) -> KeyRow:
    """Return one row; `full` names the section too."""
    value = draft.value(path)
    key = key_of(path)
    state: State = "given" if value is not None else "default"
    if path in faults:
        state = "missing" if value is None else "fault"
    shown = one_line(path, value) if value is not None else _default_words(key)
    name = path if full else parts(path)[2]
    return KeyRow(name=safe(name, 25), value=safe(shown), unit=key.unit if key else "", state=state)


def one_line(path: str, value: object) -> str:
    """Return a value as it is typed in one line; rows with semicolons between."""
    return typed(path, value).replace("\n", " ; ")


def _default_words(key: sitekeys.Key | None) -> str:
    if key is None:
        return ""
    if key.required:
        return "required"
    if key.default is None or key.default in ("", [], ()):
        return "none"
    return one_line(f"{key.section}.{key.name}", key.default)


def hint(path: str, keymap: Keymap = AS_MADE) -> str:
    """Return what stands in the empty line."""
    key = key_of(path)
    name = parts(path)[2]
    example = _HINTS.get(path) or _HINTS.get(name, "")
    if key is None or example:
        return example
    if shape(path) == "choice":
        return f"{keymap['form.less']} {keymap['form.more']} choose: " + ", ".join(key.choices)
    if shape(path) == "rows":
        return f"{keymap['form.open']} opens the rows"
    return "" if key.required else f"default: {_default_words(key)}"


def about(path: str) -> str:
    """Return the help of a key, what is accepted, and its default, as one text."""
    key = key_of(path)
    if key is None:
        return "No site file has this key: empty the line to take it out."
    said = [key.help] if key.help else []
    if key.expectation != key.help:
        said.append(key.expectation)
    said.append("required" if key.required else f"default: {_default_words(key)}")
    return ". ".join(one[0].upper() + one[1:] for one in said) + "."


def file_name(draft: SiteDraft) -> str:
    """Return a name for the file, from what the shaft is called."""
    name = draft.value("site.name")
    plain = re.sub(r"[^a-z0-9]+", "-", name.lower()).strip("-") if isinstance(name, str) else ""
    return f"{plain[:40] or 'site'}.toml"
