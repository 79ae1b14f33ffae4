"""The last words of ``perdure run``: how each study ended and where its report is."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from pathlib import Path

from perdure.errors import ResultError
from perdure.steps.chain import CHAIN
from perdure.steps.plan import Plan, made
from perdure.steps.runner import FAILED, STARTED, outcome
from perdure.steps.verdict import judge

FIRST_LINES = 6
"""How many lines of an error are repeated at the end."""


@dataclass(frozen=True, slots=True)
class End:
    """How a study ended.

    Attributes:
        study: its name.
        state: "released", "NOT RELEASED", "FAILED" or "not finished".
        lines: what there is to say about it.
        report: path of the report, None where there is none.
    """

    study: str
    state: str
    lines: tuple[str, ...]
    report: Path | None


def end_of(plan: Plan, results: Path) -> End:
    """The :class:`End` of the study of ``plan``, from its files below ``results``."""
    own = results / plan.name
    for step in CHAIN:
        last = outcome(own, step)
        if last is None:
            continue
        if last.state == FAILED:
            lines = last.text.splitlines()
            more = (f"… {len(lines) - FIRST_LINES} further lines in {own / 'evidence' / 'steps'}",) if len(lines) > FIRST_LINES else ()
            return End(plan.name, f"FAILED at {step}", (*lines[:FIRST_LINES], *more), None)
        if last.state == STARTED:
            return End(plan.name, f"stopped at {step}", ("Run it again: finished steps are kept.",), None)
    missing = [name for name in made(plan) if not (results / name).is_file()]
    if missing:
        return End(plan.name, "not finished", (f"{missing[0]} is missing",), None)
    report = own / "report.html"
    try:
        judgement = judge(own)
    except ResultError as error:
        return End(plan.name, "FAILED at report", tuple(str(one) for one in error.problems), report)
    if judgement.released:
        return End(plan.name, "released", (), report)
    return End(plan.name, "NOT RELEASED", judgement.reasons, report)


def told(ends: list[End], unread: Mapping[str, str]) -> str:
    """The closing summary as text: one block a study; ``unread`` are the studies that were not run, with the reason."""
    lines = ["How it ended:"]
    for end in ends:
        lines.append(f"  {end.study}: {end.state}")
        lines.extend(f"    {line}" for line in end.lines)
        if end.report is not None:
            lines.append(f"    report: {end.report}")
    for name, reason in unread.items():
        lines.append(f"  {name}: NOT RUN")
        lines.append(f"    {reason}")
    return "\n".join(lines)
