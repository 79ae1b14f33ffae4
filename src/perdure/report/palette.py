"""Colours of the page, in one place for CSS and figures.

The hues are a deep blue-green, a rust, a violet and an ochre, which stay apart for readers with any common colour blindness
because they also differ in lightness; nothing relies on colour alone. Text colours keep a contrast of at least 4.5 : 1
(WCAG 2.2, success criterion 1.4.3) on the paper colours.
"""

from __future__ import annotations

from collections.abc import Mapping
from types import MappingProxyType

INK = "#1d2b33"
QUIET = "#51616b"
PAPER = "#ffffff"
WASH = "#f4f2ec"
RULE = "#d5d0c4"
DATA_WINDOW = "#f3ecda"

DEEP = "#0f5a66"
RUST = "#9c3b14"
VIOLET = "#5d4391"
OCHRE = "#7a5600"
STONE = "#5a6468"

TONES: Mapping[str, tuple[str, str]] = MappingProxyType(
    {
        "kept": (DEEP, "#e3f0f0"),
        "not kept": (RUST, "#fae9e0"),
        "undecided": (VIOLET, "#eeeaf6"),
        "not released": (STONE, "#ececea"),
        "pass": (DEEP, "#e3f0f0"),
        "caution": (OCHRE, "#f8efd6"),
        "fail": (RUST, "#fae9e0"),
    }
)
"""Text colour and background of each verdict and outcome."""

MARKS: Mapping[str, str] = MappingProxyType(
    {
        "kept": "\u25cf",
        "not kept": "\u2715",
        "undecided": "\u25d0",
        "not released": "\u25a8",
        "pass": "\u25cf",
        "caution": "\u25b2",
        "fail": "\u2715",
    }
)
"""A shape for each verdict and outcome, so that colour is never the only sign."""

LIMIT = RUST
READING = INK
POPULATION = DEEP
BATCH = VIOLET
PRIOR = "#b9b2a0"


def luminance(colour: str) -> float:
    """Relative luminance of ``#rrggbb`` (WCAG 2.2)."""
    channels = [int(colour[start : start + 2], 16) / 255 for start in (1, 3, 5)]
    linear = [c / 12.92 if c <= 0.04045 else ((c + 0.055) / 1.055) ** 2.4 for c in channels]
    return 0.2126 * linear[0] + 0.7152 * linear[1] + 0.0722 * linear[2]


def contrast(first: str, second: str) -> float:
    """Contrast ratio of two colours, 1 to 21 (WCAG 2.2)."""
    high, low = sorted((luminance(first), luminance(second)), reverse=True)
    return (high + 0.05) / (low + 0.05)
