"""Typed rows of the result tables. Units are internal (MPa, s, ratio) and stand in the column names of the files."""

from __future__ import annotations

import math
import typing
from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass, field, fields
from pathlib import Path
from types import MappingProxyType
from typing import Any

from perdure.errors import Problem

REMEDY = "Run the workflow again; the step that writes this file makes it anew."
_YES_NO = MappingProxyType({"yes": True, "true": True, "1": True, "no": False, "false": False, "0": False})


def column(name: str) -> Any:
    """A dataclass field that is read from the column called ``name``."""
    return field(metadata={"column": name})


@dataclass(frozen=True, slots=True)
class Margin:
    """One row of ``margins.csv``; None where nothing was released."""

    duty: str = column("duty")
    limit: str = column("limit")
    kind: str = column("kind")
    quantity: str = column("quantity")
    level: str = column("level")
    subject: str = column("subject")
    limit_value: float = column("limit value")
    unit: str = column("unit")
    start: float = column("start [s]")
    end: float = column("end [s]")
    share: float = column("required share")
    confidence: float = column("confidence")
    share_mean: float | None = column("share mean")
    share_low: float | None = column("share low")
    share_high: float | None = column("share high")
    probability: float | None = column("probability")
    probability_error: float | None = column("probability mcse")
    bound: float | None = column("bound")
    difference: float | None = column("difference")
    ratio: float | None = column("ratio")
    median_response: float | None = column("median response")
    verdict: str = column("verdict")
    released: bool = column("released")
    digest: str = column("records sha256")


@dataclass(frozen=True, slots=True)
class Band:
    """One row of ``bands.csv``."""

    duty: str = column("duty")
    level: str = column("level")
    subject: str = column("subject")
    time: float = column("time [s]")
    kind: str = column("kind")
    median: float = column("median [MPa]")
    low50: float = column("low50 [MPa]")
    high50: float = column("high50 [MPa]")
    low90: float = column("low90 [MPa]")
    high90: float = column("high90 [MPa]")
    released: bool = column("released")
    digest: str = column("records sha256")


@dataclass(frozen=True, slots=True)
class Modulus:
    """One row of ``evidence/modulus.csv``."""

    level: str = column("level")
    subject: str = column("subject")
    time: float = column("time [s]")
    median: float = column("median [MPa]")
    low90: float = column("low90 [MPa]")
    high90: float = column("high90 [MPa]")


@dataclass(frozen=True, slots=True)
class Fitted:
    """One row of ``evidence/fitted.csv``: a reading with its predictive band."""

    record: str = column("record")
    specimen: str = column("specimen")
    batch: str = column("batch")
    method: str = column("method")
    instrument: str = column("instrument")
    time: float = column("time [s]")
    observed: float = column("observed")
    held_out: bool = column("held out")
    median: float = column("median")
    low50: float = column("low50")
    high50: float = column("high50")
    low90: float = column("low90")
    high90: float = column("high90")
    z: float | None = column("residual z")
    unit: str = column("unit")
    strain: float | None = column("strain")


@dataclass(frozen=True, slots=True)
class Parameter:
    """One row of ``parameters.csv``; prior columns may be empty."""

    quantity: str = column("quantity")
    label: str = column("label")
    level: str = column("level")
    subject: str = column("subject")
    unit: str = column("unit")
    median: float = column("median")
    low: float = column("low")
    high: float = column("high")
    prior_median: float | None = column("prior median")
    prior_low: float | None = column("prior low")
    prior_high: float | None = column("prior high")
    contraction: float | None = column("contraction")
    identified: str = column("identified")


@dataclass(frozen=True, slots=True)
class Prior:
    """One row of ``priors.csv``."""

    quantity: str = column("quantity")
    unit: str = column("unit")
    low: float | None = column("low")
    high: float | None = column("high")
    coverage: float | None = column("coverage")
    source: str = column("source")
    origin: str = column("origin")
    distribution: str = column("distribution")
    median: float | None = column("median")
    q05: float | None = column("q05")
    q95: float | None = column("q95")


@dataclass(frozen=True, slots=True)
class Intake:
    """One row of ``intake.csv``."""

    row: str = column("row")
    record: str = column("record")
    specimen: str = column("specimen")
    batch: str = column("batch")
    method: str = column("method")
    instrument: str = column("instrument")
    file: str = column("file")
    status: str = column("status")
    readings: float | None = column("readings")
    missing: float | None = column("missing")
    used: float | None = column("used")
    reason: str = column("reason")
    conversions: str = column("conversions")
    digest: str = column("sha256")


@dataclass(frozen=True, slots=True)
class HeldOut:
    """One row of ``holdout.csv``: a reading that the fit never saw."""

    record: str = column("record")
    specimen: str = column("specimen")
    batch: str = column("batch")
    time: float = column("time [s]")
    observed: float = column("observed")
    unit: str = column("unit")
    median: float = column("median")
    low50: float = column("low50")
    high50: float = column("high50")
    low90: float = column("low90")
    high90: float = column("high90")
    inside50: bool = column("inside50")
    inside90: bool = column("inside90")
    score: float | None = column("interval score 90")
    digest: str = column("records sha256")


@dataclass(frozen=True, slots=True)
class FindingRow:
    """One row of ``findings.csv``."""

    check: str = column("check")
    subject: str = column("subject")
    outcome: str = column("outcome")
    value: float | None = column("value")
    threshold: float | None = column("threshold")
    unit: str = column("unit")
    message: str = column("message")
    remedy: str = column("remedy")
    blocking: bool = column("blocking")


def _number(text: str) -> float:
    value = float(text)
    if math.isnan(value):
        raise ValueError(text)
    return value


def _optional(text: str) -> float | None:
    if not text.strip() or text.strip().lower() == "nan":
        return None
    return float(text)


def _flag(text: str) -> bool:
    return _YES_NO[text.strip().lower()]


_READERS: Mapping[Any, tuple[Callable[[str], Any], str]] = MappingProxyType(
    {
        str: (str, "text"),
        float: (_number, "a number"),
        float | None: (_optional, "a number or nothing"),
        bool: (_flag, "yes or no"),
    }
)


def parse[Row](kind: type[Row], table: Sequence[Mapping[str, str]], path: Path) -> tuple[tuple[Row, ...], list[Problem]]:
    """Turn a table of text into typed rows.

    Args:
        kind: one of the dataclasses of this module.
        table: rows as text, column name to cell.
        path: of the file, for the problems.

    Returns:
        The rows that could be read, and every problem found (missing columns, cells that are not what they must be).
    """
    hints = typing.get_type_hints(kind)
    plan = [(item.name, item.metadata["column"], *_READERS[hints[item.name]]) for item in fields(kind)]  # type: ignore[arg-type]
    if table and (missing := [name for _, name, _, _ in plan if name not in table[0]]):
        names = ", ".join(missing)
        return (), [Problem(path.name, f"no column {names}", "every column of the results table", REMEDY)]
    rows: list[Row] = []
    problems: list[Problem] = []
    for line, cells in enumerate(table, start=2):
        values: dict[str, Any] = {}
        for attribute, name, read, expected in plan:
            try:
                values[attribute] = read(cells[name])
            except (ValueError, KeyError):
                problems.append(Problem(f'{path.name}, row {line}, column "{name}"', repr(cells[name]), expected, REMEDY))
        if len(values) == len(plan):
            rows.append(kind(**values))
    return tuple(rows), problems
