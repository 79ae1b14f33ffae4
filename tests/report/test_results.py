"""The results folder is read whole, typed, and refused with every reason at once."""

from __future__ import annotations

from collections.abc import Callable
from pathlib import Path
from typing import Any

import pytest

from perdure.errors import ResultError
from perdure.report.results import ResultsFolder

Build = Callable[[Any], Path]


def test_typed_rows_and_the_window_of_used_readings(build: Build, make_recipe: Any) -> None:
    results = ResultsFolder.read(build(make_recipe(holdout=True)))
    assert results.released
    assert results.margins[0].limit_value == 0.25
    assert results.margins[0].released is True
    assert results.window is not None
    assert results.window.shortest == 1.0
    # held-out readings go on until 2.6e6 s and don't count
    assert results.window.longest <= 1e6
    assert results.holdout is not None
    assert results.holdout_summary["coverage90"] == 0.388


def test_blocking_failure_keeps_the_study_from_being_released(build: Build, make_recipe: Any) -> None:
    folder = build(make_recipe(specimens=1, readings=5))
    path = folder / "findings.csv"
    text = path.read_text(encoding="utf-8")
    path.write_text(text.replace("Look at its mounting.,no", "Look at its mounting.,yes"), encoding="utf-8")
    results = ResultsFolder.read(folder)
    assert results.gate_passed
    assert not results.released


def test_empty_cells_are_none_where_not_released(build: Build, make_recipe: Any) -> None:
    results = ResultsFolder.read(build(make_recipe(released=False)))
    assert not results.released
    assert {row.probability for row in results.margins} == {None}
    assert results.holdout is None


def test_all_missing_files_are_named_at_once(build: Build, make_recipe: Any) -> None:
    folder = build(make_recipe())
    (folder / "margins.csv").unlink()
    (folder / "evidence" / "fit.json").unlink()
    with pytest.raises(ResultError) as caught:
        ResultsFolder.read(folder)
    assert {problem.where for problem in caught.value.problems} == {"margins.csv", "evidence/fit.json"}


def test_all_damaged_cells_are_named_with_row_and_column(build: Build, make_recipe: Any) -> None:
    folder = build(make_recipe())
    path = folder / "margins.csv"
    lines = path.read_text(encoding="utf-8").splitlines()
    lines[1] = lines[1].replace(",0.25,", ",a quarter,")
    lines[3] = lines[3].replace(",yes,", ",perhaps,")
    path.write_text("\n".join(lines) + "\n", encoding="utf-8")
    with pytest.raises(ResultError) as caught:
        ResultsFolder.read(folder)
    assert [problem.where for problem in caught.value.problems] == [
        'margins.csv, row 2, column "limit value"',
        'margins.csv, row 4, column "released"',
    ]


def test_missing_column_is_named(build: Build, make_recipe: Any) -> None:
    folder = build(make_recipe())
    path = folder / "priors.csv"
    path.write_text(path.read_text(encoding="utf-8").replace("source", "origin of it", 1), encoding="utf-8")
    with pytest.raises(ResultError, match="no column source"):
        ResultsFolder.read(folder)


def test_tables_of_other_records_are_refused(build: Build, make_recipe: Any) -> None:
    folder = build(make_recipe())
    path = folder / "bands.csv"
    path.write_text(path.read_text(encoding="utf-8").replace("0123456789abcdef", "fedcba9876543210"), encoding="utf-8")
    with pytest.raises(ResultError, match=r"bands\.csv"):
        ResultsFolder.read(folder)


def test_unknown_outcome_is_refused(build: Build, make_recipe: Any) -> None:
    folder = build(make_recipe())
    path = folder / "findings.csv"
    path.write_text(path.read_text(encoding="utf-8").replace(",caution,", ",shrug,"), encoding="utf-8")
    with pytest.raises(ResultError, match="shrug"):
        ResultsFolder.read(folder)
