"""The reviewer's page: one HTML file that needs no network and no script."""

from __future__ import annotations

import re
from pathlib import Path

from perdure.border.store import atomic_path
from perdure.report.display import duration
from perdure.report.results import ResultsFolder
from perdure.report.sections import SECTIONS
from perdure.report.templating import fill

_PERCENT = re.compile(r"(?<=\d) %")
"""A number and its percent sign must not part at the end of a line."""


def page(results: ResultsFolder) -> str:
    """The page as text; the same results give the same text."""
    sections = [section for build in SECTIONS.values() if (section := build(results)) is not None]
    values = {
        "title": results.title,
        "about": results.about,
        "facts": _facts(results),
        "sections": sections,
        "style": fill("style.css", {}),
    }
    return _PERCENT.sub("\u00a0%", str(fill("page.html", values)))


def render(results: ResultsFolder, out: Path) -> None:
    """Write the page to ``out``, whole or not at all.

    Args:
        results: see :meth:`perdure.report.results.ResultsFolder.read`.
        out: the file, usually ``report.html`` in the results folder.
    """
    text = page(results)
    with atomic_path(out) as path:
        path.write_text(text, encoding="utf-8", newline="\n")


def _facts(results: ResultsFolder) -> list[tuple[str, str]]:
    """What a reader wants to know before the verdicts."""
    seen = [row for row in results.fitted if not row.held_out]
    facts = [
        ("Study", results.study),
        ("Status", "released" if results.released else "not released"),
        ("Batches", str(len(results.batches))),
        ("Specimens", str(len({row.specimen for row in seen}))),
        ("Records", str(len({row.record for row in seen}))),
        ("Readings in the fit", str(len(seen))),
    ]
    if results.window is not None:
        facts.append(("Readings cover", f"{duration(results.window.shortest)} to {duration(results.window.longest)}"))
    return facts
