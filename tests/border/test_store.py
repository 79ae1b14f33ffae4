"""Files of results: what is written comes back, whole or not at all."""

from __future__ import annotations

import csv
import json
import math
import os
import stat
from dataclasses import fields
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st

from perdure.border.intake import take_in
from perdure.border.store import (
    atomic_path,
    read_findings,
    read_json,
    read_records,
    read_table,
    sha256_of,
    write_findings,
    write_json,
    write_records,
    write_table,
)
from perdure.errors import ResultError
from perdure.rheology.history import History
from perdure.study.finding import Finding
from perdure.study.records import RecordSet


def same(first: Any, second: Any) -> bool:
    if isinstance(first, History):
        return same(first.time, second.time) and same(first.value, second.value)
    if isinstance(first, np.ndarray):
        return bool(first.dtype == second.dtype and first.tobytes() == second.tobytes())
    return bool(first == second) and type(first) is type(second)


def test_records_come_back_bit_for_bit(folder: Any, tmp_path: Path) -> None:
    folder.files["study.yaml"] += "hold out: {after: 4 s}\n"
    records = take_in(folder.write()).record_set
    write_records(tmp_path / "out" / "records.nc", records)
    back = read_records(tmp_path / "out" / "records.nc")
    assert back.instruments == records.instruments
    assert len(back.records) == len(records.records) == 2
    for ours, theirs in zip(records.records, back.records, strict=True):
        for item in fields(ours):
            if item.name != "uncertainty":
                assert same(getattr(ours, item.name), getattr(theirs, item.name)), item.name
        for item in fields(ours.uncertainty):
            assert getattr(ours.uncertainty, item.name) == getattr(theirs.uncertainty, item.name)


def test_a_reference_time_comes_back(single: Any, tmp_path: Path) -> None:
    columns = "      time: {column: t, unit: h}\n      ratio: {column: ratio, unit: 1}\n"
    folder = single(columns, {"ramp [s]": "2", "reference [h]": "1"}, "t,ratio\n2,0.98\n4,0.96\n8,0.94\n")
    write_records(tmp_path / "records.nc", take_in(folder.write()).record_set)
    assert read_records(tmp_path / "records.nc").records[0].reference_time == 3600.0


def test_the_same_records_give_the_same_bytes(folder: Any, tmp_path: Path) -> None:
    records = take_in(folder.write()).record_set
    write_records(tmp_path / "a.nc", records)
    write_records(tmp_path / "b.nc", records)
    assert sha256_of(tmp_path / "a.nc") == sha256_of(tmp_path / "b.nc")


def test_an_empty_set_of_records_comes_back(tmp_path: Path) -> None:
    write_records(tmp_path / "none.nc", RecordSet((), ()))
    assert read_records(tmp_path / "none.nc").records == ()


@pytest.mark.parametrize("content", [b"", b"no netCDF at all"])
def test_damaged_records_are_refused(tmp_path: Path, content: bytes) -> None:
    (tmp_path / "records.nc").write_bytes(content)
    with pytest.raises(ResultError, match=r"records\.nc"):
        read_records(tmp_path / "records.nc")
    with pytest.raises(ResultError, match=r"gone\.nc"):
        read_records(tmp_path / "gone.nc")


def test_cells_of_a_table(tmp_path: Path) -> None:
    row = (1 / 3, -2.5, 0.0, None, math.nan, True, np.float64(1e-300), np.int64(7), "=1+1", "+5", "-a", "@x", "plain, with comma", math.inf)
    columns = [f"c{index}" for index in range(len(row))]
    write_table(tmp_path / "t.csv", columns, [row])
    with (tmp_path / "t.csv").open(encoding="utf-8", newline="") as file:
        cells = list(csv.reader(file))[1]
    assert cells[:8] == ["0.3333333333", "-2.5", "0", "", "", "yes", "1e-300", "7"]
    assert cells[8:] == ["'=1+1", "'+5", "'-a", "'@x", "plain, with comma", "inf"]
    assert list(read_table(tmp_path / "t.csv")[0].values())[8:13] == ["=1+1", "+5", "-a", "@x", "plain, with comma"]


