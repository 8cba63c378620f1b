"""The report's figures as SVG for embedding, drawn by matplotlib: offsets by depth, plan view, differences.

Text stays text, so a figure can be searched and copied; no words of the user's get into a figure.
"""

import logging
import re
from collections.abc import Sequence
from io import StringIO
from typing import Any

import numpy as np
from numpy.typing import NDArray

# Said at its import, where it finds no folder of its own to write to; fonts are looked up anew then, no more.
logging.getLogger("matplotlib").setLevel(logging.ERROR)
import matplotlib as mpl  # noqa: E402
from matplotlib.axes import Axes  # noqa: E402
from matplotlib.figure import Figure  # noqa: E402

from eastfall.physics.budget import COVERAGE_FACTOR  # noqa: E402
from eastfall.physics.findings import Station  # noqa: E402
from eastfall.physics.settings import Shaft  # noqa: E402

_MM = 1000.0
_INK, _EAST, _LIMIT, _WARN, _QUIET = "#1a1a1a", "#0b4f8a", "#b3261e", "#b26a00", "#7a7a7a"
_PASS = ("#0b4f8a", "#c05a00", "#3b7d3b", "#7a3b86")
_MARK = ("v", "^", "s", "D")
_STYLE: Any = {
    "svg.fonttype": "none",
    "font.family": "sans-serif",
    "font.sans-serif": ["Arial", "Helvetica", "DejaVu Sans", "sans-serif"],
    "font.size": 8.5,
    "axes.edgecolor": _INK,
    "axes.linewidth": 0.7,
    "axes.grid": True,
    "grid.color": "#d9d9d9",
    "grid.linewidth": 0.5,
    "lines.linewidth": 1.1,
    "legend.frameon": False,
    "axes.spines.top": False,
    "axes.spines.right": False,
}
_FLAT = 1.9
"""Height of a figure by depth with a single depth [inch]."""
_ONLY_A_FEW = 3
"""Stations up to which a pass is drawn as points with bars instead of a line with a band."""

Column = NDArray[np.float64]


def _svg(figure: Figure, name: str) -> str:
    """Return a figure as an SVG element whose ids are its own on the page."""
    out = StringIO()
    with mpl.rc_context({"svg.fonttype": "none", "svg.hashsalt": name}):
        figure.savefig(out, format="svg", metadata={"Date": None, "Creator": None})
    text = out.getvalue()
    text = re.sub(r"<metadata>.*?</metadata>", "", text[text.index("<svg") :], flags=re.DOTALL)
    text = re.sub(r'\bid="([^"]+)"', rf'id="{name}-\1"', text)
    text = re.sub(r'(xlink:href="#|url\(#)', rf"\1{name}-", text)
    return re.sub(r'width="[\d.]+pt" height="[\d.]+pt"', 'class="figure" role="img"', text, count=1)


def _passes(stations: Sequence[Station]) -> list[tuple[int, list[Station]]]:
    numbers = sorted({one.passing for one in stations})
    return [
        (number, sorted((one for one in stations if one.passing == number), key=lambda one: one.depth))
        for number in numbers
    ]


def _column(stations: Sequence[Station], name: str) -> Column:
    return np.array([getattr(one, name) for one in stations], dtype=float)


def _pair(height: float, depths: Column) -> tuple[Figure, Any]:
    """Return a figure with two plots by depth; a low one where there is only one depth."""
    figure = Figure(figsize=(7.0, _FLAT if np.ptp(depths) == 0.0 else height), layout="constrained")
    axes = figure.subplots(1, 2, sharey=True)
    return figure, axes


def _depth_axis(axes: Axes, depths: Column, side: str, label: str) -> None:
    single = np.ptp(depths) == 0.0
    deepest, highest = float(np.max(depths)), float(np.min(depths) if single else min(np.min(depths), 0.0))
    room = 0.5 if single else 0.03 * (deepest - highest)
    axes.set_ylim(deepest + room, highest - room)
    axes.set_xlabel(f"{label} {side} [mm]")
    axes.axvline(0.0, color=_INK, linewidth=0.6)


