"""What this page does not say, and a place to sign."""

from __future__ import annotations

import math

from perdure.report.blocks import Table, cells, columns
from perdure.report.results import ResultsFolder
from perdure.report.rounding import at_places
from perdure.report.sections.scatter import ENOUGH_BATCHES
from perdure.report.sections.section import Section
from perdure.report.templating import fill
from perdure.report.words import count, limits, when

ALWAYS: tuple[tuple[str, str], ...] = (
    ("For parts made as the specimens were.", "Another compound, process, shape of flow, thickness or surface is another material."),
    ("Rupture, fatigue and environmental cracking are not answered.", "A margin on stress or on retained stress says nothing about them."),
    (
        "Extrapolation assumes that no new mechanism sets in.",
        (
            "Chemical relaxation, oxidation, ageing and moisture act on times and in places that short dry tests do not show. "
            "Beyond the window of the readings the law and its prior speak, not a measurement."
        ),
    ),
    (
        "Few batches make no bound wide by themselves.",
        (
            f"With fewer than {ENOUGH_BATCHES} batches the scatter between batches is mostly what its prior says; if the prior is too "
            "narrow, so is every bound for a new batch."
        ),
    ),
    (
        "Applicable codes and licensed practice come first.",
        (
            "Where a code, a standard or a licensed engineer asks for another method, factor or test, that holds. "
            "This tool does not replace them."
        ),
    ),
)
"""Cautions that every page carries: head and explanation."""

REVIEW_FIELDS = ("Reviewer", "Date", "Decision", "Signature")


def cautions(results: ResultsFolder) -> Section:
    """Standing cautions, this study's batches, how far each limit lies beyond the readings, and the review box."""
    own = (
        f"This study: {count(len(results.batches), 'batch', 'batches')}.",
        "Fewer than five: treat every verdict for a new batch with caution."
        if len(results.batches) < ENOUGH_BATCHES
        else "Check that they span suppliers, seasons and lines of production.",
    )
    html = fill("cautions.html", {"cautions": (*ALWAYS, own), "reach": _reach(results), "fields": REVIEW_FIELDS})
    return Section("Cautions and review", html, "cautions")


def _reach(results: ResultsFolder) -> Table | None:
    """Decades between the last reading and the last moment of each limit."""
    window = results.window
    if window is None or not results.margins:
        return None
    body = []
    for (duty, limit), rows in limits(results.margins).items():
        if rows[0].end <= 0:
            continue
        decades = math.log10(rows[0].end / window.longest)
        body.append(cells(duty, limit, when(rows[0]), at_places(decades, 1) if decades > 0 else "within the readings"))
    titles = ("Duty", "Limit", "Applies", "Decades beyond the last reading")
    return Table("How far beyond the readings each limit lies, in time", columns(titles, titles[3:]), tuple(body), headers=2)
