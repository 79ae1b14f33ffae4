"""A record with its predictive band above, and standardised residuals over time below."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np
from matplotlib.axes import Axes
from matplotlib.figure import Figure
from matplotlib.ticker import FuncFormatter, MaxNLocator

from perdure.report import palette
from perdure.report.display import Display, symbol
from perdure.report.figures.axes import Array, Curve, draw_curve, draw_readings, log_time_axis, padded, tidy_number
from perdure.report.figures.canvas import Picture, picture, single_axes
from perdure.report.rows import Fitted, HeldOut

_SIZE = (4.0, 3.6)
_SIZE_WITHOUT_RESIDUALS = (4.6, 3.1)
_LINEAR = frozenset({"strain history"})
_RESIDUAL_AXIS = 3.5
_NORMAL_95 = 1.96
_LOOK_BACK = 30.0
"""How far before the first held-out reading a hold-out panel starts, as a ratio of times."""


def record_panel(rows: Sequence[Fitted], display: Display, *, key: str) -> Picture:
    """One record: readings and predictive bands, residuals below.

    Stress relaxation is drawn over log time, histories over time itself. A record in compression is drawn as magnitude.

    Args:
        rows: of one record, at least one.
        display: units.
        key: unique in the page.
    """
    first = rows[0]
    linear = first.method in _LINEAR
    shown = sorted((row for row in rows if linear or row.time > 0), key=lambda row: row.time)
    sign = sign_shown([row.observed for row in rows])
    time, observed, curve = _arrays(shown, display, sign)
    held_out = np.array([row.held_out for row in shown], dtype=np.bool_)
    z = np.array([np.nan if row.z is None else sign * row.z for row in shown])

    def draw(figure: Figure) -> None:
        grid = figure.add_gridspec(2, 1, height_ratios=(3, 1.1))
        upper, lower = figure.add_subplot(grid[0]), figure.add_subplot(grid[1])
        _time_axis(upper, time, display, linear=linear)
        _time_axis(lower, time, display, linear=linear, spans=False)
        _response_axis(upper, curve, observed, display.response_unit(first.unit), sign)
        draw_readings(upper, time, observed, held_out)
        upper.set_xlabel("")
        upper.tick_params(axis="x", labelbottom=False)
        lower.axhspan(-_NORMAL_95, _NORMAL_95, color=palette.WASH, zorder=0)
        lower.axhline(0, color=palette.QUIET, linewidth=0.7)
        clipped = np.clip(z, -_RESIDUAL_AXIS, _RESIDUAL_AXIS)
        draw_readings(lower, time, clipped, held_out)
        lower.set_ylim(-_RESIDUAL_AXIS * 1.08, _RESIDUAL_AXIS * 1.08)
        lower.set_yticks([-2, 0, 2], ["\u22122", "0", "2"])
        lower.set_ylabel("z")

    caption = _caption(first)
    beyond = int(np.sum(np.abs(z) > _NORMAL_95))
    label = f"Record {caption}: {len(rows)} readings with 50 and 90 % predictive bands; {beyond} standardised residuals beyond \u00b12."
    if left := len(rows) - len(shown):
        caption += f"; {left} at time 0 not drawn"
    return picture(draw, key=key, size=_SIZE, label=label, caption=caption)


def holdout_panel(rows: Sequence[HeldOut], used: Sequence[Fitted], display: Display, *, key: str) -> Picture:
    """Held-out readings of one record against their predictive bands, after the readings that the fit used.

    Args:
        rows: held-out readings of one record, at least one.
        used: readings of the same record that the fit used; may be empty.
        display: units.
        key: unique in the page.
    """
    shown = sorted((row for row in rows if row.time > 0), key=lambda row: row.time)
    sign = sign_shown([row.observed for row in rows])
    time, observed, curve = _arrays(shown, display, sign)
    inside = np.array([row.inside90 for row in shown], dtype=np.bool_)
    near = min((row.time for row in shown), default=0.0) / _LOOK_BACK
    before = sorted((row for row in used if row.time > near and not row.held_out), key=lambda row: row.time)
    earlier, seen, _ = _arrays(before, display, sign)

    def draw(figure: Figure) -> None:
        axes = single_axes(figure)
        _time_axis(axes, np.concatenate([earlier, time]), display, linear=False)
        _response_axis(axes, curve, np.concatenate([seen, observed]), display.response_unit(rows[0].unit), sign)
        draw_readings(axes, earlier, seen, np.zeros(earlier.shape, dtype=np.bool_))
        axes.plot(
            time[inside],
            observed[inside],
            linestyle="none",
            marker="o",
            markersize=3.6,
            markerfacecolor=palette.PAPER,
            color=palette.DEEP,
            zorder=5,
        )
        axes.plot(
            time[~inside],
            observed[~inside],
            linestyle="none",
            marker="X",
            markersize=4.6,
            color=palette.RUST,
            markeredgewidth=0.3,
            zorder=5,
        )

    caption = f"{rows[0].specimen} \u00b7 record {rows[0].record} \u00b7 batch {rows[0].batch}"
    label = f"Hold-out of record {rows[0].record}: {sum(row.inside90 for row in rows)} of {len(rows)} readings inside the 90 % band."
    return picture(draw, key=key, size=_SIZE_WITHOUT_RESIDUALS, label=label, caption=caption)


def sign_shown(observed: Sequence[float]) -> int:
    """−1 where the readings are compressive and shown as magnitudes, else 1."""
    return -1 if float(np.sum(observed)) < 0 else 1


def _arrays(rows: Sequence[Fitted] | Sequence[HeldOut], display: Display, sign: int) -> tuple[Array, Array, Curve]:
    unit = rows[0].unit if rows else "MPa"
    time = display.times([row.time for row in rows])
    observed = sign * display.responses([row.observed for row in rows], unit)
    columns = {
        name: sign * display.responses([getattr(row, name) for row in rows], unit)
        for name in ("median", "low90", "high90", "low50", "high50")
    }
    return time, observed, Curve(time=time, **columns)


def _time_axis(axes: Axes, time: Array, display: Display, *, linear: bool, spans: bool = True) -> None:
    if not time.size:
        return
    if linear:
        axes.set_xlabel(f"time / {symbol(display.units.time)}")
        axes.xaxis.set_major_locator(MaxNLocator(5))
        axes.xaxis.set_major_formatter(FuncFormatter(tidy_number))
        axes.set_xlim(*padded(time, 0.03))
        return
    log_time_axis(axes, display, float(time.min()), float(time.max()), spans=spans)


def _response_axis(axes: Axes, curve: Curve, observed: Array, unit: str, sign: int) -> None:
    draw_curve(axes, curve, palette.POPULATION)
    if observed.size:
        axes.set_ylim(*padded(np.concatenate([curve.low90, curve.high90, observed])))
    axes.yaxis.set_major_locator(MaxNLocator(4))
    axes.yaxis.set_major_formatter(FuncFormatter(tidy_number))
    word = "compressive stress" if sign < 0 else "stress"
    axes.set_ylabel(f"{word} / {unit}" if unit else "response (ratio)")


def _caption(row: Fitted) -> str:
    return f"{row.specimen} \u00b7 record {row.record} \u00b7 batch {row.batch} \u00b7 {row.instrument}"
