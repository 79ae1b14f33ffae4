"""Sections of the page, one file each, in the order of :data:`SECTIONS`. A new section is one file and one line here."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from types import MappingProxyType

from perdure.report.results import ResultsFolder
from perdure.report.sections.bands import bands
from perdure.report.sections.cautions import cautions
from perdure.report.sections.findings import findings
from perdure.report.sections.holdout import holdout
from perdure.report.sections.intake import intake
from perdure.report.sections.margins import margins
from perdure.report.sections.modulus import modulus
from perdure.report.sections.parameters import parameters
from perdure.report.sections.priors import priors
from perdure.report.sections.provenance import provenance
from perdure.report.sections.records import records
from perdure.report.sections.sampling import sampling
from perdure.report.sections.scatter import scatter
from perdure.report.sections.section import Section
from perdure.report.sections.verdicts import verdicts

SECTIONS: Mapping[str, Callable[[ResultsFolder], Section | None]] = MappingProxyType(
    {
        "verdicts": verdicts,
        "margins": margins,
        "bands": bands,
        "modulus": modulus,
        "records": records,
        "parameters": parameters,
        "scatter": scatter,
        "priors": priors,
        "holdout": holdout,
        "findings": findings,
        "intake": intake,
        "sampling": sampling,
        "provenance": provenance,
        "cautions": cautions,
    }
)
"""Name (also the anchor) to the function that builds the section; None where a study has nothing of the kind (hold-out)."""
