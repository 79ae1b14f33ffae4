"""What a section of the page is."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

from markupsafe import Markup

from perdure.report.blocks import Block
from perdure.report.templating import fill


@dataclass(frozen=True, slots=True)
class Section:
    """One section of the page.

    Attributes:
        title: heading.
        html: everything below the heading; text from users is escaped in it.
        anchor: id of the section, unique in the page.
    """

    title: str
    html: Markup
    anchor: str


def section(title: str, anchor: str, blocks: Sequence[Block]) -> Section:
    """A section made of blocks, in their order."""
    return Section(title, fill("blocks.html", {"blocks": blocks}), anchor)
