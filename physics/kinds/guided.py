"""A probe or cage in guides: tilt summed over depth, against what a plumb guide shows on the same journey."""

from collections import Counter
from dataclasses import replace
from itertools import pairwise

import numpy as np

from eastfall.physics.budget import joint
from eastfall.physics.calibration import corrected
from eastfall.physics.depth import Jump
from eastfall.physics.expected import ExpectedCurve
from eastfall.physics.faces import FaceBins
from eastfall.physics.findings import FaceSums, Halt, RestPoint, Rows, Station
from eastfall.physics.halts import HaltFinder, Rest
from eastfall.physics.kinds import base, closing
from eastfall.physics.kinds.azimuths import azimuth_of_a
from eastfall.physics.kinds.base import (
    ROW,
    Array,
    Batch,
    Judged,
    StationFacts,
    fill_limits,
    rows_of,
    stations_of,
    usable,
)
from eastfall.physics.kinds.closing import Closing, Due
from eastfall.physics.kinds.gaps import Gaps
from eastfall.physics.kinds.lever import Lever
from eastfall.physics.kinds.plumbguide import PlumbGuide
from eastfall.physics.kinds.shares import Shares, Summed
from eastfall.physics.kinds.sidepull import SidePull
from eastfall.physics.kinds.stillsum import StillSum
from eastfall.physics.models import reach
from eastfall.physics.readings import Readings
from eastfall.physics.settings import Assumptions
from eastfall.physics.tilt import OffsetSum, increments

_PIECE = 4096


