"""From a drawing to an inline SVG: same input, same bytes; nothing global is left behind."""

from __future__ import annotations

import io
import re
import warnings
from collections.abc import Callable, Iterator
from contextlib import contextmanager
from dataclasses import dataclass
from html import escape
from typing import Any

import matplotlib as mpl
from markupsafe import Markup
from matplotlib.axes import Axes
from matplotlib.figure import Figure

from perdure.report import palette

POINTS_PER_INCH = 72
PIXELS_PER_INCH = 96

# typed loosely: matplotlib wants its 300 keys as literals
_STYLE: Any = {
    "svg.hashsalt": "perdure",
    "svg.fonttype": "none",  # text stays text: it can be searched, read aloud, and takes the system's font
    "text.parse_math": False,  # names of users may hold dollar signs
    "axes.unicode_minus": True,
    "font.size": 10.0,
    "axes.edgecolor": palette.QUIET,
    "axes.labelcolor": palette.INK,
    "axes.linewidth": 0.8,
    "axes.spines.right": False,
    "axes.titlesize": 10.0,
    "xtick.color": palette.QUIET,
    "ytick.color": palette.QUIET,
    "xtick.labelcolor": palette.INK,
    "ytick.labelcolor": palette.INK,
    "xtick.labelsize": 9.0,
    "ytick.labelsize": 9.0,
    "legend.fontsize": 9.0,
    "legend.frameon": False,
    "hatch.linewidth": 0.6,
    "path.simplify": True,
    "figure.facecolor": "none",
    "axes.facecolor": "none",
}
_METADATA = {"Date": None, "Creator": None, "Format": None, "Type": None}


@dataclass(frozen=True, slots=True)
class Picture:
    """A figure of the page.

    Attributes:
        svg: inline element with role and label.
        label: what a reader who can't see it is told.
        caption: text under it; "" for none.
        width: natural width in CSS pixels; narrower screens scale it down.
    """

    svg: Markup
    label: str
    caption: str
    width: int


@contextmanager
def house_style() -> Iterator[None]:
    """Matplotlib with its own defaults plus the style of the page, whatever the user's configuration; undone afterwards."""
    with mpl.rc_context():
        mpl.rcdefaults()
        mpl.rcParams.update(_STYLE)
        yield


def picture(draw: Callable[[Figure], None], *, key: str, size: tuple[float, float], label: str, caption: str = "") -> Picture:
    """Draw on a fresh figure and take it as inline SVG.

    Args:
        draw: puts axes and artists on the figure.
        key: unique in the page, letters, digits and dashes; it prefixes every id within the SVG.
        size: width and height in inches.
        label: text alternative.
        caption: text under the picture.
    """
    with house_style(), warnings.catch_warnings():
        # the font that measures the text lacks some scripts; the reader's system font, which shows it, has them
        warnings.filterwarnings("ignore", message="Glyph .* missing from", category=UserWarning)
        figure = Figure(figsize=size, layout="constrained")
        draw(figure)
        buffer = io.StringIO()
        figure.savefig(buffer, format="svg", metadata=_METADATA)
    return Picture(Markup(_inline(buffer.getvalue(), key, label)), label, caption, round(size[0] * PIXELS_PER_INCH))  # noqa: S704 - text was escaped by the SVG writer


def single_axes(figure: Figure) -> Axes:
    """One axes that fills the figure."""
    return figure.add_subplot()


def _inline(svg: str, key: str, label: str) -> str:
    """Strip what only a file of its own needs (prolog, metadata, namespaces, fixed size), and keep ids apart between pictures."""
    body = svg[svg.index("<svg") :]
    body = re.sub(r"<metadata>.*?</metadata>", "", body, flags=re.DOTALL)
    body = re.sub(r"<!--.*?-->", "", body, flags=re.DOTALL)
    head, rest = body.split(">", 1)
    view_box = re.search(r'viewBox="[^"]*"', head)
    frame = view_box.group(0) if view_box else ""
    referenced = set(re.findall(r'(?:url\(#|xlink:href="#)([^)"]+)', rest))
    rest = re.sub(r' id="([^"]+)"', lambda match: f' id="{key}-{match.group(1)}"' if match.group(1) in referenced else "", rest)
    rest = rest.replace("url(#", f"url(#{key}-").replace('xlink:href="#', f'href="#{key}-')
    rest = re.sub(r"\n\s*", "\n", rest)
    return f'<svg {frame} role="img" aria-label="{escape(label, quote=True)}" preserveAspectRatio="xMidYMid meet">{rest}'.strip()
