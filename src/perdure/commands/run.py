"""``perdure run``: from records to margins and a report."""

from __future__ import annotations

import sys
from collections.abc import Sequence
from pathlib import Path

from perdure.border.check_text import grouped
from perdure.border.shipped import shipped
from perdure.commands import closing, forecast
from perdure.commands.reading import Ready, read
from perdure.commands.snakemake import NOTES, workflow_of
from perdure.errors import Problem
from perdure.steps.chain import later
from perdure.steps.plan import keep_apart, plans
from perdure.steps.runner import withdraw

SHIPPED_STUDY = "fender"
"""The study below ``config/studies`` that runs where the user names none."""

DRY = frozenset({"-n", "--dry-run", "--dryrun"})


def run(folders: Sequence[Path], results: Path, cores: int | None, options: Sequence[str]) -> int:
    """Run the studies in ``folders`` (none: the shipped one) into ``results`` and return the exit code.

    All problems of all studies are printed first, at once. A study that has any isn't run, the others are. What an earlier run
    predicted for it is withdrawn: it belongs to other inputs. Its posterior stays, so that a slip costs no refit once it is mended.

    Raises:
        StudyError: two studies share a name, or the results folder isn't apart from a study.
        ResultError: the results folder is in use or cannot be written, or Snakemake refused its options.
    """
    planned = plans(folder.expanduser() for folder in (folders or [shipped("config") / "studies" / SHIPPED_STUDY]))
    target = results.expanduser().resolve()
    keep_apart(planned, target)
    readings = {name: read(plan.study) for name, plan in planned.items()}
    faulty = {name: found for name, found in readings.items() if not isinstance(found, Ready)}
    for name, found in faulty.items():
        _say(f"{name}: cannot run as it is\n\n{grouped(found)}\n")
    sound = {name: plan for name, plan in planned.items() if name not in faulty}
    dry = bool(DRY.intersection(options))
    if not sound and not any((target / name).is_dir() for name in faulty):
        return 1
    code = 0
    with workflow_of(sound, target, cores, options) as workflow:
        withdrawn = [] if dry else [name for name in faulty if withdraw(target / name, later("fit"))]
        if sound:
            print(forecast.told(forecast.forecast(workflow.summary(), sound, target), sound, target), flush=True)
            code = workflow.run()
    if dry:
        return code or int(bool(faulty))
    ends = [closing.end_of(plan, target) for plan in sound.values()]
    unread = {name: _why(found, withdrawn=name in withdrawn) for name, found in faulty.items()}
    print(closing.told(ends, unread), flush=True)
    if code and all(end.state == "released" for end in ends):
        _say(f"Snakemake ended with exit code {code}; its log is in {target / NOTES / 'log'}")
    return code if code < 0 else int(bool(code or faulty or any(end.state != "released" for end in ends)))


def _why(problems: Sequence[Problem], *, withdrawn: bool) -> str:
    listed = f"{len(problems)} problem{'s' if len(problems) > 1 else ''}, listed above"
    return f"{listed}; the predictions and the report of an earlier run are withdrawn" if withdrawn else listed


def _say(text: str) -> None:
    sys.stderr.write(text + "\n")
    sys.stderr.flush()