class Guided:
    """Findings of a guided run.

    Parameters
    ----------
    assumptions : Assumptions
        Its kind is guided.
    curve : ExpectedCurve
        For the same assumptions.
    """

    u_of_rows = True

    def __init__(self, assumptions: Assumptions, curve: ExpectedCurve) -> None:
        guide, run, instrument = assumptions.guide, assumptions.run, assumptions.instrument
        self._assumptions = assumptions
        self._curve = curve
        self._plumb = PlumbGuide(curve)
        self._sum = OffsetSum(guide.start_east, guide.start_north, guide.method)
        self._still = StillSum(guide, instrument.u_tilt) if guide.readings == "still" else None
        self._halts = HaltFinder(run.hold)
        self._closing = Closing(
            run, assumptions.shaft.depth, reach(assumptions), crossed=guide.readings == "all"
        )
        self._faces = FaceBins(run.station_every, reach(assumptions))
        self._shares = Shares(assumptions)
        self._pull = SidePull()
        self._lever = Lever(instrument.a_azimuth + instrument.north_offset)
        self._last: Array | None = None
        self._seen: Array | None = None
        self._depth: float | None = None
        self._slope: Array = np.zeros(2)
        self._gaps = Gaps(assumptions.limits.feed_silent)
        self._station: Station | None = None
        self._station_before: Station | None = None
        self.unused: Counter[str] = Counter()

    # -- readings --------------------------------------------------------------------------------------------------

    def feed(self, readings: Readings) -> Batch:
        """Take a block."""
        slopes, azimuth = self._slopes(readings)
        good = np.isfinite(slopes[0]) & (slopes[0] * slopes[0] + slopes[1] * slopes[1] < 1.0)
        edges = self._gaps.ends(readings, good) if self._still is None else []
        readings = usable(readings, good, "no usable tilt", self.unused)
        if not len(readings):
            return Batch.none()
        if len(readings) < good.size:
            slopes, azimuth = slopes[:, good], azimuth[good]
        found = []
        for begin, end in zip([0, *edges], [*edges, len(readings)], strict=True):
            if begin == end:
                continue
            if begin in edges:
                self._bridge(readings.depth[begin], slopes[:, begin])
            part = slice(begin, end)
            found.append(self._take(readings[part], slopes[:, part], azimuth[part]))
        return found[0] if len(found) == 1 else _joined(found)

    def _slopes(self, readings: Readings) -> tuple[Array, Array]:
        """Return slope east and north, shape (2, n) [m/m], and azimuth of A at each row [rad]."""
        instrument = self._assumptions.instrument
        a, b = corrected(
            readings.column("tilt_a"), readings.column("tilt_b"), readings.column("temperature"), instrument
        )
        azimuth, face = readings.column("azimuth"), readings.column("face")
        true = np.full(a.shape, instrument.a_azimuth + instrument.north_offset)
        if np.isnan(azimuth).all() and np.isnan(face).all():
            return np.stack(increments(a, b, true[:1])), true
        true = azimuth_of_a(readings, instrument)
        return np.stack(increments(a, b, true)), true

    def _bridge(self, depth: float, slope: Array) -> None:
        """Go over a stretch without readings."""
        if self._depth is not None:
            self._shares.bridge(abs(depth - self._depth), self._slope, slope)

    def _take(self, readings: Readings, slopes: Array, azimuth: Array) -> Batch:
        """Take rows without a gap or a jump between them."""
        depth = readings.depth
        rows = rows_of(len(readings))
        rows[ROW["time"]], rows[ROW["depth"]] = readings.time, depth
        rows[ROW["host_time"]] = readings.host_time
        rows[ROW["speed"]], acceleration = self._plumb.line_speed(readings)
        rests = self._rests(readings, slopes)
        ridden, leaning = self._plumb.ride(readings.time, depth, rows[ROW["speed"]], acceleration)
        self._gather(readings, slopes, leaning, azimuth, rests)
        speed = rows[ROW["speed"]]
        bend = speed * speed / self._curve.models.field.gravity
        if self._still is None:
            at, summed = self._moving(readings, rows, slopes, ridden, azimuth, bend)
        else:
            at, summed = self._halting(self._still, rows, azimuth, rests)
        if self.u_of_rows:
            rows[ROW["u_east"]], rows[ROW["u_north"]] = self._uncertainty(at, summed)
        columns = (
            readings.time,
            depth,
            *rows[base.MEASURED],
            *rows[base.EXPECTED],
            summed.weight,
            *summed.slope,
            summed.lever,
            *summed.pull,
            readings.column("face"),
        )
        rows[ROW["passing"]], rows[ROW["direction"]], due = self._closing.take(columns, rests)
        fill_limits(rows, self._assumptions.limits)
        self._last = np.array([one[-1] for one in columns])
        self._last[closing.DEPTH], self._depth = at[-1], float(depth[-1])
        self._slope = self._last[closing.SLOPE]
        found = Rows(rows)
        judged = rows[base.MEASURED] - rows[base.EXPECTED]
        return Batch(rows=found, judged=judged, stations=self._stations(due))

    def _rests(self, readings: Readings, slopes: Array) -> list[tuple[int, Rest]]:
        """Return the halts that rows complete; a probe that is turned to its other face at rest begins another."""
        if np.isnan(readings.time).any():
            return []
        rows = np.array([readings.time, readings.depth, *slopes])
        face = readings.column("face")
        before = face[0] if self._last is None else self._last[closing.FACE]
        turns = np.flatnonzero(np.abs(np.diff(face, prepend=before)) > 0.0).tolist()
        found: list[tuple[int, Rest]] = []
        for begin, end in pairwise([0, *turns, len(readings)]):
            if begin in turns:
                self._halts.moved()
            if end > begin:
                found += [(begin + row, rest) for row, rest in self._halts.feed(rows[:, begin:end])]
        return found

    def _moving(
        self, readings: Readings, rows: Array, slopes: Array, ridden: Array, azimuth: Array, bend: Array
    ) -> tuple[Array, Summed]:
        """Sum every reading; return the depths that the offsets stand for, and where the sum stands."""
        depth = rows[ROW["depth"]]
        east, north, weight = self._sum.update(depth, slopes[1], slopes[0])
        rows[ROW["measured_east"]], rows[ROW["measured_north"]] = east, north
        self._plumb.begin(float(depth[0]))
        expected = self._plumb.at_rest(depth)
        expected[0] -= ridden
        rows[ROW["expected_east"]], rows[ROW["expected_north"]] = expected
        told = np.isfinite(readings.column("azimuth")) | np.isfinite(readings.column("face"))
        lever = self._lever.update(depth, azimuth, told)
        pull = self._pull.update(bend, slopes)
        return depth, Summed(
            depth=depth, offset=rows[base.MEASURED], weight=weight, slope=slopes, lever=lever, pull=pull
        )

    def _halting(
        self, still: StillSum, rows: Array, azimuth: Array, rests: list[tuple[int, Rest]]
    ) -> tuple[Array, Summed]:
        """Hold what the last halt gave; the same returns as `_moving`."""
        held = still.take(azimuth, rests)
        before = np.isnan(held[0])
        at = np.where(before, rows[ROW["depth"]], held[0])
        if rests:
            self._plumb.begin(rests[0][1].depth)
        rows[ROW["measured_east"]], rows[ROW["measured_north"]] = held[1:3]
        rows[ROW["expected_east"]], rows[ROW["expected_north"]] = np.where(
            before, 0.0, self._plumb.at_rest(at)
        )
        return at, Summed(
            depth=at,
            offset=held[1:3],
            weight=held[3],
            slope=held[4:6],
            lever=held[6],
            pull=np.zeros((2, at.size)),
        )

    def _gather(
        self,
        readings: Readings,
        slopes: Array,
        leaning: Array,
        azimuth: Array,
        rests: list[tuple[int, Rest]],
    ) -> None:
        """Put what the axes showed, freed from the lean of the line, to its depth and face."""
        face = readings.column("face")
        if np.isnan(face).all():
            return
        s, c = np.sin(azimuth), np.cos(azimuth)
        if self._still is None:
            # Where the speed is not known yet, the line has hardly begun to move.
            east, north = slopes[0] + np.nan_to_num(leaning), slopes[1]
            now = np.stack([readings.depth, east * s + north * c, east * c - north * s, face])
            joined = np.concatenate([now[:, :1] if self._seen is None else self._seen, now], axis=1)
            self._seen = now[:, -1:].copy()
            # The middle of each step, so that a way down and up again stand for the same depths, at the ends as well.
            # A step on which the probe was turned has no face of its own.
            middle = 0.5 * (joined[:, 1:] + joined[:, :-1])
            face = np.where(joined[3, 1:] == joined[3, :-1], face, np.nan)
            self._faces.add(middle[0], np.abs(np.diff(joined[0])), middle[1:3], face)
            return
        at = np.array([row for row, _ in rests], dtype=np.intp)
        east = np.array([rest.east.mean for _, rest in rests])
        north = np.array([rest.north.mean for _, rest in rests])
        s, c = s[at], c[at]
        tilts = np.stack([east * s + north * c, east * c - north * s])
        self._faces.add(readings.depth[at], np.ones(at.size), tilts, face[at])

    # -- stations --------------------------------------------------------------------------------------------------

    def _uncertainty(self, at: Array, summed: Summed) -> Array:
        u = self._curve.look_up(self._curve.u, at)
        u *= u
        # In pieces that stay in the processor's cache: the parts of a long block would not.
        for start in range(0, at.size, _PIECE):
            piece = slice(start, start + _PIECE)
            own = self._shares.parts(summed[piece])
            np.multiply(own, own, out=own)
            u[:, piece] += own.sum(axis=0)
        return np.sqrt(u, out=u)

    def _stations(self, due: list[Due]) -> tuple[Station, ...]:
        found: list[Station] = []
        start = 0
        for end in range(1, len(due) + 1):
            if end == len(due) or not _alike(due[end - 1], due[end]):
                found += self._closed(due[start:end])
                start = end
        return tuple(found)

    def _closed(self, due: list[Due]) -> list[Station]:
        """Close stations taken in passing one after the other, or one at rest."""
        kept = np.stack([one.at for one in due], axis=1)
        at, first = kept[closing.DEPTH], due[0]
        before = self._before(first)
        summed, expected = _summed(kept), self._curve.budget.at(at)
        facts = StationFacts(
            numbers=[one.number for one in due],
            depth=np.array([one.depth for one in due]),
            time=kept[closing.TIME],
            passing=first.passing,
            direction=first.direction,
            measured=kept[closing.MEASURED],
            expected=kept[closing.EXPECTED],
            readings=[one.readings for one in due],
            still=first.rest is not None,
            names=(*self._shares.names, *self._curve.budget.names),
            parts=np.concatenate([self._shares.parts(summed), expected]),
            correlation=np.concatenate([self._shares.correlation(summed), np.ones((len(expected), at.size))]),
            halt=_halt(first.rest),
            face=kept[closing.FACE],
            before=before,
        )
        found = stations_of(facts, self._assumptions)
        self._note_leans(before, found)
        self._station_before = found[-2] if len(found) > 1 else before
        self._station = found[-1]
        return found

    def _before(self, due: Due) -> Station | None:
        """Return the station before one in the same pass; that of a station renewed by a halt is the one before it."""
        for one in (self._station, self._station_before):
            if one is not None and one.passing == due.passing and one.number != due.number:
                return one
        return None

    def _note_leans(self, before: Station | None, found: list[Station]) -> None:
        for first, second in zip([before, *found[:-1]], found, strict=True):
            if first is not None and first.depth != second.depth:
                step = second.depth - first.depth
                east = (second.residual_east - first.residual_east) / step
                self._shares.lean(east, (second.residual_north - first.residual_north) / step)

    def jump(self, jump: Jump) -> None:
        """Go on at another depth: nothing is summed between, and what that leaves open is added to the uncertainty."""
        by = jump.after - jump.before
        if self._last is None:
            return
        self._shares.jumped(by, self._slope)
        self._sum.jump(jump.after)
        if self._still is not None:
            self._still.jump(by)
        self._plumb.jump(jump)
        self._lever.jump(by)
        self._seen = None
        self._halts.moved()
        self._closing.jump(jump.after)
        self._gaps.jump(jump.after)
        self._depth = jump.after

    def close(self) -> tuple[Station, ...]:
        """Close the station that the last pass stopped just short of."""
        return self._stations(self._closing.close())

    # -- looking ---------------------------------------------------------------------------------------------------

    def judged(self) -> Judged | None:
        """Return the newest row."""
        if self._last is None:
            return None
        at = _summed(self._last[:, None])
        u = self._uncertainty(at.depth, at)
        shared = self._curve.look_up(self._curve.covariance, at.depth)
        shared = shared + joint(self._shares.parts(at), self._shares.correlation(at))
        east, north = self._last[closing.MEASURED].tolist()
        expected_east, expected_north = self._last[closing.EXPECTED].tolist()
        return Judged(
            depth=float(at.depth[0]),
            measured_east=east,
            measured_north=north,
            expected_east=expected_east,
            expected_north=expected_north,
            u_east=float(u[0, 0]),
            u_north=float(u[1, 0]),
            covariance=float(shared[0]),
        )

    def hold_still(self) -> float | None:
        """Return the seconds until a halt closes a station."""
        return None if self._last is None else self._halts.to_go(float(self._last[closing.TIME]))

    def faces(self) -> FaceSums | None:
        """Return the sums of readings in two faces."""
        return self._faces.sums(self._assumptions.instrument.u_tilt)

    def rest_point(self) -> RestPoint | None:
        """Return nothing: a guided probe does not swing."""
        return None

    def notes(self) -> tuple[str, ...]:
        """Say where the answer leans on an assumption."""
        found = []
        if self._plumb.without_clock:
            found.append("no clock in the readings: line speed taken from guide.line_speed_mps")
        if self._still is not None and self._last is not None:
            found.append(f"summed from halt to halt: the answer is that at {self._last[closing.DEPTH]:.1f} m")
        if self._shares.is_bridged:
            found.append(
                "readings are missing over more than half a metre: bridged, with a larger uncertainty"
            )
        return tuple(found)


def _summed(kept: Array) -> Summed:
    """Return where the sum stood at rows kept in the order of `KEPT`, shape (len(KEPT), n)."""
    return Summed(
        depth=kept[closing.DEPTH],
        offset=kept[closing.MEASURED],
        weight=kept[closing.WEIGHT],
        slope=kept[closing.SLOPE],
        lever=kept[closing.LEVER],
        pull=kept[closing.PULL],
    )


def _alike(one: Due, other: Due) -> bool:
    """Whether two stations may be closed together."""
    still = one.rest is not None or other.rest is not None
    return not still and one.passing == other.passing


def _halt(rest: Rest | None) -> Halt | None:
    if rest is None:
        return None
    return Halt(
        east=rest.east.mean,
        north=rest.north.mean,
        scatter_east=rest.east.scatter,
        scatter_north=rest.north.scatter,
        seconds=rest.seconds,
    )


def _joined(batches: list[Batch]) -> Batch:
    return replace(
        batches[0],
        rows=Rows(np.concatenate([one.rows.data for one in batches], axis=1)),
        judged=np.concatenate([one.judged for one in batches], axis=1),
        stations=tuple(station for one in batches for station in one.stations),
    )
