"""Delimited text: any numbers, separators, decimal signs and blank cells come back exactly, with their rows."""

from __future__ import annotations

import math
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st

from perdure.border.instruments import Column, ReaderSettings
from perdure.border.readers import READERS
from perdure.border.readers.delimited import DELIMITED
from perdure.border.units import Dimension
from perdure.errors import StudyError

COLUMNS = {
    "time": Column("Zeit [s]", "s", Dimension.TIME),
    "force": Column("Kraft", "N", Dimension.FORCE),
    "strain": Column("ε", "%", Dimension.RATIO),
}


def read(path: Path, text: str, reader: ReaderSettings = ReaderSettings(), where: tuple[tuple[str, str], ...] = ()) -> Any:  # noqa: B008 (frozen)
    path.write_bytes(text.encode(reader.encoding))
    return DELIMITED.read(path, "records/x.csv", COLUMNS, where, reader)


finite = st.floats(allow_nan=False, allow_infinity=False, width=64)
cell = st.one_of(st.none(), finite)
table = st.lists(st.tuples(finite, cell, cell), min_size=1, max_size=12)
formats = st.sampled_from(
    [(",", "."), (";", "."), (";", ","), ("|", ","), ("\t", ","), ("\t", "."), ("whitespace", "."), ("whitespace", ",")]
)
preamble = st.lists(st.sampled_from(["", "Operator: nobody", "a;b;c", '"unclosed quote', "1,2,3", "Kraft"]), max_size=4)


@settings(suppress_health_check=[HealthCheck.function_scoped_fixture], deadline=None, max_examples=150)
@given(
    rows=table,
    form=formats,
    before=preamble,
    order=st.permutations(list(COLUMNS)),
    quote=st.booleans(),
    end=st.sampled_from(["\n", "\r\n"]),
)
def test_numbers_come_back_exactly(
    tmp_path: Path,
    rows: list[tuple[float, float | None, float | None]],
    form: tuple[str, str],
    before: list[str],
    order: list[str],
    quote: bool,
    end: str,
) -> None:
    separator, decimal = form
    written = " " if separator == "whitespace" else separator
    reader = ReaderSettings(separator=separator, decimal=decimal, missing_marks=("---",))
    blank = "---" if separator == "whitespace" else ""
    headings = {key: column.heading for key, column in COLUMNS.items()}
    if separator == "whitespace":
        headings["time"] = "Zeit"
    columns = {key: Column(headings[key], column.unit, column.dimension) for key, column in COLUMNS.items()}

    def text(value: float | None) -> str:
        shown = blank if value is None else repr(value).replace(".", decimal)
        return f'"{shown}"' if quote and separator != "whitespace" else shown

    lines = [*before, written.join(headings[key] for key in order)]
    first = len(lines) + 1
    for row in rows:
        values = dict(zip(COLUMNS, row, strict=True))
        lines.append(written.join(text(values[key]) for key in order))
    path = tmp_path / "x.csv"
    path.write_text(end.join(lines) + end, encoding="utf-8", newline="")
    got = DELIMITED.read(path, "records/x.csv", columns, (), reader)
    assert got.rows.tolist() == list(range(first, first + len(rows)))
    for index, key in enumerate(COLUMNS):
        wanted = np.array([math.nan if row[index] is None else row[index] for row in rows], dtype=np.float64)
        assert got.values[key].tobytes() == np.where(np.isnan(wanted), math.nan, wanted).tobytes()


def test_a_byte_order_mark_is_no_part_of_the_heading(tmp_path: Path) -> None:
    path = tmp_path / "x.csv"
    path.write_bytes(b"\xef\xbb\xbf" + "Zeit [s],Kraft,ε\n1,2,3\n".encode())
    assert DELIMITED.read(path, "x", COLUMNS, (), ReaderSettings()).values["time"].tolist() == [1.0]


@pytest.mark.parametrize("encoding", ["utf-16", "cp1253", "utf-8"])
def test_declared_encodings_are_read(tmp_path: Path, encoding: str) -> None:
    got = read(tmp_path / "x.csv", "Zeit [s],Kraft,ε\n1,2,3\n", ReaderSettings(encoding=encoding))
    assert got.values["strain"].tolist() == [3.0]


