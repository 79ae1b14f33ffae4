"""Last step of a run: names every study and fails when one is not released.

``python -m perdure.steps.verdict --results FOLDER -- STUDY …`` where ``FOLDER`` holds one folder a study.
"""

from __future__ import annotations

import argparse
import csv
import json
import sys
from collections.abc import Sequence
from dataclasses import dataclass
from pathlib import Path

from perdure.errors import PerdureError, ResultError, problem


@dataclass(frozen=True, slots=True)
class Judgement:
    """Whether the numbers of a study may be used.

    Attributes:
        study: its name.
        released: False where the posterior did not pass its gate, or a blocking finding failed.
        reasons: messages of the findings that stopped it; empty where it is released.
    """

    study: str
    released: bool
    reasons: tuple[str, ...]


def judge(results: Path) -> Judgement:
    """The :class:`Judgement` of the study whose results are in ``results`` (``results/<study>``).

    Raises:
        ResultError: ``evidence/fit.json`` or ``findings.csv`` is missing or cannot be read.
    """
    diagnosis, findings = results / "evidence" / "fit.json", results / "findings.csv"
    try:
        released = json.loads(diagnosis.read_text(encoding="utf-8"))["released"] is True
        with findings.open(encoding="utf-8", newline="") as handle:
            stopping = [row for row in csv.DictReader(handle) if row["outcome"] == "fail" and row["blocking"].lower() in {"true", "yes"}]
    except (OSError, ValueError, KeyError, TypeError) as error:
        raise ResultError(
            [
                problem(
                    f"{diagnosis} or {findings}",
                    f"{type(error).__name__}: {error}",
                    "the files that steps fit and report write",
                    "Run the study again with perdure run.",
                )
            ]
        ) from error
    reasons = tuple(dict.fromkeys(f"{row['check']}, {row['subject']}: {row['message']}" for row in stopping))
    if not released and not reasons:
        reasons = ("the posterior did not pass its gate",)
    return Judgement(results.name, released and not reasons, reasons)


def main(arguments: Sequence[str] | None = None) -> int:
    """Print a line for each study; return 1 when one is not released, else 0."""
    parser = argparse.ArgumentParser(prog="python -m perdure.steps.verdict", description="perdure verdict: names every study")
    parser.add_argument("--results", required=True, type=Path, metavar="FOLDER", help="folder that holds one folder a study")
    parser.add_argument("studies", nargs="+", metavar="STUDY", help="name of a study")
    parsed = parser.parse_args(arguments)
    code = 0
    for study in parsed.studies:
        try:
            judgement = judge((parsed.results / study).resolve())
        except PerdureError as error:
            print(error, file=sys.stderr)
            code = 1
            continue
        if judgement.released:
            print(f"{study}: released")
        else:
            code = 1
            print(f"{study}: NOT RELEASED\n" + "\n".join(f"  {reason}" for reason in judgement.reasons))
    return code


if __name__ == "__main__":
    raise SystemExit(main())