def _with_band(axes: Axes, value: Column, u: Column, depth: Column, number: int, label: str) -> None:
    colour, mark = _PASS[number % len(_PASS)], _MARK[number % len(_MARK)]
    width = COVERAGE_FACTOR * u
    if depth.size <= _ONLY_A_FEW:
        axes.errorbar(
            value, depth, xerr=width, fmt=mark, color=colour, markersize=4.5, capsize=3.0, label=label
        )
        return
    axes.fill_betweenx(depth, value - width, value + width, color=colour, alpha=0.16, linewidth=0)
    axes.plot(
        value,
        depth,
        color=colour,
        marker=mark,
        markersize=2.6,
        label=label,
        markevery=max(1, depth.size // 60),
    )


def _limit_lines(axes: Axes, stations: Sequence[Station]) -> None:
    rows = sorted(stations, key=lambda one: one.depth)
    depth = _column(rows, "depth")
    if np.ptp(depth) == 0.0:
        depth = depth[0] + np.array([-0.5, 0.5])
        rows = [rows[0], rows[0]]
    for name, colour, dashes in (("warning", _WARN, (4, 2)), ("action", _LIMIT, ())):
        limit = _MM * _column(rows, name)
        for sign in (-1.0, 1.0):
            (line,) = axes.plot(sign * limit, depth, color=colour, linewidth=1.0)
            if dashes:
                line.set_dashes(dashes)
            if sign > 0:
                line.set_label(f"{name} limit")


def residual_figure(stations: Sequence[Station]) -> str:
    """Draw measured less expected by depth, east and north, with band ±U and the limits, as SVG."""
    with mpl.rc_context(_STYLE):
        figure, axes = _pair(4.3, _column(stations, "depth"))
        for one, side in zip(axes, ("east", "north"), strict=True):
            for number, rows in _passes(stations):
                value, u = _MM * _column(rows, f"residual_{side}"), _MM * _column(rows, f"u_{side}")
                label = f"pass {number + 1}, {rows[0].direction}"
                _with_band(one, value, u, _column(rows, "depth"), number, label)
            _limit_lines(one, stations)
            _depth_axis(one, _column(stations, "depth"), side, "measured less expected,")
        axes[0].set_ylabel("depth [m]")
        figure.legend(*axes[0].get_legend_handles_labels(), loc="outside upper center", ncols=6)
        return _svg(figure, "residual")


def offsets_figure(stations: Sequence[Station]) -> str:
    """Draw measured and expected offsets by depth, east and north, as SVG."""
    with mpl.rc_context(_STYLE):
        figure, axes = _pair(3.5, _column(stations, "depth"))
        for one, side in zip(axes, ("east", "north"), strict=True):
            for number, rows in _passes(stations):
                depth, colour = _column(rows, "depth"), _PASS[number % len(_PASS)]
                words = f"pass {number + 1}, {rows[0].direction}"
                one.plot(
                    _MM * _column(rows, f"measured_{side}"),
                    depth,
                    color=colour,
                    marker=_MARK[number % len(_MARK)],
                    markersize=2.6,
                    label=f"measured, {words}",
                )
                one.plot(
                    _MM * _column(rows, f"expected_{side}"),
                    depth,
                    color=colour,
                    linestyle=(0, (5, 2)),
                    marker="+" if len(rows) <= _ONLY_A_FEW else "",
                    label=f"expected, {words}",
                )
            _depth_axis(one, _column(stations, "depth"), side, "offset")
        axes[0].set_ylabel("depth [m]")
        figure.legend(*axes[0].get_legend_handles_labels(), loc="outside upper center", ncols=2)
        return _svg(figure, "offsets")


def plan_figure(stations: Sequence[Station], shaft: Shaft, *, place: str) -> str:
    """Draw the plan: the whole shaft with its wall, and the stations enlarged with the limits of the deepest.

    Parameters
    ----------
    stations : sequence of Station
        At least one.
    shaft : Shaft
        Its diameter gives the wall; without one only the enlarged plan is drawn.
    place : {"residual", "measured"}
        What says where the thing is: the residual of a guide, the measured offset of a bob or a body.
    """
    with mpl.rc_context(_STYLE):
        figure = Figure(figsize=(7.0, 3.5), layout="constrained")
        axes = figure.subplots(1, 2 if shaft.diameter else 1, squeeze=False)[0]
        _near(axes[-1], stations)
        if shaft.diameter:
            _wall(axes[0], stations, shaft, shaft.diameter, place)
        return _svg(figure, "plan")


def _ring(axes: Axes, east: float, north: float, radius: float, **style: object) -> None:
    turn = np.linspace(0.0, 2.0 * np.pi, 181)
    axes.plot(east + radius * np.sin(turn), north + radius * np.cos(turn), **style)  # type: ignore[arg-type]


def _wall(axes: Axes, stations: Sequence[Station], shaft: Shaft, diameter: float, place: str) -> None:
    _ring(axes, shaft.centre_east, shaft.centre_north, diameter / 2.0, color=_INK, linewidth=2.0)
    axes.plot(
        _column(stations, f"{place}_east"),
        _column(stations, f"{place}_north"),
        "o",
        color=_EAST,
        markersize=3.0,
    )
    axes.plot(0.0, 0.0, "+", color=_QUIET, markersize=12.0, markeredgewidth=0.6)
    axes.set_aspect("equal")
    axes.set_xlabel("east [m]")
    axes.set_ylabel("north [m]")
    axes.set_title("shaft wall, reference point (+) and stations", fontsize=8.5)


def _near(axes: Axes, stations: Sequence[Station]) -> None:
    deepest = max(stations, key=lambda one: one.depth)
    _ring(axes, 0.0, 0.0, _MM * deepest.warning, color=_WARN, linestyle="--", linewidth=1.0)
    _ring(axes, 0.0, 0.0, _MM * deepest.action, color=_LIMIT, linewidth=1.0)
    for number, rows in _passes(stations):
        axes.plot(
            _MM * _column(rows, "residual_east"),
            _MM * _column(rows, "residual_north"),
            color=_PASS[number % len(_PASS)],
            marker=_MARK[number % len(_MARK)],
            markersize=3.0,
            linewidth=0.6,
        )
    for one in _named(stations):
        axes.annotate(
            f"{one.depth:.0f} m",
            (_MM * one.residual_east, _MM * one.residual_north),
            xytext=(4, 4),
            textcoords="offset points",
            fontsize=7.5,
        )
    axes.plot(0.0, 0.0, "+", color=_INK, markersize=9.0)
    axes.set_aspect("equal", adjustable="datalim")
    axes.set_xlabel("measured less expected, east [mm]")
    axes.set_ylabel("north [mm]")
    axes.set_title(f"stations, and the limits at {deepest.depth:.0f} m", fontsize=8.5)


def _named(stations: Sequence[Station]) -> list[Station]:
    """Return the stations whose depth is written into the plan: first, last, and farthest out."""
    known = [one for one in stations if np.isfinite(one.residual_east + one.residual_north)]
    farthest = max(
        known, key=lambda one: np.hypot(one.residual_east, one.residual_north), default=stations[0]
    )
    named = {one.depth: one for one in (min(stations, key=lambda one: one.depth), stations[-1], farthest)}
    return list(named.values())


def difference_figure(depth: Column, east: Column, north: Column, u_east: Column, u_north: Column) -> str:
    """Draw differences between two surveys by depth with band ±U, east and north, as SVG; all [m], shape (n,)."""
    with mpl.rc_context(_STYLE):
        figure, axes = _pair(4.3, depth)
        for one, side, value, u in zip(
            axes, ("east", "north"), (east, north), (u_east, u_north), strict=True
        ):
            _with_band(one, _MM * value, _MM * u, depth, 0, "second less first, with ±U")
            _depth_axis(one, depth, side, "difference")
        axes[0].set_ylabel("depth [m]")
        figure.legend(*axes[0].get_legend_handles_labels(), loc="outside upper center")
        return _svg(figure, "difference")
