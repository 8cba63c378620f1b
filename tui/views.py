"""From a snapshot and a sight to what each part of the screen shows; decides words and places, draws nothing."""

from dataclasses import dataclass
from math import isfinite
from typing import TYPE_CHECKING

import numpy as np

from eastfall.physics.findings import Standing, Station
from eastfall.tui import sight as look
from eastfall.tui import words
from eastfall.tui.keys import AS_MADE, Keymap
from eastfall.tui.roles import Role
from eastfall.tui.session import Curve, Session
from eastfall.tui.store import Snapshot, in_order
from eastfall.tui.units import METRIC, Units, lengths_in
from eastfall.tui.widgets.figures import Figure
from eastfall.tui.widgets.line import Piece
from eastfall.tui.widgets.plan import PlanView, Point

if TYPE_CHECKING:
    from eastfall.physics.settings import Kind

Subject = Standing | Station | None

_DEEP = 1000.0  # of the long unit, from where the large figure leaves the tenth to the answer line
_NOTHING = (np.empty(0), np.empty(0))
_TRAIL_SECONDS = 60.0
_NOTE_SECONDS = 20.0  # that a note stays in view


def title(session: Session) -> tuple[Piece, ...]:
    """Return kind of run and reference line, then the site: its name may be cut, the reference line never."""
    run = session.assumptions.run
    return (
        (f"{words.KIND[run.kind]} from ", Role.TEXT),
        (words.REFERENCE[run.reference], Role.STRONG),
        (f"  {session.title or 'unnamed site'}", Role.STRONG),
    )


def state(snapshot: Snapshot, sight: look.Sight, *, held: bool) -> tuple[Piece, ...]:
    """Return where in time the picture is, and whether it is the newest."""
    if snapshot.mode == "replay":
        position = f"{words.clock(snapshot.time)} of {words.clock(snapshot.duration or 0.0)}"
        pieces = [(f"REPLAY {position} {_pace(snapshot)}", Role.STRONG)]
    else:
        what = "ENDED" if snapshot.ended else "LIVE"
        pieces = [(f"{what} {words.clock(snapshot.time)}", Role.STRONG)]
    if held:
        pieces.insert(0, ("PICTURE HELD ", Role.WARNING))
    if not sight.follows:
        pieces.insert(0, ("LOOKING BACK ", Role.WARNING))
    return tuple(pieces)


def _pace(snapshot: Snapshot) -> str:
    """Return how a replay moves."""
    if snapshot.keeping_up:
        return "NEWEST"
    if snapshot.ended:
        return "END"
    return f"x{snapshot.speed:g}" if snapshot.playing else "PAUSED"


def is_old(snapshot: Snapshot, one: Subject) -> bool:
    """Tell whether the answer in view is the newest there is, and the feed has brought nothing since."""
    gone = ("feed silent", "link lost")
    return isinstance(one, Standing) and any(
        alarm.name.startswith(gone) and alarm.state in {"active", "acknowledged"} for alarm in snapshot.alarms
    )


def answer(snapshot: Snapshot, one: Subject, units: Units) -> str:
    """Return the answer as one line, which says first if it is old."""
    told = words.answer(one, units)
    return f"OLD, no new reading: {told}" if is_old(snapshot, one) else told


def answer_ground(snapshot: Snapshot, one: Subject) -> Role | None:
    """Return the colour under the answer; an old one has none, whatever it says."""
    if one is None or not isfinite(words.residual_length(one)) or is_old(snapshot, one):
        return None
    if one.verdict == "over":
        return Role.GROUND_ACTION
    calm = one.verdict == "within" and words.residual_length(one) <= one.warning
    return Role.GROUND_OK if calm else Role.GROUND_WARNING


def steer(session: Session, snapshot: Snapshot, one: Subject, keymap: Keymap = AS_MADE) -> tuple[Piece, ...]:
    """Return what to do, or what hinders."""
    if snapshot.trouble:
        return ((f"STOPPED: {snapshot.trouble}", Role.ACTION),)
    if not snapshot.armed:
        arm, planner = keymap["watch.arm"], keymap["watch.planner"]
        told = f"Not armed. Clear the shaft, then press {arm} to say so. {planner} plans the release."
        return ((told, Role.WARNING),)
    if isinstance(one, Station):
        how = words.taken(one, session.assumptions.run.kind)
        follow = f"Press {keymap['watch.follow']} to follow the newest."
        return ((f"Station {one.number}, {how}. {follow}", Role.TEXT),)
    if is_old(snapshot, one):
        return (("Do not go by this: wait until the feed is back.", Role.WARNING),)
    return ((words.steering(one, session.assumptions.run.kind, session.units), Role.STRONG),)


def swing(session: Session, one: Subject) -> tuple[Piece, ...]:
    """Return what the swing of a hung line says; nothing for other runs."""
    if session.assumptions.run.kind != "hung" or not isinstance(one, Standing):
        return ()
    touches = one.rest_point is not None and words.TOUCHING in one.rest_point.message
    return ((words.swing(one.rest_point, session.units), Role.WARNING if touches else Role.TEXT),)


def notes(session: Session, snapshot: Snapshot, one: Subject) -> tuple[Piece, ...]:
    """Return what a reader must know besides: other settings than recorded, what the model leaves out, a fresh note."""
    found = list(one.notes) if isinstance(one, Standing) else []
    if session.differences:
        found.insert(0, f"WHAT IF: {', '.join(session.differences)}")
    noted = [said for said in snapshot.said if said.is_note and snapshot.time - said.time <= _NOTE_SECONDS]
    fresh = tuple((f"note {words.clock(said.time)} {said.text}  ", Role.STRONG) for said in noted[-1:])
    return (*fresh, *((f"! {lengths_in(note, session.units)}  ", Role.WARNING) for note in found))


