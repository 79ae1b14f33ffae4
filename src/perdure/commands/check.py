"""``perdure check``: everything that can be said of a study without sampling."""

from __future__ import annotations

import sys
from collections.abc import Iterable, Sequence
from pathlib import Path

from perdure.border.check_text import grouped
from perdure.border.intake import Intake, IntakeRow
from perdure.border.units import Dimension, from_internal
from perdure.checks import before_sampling
from perdure.commands.reading import Ready, read
from perdure.inference.priors import QUANTITIES
from perdure.report.display import Display, duration, symbol
from perdure.report.rounding import significant, stated
from perdure.study.duty import Duty, Limit
from perdure.study.finding import OUTCOMES, Finding
from perdure.study.records import Record


def check(folders: Sequence[Path]) -> int:
    """Print what the study in each folder holds, or every problem that keeps it from running; return 1 if there is any, else 0."""
    code = 0
    for place, folder in enumerate(folders):
        study = folder.expanduser().resolve()
        ready = read(study)
        if place:
            print()
        if not isinstance(ready, Ready):
            code = 1
            print(f"{study.name}: {_count(len(ready), 'problem')}; it would not run", flush=True)
            sys.stderr.write(f"\n{grouped(ready)}\n")
            continue
        findings = before_sampling(ready.intake.record_set, ready.intake.study)
        print(summary(ready, findings))
        code = max(code, int(any(finding.outcome == "fail" and finding.blocking for finding in findings)))
    return code


def summary(ready: Ready, findings: Sequence[Finding]) -> str:
    """The study in words: records, what was done to them, reach, duties, priors and what is doubtful."""
    intake, study = ready.intake, ready.intake.study
    parts = (
        [f"{study.name}: {study.title}"],
        _records(intake),
        _log(intake.log),
        _reach(ready),
        _duties(intake),
        _priors(intake),
        _findings(findings),
    )
    return "\n".join(line for part in parts for line in part)


def _records(intake: Intake) -> list[str]:
    records, display = intake.record_set, Display(intake.study.display)
    accepted = [row for row in intake.log if row.status == "accepted"]
    raw = sum(row.readings or 0 for row in accepted)
    missing = sum(row.missing or 0 for row in accepted)
    used = sum(row.used or 0 for row in accepted)
    held_out = sum(int(record.held_out.sum()) for record in records.records)
    specimens, batches = _count(len(records.specimens), "specimen"), _count(len(records.batches), "batch", "batches")
    lines = [
        f"  {_count(len(records.records), 'record')} of {specimens} from {batches}",
        f"  {raw} readings with a time, {missing} of them without a response; {used} after thinning, {held_out} of these held out",
    ]
    for batch in records.batches:
        own = [record for record in records.records if record.batch == batch]
        pieces = dict.fromkeys(record.specimen for record in own)
        lines.append(f"    {batch}: {_count(len(pieces), 'specimen')}, {_ranges(own, display)}")
    return lines


def _ranges(records: Sequence[Record], display: Display) -> str:
    kinds = dict.fromkeys(f"{record.method} in {record.sense}, {record.state}" for record in records)
    strain = [display.strain(record.strain_level) for record in records]
    longest = max(float(record.time[-1]) for record in records)
    celsius = dict.fromkeys(_temperature(temperature, display) for temperature in sorted(record.temperature for record in records))
    levels = dict.fromkeys(significant(level) for level in (min(strain, key=abs), max(strain, key=abs)))
    reach = f"strain {' to '.join(levels)} {symbol(display.units.strain)}"
    return f"{'; '.join(kinds)}; {reach}; {', '.join(celsius)}; up to {duration(longest)}"


def _temperature(kelvin: float, display: Display) -> str:
    unit = display.units.temperature
    return f"{stated(float(from_internal(kelvin, Dimension.TEMPERATURE, unit)))} {symbol(unit)}"


def _count(number: int, one: str, many: str | None = None) -> str:
    return f"{number} {one if number == 1 else many or f'{one}s'}"


def _log(log: Iterable[IntakeRow]) -> list[str]:
    rows = list(log)
    lines = ["  What was done to the readings"]
    lines.extend(f"    {row.record}: {'; '.join(row.conversions) or 'nothing'}" for row in rows if row.status == "accepted")
    left_out = [row for row in rows if row.status == "left out"]
    if left_out:
        lines.append("  Left out")
        lines.extend(f"    {row.record} (register.csv, row {row.row}): {row.reason}" for row in left_out)
    strays = [row for row in rows if row.status == "file"]
    if strays:
        lines.append("  Files that no row of the register names")
        lines.extend(f"    {row.file}" for row in strays)
    return lines


def _reach(ready: Ready) -> list[str]:
    study, layout = ready.intake.study, ready.layout
    origin = "declared" if study.horizon is not None else "three decades beyond the longest record; set the key horizon to change it"
    times = f"{study.law.free_times} free times" if study.law.free_times is not None else f"{study.law.terms_per_decade:g} terms a decade"
    return [
        "  Law and reach",
        f"    {study.law.name}, {'with' if study.law.equilibrium else 'without'} equilibrium term, {times}; clock {study.clock}",
        f"    horizon {duration(layout.horizon)} ({origin})",
    ]


def _duties(intake: Intake) -> list[str]:
    display = Display(intake.study.display)
    lines = ["  Duties"]
    for duty in intake.study.duties:
        lines.append(
            f"    {duty.name}: {duty.sense}, {duty.state}, {_temperature(duty.temperature, display)}, {duration(duty.history.duration)}, "
            f"strain to {stated(display.strain(duty.history.peak))} {symbol(display.units.strain)}"
        )
        lines.extend(f"      {_limit(limit, duty, display)}" for limit in duty.limits)
    return lines


def _limit(limit: Limit, duty: Duty, display: Display) -> str:
    if limit.quantity == "stress":
        what = f"{'magnitude of the ' if duty.sense == 'compression' else ''}stress"
        value = f"{stated(display.response(limit.value, 'MPa'))} {display.response_unit('MPa')}"
    else:
        what = f"share of the stress at {duration(limit.reference or 0.0)} that is retained"
        value = stated(limit.value)
    when = f"at {duration(limit.start)}" if limit.start == limit.end else f"from {duration(limit.start)} to {duration(limit.end)}"
    share, confidence = stated(100 * limit.share), stated(100 * limit.confidence)
    return f"{limit.name}: {what} {limit.kind} {value} {when}, for {share} % of parts with {confidence} % confidence"


def _priors(intake: Intake) -> list[str]:
    lines = ["  Priors (the range holds the quantity with the stated probability)"]
    for prior in intake.study.priors:
        unit = QUANTITIES[prior.quantity].unit
        shown = f"{stated(prior.low)} to {stated(prior.high)}{'' if unit == '1' else f' {unit}'}"
        lines.append(f"    {prior.quantity}: {shown}, {stated(100 * prior.coverage)} %; {prior.source} ({prior.origin})")
    return lines


def _findings(findings: Sequence[Finding]) -> list[str]:
    counts = {outcome: sum(finding.outcome == outcome for finding in findings) for outcome in OUTCOMES}
    lines = [f"  Checks before sampling: {counts['pass']} passed, {counts['caution']} cautions, {counts['fail']} failed"]
    doubts = [finding for outcome in ("fail", "caution") for finding in findings if finding.outcome == outcome]
    lines.extend(f"    {doubt.outcome}: {doubt.check}, {doubt.subject}: {doubt.message} {doubt.remedy}".rstrip() for doubt in doubts)
    return lines
