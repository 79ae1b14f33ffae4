"""Parts that several pictures share: the log time axis, the data window, bands, readings."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from matplotlib.axes import Axes
from matplotlib.markers import TICKUP
from matplotlib.ticker import FixedFormatter, FixedLocator, NullFormatter
from numpy.typing import NDArray

from perdure.report import palette
from perdure.report.display import SPANS, Display, symbol
from perdure.report.results import Window
from perdure.report.rounding import MINUS

Array = NDArray[np.float64]

_SUPERSCRIPTS = str.maketrans("0123456789", "\u2070\u00b9\u00b2\u00b3\u2074\u2075\u2076\u2077\u2078\u2079")
_NAMED = {**{f"1 {name}": span for name, span in SPANS.items() if name != "\u00b5s"}, "10 a": 10 * SPANS["a"], "100 a": 100 * SPANS["a"]}
_MOST_DECADE_LABELS = 7
_PLAIN_DECADES = range(-2, 4)


@dataclass(frozen=True, slots=True)
class Curve:
    """A median with its bands over time; arrays of one shape, display units.

    Attributes:
        time: > 0.
        low50, high50: None where there is no inner band.
    """

    time: Array
    median: Array
    low90: Array
    high90: Array
    low50: Array | None = None
    high50: Array | None = None


def decade_label(exponent: int) -> str:
    """A power of ten as readers write it: 0.01 to 1000 plain, else with a raised exponent."""
    if exponent in _PLAIN_DECADES:
        return f"{10.0**exponent:g}"
    sign = "\u207b" if exponent < 0 else ""
    return f"10{sign}{str(abs(exponent)).translate(_SUPERSCRIPTS)}"


def log_time_axis(axes: Axes, display: Display, first: float, last: float, *, spans: bool = True) -> None:
    """Give ``axes`` a log time axis from ``first`` to ``last`` (display unit): decades below, with ``spans`` named ones above."""
    low, high = first / 1.25, last * 1.25
    axes.set_xscale("log")
    axes.set_xlim(low, high)
    exponents = list(range(math.ceil(math.log10(low)), math.floor(math.log10(high)) + 1))
    shown = exponents[:: max(1, math.ceil(len(exponents) / _MOST_DECADE_LABELS))]
    axes.xaxis.set_major_locator(FixedLocator([10.0**exponent for exponent in shown]))
    axes.xaxis.set_major_formatter(FixedFormatter([decade_label(exponent) for exponent in shown]))
    axes.xaxis.set_minor_locator(FixedLocator([10.0**exponent for exponent in exponents if exponent not in shown]))
    axes.xaxis.set_minor_formatter(NullFormatter())
    axes.set_xlabel(f"time / {symbol(display.units.time)}")
    axes.spines["top"].set_color(palette.RULE)
    if not spans:
        return
    positions = display.times(list(_NAMED.values()))
    named = [(float(at), name) for at, name in zip(positions, _NAMED, strict=True) if low <= at <= high]
    # plain marks and texts: a secondary axis would cost more time than the rest of the picture
    edge = axes.get_xaxis_transform()
    axes.plot(
        [at for at, _ in named],
        [1.0] * len(named),
        linestyle="none",
        marker=TICKUP,
        markersize=3,
        color=palette.QUIET,
        transform=edge,
        clip_on=False,
    )
    for at, name in named:
        axes.text(at, 1.03, name, transform=edge, ha="center", va="bottom", fontsize=8, color=palette.QUIET)


def shade_window(axes: Axes, display: Display, window: Window | None) -> None:
    """Shade the times that readings cover, with edges that survive a black-and-white print."""
    if window is None:
        return
    low, high = (float(at) for at in display.times([window.shortest, window.longest]))
    axes.axvspan(low, high, facecolor=palette.DATA_WINDOW, edgecolor="none", zorder=0)
    for edge in (low, high):
        axes.axvline(edge, color=palette.QUIET, linewidth=0.6, linestyle=(0, (1, 2)), zorder=0.5)


def draw_curve(axes: Axes, curve: Curve, colour: str, *, released: bool = True) -> None:
    """Draw bands and median; what is not released is grey, hatched and dashed."""
    if not released:
        axes.fill_between(
            curve.time,
            curve.low90,
            curve.high90,
            facecolor="none",
            edgecolor=palette.STONE,
            hatch="////",
            linewidth=0.6,
            linestyle="--",
            zorder=2,
        )
        axes.plot(curve.time, curve.median, color=palette.STONE, linewidth=1.2, linestyle="--", zorder=3)
        return
    axes.fill_between(curve.time, curve.low90, curve.high90, color=colour, alpha=0.22, linewidth=0, zorder=2)
    if curve.low50 is not None and curve.high50 is not None:
        axes.fill_between(curve.time, curve.low50, curve.high50, color=colour, alpha=0.34, linewidth=0, zorder=2.2)
    axes.plot(curve.time, curve.median, color=colour, linewidth=1.6, zorder=3)


def draw_readings(axes: Axes, time: Array, observed: Array, held_out: NDArray[np.bool_]) -> None:
    """Draw readings as dots; those kept from the fit as open rings."""
    axes.plot(
        time[~held_out],
        observed[~held_out],
        linestyle="none",
        marker="o",
        markersize=2.4,
        color=palette.READING,
        markeredgewidth=0,
        zorder=4,
    )
    axes.plot(
        time[held_out], observed[held_out], linestyle="none", marker="o", markersize=3.4, markerfacecolor="none",
        markeredgecolor=palette.RUST, markeredgewidth=0.9, zorder=4,
    )  # fmt: skip


def padded(values: Sequence[float] | Array, share: float = 0.06) -> tuple[float, float]:
    """Limits of an axis that holds ``values`` (not empty) with some room."""
    low, high = float(np.min(values)), float(np.max(values))
    room = (high - low) * share or abs(high) * share or 1.0
    return low - room, high + room


def tidy_number(value: float, _position: int | None = None) -> str:
    """Tick label of a linear axis."""
    return f"{value:g}".replace("-", MINUS)


def note(axes: Axes, text: str, colour: str = palette.STONE) -> None:
    """A short remark in the lower right corner of ``axes``."""
    axes.text(0.98, 0.03, text, ha="right", transform=axes.transAxes, color=colour, fontsize=9, fontweight="bold", zorder=6)
