"""Every kind of wrong input: which file and place, what was found, what was expected, and what to do; all in one pass."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import pytest

from perdure.border.check_text import grouped
from perdure.border.intake import examine, take_in
from perdure.errors import StudyError

STUDY, REGISTER, NORTH, SOUTH = "study.yaml", "register.csv", "records/n1.csv", "records/sub/s1.csv"


@dataclass(frozen=True)
class Wrong:
    """One mistake: the edit that makes it, and words that its problem must hold."""

    name: str
    file: str
    old: str
    new: str
    where: str
    got: str
    expected: str
    remedy: str


CASES = (
    # the text of the study file
    Wrong("key twice", STUDY, "title: Pads", "format: 1\ntitle: Pads", "study.yaml, line 2, key format", "second time", "once", "Remove"),
    Wrong("anchor", STUDY, "family: filled", "family: &x filled", "study.yaml, line 4", "anchor", "written out", "quotes"),
    Wrong("not YAML", STUDY, "  family: filled", "  family: [filled", "study.yaml, line", "expected ',' or ']'", "valid YAML", "quotes"),
    Wrong("tab", STUDY, "  family: filled", "\tfamily: filled", "study.yaml, line 4", "cannot start", "valid YAML", "indentation"),
    Wrong("tag", STUDY, "title: Pads", "title: !!python/name:os Pads", "study.yaml, line 2", "tag", "plain values", "Remove"),
    # its keys
    Wrong("unknown key", STUDY, "horizon:", "horizont:", "study.yaml, line 10, key horizont", "unknown key", "documented", '"horizon"'),
    Wrong(
        "unknown inner key",
        STUDY,
        "frame compliance: 2e-4 mm/N, ",
        "frame compliance: 2e-4 mm/N, frame complience: 1, ",
        "key instruments > north frame > strain source > frame complience",
        'unknown key "frame complience"',
        "documented",
        '"frame compliance"',
    ),
    Wrong("missing key", STUDY, "title: Pads of a test bench\n", "", "study.yaml, key title", "nothing", 'the key "title"', "Add title"),
    Wrong("other format", STUDY, "format: 1", "format: 2", "study.yaml, line 1, key format", '"2"', "1", "README"),
    Wrong(
        "unknown family", STUDY, "filled rubber", "filed rubber", "line 4, key material > family", '"filed rubber"', "handbook", '"filled'
    ),
    Wrong("unknown law", STUDY, "name: maxwell", "name: maxwel", "line 6, key law > name", '"maxwel"', "known law", '"maxwell"'),
    Wrong("unknown clock", STUDY, "name: isothermal", "name: isotherm", "line 8, key clock > name", "isotherm", "clock", '"isothermal"'),
    Wrong("unknown mode", STUDY, "strength, pace]", "strength, speed]", "key scatter > modes > 3", '"speed"', "'pace'", "README"),
    Wrong(
        "unit missing",
        STUDY,
        "temperature: 23 degC\nhorizon",
        "temperature: 23\nhorizon",
        "line 9",
        "without a unit",
        "unit of temp",
        "degC",
    ),
    Wrong("wrong dimension", STUDY, "horizon: 20 a", "horizon: 20 mm", "line 10, key horizon", '"mm"', "unit of time", "s, min, h"),
    Wrong("decimal comma", STUDY, "2e-4 mm/N", '"2,5e-4 mm/N"', "frame compliance", '"2,5e-4 mm/N"', "compliance", "decimal point"),
    Wrong(
        "negative uncertainty", STUDY, "force: 0.5 %", "force: -0.5 %", "standard uncertainties > force", "-0.5 %", "zero or more", "magn"
    ),
    Wrong("absolute u", STUDY, "force: 0.5 %", "force: 2 N", "standard uncertainties > force", '"N"', "unit of ratio", "%"),
    Wrong(
        "boolean word", STUDY, "name: maxwell", "name: maxwell\n  equilibrium: maybe", "law > equilibrium", '"maybe"', "boolean", "README"
    ),
    Wrong("prior unknown", STUDY, "  modulus: {", "  modulos: {", "priors > modulos", '"modulos"', "known quantity", '"modulus"'),
    Wrong(
        "prior reversed",
        STUDY,
        "low: 3 MPa, high: 6",
        "low: 9 MPa, high: 6",
        "priors > modulus",
        "9 MPa to 6 MPa",
        "low < high",
        "Exchange",
    ),
    Wrong("prior unit", STUDY, "low: 3 MPa", "low: 3 s", "priors > modulus > low", '"s"', "stress", "MPa"),
    Wrong(
        "coverage", STUDY, "coverage: 0.9, source", "coverage: 90, source", "priors > modulus > coverage", '"90"', "between 0 and 1", "90 %"
    ),
    Wrong("crosshead bare", STUDY, ", frame compliance: 2e-4 mm/N", "", "strain source", "without them", "frame compliance", "stiff block"),
    Wrong(
        "observed twice",
        STUDY,
        "stress: {column: stress",
        "force: {column: f, unit: N}\n      stress: {column: stress",
        "south frame > columns",
        "force and stress",
        "exactly one",
        "Declare the one",
    ),
    Wrong("column twice", STUDY, "{column: Kraft", "{column: Zeit", "north frame > columns > force", '"Zeit"', "of its own", "headings"),
    Wrong("column unit", STUDY, "column: Kraft, unit: N}", "column: Kraft, unit: mm}", "columns > force > unit", '"mm"', "force", "kgf"),
    Wrong("decimal = separator", STUDY, 'separator: ";"', 'separator: ","', "instruments > north frame", '","', "not the decimal", "Look"),
    Wrong("separator", STUDY, 'separator: ";"', 'separator: "!"', "north frame > separator", '"!"', "'whitespace'", "README"),
    Wrong("reader", STUDY, 'separator: ";"', 'separator: ";"\n    reader: excel', "north frame > reader", '"excel"', "delimited", "Name"),
    Wrong("encoding", STUDY, 'separator: ";"', 'separator: ";"\n    encoding: utf-9', "frame > encoding", "utf-9", "known enc", "cp1252"),
    Wrong("noise unit", STUDY, "low: 0.1 N, high: 1 N", "low: 0.1 s, high: 1 s", "noise > absolute", "0.1 s", "unit of force", "units"),
    Wrong("noise order", STUDY, "low: 0.1 N, high: 1 N", "low: 2 N, high: 1 N", "noise > absolute", "2 N to 1 N", "low < high", "range"),
    # duties
    Wrong("negative limit", STUDY, "0.25 MPa", "-0.25 MPa", "contact > at least", "duty in compression", "magnitude", "Leave the sign out"),
    Wrong("negative strain", STUDY, "to: 12 %", "to: -12 %", "duties > mooring > history", "-0.12", "magnitude", "Leave the sign out"),
    Wrong(
        "both kinds", STUDY, "at least: 0.25 MPa", "at least: 0.25 MPa, at most: 2 MPa", "limits > contact", "both", "at least or", "one"
    ),
    Wrong("ratio as stress", STUDY, "0.25 MPa", "60 %", "contact > at least", '"%"', "stress", "quantity: retained"),
    Wrong("no reference", STUDY, "reference: 1 h, ", "", "limits > kept", "retained", "reference exactly", "Add reference"),
    Wrong("after the end", STUDY, "at: 10 a,", "at: 11 a,", "contact > at", "3.47134e+08 s", "within the history", "Lengthen"),
    Wrong("share", STUDY, "required share: 90 %", "required share: 100 %", "required share", '"100 %"', "between 0 and 1", "90 %"),
    Wrong(
        "beyond the horizon", STUDY, "horizon: 20 a", "horizon: 5 a", "duties > mooring > history", "(10 a)", "5 a", '"horizon" to 10.001 a'
    ),
    Wrong(
        "both steps",
        STUDY,
        "- hold: {for: 10 a}",
        "- {hold: {for: 10 a}, ramp: {to: 1 %, over: 1 s}}",
        "history > 2",
        "both",
        "ramp or",
        "one",
    ),
    Wrong(
        "history file",
        STUDY,
        "    history:\n      - ramp: {to: 12 %, over: 1 h}\n      - hold: {for: 10 a}\n",
        "    history file: ../../secret.csv\n",
        "duties > mooring > history file",
        "secret",
        "file in histories/",
        "Put",
    ),
    Wrong("hold out", STUDY, "duties:\n", "hold out: {specimens: [A9]}\nduties:\n", "hold out > specimens", '"A9"', "in use", "A1, B1"),
    # register
    Wrong("heading", REGISTER, ",until [s],", ",untill [s],", 'register.csv, row 1, column "untill [s]"', "untill", "known", '"until"'),
    Wrong("heading unit", REGISTER, "area [mm2]", "area [mm]", 'row 1, column "area [mm]"', '"mm"', "unit of area", "mm2, cm2"),
    Wrong("no unit", REGISTER, "area [mm2]", "area", 'row 1, column "area"', '"none"', "unit of area", "mm2, cm2"),
    Wrong(
        "heading gone", REGISTER, ",sense,", ",where,", "register.csv, row 1", 'no column "sense"', "that column", "tension, compression"
    ),
    Wrong("cells", REGISTER, "23,500,10,virgin", "23,500,10,5,virgin", "register.csv, row 2", "17 cells", "16 cells", "commas"),
    Wrong("record twice", REGISTER, "\ns1,B1", "\nn1,B1", 'row 3, column "record"', "first in row 2", "of its own", "Rename"),
    Wrong("two batches", REGISTER, "s2,B2,B,", "s2,B1,C,", 'row 4, column "batch"', 'in row 3 in batch "B"', "one batch", "Correct"),
    Wrong(
        "method", REGISTER, "A,stress relaxation", "A,relaxation", 'row 2, column "method"', '"relaxation"', "strain history", '"stress rel'
    ),
    Wrong("instrument", REGISTER, "tion,north frame", "tion,norht frame", 'row 2, column "instrument"', "norht", "one of north", '"north'),
    Wrong("sense", REGISTER, "n1.csv,,compression", "n1.csv,,squeeze", 'row 2, column "sense"', '"squeeze"', "tension, comp", "Known are"),
    Wrong("file gone", REGISTER, "n1.csv", "n9.csv", 'row 2, column "file"', "not there", "inside records/", "Copy"),
    Wrong("outside", REGISTER, "n1.csv", "../study.yaml", 'row 2, column "file"', "../study.yaml", "a path inside records/", "Copy"),
    Wrong("use", REGISTER, "10,virgin,yes", "10,virgin,maybe", 'row 2, column "use"', '"maybe"', "yes or no", "reason"),
    Wrong("no reason", REGISTER, "fell from the bench", "", 'row 4, column "reason"', "empty", "leaving the record out", "Say why"),
    Wrong("number", REGISTER, "23,500,10", '23,"500,5",10', 'row 2, column "area"', "500,5", "a number", "decimal point"),
    Wrong("zero area", REGISTER, "23,500,10", "23,0,10", 'row 2, column "area"', '"0"', "above zero", "Correct"),
    Wrong("no temperature", REGISTER, "compression,23,500", "compression,,500", 'row 2, column "temperature"', "empty", "a number", "Fill"),
    Wrong(
        "too warm",
        REGISTER,
        "compression,23,500",
        "compression,40,500",
        'row 2, column "temperature"',
        "313.15",
        "296.15",
        "one temperature",
    ),
    Wrong("no area", REGISTER, "23,500,10", "23,,10", 'row 2, column "area"', "empty", "holds a force", "Fill it in"),
    Wrong("no length", REGISTER, "23,500,10", "23,500,", 'row 2, column "length"', "empty", "displacement", "Fill it in"),
    Wrong("until first", REGISTER, "yes,,,\ns1", "yes,9,3,\ns1", 'row 2, column "until"', '"3"', "later than from", "Exchange"),
    Wrong("where", REGISTER, "n1.csv,,", "n1.csv,unit3,", 'row 2, column "where"', '"unit3"', "column=value", "unit=3"),
    Wrong("where column", REGISTER, "n1.csv,,", "n1.csv,Probe=3,", "records/n1.csv, row 2", '"Probe"', "heading", "as the export"),
    Wrong("where nothing", REGISTER, "n1.csv,,", "n1.csv,Weg=3,", "records/n1.csv", "no row with Weg=3", "conditions", '"where"'),
    # exports
    Wrong(
        "heading gone in export", NORTH, "Zeit;Kraft", "Zeit;Last", "records/n1.csv, row 2", '"Kraft"', "every declared", "as the export"
    ),
    Wrong("no headings", NORTH, "Zeit;Kraft;Weg\n", "", "records/n1.csv", "no line with", "Zeit, Kraft, Weg", "separator"),
    Wrong("text in a number", NORTH, "2;200;1", "2;200;eins", 'records/n1.csv, row 5, column "Weg"', '"eins"', 'sign ","', "missing marks"),
    Wrong("point for comma", NORTH, "1;100;0,5", "1;100;0.5", 'row 4, column "Weg"', '"0.5"', 'sign ","', 'decimal: "."'),
    Wrong("too many cells", SOUTH, "1,-450,-10", "1,-450,5,-10", "records/sub/s1.csv, row 4", "4 cells", "at most 3", "decimal sign"),
    Wrong("time twice", NORTH, "4;190;1", "2;190;1", "records/n1.csv, row 6", "2 s a second time", "increase", '"where"'),
    Wrong("time back", NORTH, "4;190;1", "1,5;190;1", "records/n1.csv, row 6", "1.5 s after 2 s", "increase", "mixes runs"),
    Wrong("loaded start", NORTH, "0;0;0", "0;150;0", "records/n1.csv, row 3", "75%", "at rest", '"ramp"'),
    Wrong("both signs", SOUTH, "0.1,-500,-10", "0.1,400,-10", "records/sub/s1.csv, row 3", "both signs", "noise", "zero"),
    Wrong("strain still", SOUTH, "0,0,0\n", "0,0,-10\n", "records/sub/s1.csv", "never changes", "from rest", '"ramp"'),
    Wrong(
        "too few", SOUTH, "1,-450,-10\n10,-400,-10\n", "", "records/sub/s1.csv", "1 usable readings", "3 or more", "leave the record out"
    ),
    Wrong(
        "nothing read", SOUTH, "0,0,0\n0.1,-500,-10\n1,-450,-10\n10,-400,-10\n", "0,,0\n1,,-1\n", "s1.csv", "no response", "response", "out"
    ),
)


@pytest.mark.parametrize("case", CASES, ids=[case.name for case in CASES])
def test_a_mistake_is_named_with_place_finding_expectation_and_remedy(case: Wrong, folder: Any) -> None:
    path = folder.edit(case.file, case.old, case.new).write()
    problems = examine(path).problems
    fitting = [
        item
        for item in problems
        if case.where in item.where and case.got in item.got and case.expected in item.expected and case.remedy in item.remedy
    ]
    assert fitting, grouped(problems)


def test_a_sound_study_has_no_problems(folder: Any) -> None:
    assert examine(folder.write()).problems == ()


def test_names_of_cases_differ() -> None:
    assert len({case.name for case in CASES}) == len(CASES) >= 40


def test_all_mistakes_come_in_one_pass(folder: Any) -> None:
    folder.edit(STUDY, "filled rubber", "filed rubber").edit(STUDY, "to: 12 %", "to: -12 %").edit(STUDY, "cover", "kover")
    folder.edit(REGISTER, "s2,B2,B,", "s2,B1,C,").edit(NORTH, "2;200;1", "2;200;eins").edit(SOUTH, "10,-400", "0.5,-400")
    folder.files["handbook/own.yaml"] = "format: 1\nfamily: own\nranges:\n  modulus: {low: 1 MPa, high: 2 MPa}\n"
    with pytest.raises(StudyError) as caught:
        take_in(folder.write())
    places = [item.where for item in caught.value.problems]
    for place in (
        "key material > family",
        "key duties > mooring > history",
        "key priors > modulus > koverage",
        "register.csv, row 4",
        "records/n1.csv, row 5",
        "records/sub/s1.csv, row 5",
        "handbook/own.yaml, line 4, key ranges > modulus > source",
    ):
        assert any(place in found for found in places), (place, places)
    text = grouped(caught.value.problems)
    for file in ("study.yaml (3 problems)", "register.csv (1 problem)", "records/n1.csv (1 problem)", "handbook/own.yaml (1 problem)"):
        assert file in text
    assert len(set(caught.value.problems)) == len(caught.value.problems)


@pytest.mark.parametrize("missing", ["study.yaml", "register.csv"])
def test_a_missing_file_is_named(missing: str, folder: Any) -> None:
    del folder.files[missing]
    problems = examine(folder.write()).problems
    assert any(item.where == missing and item.got == "no such file" for item in problems)


def test_a_missing_folder_is_named(tmp_path: Any) -> None:
    assert examine(tmp_path / "nowhere").problems[0].where == "nowhere"


def test_a_folder_name_that_cannot_name_results_is_refused(folder: Any) -> None:
    folder.path = folder.path.with_name("my pads")
    assert any('folder "my pads"' in item.where for item in examine(folder.write()).problems)


def test_a_large_study_file_is_refused_before_it_is_parsed(folder: Any) -> None:
    folder.files["study.yaml"] += "#" * 1_000_001
    assert any("1000000 bytes" in item.expected for item in examine(folder.write()).problems)


def test_bytes_that_are_not_utf8_are_named_with_their_row(folder: Any) -> None:
    path = folder.write()
    (path / "records" / "n1.csv").write_bytes("Prüfung\nZeit;Kraft;Weg\n0;0;0\n".encode("cp1252"))
    (path / "register.csv").write_bytes((path / "register.csv").read_bytes().replace(b"fell", b"f\xe4ll"))
    problems = examine(path).problems
    assert any(item.where == "register.csv, row 4" and "UTF-8" in item.got for item in problems)


def test_a_link_out_of_the_records_is_not_followed(folder: Any, tmp_path: Any) -> None:
    path = folder.write()
    outside = tmp_path / "outside.csv"
    outside.write_text(folder.files["records/n1.csv"], encoding="utf-8")
    (path / "records" / "n1.csv").unlink()
    (path / "records" / "n1.csv").symlink_to(outside)
    assert any(item.expected == "a path inside records/" for item in examine(path).problems)


def test_readings_of_two_records_are_not_counted_twice(folder: Any) -> None:
    folder.edit(
        "register.csv",
        "s2,B2,B,stress relaxation,south frame,s2.csv,,compression,23,,,virgin,no,,,fell from the bench",
        "s2,B2,B,stress relaxation,south frame,sub/s1.csv,,compression,23,,,virgin,yes,,,",
    )
    found = examine(folder.write())
    assert any('record "s1" (row 3) has already' in item.got for item in found.problems)
    assert [entry.status for entry in found.log] == ["accepted", "accepted", "refused"]
