"""A study read as far as it can be without sampling."""

from __future__ import annotations

from dataclasses import dataclass
from pathlib import Path

from perdure.border.intake import Intake, examine
from perdure.errors import Problem, StudyError
from perdure.inference.priors import Layout, build_priors, lay_out


@dataclass(frozen=True, slots=True, eq=False)
class Ready:
    """A study that can run.

    Attributes:
        intake: its records and declarations.
        layout: its law, laid out over tests and horizon.
    """

    intake: Intake
    layout: Layout


def read(folder: Path) -> Ready | tuple[Problem, ...]:
    """The study in ``folder``, or every problem that keeps it from running."""
    found = examine(folder)
    if found.intake is None:
        return found.problems
    try:
        layout = lay_out(found.intake.study, found.intake.record_set)
        build_priors(found.intake.study, found.intake.record_set, layout)
    except StudyError as error:
        return error.problems
    return Ready(found.intake, layout)
