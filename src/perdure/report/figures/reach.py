"""The time ruler: how far the readings reach, and where the limits lie."""

from __future__ import annotations

from collections.abc import Mapping

from matplotlib.figure import Figure
from matplotlib.patches import Rectangle

from perdure.report import palette
from perdure.report.display import Display, duration
from perdure.report.figures.axes import log_time_axis
from perdure.report.figures.canvas import Picture, picture, single_axes
from perdure.report.results import Window

_ROW, _HEAD, _WIDTH = 0.42, 0.8, 4.9


def reach_ruler(window: Window, spans: Mapping[str, tuple[float, float]], display: Display) -> Picture:
    """Draw the tested window above the span of every limit.

    Args:
        window: times covered by readings, s.
        spans: name of the limit to its start and end, s.
        display: units.
    """
    rows = [("readings", (window.shortest, window.longest)), *spans.items()]
    last = max(end for _, (_, end) in rows)
    first = min(window.shortest, *(end for _, end in spans.values()), window.longest)
    rate = float(display.times([1.0])[0])

    def draw(figure: Figure) -> None:
        axes = single_axes(figure)
        log_time_axis(axes, display, first * rate, last * rate)
        left = axes.get_xlim()[0]
        for row, (name, (start, end)) in enumerate(rows):
            low, high = max(start * rate, left), end * rate
            colour = palette.OCHRE if row == 0 else palette.DEEP
            if high > low:
                face = palette.DATA_WINDOW if row == 0 else palette.TONES["kept"][1]
                axes.add_patch(Rectangle((low, row - 0.15), high - low, 0.3, facecolor=face, edgecolor=colour, linewidth=1))
            axes.text(0.01, row - 0.22, _short(name), transform=axes.get_yaxis_transform(), va="bottom", fontsize=9, color=palette.INK)
            if row > 0:
                axes.plot([high], [row], marker="D", markersize=6, color=colour, linestyle="none", zorder=4)
        for edge in (window.shortest * rate, window.longest * rate):
            axes.axvline(edge, color=palette.OCHRE, linewidth=0.7, linestyle=(0, (1, 2)), zorder=0.5)
        axes.set_ylim(len(rows) - 0.6, -0.75)
        axes.set_yticks([])
        axes.spines["left"].set_visible(False)

    label = f"Ruler of log time. Readings cover {duration(window.shortest)} to {duration(window.longest)}. " + " ".join(
        f"{name}: {_span(start, end)}." for name, (start, end) in spans.items()
    )
    return picture(
        draw,
        key="reach",
        size=(_WIDTH, _HEAD + _ROW * len(rows)),
        label=label,
        caption="Where the answer lies against what was tested. Diamonds mark the last moment of each limit; the longer the way from the "
        "readings to a diamond, the more rests on the prior and on the law.",
    )


def _span(start: float, end: float) -> str:
    return f"at {duration(end)}" if start == end else f"from {duration(start)} until {duration(end)}"


def _short(name: str, most: int = 60) -> str:
    return name if len(name) <= most else name[: most - 1] + "\u2026"
