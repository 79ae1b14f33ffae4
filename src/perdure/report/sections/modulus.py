"""Relaxation modulus against log time, population and batches."""

from __future__ import annotations

from perdure.report.blocks import Block, Key, Note, Panels, Text
from perdure.report.figures.modulus import ModulusScene, modulus_panel
from perdure.report.results import ResultsFolder
from perdure.report.rows import Modulus
from perdure.report.sections.bands import KEY_TIME, KEY_UNRELEASED
from perdure.report.sections.section import Section, section


def modulus(results: ResultsFolder) -> Section:
    """One panel for the population, one a batch, with the population's median as a thin line."""
    subjects: dict[tuple[str, str], list[Modulus]] = {}
    for row in results.modulus:
        if row.time > 0:
            subjects.setdefault((row.level, row.subject), []).append(row)
    population = next((rows for (level, _), rows in subjects.items() if level.startswith("population")), [])
    everything = [row for rows in subjects.values() for row in rows]
    scene = ModulusScene(everything, population, results.window, results.display, results.released)
    pictures = [
        modulus_panel(scene, rows, title=_title(level, subject), key=f"modulus-{number}")
        for number, ((level, subject), rows) in enumerate(subjects.items(), start=1)
    ]
    key = [KEY_UNRELEASED] if not results.released else [("median", "median"), ("outer", "90 % credible band")]
    blocks: list[Block] = [
        Text(
            "The stress answer to a unit step of strain, without reading errors. Outside the shaded window no reading speaks: there the "
            "prior of the relaxation per decade rules, and the bands open."
        ),
        Key((*key, ("thin", "median of the population"), KEY_TIME)),
        Panels(tuple(pictures)) if pictures else Note("caution", "The tables hold no relaxation modulus."),
    ]
    return section("Relaxation modulus", "modulus", blocks)


def _title(level: str, subject: str) -> str:
    return f"{level.capitalize()} {subject}".strip()
