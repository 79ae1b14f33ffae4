"""Relaxation modulus over log time."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

from matplotlib.figure import Figure
from matplotlib.ticker import FuncFormatter, MaxNLocator

from perdure.report import palette
from perdure.report.display import Display, duration
from perdure.report.figures.axes import Curve, draw_curve, log_time_axis, note, padded, shade_window, tidy_number
from perdure.report.figures.canvas import Picture, picture, single_axes
from perdure.report.results import Window
from perdure.report.rounding import significant
from perdure.report.rows import Modulus

_SIZE = (4.6, 3.1)


@dataclass(frozen=True, slots=True)
class ModulusScene:
    """What the panels share.

    Attributes:
        everything: rows of all subjects, for common axes.
        population: rows of the population, drawn as a thin line in the other panels.
        window: times covered by readings, s.
        display: units.
        released: False draws every band as not released.
    """

    everything: Sequence[Modulus]
    population: Sequence[Modulus]
    window: Window | None
    display: Display
    released: bool


def modulus_panel(scene: ModulusScene, rows: Sequence[Modulus], *, title: str, key: str) -> Picture:
    """Relaxation modulus of one subject.

    Args:
        scene: common to all panels.
        rows: of the subject, at least one at a positive time.
        title: name of the subject.
        key: unique in the page.
    """
    display, everything, released = scene.display, scene.everything, scene.released
    own = rows is scene.population
    shown = sorted((row for row in rows if row.time > 0), key=lambda row: row.time)
    ends = display.times([row.time for row in everything if row.time > 0])
    extremes = display.responses([value for row in everything for value in (row.low90, row.high90)], "MPa")

    def draw(figure: Figure) -> None:
        axes = single_axes(figure)
        log_time_axis(axes, display, float(ends.min()), float(ends.max()))
        shade_window(axes, display, scene.window)
        columns = {name: display.responses([getattr(row, name) for row in shown], "MPa") for name in ("median", "low90", "high90")}
        draw_curve(
            axes,
            Curve(time=display.times([row.time for row in shown]), **columns),
            palette.POPULATION if own else palette.BATCH,
            released=released,
        )
        if scene.population and not own:
            thin = sorted((row for row in scene.population if row.time > 0), key=lambda row: row.time)
            axes.plot(
                display.times([row.time for row in thin]), display.responses([row.median for row in thin], "MPa"),
                color=palette.INK, linewidth=0.8, linestyle=(0, (4, 2)), zorder=3.5,
            )  # fmt: skip
        axes.set_ylim(min(0.0, padded(extremes)[0]), padded(extremes)[1])
        axes.set_ylabel(f"E(t) / {display.response_unit('MPa')}")
        axes.yaxis.set_major_locator(MaxNLocator(5))
        axes.yaxis.set_major_formatter(FuncFormatter(tidy_number))
        if not released:
            note(axes, "NOT RELEASED")

    last = shown[-1]
    values = [significant(display.response(value, "MPa")) for value in (last.median, last.low90, last.high90)]
    label = (
        f"Relaxation modulus over log time, {title}. At {duration(last.time)} the median is {values[0]} {display.response_unit('MPa')}, "
        f"the 90 % interval {values[1]} to {values[2]}."
    )
    return picture(draw, key=key, size=_SIZE, label=label, caption=title)
