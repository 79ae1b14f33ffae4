"""Bands of a duty over log time with the window of the readings and the limits."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from matplotlib.axes import Axes
from matplotlib.figure import Figure
from matplotlib.ticker import FuncFormatter, MaxNLocator

from perdure.report import palette
from perdure.report.display import Display, duration
from perdure.report.figures.axes import Curve, draw_curve, log_time_axis, note, padded, shade_window, tidy_number
from perdure.report.figures.canvas import Picture, picture, single_axes
from perdure.report.results import Window
from perdure.report.rounding import significant, stated
from perdure.report.rows import Band, Margin

_SIZE = (4.6, 3.1)


@dataclass(frozen=True, slots=True)
class Scene:
    """What the panels of one duty share.

    Attributes:
        duty: name.
        window: times covered by readings, s.
        display: units.
        span: first and last time, display unit.
        stress: lowest and highest value of the stress axis, display unit.
        released: False draws every band as not released.
    """

    duty: str
    window: Window | None
    display: Display
    span: tuple[float, float]
    stress: tuple[float, float]
    released: bool

    @classmethod
    def of(
        cls, duty: str, bands: Sequence[Band], margins: Sequence[Margin], window: Window | None, display: Display, *, released: bool
    ) -> Scene:
        """A scene that holds all ``bands`` at positive times (at least one) and the limits in MPa among ``margins``."""
        later = [row for row in bands if row.time > 0]
        times = display.times([row.time for row in later])
        values = [value for row in later for value in (row.low90, row.high90)]
        values += [row.limit_value for row in margins if row.unit == "MPa"]
        stresses = display.responses([*values, 0.0] if min(values) >= 0 else values, "MPa")
        low, high = padded(stresses)
        floor = 0.0 if min(values) >= 0 else low
        return cls(duty, window, display, (float(times.min()), float(times.max())), (floor, high), released)


def band_panel(scene: Scene, rows: Sequence[Band], margins: Sequence[Margin], *, title: str, key: str, colour: str) -> Picture:
    """One level of one duty.

    Args:
        scene: axes common to the duty.
        rows: bands of one level and subject; rows at time 0 are left to the table, a log axis has no place for them.
        margins: of the same duty, level and subject; their limits (MPa only) and bounds are drawn.
        title: above the panel.
        key: unique in the page.
        colour: of the band.
    """
    display = scene.display
    shown = sorted((row for row in rows if row.time > 0), key=lambda row: row.time)
    columns = {
        name: display.responses([getattr(row, name) for row in shown], "MPa") for name in ("median", "low90", "high90", "low50", "high50")
    }
    curve = Curve(time=display.times([row.time for row in shown]), **columns)
    released = scene.released and all(row.released for row in shown)

    def draw(figure: Figure) -> None:
        axes = single_axes(figure)
        log_time_axis(axes, display, *scene.span)
        shade_window(axes, display, scene.window)
        draw_curve(axes, curve, colour, released=released)
        axes.set_ylim(*scene.stress)
        axes.set_ylabel(f"stress / {display.response_unit('MPa')}")
        axes.yaxis.set_major_locator(MaxNLocator(5))
        axes.yaxis.set_major_formatter(FuncFormatter(tidy_number))
        for margin in margins:
            if margin.unit == "MPa":
                _draw_limit(axes, margin, display, released=released)
        if not released:
            note(axes, "NOT RELEASED")

    kind = shown[0].kind if shown else ""
    label = f"{scene.duty}, {title}: {kind} band over log time" + ("; not released" if not released else "") + "." + _ends(shown, display)
    return picture(draw, key=key, size=_SIZE, label=label, caption=f"{title} ({kind} band)" if kind else title)


def _draw_limit(axes: Axes, margin: Margin, display: Display, *, released: bool) -> None:
    """The limit as a line with teeth on the forbidden side, heavier where it applies, and the bound where it is at one time."""
    value = display.response(margin.limit_value, "MPa")
    low, high = axes.get_xlim()
    start, end = (float(at) for at in display.times([margin.start, margin.end]))
    axes.axhline(value, color=palette.LIMIT, linewidth=0.9, linestyle=(0, (5, 3)), zorder=5)
    forbidden = "bottom" if margin.kind == "at least" else "top"
    span = (max(start, low), min(end, high)) if end > start else (end / 1.6, end * 1.6)
    teeth = np.geomspace(max(span[0], low), min(span[1], high), 7)
    axes.plot(teeth, np.full(teeth.shape, value), color=palette.LIMIT, linewidth=2.2, zorder=5)
    axes.plot(
        teeth,
        np.full(teeth.shape, value),
        linestyle="none",
        marker=3 if forbidden == "bottom" else 2,
        markersize=5,
        color=palette.LIMIT,
        zorder=5,
    )
    words = f"{margin.limit}: {margin.kind} {stated(value)}"
    axes.annotate(
        words, (0.02, value), xycoords=axes.get_yaxis_transform(),
        xytext=(0, 3 if forbidden == "bottom" else -3), textcoords="offset points",
        va="bottom" if forbidden == "bottom" else "top", ha="left", color=palette.LIMIT, fontsize=8.5, zorder=6,
    )  # fmt: skip
    if released and margin.bound is not None and margin.start == margin.end:
        axes.plot(
            [end],
            [display.response(margin.bound, "MPa")],
            marker="D",
            markersize=5,
            markerfacecolor=palette.PAPER,
            color=palette.INK,
            zorder=6,
        )


def _ends(rows: Sequence[Band], display: Display) -> str:
    if not rows:
        return ""
    last = rows[-1]
    values = [significant(display.response(value, "MPa")) for value in (last.median, last.low90, last.high90)]
    return f" At {duration(last.time)} the median is {values[0]} {display.response_unit('MPa')}, the 90 % band {values[1]} to {values[2]}."
