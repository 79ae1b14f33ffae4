"""Posterior intervals against prior ranges, one line a parameter."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass

from matplotlib.figure import Figure

from perdure.report import palette
from perdure.report.figures.canvas import Picture, picture, single_axes
from perdure.report.rows import Parameter

_ROW, _HEAD, _WIDTH = 0.225, 0.6, 5.0
_LEFT, _RIGHT = -0.45, 1.45


@dataclass(frozen=True, slots=True)
class Place:
    """A posterior interval on the scale of its prior: 0 and 1 are the ends of the prior's 90 % interval."""

    low: float
    median: float
    high: float


def on_prior_scale(row: Parameter) -> Place | None:
    """Place of the posterior within the prior's 90 % interval, on the log scale where the prior is positive; None without a prior."""
    if row.prior_low is None or row.prior_high is None or row.prior_high <= row.prior_low:
        return None
    if row.prior_low > 0 and row.low > 0:
        low, high = math.log(row.prior_low), math.log(row.prior_high)
        values = [math.log(value) for value in (row.low, row.median, row.high)]
    else:
        low, high = row.prior_low, row.prior_high
        values = [row.low, row.median, row.high]
    return Place(*((value - low) / (high - low) for value in values))


def forest(rows: Sequence[Parameter], *, key: str, label: str, caption: str) -> Picture:
    """Draw one line a parameter that has a prior: the prior's interval as a pale bar, the posterior's as a line with its median.

    Args:
        rows: parameters; those without a prior are left to the table.
        key: unique in the page.
        label: text alternative.
        caption: under the picture.
    """
    placed = [(row, place) for row in rows if (place := on_prior_scale(row)) is not None]

    def draw(figure: Figure) -> None:
        axes = single_axes(figure)
        for index, (row, place) in enumerate(placed):
            known = row.identified != "no"
            colour = palette.DEEP if known else palette.STONE
            axes.plot([0, 1], [index, index], color=palette.PRIOR, linewidth=7, alpha=0.55, solid_capstyle="butt", zorder=1)
            ends = [min(max(value, _LEFT), _RIGHT) for value in (place.low, place.high)]
            axes.plot(ends, [index, index], color=colour, linewidth=2, linestyle="-" if known else (0, (2, 1.5)), zorder=2)
            if _LEFT < place.median < _RIGHT:
                axes.plot(
                    [place.median],
                    [index],
                    marker="o",
                    markersize=5.5,
                    color=colour,
                    markerfacecolor=colour if known else palette.PAPER,
                    zorder=3,
                )
        axes.set_ylim(len(placed) - 0.4, -0.6)
        axes.set_xlim(_LEFT, _RIGHT)
        axes.set_yticks(range(len(placed)), [_name(row) for row, _ in placed], fontsize=8.5)
        axes.set_xticks([0, 1], ["prior 5 %", "prior 95 %"])
        axes.tick_params(axis="y", length=0)
        axes.spines["left"].set_visible(False)

    return picture(draw, key=key, size=(_WIDTH, _HEAD + _ROW * len(placed)), label=label, caption=caption)


def _name(row: Parameter, most: int = 30) -> str:
    name = row.label or row.quantity
    name = f"{name}, {row.subject}" if row.subject else name
    return name if len(name) <= most else name[: most - 1] + "\u2026"