def figures(session: Session, one: Subject) -> tuple[Figure, ...]:
    """Return the numbers that matter."""
    units = session.units
    if one is None:
        return (Figure(name="depth", value="–", unit=units.long),)
    length = words.residual_length(one)
    role = {"over": Role.ACTION, "undecided": Role.WARNING}.get(one.verdict, Role.STRONG)
    shown = [
        Figure(
            name="depth",
            value=units.depth(one.depth, int(one.depth < _DEEP * units.long_size)),
            unit=units.long,
            note=_motion(one, session.assumptions.run.kind, units),
        ),
        Figure(
            name="residual",
            value=units.offset(length),
            unit=f"± {units.offset(words.expanded(one))} {units.short}",
            role=role,
        ),
        Figure(
            name="toward",
            value=words.bearing(one.residual_east, one.residual_north),
            unit="",
            role=role,
        ),
        Figure(
            name="measured E",
            value=units.signed(one.measured_east),
            unit=units.short,
            note=f"expect {units.signed(one.expected_east)}",
        ),
        Figure(
            name="measured N",
            value=units.signed(one.measured_north),
            unit=units.short,
            note=f"expect {units.signed(one.expected_north)}",
        ),
    ]
    if isinstance(one, Standing) and session.assumptions.run.kind == "hung" and one.rest_point is not None:
        rest = one.rest_point
        shown.append(
            Figure(name="period", value=f"{rest.period:.1f}", unit="s", note=f"{rest.swings:.1f} swings")
        )
    return tuple(shown)


def _motion(one: Standing | Station, kind: "Kind", units: Units) -> str:
    """Return how the line moves; of a body that fell, nothing does any more."""
    if isinstance(one, Station):
        return words.taken(one, kind).partition(",")[0]
    if kind == "drop" or not isfinite(one.speed):
        return ""
    if abs(one.speed) < 0.005:
        return "line still"
    way = "down" if one.speed > 0.0 else "up"
    return f"{way} {units.depth(abs(one.speed))} {units.speed}"


def plan(session: Session, snapshot: Snapshot, sight: look.Sight, one: Subject) -> PlanView:
    """Return what the plan shows at the depth in view."""
    shaft = session.assumptions.shaft
    kind = session.assumptions.run.kind
    live = isinstance(one, Standing)
    return PlanView(
        one=one,
        leans=kind == "guided",
        trail=_trail(snapshot) if live and kind == "hung" else _NOTHING,
        landings=_landings(snapshot) if live and kind == "drop" else _NOTHING,
        rest=one.rest_point if isinstance(one, Standing) else None,
        bob=_at(session.bob, one) if sight.extras else None,
        fall=_at(session.fall, one) if sight.extras else None,
        centre=(shaft.centre_east, shaft.centre_north),
        diameter=shaft.diameter,
        clearance=one.wall_clearance if isinstance(one, Standing) else None,
        units=session.units,
    )


def _trail(snapshot: Snapshot) -> tuple[np.ndarray, np.ndarray]:
    """Return where the line was in the last minute [m]."""
    rows = snapshot.rows
    time = rows.column("time")
    begin = int(np.searchsorted(time, time[-1] - _TRAIL_SECONDS)) if time.size else 0
    return rows.column("measured_east")[begin:], rows.column("measured_north")[begin:]


def _landings(snapshot: Snapshot) -> tuple[np.ndarray, np.ndarray]:
    """Return where the bodies were so far [m]."""
    rows = snapshot.rows
    return rows.column("measured_east"), rows.column("measured_north")


def _at(curve: Curve | None, one: Subject) -> Point | None:
    if curve is None or one is None or not isfinite(one.depth):
        return None
    east, north = curve(np.array([one.depth]))
    return float(east[0]), float(north[0])


@dataclass(frozen=True, slots=True, kw_only=True)
class AlarmLine:
    """The alarm to show first, what to do with it, and the colour under both."""

    pieces: tuple[Piece, ...]
    hint: tuple[Piece, ...] = ()
    under: Role | None = None


def alarm_line(
    snapshot: Snapshot,
    units: Units = METRIC,
    keymap: Keymap = AS_MADE,
    *,
    seen: str = "watch.acknowledge",
    board: str = "watch.alarms",
) -> AlarmLine:
    """Return the line of the alarm to show first; `seen` and `board` name the keys that acknowledge and list it."""
    if not snapshot.alarms:
        return AlarmLine(pieces=(("no alarms", Role.DIM),))
    worst = in_order(snapshot.alarms)[0]
    waiting = sum(one.state in words.WANTS_ANSWER for one in snapshot.alarms)
    text = words.alarm(worst, units)
    if not waiting:
        return AlarmLine(pieces=((text, Role.TEXT),), hint=((f"{len(snapshot.alarms)} seen", Role.DIM),))
    under = Role.GROUND_WARNING if "warning" in worst.name else Role.GROUND_ACTION
    more = f"{waiting - 1} more  " if waiting > 1 else ""
    keys = [f"{keymap[seen]}: seen"] if snapshot.mode == "live" else []
    keys += [f"{keymap[board]}: all"] if board else []
    told = f"({', '.join(keys)})" if keys else ""
    return AlarmLine(pieces=((text, Role.ON_GROUND),), hint=((f"{more}{told}", Role.ON_GROUND),), under=under)
