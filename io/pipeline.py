"""The one shared path from arrivals to findings: live, replay, follow and reduce all go through here.

Decoding is `io.forms`, joining links `io.join`, and what readings mean is `physics.survey`.
"""

from collections import Counter
from collections.abc import Iterable
from math import inf, isfinite, nextafter

import numpy as np

from eastfall.io.arrivals import Arrival, LineBlock, RunEvent
from eastfall.io.decoded import believed
from eastfall.io.errors import LogError
from eastfall.io.forms import decoder_for
from eastfall.io.join import NO_DEPTH, NO_PARTNER, Join, Joined
from eastfall.io.safetext import safe
from eastfall.io.sitefile import LinkSettings, SiteFile
from eastfall.io.siteplace import refusals_of
from eastfall.physics.errors import ParameterError
from eastfall.physics.findings import AlarmChange, Findings, Rows, Station
from eastfall.physics.survey import Survey

CUT_SHORT = "line cut short"
"""The fault of a line whose end never came because its link was lost or closed."""
NOT_APPLIED = "event not applied"
"""The fault of an event that the engine refuses, such as an acknowledgement of an alarm that does not exist."""
UNKNOWN_LINK = "line of an unknown link"
_UNARMED = "read before the run was armed"
_DEFAULT_LINK = LinkSettings(url="-")
_MARKED = {"depth_m": "depth_m", "east_m": "east_mm", "north_m": "north_mm"}
"""Fields of a mark, and the quantity of a line whose bounds hold for each."""


class Pipeline:
    """Takes arrivals in their order and returns what follows from them.

    Parameters
    ----------
    site : SiteFile
        How lines are read and what the run is about.
    survey : Survey, optional
        The engine; by default a fresh one for the site's assumptions.
    armed : bool, optional
        Whether readings count from the start. By default not in a `drop` run: there an "armed" event must come first.
        A plain capture has no events: hand in True for it.

    Attributes
    ----------
    survey : Survey
    faults : Counter
        Faults by kind since the start.
    frames : int
        Readings handed to the survey.
    rejected : int
        Lines and readings that were refused.
    set_aside : int
        Readings that came before the run was armed.
    last_faults : dict
        For each link, its latest bad line: (line number, kind, safe text, what was expected).
    """

    def __init__(self, site: SiteFile, survey: Survey | None = None, *, armed: bool | None = None) -> None:
        links = site.links or (_DEFAULT_LINK,)
        with refusals_of(site):
            self.survey = survey or Survey(site.assumptions, notes=site.notes, feed_watched=not site.by_hand)
        self.armed = site.assumptions.run.kind != "drop" if armed is None else armed
        self.faults: Counter[str] = Counter()
        self.frames = 0
        self.rejected = 0
        self.set_aside = 0
        self.last_faults: dict[int, tuple[int, str, str, str]] = {}
        self._decoders = [decoder_for(one) for one in links]
        self._join = Join(links)

    def take(self, arrival: Arrival) -> Findings:
        """Take one arrival.

        Parameters
        ----------
        arrival : LineBlock or RunEvent
            In the order of the run log.

        Returns
        -------
        Findings
            What it brought.

        Raises
        ------
        LogError
            An event whose fields are not those of its name: the log was not written by this program.
        """
        return self._lines(arrival) if isinstance(arrival, LineBlock) else self._event(arrival)

    def tick(self, host_time: float) -> Findings:
        """Let time pass [s] without an arrival: only brings forward what is settled whatever comes next."""
        if not self.armed:
            return merged(())
        joined = self._feed(self._join.tick(host_time))
        # A reading that waits for its partner is no silence: for the engine, time stands just before it.
        return merged([joined, self.survey.tick(min(host_time, nextafter(self._join.oldest, -inf)))])

    def close(self, host_time: float) -> Findings:
        """End the run at `host_time` [s], NaN for a capture; as the "end" event does."""
        found = [self.tick(host_time)] if isfinite(host_time) else []
        return merged([*found, self._feed(self._join.close()), self.survey.close(host_time)])

    # -- lines -----------------------------------------------------------------------------------------------------

    def _lines(self, block: LineBlock) -> Findings:
        if not 0 <= block.link < len(self._decoders):
            self.faults[UNKNOWN_LINK] += len(block)
            self.rejected += len(block)
            return merged(())
        decoded = self._decoders[block.link].decode(block)
        self.faults.update(decoded.faults)
        if decoded.examples:
            self.last_faults[block.link] = decoded.examples[-1]
        self.rejected += decoded.rejected.size
        if not self.armed:
            self._set_aside(len(decoded.readings))
            return merged(())
        return self._feed(self._join.push(block.link, decoded.readings, decoded.rejected))

    def _set_aside(self, count: int) -> None:
        self.set_aside += count
        self.survey.unused[_UNARMED] += count

    def _feed(self, joined: Joined) -> Findings:
        if joined.missing:
            self.faults[NO_DEPTH] += joined.missing
            self.rejected += joined.missing
        if joined.bare:
            self.faults[NO_PARTNER] += joined.bare
        self.frames += len(joined.readings)
        if not len(joined.readings) and not joined.rejected.size:
            return merged(())
        return self.survey.feed(joined.readings, joined.rejected)

    # -- events ----------------------------------------------------------------------------------------------------

    def _event(self, event: RunEvent) -> Findings:
        match event.name:
            case "armed":
                self.armed = True
            case "link":
                if event.fields.get("cut"):
                    self.faults[CUT_SHORT] += 1
            case "end":
                return self.close(event.time)
            case "mark":
                return self._marked(event)
            case "acknowledge" | "shelve" | "condition":
                ahead = self.tick(event.time)
                return merged([ahead, self._applied(event)])
        return merged(())

    def _marked(self, event: RunEvent) -> Findings:
        """Take an offset that a person typed in, as a reading like any other."""
        values = [_length(event, name, column) for name, column in _MARKED.items()]
        if not self.armed:
            self._set_aside(1)
            return merged(())
        self.frames += 1
        return merged([self.tick(event.time), self.survey.mark(event.time, *values)])

    def _applied(self, event: RunEvent) -> Findings:
        try:
            return self._by_name(event)
        except ParameterError:
            # Refused live, it is refused in the same place of a replay: nothing else follows from it.
            self.faults[NOT_APPLIED] += 1
            return merged(())

    def _by_name(self, event: RunEvent) -> Findings:
        survey, time, name = self.survey, event.time, _text(event, "name")
        if event.name == "acknowledge":
            return survey.acknowledge(time, name, _text(event, "who", ""))
        if event.name == "shelve":
            reason, who = _text(event, "reason"), _text(event, "who", "")
            return survey.shelve(time, name, _number(event, "seconds"), reason, who)
        return survey.condition(time, name, _flag(event, "on"), _text(event, "message", ""))