def test_conditions_select_rows_by_text_and_by_number(tmp_path: Path) -> None:
    text = "unit,oven,Zeit [s],Kraft,ε\n3,A,1,10,0\n4,A,1,20,0\n3.0,B,1,30,0\n3,A,2,40,0\n"
    got = read(tmp_path / "x.csv", text, where=(("unit", "3"), ("oven", "A")))
    assert got.values["force"].tolist() == [10.0, 40.0]
    assert got.rows.tolist() == [2, 5]
    assert read(tmp_path / "x.csv", text, where=(("unit", "3"),)).rows.tolist() == [2, 4, 5]


def test_words_in_rows_of_other_records_do_not_matter(tmp_path: Path) -> None:
    got = read(tmp_path / "x.csv", "unit,Zeit [s],Kraft,ε\n1,1,broken,0\n2,1,5,0\n", where=(("unit", "2"),))
    assert got.values["force"].tolist() == [5.0]


def test_reading_stops_at_the_declared_line_and_passes_over_empty_ones(tmp_path: Path) -> None:
    got = read(tmp_path / "x.csv", "Zeit [s],Kraft,ε\n1,2,3\n\n,,\n4,5,6\nEnd of test\n", ReaderSettings(stop_at="End"))
    assert got.rows.tolist() == [2, 5]


def test_a_units_row_is_compared_with_the_declaration(tmp_path: Path) -> None:
    reader = ReaderSettings(units_row=True)
    assert read(tmp_path / "x.csv", "Zeit [s],Kraft,ε\n[s],[N],[%]\n1,2,3\n", reader).rows.tolist() == [3]
    with pytest.raises(StudyError) as caught:
        read(tmp_path / "x.csv", "Zeit [s],Kraft,ε\n[s],[kN],[%]\n1,2,3\n", reader)
    assert [(item.where, item.got) for item in caught.value.problems] == [('records/x.csv, row 2, column "Kraft"', 'the unit "kN"')]
    with pytest.raises(StudyError, match="units row: false"):
        read(tmp_path / "x.csv", "Zeit [s],Kraft,ε\n1,2,3\n4,5,6\n", reader)


@pytest.mark.parametrize(
    ("text", "where", "got"),
    [
        ("Zeit [s],Kraft,ε,Kraft\n1,2,3,4\n", "records/x.csv, row 1", 'the heading "Kraft" more than once'),
        ("Zeit [s],Kraft,ε\n", "records/x.csv", "no reading below the headings"),
        ("Zeit [s],Kraft,ε\n1,NaN,3\n", 'records/x.csv, row 2, column "Kraft"', '"NaN"'),
        ("Zeit [s],Kraft,ε\n1,1e999,3\n", 'records/x.csv, row 2, column "Kraft"', '"1e999"'),
        ("Zeit [s],Kraft,ε\n1,1_000,3\n", 'records/x.csv, row 2, column "Kraft"', '"1_000"'),
        ("Zeit [s],Kraft,ε\n1,\x00,3\n", "records/x.csv", "binary content"),
    ],
)
def test_exports_that_cannot_be_read_say_where(tmp_path: Path, text: str, where: str, got: str) -> None:
    with pytest.raises(StudyError) as caught:
        read(tmp_path / "x.csv", text)
    assert (caught.value.problems[0].where, caught.value.problems[0].got) == (where, got)


def test_a_wrong_column_is_not_reported_for_every_row(tmp_path: Path) -> None:
    text = "Zeit [s],Kraft,ε\n" + "1,x,3\n" * 1000
    with pytest.raises(StudyError) as caught:
        read(tmp_path / "x.csv", text)
    assert len(caught.value.problems) == 6
    assert caught.value.problems[-1].got == "995 further problems of this kind"


@pytest.mark.parametrize("name", list(READERS))
def test_readers_are_listed_under_their_names(name: str) -> None:
    assert READERS[name].name == name
    assert READERS[name].about.endswith(".")
