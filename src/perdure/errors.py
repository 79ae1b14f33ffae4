"""The one error family: where it happened, what was found, what was expected, and the remedy."""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass


@dataclass(frozen=True, slots=True)
class Problem:
    """One thing that a user has to mend.

    Attributes:
        where: file, and row, column or key where there is one, as ``register.csv, row 7, column "use"``.
        got: what was found there.
        expected: what would have been right.
        remedy: what to write or do instead.
    """

    where: str
    got: str
    expected: str
    remedy: str

    def __str__(self) -> str:
        return f"{self.where}: found {self.got}; expected {self.expected}. {self.remedy}"


class PerdureError(Exception):
    """A mistake that the user can mend: shown without a traceback.

    Attributes:
        problems: every problem found in one pass, at least one.
    """

    def __init__(self, problems: Iterable[Problem]) -> None:
        self.problems: tuple[Problem, ...] = tuple(problems)
        super().__init__("\n".join(str(problem) for problem in self.problems))

    def __reduce__(self) -> tuple[type[PerdureError], tuple[tuple[Problem, ...]]]:
        return type(self), (self.problems,)


class StudyError(PerdureError):
    """The study folder holds something that cannot be used as it is."""


class ResultError(PerdureError):
    """A results file is missing, damaged or belongs to other inputs."""


class NumericsError(PerdureError):
    """A computation could not be carried out for these inputs."""


def problem(where: str, got: object, expected: str, remedy: str) -> Problem:
    """Build a :class:`Problem`; ``got`` is rendered with ``repr`` unless it is text already."""
    return Problem(where, got if isinstance(got, str) else repr(got), expected, remedy)