def merged(findings: Iterable[Findings]) -> Findings:
    """Return one Findings that says what several say, in their order."""
    given = [one for one in findings if len(one.rows) or one.stations or one.alarms]
    if len(given) == 1:
        return given[0]
    stations: list[Station] = []
    alarms: list[AlarmChange] = []
    for one in given:
        stations += one.stations
        alarms += one.alarms
    blocks = [one.rows.data for one in given if len(one.rows)]
    rows = Rows(np.concatenate(blocks, axis=1)) if blocks else Rows.none()
    return Findings(rows=rows, stations=tuple(stations), alarms=tuple(alarms))


def _text(event: RunEvent, key: str, otherwise: str | None = None) -> str:
    """Return a name or words of an alarm; those in someone's log may have been made to act on a terminal."""
    value = event.fields.get(key, otherwise)
    if not isinstance(value, str):
        raise _not_ours(event, key, "text")
    return safe(value)


def _number(event: RunEvent, key: str) -> float:
    value = event.fields.get(key)
    if isinstance(value, bool) or not isinstance(value, int | float):
        raise _not_ours(event, key, "a number")
    return float(value)


def _length(event: RunEvent, key: str, column: str) -> float:
    value = _number(event, key)
    if not believed(column, value):
        raise _not_ours(event, key, "a length in a shaft")
    return value


def _flag(event: RunEvent, key: str) -> bool:
    value = event.fields.get(key)
    if not isinstance(value, bool):
        raise _not_ours(event, key, "true or false")
    return value


def _not_ours(event: RunEvent, key: str, expected: str) -> LogError:
    shown = safe(repr(event.fields.get(key)), 40)
    return LogError(
        f'event "{safe(event.name, 40)}" at {event.time:g} s: {key} is {shown}; expected {expected}'
    )
