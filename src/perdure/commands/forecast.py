"""What will run and why, in the words of the study rather than of the workflow."""

from __future__ import annotations

import json
from collections.abc import Mapping
from dataclasses import dataclass
from pathlib import Path
from types import MappingProxyType

from perdure.steps.chain import CHAIN, note
from perdure.steps.plan import Plan, dependencies
from perdure.steps.runner import DONE, FAILED, outcome

PARTS: Mapping[str, str] = MappingProxyType(
    {
        "register": "register.csv changed",
        "records": "files in records/ changed",
        "instruments": "instruments changed",
        "noise": "material or noise ranges changed",
        "hold out": "the hold-out changed",
        "law": "law or clock changed",
        "model": "material, law, scatter, horizon or priors changed",
        "handbook": "a handbook changed",
        "sampler": "sampler settings changed",
        "duties": "duties changed",
        "text": "title, display units or the like changed",
        "code": "the code of this step changed",
    }
)
"""What to say for each part of a study that a step depends on."""

NEW = "not made yet"

STATUS: Mapping[str, str] = MappingProxyType(
    {
        "missing": NEW,
        "updated input files": "a file that it reads is newer",
        "set of input files changed": "it reads other files than before",
        "rule implementation changed": "the rule of the workflow changed",
        "params changed": "the study changed",
    }
)
"""What to say for each status in Snakemake's summary where our own note doesn't say more."""


@dataclass(frozen=True, slots=True)
class Coming:
    """One step that will run.

    Attributes:
        study, step: names.
        reason: why, in words.
    """

    study: str
    step: str
    reason: str


def forecast(summary: str, plans: Mapping[str, Plan], results: Path) -> list[Coming]:
    """The steps that will run, by study and in the order of a run, from Snakemake's ``summary`` table."""
    states = _pending(summary)
    coming: list[Coming] = []
    for name, plan in plans.items():
        pending = [step for step in CHAIN if (name, step) in states]
        for step in pending:
            first = [before for before in CHAIN[step].after if before in pending]
            own = _own_reason(states[name, step], step, plan, results / name, follows=bool(first))
            coming.append(Coming(name, step, own or f"follows {', '.join(first)}"))
    return coming


def told(coming: list[Coming], plans: Mapping[str, Plan], results: Path) -> str:
    """The forecast as text for the terminal: a block for each study."""
    lines = [f"What will run (results go to {results}):"]
    for name in plans:
        own = [one for one in coming if one.study == name]
        if not own:
            lines.append(f"  {name}: everything is up to date")
        elif all(one.reason == NEW for one in own):
            lines.append(f"  {name}: {', '.join(one.step for one in own)} ({NEW})")
        else:
            lines.append(f"  {name}")
            lines.extend(f"    {one.step:<11} {one.reason}" for one in own)
    return "\n".join(lines)


def _pending(summary: str) -> dict[tuple[str, str], set[str]]:
    """Statuses of the files of each (study, step) that will run."""
    found: dict[tuple[str, str], set[str]] = {}
    for line in summary.splitlines():
        cells = line.split("\t")
        if len(cells) < 6 or cells[-1] != "update pending":
            continue
        study = cells[0].partition("/")[0]
        found.setdefault((study, cells[2]), set()).add(cells[-2])
    return found


def _own_reason(statuses: set[str], step: str, plan: Plan, results: Path, *, follows: bool) -> str:
    """Why ``step`` runs for a reason of its own; "" where it only follows an earlier step."""
    changed = _changed(step, plan, results)
    if changed:
        return ", ".join(PARTS[part] for part in changed)
    last = outcome(results, step)
    if last is not None and last.state == FAILED:
        return "failed last time"
    if last is not None and last.state != DONE:
        return "was stopped last time"
    told_by_snakemake = [STATUS.get(status, status) for status in sorted(statuses - {"ok"})]
    if follows and (not told_by_snakemake or statuses <= {"ok", "missing", "updated input files"}):
        return "" if _ran_before(step, results) else NEW
    return ", ".join(told_by_snakemake)


def _ran_before(step: str, results: Path) -> bool:
    return (results / note(step)).is_file()


def _changed(step: str, plan: Plan, results: Path) -> list[str]:
    """Parts of the study that are other than when ``step`` last ran, by the step's own note."""
    try:
        before = json.loads((results / note(step)).read_text(encoding="utf-8"))["depends"]
    except (OSError, ValueError, KeyError, TypeError):
        return []
    return [part for part, digest in dependencies(plan, step).items() if before.get(part) != digest]