@settings(suppress_health_check=[HealthCheck.function_scoped_fixture], deadline=None)
@given(st.lists(st.lists(st.text(st.characters(codec="utf-8", exclude_characters="\r\x00")), min_size=2, max_size=2), max_size=5))
def test_any_text_comes_back_from_a_table(tmp_path: Path, rows: list[list[str]]) -> None:
    write_table(tmp_path / "t.csv", ["a", "b"], rows)
    assert [list(row.values()) for row in read_table(tmp_path / "t.csv")] == rows


@given(st.floats(-1e300, 1e300))
def test_numbers_keep_ten_digits(value: float) -> None:
    from perdure.border.store import _cell  # noqa: PLC0415 (the one private name that this file looks at)

    assert float(_cell(value)) == pytest.approx(value, rel=1e-9, abs=1e-300)


def test_a_row_of_another_width_leaves_no_table(tmp_path: Path) -> None:
    with pytest.raises(ResultError, match="3 entries"):
        write_table(tmp_path / "t.csv", ["a", "b"], [(1, 2), (1, 2, 3)])
    assert list(tmp_path.iterdir()) == []


def test_damaged_tables_are_refused(tmp_path: Path) -> None:
    (tmp_path / "t.csv").write_text("a,b\n1\n", encoding="utf-8")
    with pytest.raises(ResultError, match="row 2"):
        read_table(tmp_path / "t.csv")
    (tmp_path / "t.csv").write_text("", encoding="utf-8")
    with pytest.raises(ResultError, match="empty"):
        read_table(tmp_path / "t.csv")
    with pytest.raises(ResultError):
        read_table(tmp_path / "gone.csv")


def test_json_is_sorted_plain_and_strict(tmp_path: Path) -> None:
    write_json(tmp_path / "x.json", {"b": np.array([1.0, math.nan]), "a": np.float64(2), "c": (np.bool_(True), "ε")})
    text = (tmp_path / "x.json").read_text(encoding="utf-8")
    assert list(json.loads(text)) == ["a", "b", "c"]
    assert read_json(tmp_path / "x.json") == {"a": 2.0, "b": [1.0, None], "c": [True, "ε"]}
    (tmp_path / "x.json").write_text("{", encoding="utf-8")
    with pytest.raises(ResultError, match=r"x\.json"):
        read_json(tmp_path / "x.json")


FINDINGS = (
    Finding("time order", "n1", "pass", None, None, "", "Times increase."),
    Finding("gaps", "n1", "caution", 2.5, 1.0, "decades", "A gap.", "Read more often.", blocking=True),
)


def test_findings_come_back_from_a_list_and_from_a_mapping(tmp_path: Path) -> None:
    write_findings(tmp_path / "f.json", FINDINGS)
    assert read_findings(tmp_path / "f.json") == FINDINGS
    write_json(tmp_path / "g.json", {"released": True, "findings": read_json(tmp_path / "f.json")})
    assert read_findings(tmp_path / "g.json") == FINDINGS


@pytest.mark.parametrize("content", [{}, [1], [{"check": "x"}], [{**{f.name: "" for f in fields(Finding)}, "outcome": "fine"}]])
def test_other_content_is_no_finding(tmp_path: Path, content: object) -> None:
    write_json(tmp_path / "f.json", content)
    with pytest.raises(ResultError):
        read_findings(tmp_path / "f.json")


def write_and_fail(path: Path) -> None:
    with atomic_path(path) as temporary:
        temporary.write_text("half", encoding="utf-8")
        raise RuntimeError


def test_a_failed_write_leaves_the_old_file_and_no_other(tmp_path: Path) -> None:
    (tmp_path / "x.txt").write_text("old", encoding="utf-8")
    with pytest.raises(RuntimeError):
        write_and_fail(tmp_path / "x.txt")
    assert (tmp_path / "x.txt").read_text(encoding="utf-8") == "old"
    assert [item.name for item in tmp_path.iterdir()] == ["x.txt"]


def test_results_are_as_readable_as_other_files(tmp_path: Path) -> None:
    old = os.umask(0o022)
    try:
        write_json(tmp_path / "x.json", 1)
    finally:
        os.umask(old)
    assert stat.S_IMODE((tmp_path / "x.json").stat().st_mode) == 0o644


def test_the_digest_is_that_of_the_bytes(tmp_path: Path) -> None:
    (tmp_path / "x").write_bytes(b"abc")
    assert sha256_of(tmp_path / "x") == "ba7816bf8f01cfea414140de5dae2223b00361a396177a9cb410ff61f20015ad"
    with pytest.raises(ResultError):
        sha256_of(tmp_path / "gone")
