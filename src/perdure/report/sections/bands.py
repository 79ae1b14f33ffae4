"""Bands of every duty over log time, one panel a level."""

from __future__ import annotations

from perdure.report import palette
from perdure.report.blocks import Block, Key, Note, Panels, Subhead, Text
from perdure.report.figures.bands import Scene, band_panel
from perdure.report.results import ResultsFolder
from perdure.report.rows import Band
from perdure.report.sections.section import Section, section
from perdure.report.words import level_name, level_rank

KEY_TIME = ("window", "times covered by readings")
_KEY = Key(
    (
        ("median", "median"),
        ("inner", "50 % band"),
        ("outer", "90 % band"),
        KEY_TIME,
        ("limit", "limit, teeth on the forbidden side"),
        ("diamond", "tolerance bound, where the limit is at one time"),
    )
)
KEY_UNRELEASED = ("unreleased", "not released: 90 % band and median")
_COLOURS = {"population median": palette.POPULATION, "tested specimen": palette.POPULATION}


def bands(results: ResultsFolder) -> Section:
    """Credible bands of the population median, prediction bands of the next specimen, with limits and the window of the readings."""
    blocks: list[Block] = [
        Text(
            "A credible band says how well the median of the material is known; a prediction band holds the next part with the stated "
            "probability, scatter of batches and specimens and the law's uncertainty included, instrument and reading errors left out. "
            "Duties in compression show magnitudes."
        )
    ]
    if not results.released:
        blocks += [Note("not released", "These bands are not released."), Key((KEY_UNRELEASED, *_KEY.entries[3:5]))]
    else:
        blocks.append(_KEY)
    if not results.bands:
        blocks.append(Note("caution", "The tables hold no band."))
    for number, duty in enumerate(results.duties, start=1):
        blocks += _duty(duty, number, results)
    return section("Bands of the duties", "bands", blocks)


def _duty(duty: str, number: int, results: ResultsFolder) -> list[Block]:
    rows = [row for row in results.bands if row.duty == duty]
    margins = [row for row in results.margins if row.duty == duty]
    if not any(row.time > 0 for row in rows):
        return [Subhead(duty), Note("caution", "No band for this duty.")]
    scene = Scene.of(duty, rows, margins, results.window, results.display, released=results.released)
    subjects: dict[tuple[str, str], list[Band]] = {}
    for row in rows:
        subjects.setdefault((row.level, row.subject), []).append(row)
    pictures = [
        band_panel(
            scene,
            mine,
            [row for row in margins if (row.level, row.subject) == (level, subject)],
            title=level_name(level, subject),
            key=f"band-{number}-{panel}",
            colour=_COLOURS.get(level, palette.BATCH),
        )
        for panel, ((level, subject), mine) in enumerate(sorted(subjects.items(), key=lambda item: level_rank(item[0][0])), start=1)
        if any(row.time > 0 for row in mine)
    ]
    blocks: list[Block] = [Subhead(duty), Panels(tuple(pictures))]
    if unseen := sorted({row.limit for row in margins if row.unit != "MPa"}):
        blocks.append(
            Text(f"Limits on a ratio have no place on a stress axis and are not drawn: {', '.join(unseen)}. The margins table has them.")
        )
    return blocks
