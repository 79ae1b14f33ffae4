"""How it was sampled: the gate, attempts, seeds, settings."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from types import MappingProxyType
from typing import Any

from perdure.report.blocks import Block, Cell, Note, Subhead, Table, Text, columns
from perdure.report.results import ResultsFolder
from perdure.report.rounding import at_places, stated
from perdure.report.sections.section import Section, section
from perdure.report.words import count

GATE: Mapping[str, tuple[str, str]] = MappingProxyType(
    {
        "rhat": ("R-hat, largest", "at most 1.01"),
        "ess bulk": ("Effective sample size, bulk, smallest", "at least 400"),
        "ess tail": ("Effective sample size, tail, smallest", "at least 400"),
        "divergences": ("Divergences", "none"),
        "ebfmi": ("E-BFMI, smallest", "at least 0.3"),
    }
)
"""Numbers of the gate: key in ``fit.json`` to its name and what it must be."""


def sampling(results: ResultsFolder) -> Section:
    """Gate, attempts with what was changed between them, worst quantities, settings."""
    fit = results.fit
    diagnosis = _mapping(fit.get("diagnosis"))
    attempts = [_flat(_mapping(attempt)) for attempt in fit.get("attempts") or ()]
    blocks: list[Block] = [
        Text(
            f"Hamiltonian Monte Carlo with no U-turns; {count(len(attempts), 'attempt')}. "
            "Nothing is released unless every number of the gate is met."
        ),
        Note("pass", "The gate was passed.")
        if results.gate_passed
        else Note("fail", "The gate was not passed; the last attempt is shown below."),
        Table("The gate", columns(("Number", "Reached", "Required"), ("Reached",)), tuple(_gate_row(key, diagnosis) for key in GATE)),
    ]
    if attempts:
        blocks.append(_attempts(attempts))
    if worst := _flat(_mapping(fit.get("worst"))):
        blocks.append(_pairs("Quantities with the worst numbers", worst))
    settings = {**_flat(_mapping(results.run.get("settings")))}
    if "seed" in fit:
        settings["seed of the accepted attempt" if results.gate_passed else "seed of the last attempt"] = shown(fit["seed"])
    settings |= {f"grid, {name}": value for name, value in _flat(_mapping(fit.get("grid"))).items()}
    settings |= {f"seconds, {name}": value for name, value in _flat(_mapping(fit.get("seconds"))).items()}
    blocks += [Subhead("Settings"), _pairs("Settings of the run", settings)]
    return section("How it was sampled", "sampling", blocks)


def shown(value: object) -> str:
    """A value of a JSON file as readers write it."""
    match value:
        case None:
            text = ""
        case bool():
            text = "yes" if value else "no"
        case float():
            text = stated(value if value.is_integer() else float(f"{value:.4g}"))
        case list() | tuple():
            text = ", ".join(shown(item) for item in value)
        case dict():
            text = "; ".join(f"{key} {shown(item)}" for key, item in value.items())
        case _:
            text = str(value)
    return text


def _gate_row(key: str, diagnosis: Mapping[str, Any]) -> tuple[Cell, ...]:
    name, required = GATE[key]
    value = diagnosis.get(key)
    if isinstance(value, int | float) and not isinstance(value, bool):
        text = at_places(float(value), {"rhat": 4, "ebfmi": 2}.get(key, 0))
    else:
        text = shown(value) or ("not finite" if key in diagnosis else "not reported")
    return Cell(name), Cell(text), Cell(required)


def _attempts(attempts: Sequence[Mapping[str, str]]) -> Table:
    names = list(dict.fromkeys(name for attempt in attempts for name in attempt if name != "change"))
    titles = ("Attempt", *names, "Change before it")
    body = tuple(
        (Cell(str(number)), *(Cell(attempt.get(name, "")) for name in names), Cell(attempt.get("change", "")))
        for number, attempt in enumerate(attempts, start=1)
    )
    return Table("Attempts", columns(titles, names), body)


def _pairs(caption: str, values: Mapping[str, str]) -> Table:
    return Table(caption, columns(("Name", "Value")), tuple((Cell(name), Cell(value)) for name, value in values.items()))


def _mapping(value: object) -> Mapping[str, Any]:
    return value if isinstance(value, dict) else {}


def _flat(values: Mapping[str, Any]) -> dict[str, str]:
    """One level: entries of an inner object stand under their own names, unless the outer object has that name too."""
    flat: dict[str, str] = {}
    for name, value in values.items():
        if isinstance(value, dict):
            for inner, item in value.items():
                flat[inner if inner not in values and inner not in flat else f"{name} {inner}"] = shown(item)
        else:
            flat[name] = shown(value)
    return flat
