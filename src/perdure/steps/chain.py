"""The chain of steps: what each one makes, what it follows, and which parts of a study change it.

The rules in ``workflow/rules`` say the same in Snakemake's words; a test holds the two in step.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from types import MappingProxyType


@dataclass(frozen=True, slots=True)
class Step:
    """One step of a study's chain.

    Attributes:
        name: module in ``perdure.steps`` and rule of the workflow.
        about: what the step does, for a summary.
        makes: files below ``results/<study>``, without the note of the run (see :func:`note`).
        after: steps whose files it reads.
        parts: keys of :attr:`perdure.steps.plan.Plan.parts` that it reads beside those files.
    """

    name: str
    about: str
    makes: tuple[str, ...]
    after: tuple[str, ...]
    parts: tuple[str, ...]


_CHAIN = (
    Step(
        "intake",
        "reads the register and the records",
        ("records.nc", "intake.csv", "evidence/intake.json"),
        (),
        ("register", "records", "instruments", "noise", "hold out", "law", "handbook"),
    ),
    Step("priors", "builds the priors", ("priors.csv", "evidence/priors.json"), ("intake",), ("model", "handbook")),
    Step("fit", "samples the posterior", ("posterior.nc", "evidence/fit.json"), ("intake", "priors"), ("model", "handbook", "sampler")),
    Step(
        "checks",
        "checks the fit and the reach of the duties",
        ("evidence/checks.json", "evidence/fitted.csv"),
        ("intake", "fit"),
        ("duties",),
    ),
    Step("parameters", "tabulates the parameters", ("parameters.csv", "evidence/modulus.csv"), ("intake", "fit"), ()),
    Step(
        "predict",
        "predicts the duties and their margins",
        ("predictions.nc", "bands.csv", "margins.csv", "evidence/predict.json"),
        ("intake", "fit"),
        ("duties",),
    ),
    Step("holdout", "predicts the readings held out", ("holdout.csv", "evidence/holdout.json"), ("intake", "fit"), ()),
    Step(
        "report",
        "writes the findings and the report",
        ("findings.csv", "report.html", "run.json"),
        ("intake", "priors", "fit", "checks", "parameters", "predict", "holdout"),
        ("text",),
    ),
)

CHAIN: Mapping[str, Step] = MappingProxyType({step.name: step for step in _CHAIN})
"""Steps of one study in the order of a run. ``verdict`` comes after the reports of all studies and belongs to none."""


def note(step: str) -> str:
    """The file, below ``results/<study>``, that says when ``step`` ran, how long it took, with which versions and what it depended on."""
    return f"evidence/steps/{step}.json"


def log(step: str) -> str:
    """The file, below ``results/<study>``, that holds what ``step`` said in its last run."""
    return f"evidence/steps/{step}.log"


def later(step: str) -> tuple[str, ...]:
    """Names of all steps that read, directly or not, what ``step`` makes; in the order of a run."""
    reached = {step}
    for other in _CHAIN:
        if reached.intersection(other.after):
            reached.add(other.name)
    return tuple(other.name for other in _CHAIN if other.name in reached and other.name != step)


def files(step: str) -> tuple[str, ...]:
    """Everything that ``step`` writes below ``results/<study>``, its note included, its log not."""
    return (*CHAIN[step].makes, note(step))
