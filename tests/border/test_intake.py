"""Intake: from exports to records, with measures, signs, ramps, conversions and a log of all of it."""

from __future__ import annotations

import math
from typing import Any

import numpy as np
import pytest

from perdure.border.handbook import shipped_families
from perdure.border.intake import INTAKE_COLUMNS, IntakeRow, examine, take_in
from perdure.border.store import sha256_of, write_table
from perdure.study.records import Record


def record_of(folder: Any) -> tuple[Record, IntakeRow]:
    taken = take_in(folder.write())
    return taken.record_set.records[0], taken.log[0]


def found(folder: Any) -> str:
    return "\n".join(str(item) for item in examine(folder.write()).problems)


STRESS = "      time: {column: t, unit: s}\n      stress: {column: stress, unit: MPa}\n      strain: {column: strain, unit: '%'}\n"
FORCE = "      time: {column: t, unit: s}\n      force: {column: F, unit: N}\n      displacement: {column: u, unit: mm}\n"
LOST = "      time: {column: t, unit: h}\n      percent lost: {column: lost, unit: '%'}\n"
RATIO = "      time: {column: t, unit: h}\n      ratio: {column: ratio, unit: 1}\n"
EXTENSOMETER = "    strain source: {kind: extensometer}\n"


def test_force_and_displacement_become_stress_and_strain_with_the_frame_taken_off(folder: Any) -> None:
    taken = take_in(folder.write())
    record = taken.record_set.records[0]
    assert record.name == "n1"
    # compression: both channels came in positive
    np.testing.assert_allclose(record.response, [-0.2, -0.4, -0.38, -0.36, -0.34], rtol=1e-14)
    np.testing.assert_allclose(record.time, [1, 2, 4, 8, 32])
    forces, travel = np.array([0, 100, 200, 190, 180, 170]), np.array([0, 0.5, 1, 1, 1, 1])
    np.testing.assert_allclose(record.history.time, [0, 1, 2, 4, 8, 32])
    np.testing.assert_allclose(record.history.value, -(travel - 2e-4 * forces) / 10, rtol=1e-14)
    # one standard uncertainty more of the frame's compliance: less strain in magnitude
    np.testing.assert_allclose(record.compliance, 1e-5 * forces / 10, rtol=1e-14)
    assert record.missing == 1
    assert record.first_row.tolist() == [4, 5, 6, 7, 9]
    assert taken.record_set.instrument("north frame").has_compliance


def test_units_paths_and_digests_of_a_nested_export(folder: Any) -> None:
    path = folder.write()
    record = take_in(path).record_set.records[1]
    assert record.file == "records/sub/s1.csv"
    assert record.sha256 == sha256_of(path / record.file)
    np.testing.assert_allclose(record.time, [6, 60, 600])
    np.testing.assert_allclose(record.response, [-0.5, -0.45, -0.4])
    np.testing.assert_allclose(record.history.value, [0, -0.1, -0.1, -0.1])
    assert not record.compliance.any()


def test_every_conversion_is_logged(folder: Any) -> None:
    log = {entry.record: entry for entry in take_in(folder.write()).log}
    assert log["n1"].conversions == (
        "sign of strain reversed: compression is negative here",
        "sign of stress reversed: compression is negative here",
        "strain = (displacement - 0.0002 mm/N x force) / 10 mm",
        "stress = force / 500 mm2",
    )
    assert log["s1"].conversions == ("time from min to s", "stress from kPa to MPa", "strain from % to a ratio")
    assert (log["n1"].readings, log["n1"].missing, log["n1"].used) == (7, 1, 5)


def test_the_log_holds_every_row_and_every_file(folder: Any, tmp_path: Any) -> None:
    folder.files["records/notes.txt"] = "dust"
    log = take_in(folder.write()).log
    assert [(entry.row, entry.status, entry.file) for entry in log] == [
        (2, "accepted", "records/n1.csv"),
        (3, "accepted", "records/sub/s1.csv"),
        (4, "left out", "records/s2.csv"),
        (None, "file", "records/notes.txt"),
    ]
    assert log[2].reason == "fell from the bench"
    write_table(tmp_path / "intake.csv", INTAKE_COLUMNS, [entry.cells() for entry in log])
    assert (tmp_path / "intake.csv").read_text(encoding="utf-8").count("\n") == 5


def test_the_log_names_refused_records_beside_accepted_ones(folder: Any) -> None:
    found = examine(folder.edit("records/n1.csv", "2;200;1", "2;two;1").write())
    assert found.intake is None
    assert [entry.status for entry in found.log] == ["refused", "accepted", "left out"]
    assert '"two" (records/n1.csv, row 5' in found.log[0].reason


@pytest.mark.parametrize("strain", [1, -1])
@pytest.mark.parametrize("stress", [1, -1])
def test_compression_in_either_sign_gives_the_same_record(single: Any, strain: int, stress: int) -> None:
    export = "t,stress,strain\n0,0,0\n" + "".join(f"{t},{stress * s},{strain * 10}\n" for t, s in ((1, 0.5), (2, 0.45), (9, 0.4)))
    record, entry = record_of(single(STRESS, {"sense": "compression"}, export))
    np.testing.assert_allclose(record.response, [-0.5, -0.45, -0.4])
    np.testing.assert_allclose(record.history.value, [0, -0.1, -0.1, -0.1])
    assert ("sign of strain reversed: compression is negative here" in entry.conversions) == (strain > 0)
    assert ("sign of stress reversed: compression is negative here" in entry.conversions) == (stress > 0)


@pytest.mark.parametrize(("strain", "stress"), [(1, 1), (-1, -1), (-1, 1)])
def test_shear_becomes_positive(single: Any, strain: int, stress: int) -> None:
    export = "t,stress,strain\n0,0,0\n" + "".join(f"{t},{stress * s},{strain * 10}\n" for t, s in ((1, 0.5), (2, 0.45), (9, 0.4)))
    record, _ = record_of(single(STRESS, {"sense": "shear"}, export))
    assert (record.response > 0).all()
    assert record.strain_level == pytest.approx(0.1)


def test_negative_readings_in_tension_are_refused(single: Any) -> None:
    text = found(single(STRESS, {}, "t,stress,strain\n0,0,0\n1,-0.5,10\n2,-0.4,10\n3,-0.3,10\n"))
    assert "records/r.csv, row 3: found a negative stress at its peak in a record in tension" in text


def test_zero_shape_factor_and_area(single: Any) -> None:
    export = "t,F,u\n0,5,2\n1,105,3\n2,95,3\n9,85,3\n"
    cells = {"area [cm2]": "1", "length [mm]": "10", "zero [N]": "5", "shape factor": "1.5"}
    record, entry = record_of(single(FORCE, cells, export, extra=EXTENSOMETER))
    np.testing.assert_allclose(record.response, np.array([100, 90, 80]) / 100 / 5.5)
    np.testing.assert_allclose(record.history.value, [0, 0.1, 0.1, 0.1])
    assert "force at no load 5 N subtracted" in entry.conversions
    assert "stress divided by 5.5 (shape factor 1.5)" in entry.conversions
    assert "strain counts from row 2 (2 mm in the export)" in entry.conversions


def test_a_preload_moves_the_zero_of_time_and_strain(single: Any) -> None:
    export = "t,F,u\n0,0,0\n1,4,0.1\n2,12,0.2\n3,60,1.2\n4,55,1.2\n9,50,1.2\n"
    cells = {"area [mm2]": "10", "length [mm]": "10", "preload [N]": "10"}
    record, entry = record_of(single(FORCE, cells, export, extra=EXTENSOMETER))
    np.testing.assert_allclose(record.time, [1, 2, 7])
    np.testing.assert_allclose(record.history.value, [0, 0.1, 0.1, 0.1])
    np.testing.assert_allclose(record.response, [6, 5.5, 5])
    assert "2 readings below the preload of 10 N dropped (rows 2 to 3)" in entry.conversions


def test_a_preload_that_is_never_reached_is_refused(single: Any) -> None:
    cells = {"area [mm2]": "10", "length [mm]": "10", "preload [N]": "100"}
    assert "no force of 100 N or more" in found(single(FORCE, cells, "t,F,u\n0,0,0\n1,4,1\n2,3,1\n3,2,1\n", extra=EXTENSOMETER))


def test_a_normalised_record_that_starts_late(single: Any) -> None:
    cells = {"ramp [s]": "2", "reference [h]": "0.01", "where": "unit=2", "reference uncertainty [%]": "0.3"}
    export = "unit,t,lost\n1,108,2\n2,108,2.5\n2,241,\n2,534,4\n2,839,5\n"
    record, entry = record_of(single(LOST, cells, export))
    assert record.reference_time == 36.0
    assert record.normalised
    assert record.uncertainty.reference == pytest.approx(0.003)
    np.testing.assert_allclose(record.response, [0.975, 0.96, 0.95])
    np.testing.assert_allclose(record.time, [108 * 3600, 534 * 3600, 839 * 3600])
    np.testing.assert_allclose(record.history.time[:3], [0, 2, 108 * 3600])
    np.testing.assert_allclose(record.history.value[:3], [0, 0.01, 0.01])
    assert (record.missing, record.first_row.tolist()) == (1, [3, 5, 6])
    assert "strain level not stated: 1% taken; it drops out of a normalised response" in entry.conversions
    assert "starts after its ramp: a ramp of 2 s to a strain of 0.01 put before it" in entry.conversions


def test_the_reference_reading_itself_is_not_fitted(single: Any) -> None:
    cells = {"ramp [s]": "2", "reference [h]": "1", "strain [%]": "5"}
    record, entry = record_of(single(RATIO, cells, "t,ratio\n1,1\n2,0.98\n4,0.96\n8,0.94\n"))
    np.testing.assert_allclose(record.response, [0.98, 0.96, 0.94])
    assert record.strain_level == pytest.approx(0.05)
    assert "the reference reading (row 2) is 1 by definition and not fitted" in entry.conversions


def test_a_late_record_in_compression_takes_the_strain_of_its_column(single: Any) -> None:
    export = "t,stress,strain\n5,0.5,10\n6,0.45,10\n9,0.4,10\n"
    record, _ = record_of(single(STRESS, {"sense": "compression", "ramp [s]": "5"}, export))
    np.testing.assert_allclose(record.history.time, [0, 5, 6, 9])
    np.testing.assert_allclose(record.history.value, [0, -0.1, -0.1, -0.1])
    np.testing.assert_allclose(record.response, [-0.5, -0.45, -0.4])


@pytest.mark.parametrize(
    ("columns", "cells", "export", "words"),
    [
        (LOST, {"ramp [s]": "2"}, "t,lost\n1,1\n2,2\n3,3\n", 'column "reference": found an empty cell'),
        (LOST, {"reference [h]": "1"}, "t,lost\n1,1\n2,2\n3,3\n", "the record must start after a ramp"),
        (STRESS, {"reference [h]": "1"}, "t,stress,strain\n0,0,0\n", "holds an absolute response"),
        (STRESS, {"zero [N]": "1"}, "t,stress,strain\n0,0,0\n", "holds no force"),
        (STRESS, {"strain [%]": "1"}, "t,stress,strain\n0,0,0\n", "no ramp is given"),
        (STRESS, {"ramp [s]": "1", "strain [%]": "1"}, "t,stress,strain\n2,1,1\n", "the export holds the strain itself"),
        (STRESS, {"ramp [s]": "5"}, "t,stress,strain\n2,1,1\n3,1,1\n4,1,1\n", "a reading at 2 s, within the ramp of 5 s"),
        (RATIO, {"ramp [s]": "9", "reference [s]": "1"}, "t,ratio\n1,1\n", "not before the end of the ramp"),
        (RATIO, {"ramp [s]": "9", "reference [h]": "99"}, "t,ratio\n1,1\n2,1\n3,0.9\n", "a time within the record"),
        (RATIO, {"ramp [s]": "9", "reference [h]": "1", "strain [%]": "-2"}, "t,ratio\n1,1\n", "a strain above zero"),
        (RATIO, {"ramp [s]": "9", "reference [h]": "1"}, "t,ratio\n1,-1\n2,-1\n3,-0.9\n", "a negative ratio"),
        (STRESS, {"sense": "shear", "shape factor": "2"}, "t,stress,strain\n0,0,0\n", "applies to tension and compression"),
        (STRESS, {"area uncertainty [%]": "60"}, "t,stress,strain\n0,0,0\n", "at most 50 %"),
    ],
)
def test_rows_that_contradict_their_instrument_are_refused(
    single: Any, columns: str, cells: dict[str, str], export: str, words: str
) -> None:
    assert words in found(single(columns, cells, export))


def test_a_ramp_belongs_to_methods_that_may_start_late(single: Any) -> None:
    folder = single(STRESS, {"ramp [s]": "1"}, "t,stress,strain\n2,1,1\n3,1,1\n4,1,1\n", method="strain history")
    assert "a record of the method strain history starts at rest" in found(folder)


def test_a_limit_in_stress_needs_an_absolute_record(single: Any) -> None:
    folder = single(RATIO, {"ramp [s]": "2", "reference [h]": "1"}, "t,ratio\n2,0.98\n4,0.96\n8,0.94\n")
    folder.edit("study.yaml", "{at least: 50 %, quantity: retained, reference: 1 s, at", "{at least: 5 MPa, at")
    assert "a limit of 5 MPa, while every record is normalised" in found(folder)


def test_the_default_horizon_is_three_decades_beyond_the_records(single: Any) -> None:
    folder = single(STRESS, {}, "t,stress,strain\n0,0,0\n1,5,1\n2,4.5,1\n3,4,1\n")
    assert found(folder) == ""
    folder.edit("study.yaml", "hold: {for: 20 s}", "hold: {for: 3001 s}")
    assert '1000 times the longest fitted record. Set the key "horizon" to 0.001 a or more' in found(folder)


def test_from_and_until_cut_readings_but_not_the_history(single: Any) -> None:
    export = "t,stress,strain\n" + "".join(f"{t},{min(t, 2)},{min(t, 2)}\n" for t in range(10))
    record, entry = record_of(single(STRESS, {"from [s]": "3", "until [s]": "6"}, export))
    np.testing.assert_allclose(record.time, [3, 4, 5, 6])
    np.testing.assert_allclose(record.history.time, np.arange(7))
    assert "5 readings outside from and until not fitted" in entry.conversions


def test_readings_without_a_time_or_a_strain_are_left_out_and_told(single: Any) -> None:
    export = "t,stress,strain\n0,0,0\n1,0.5,10\n,0.48,10\n2,0.45,\n3,0.44,10\n4,0.43,10\n"
    record, entry = record_of(single(STRESS, {}, export))
    np.testing.assert_allclose(record.time, [1, 3, 4])
    assert "1 readings without a time left out (first in row 4)" in entry.conversions
    assert "1 readings without a strain left out (first in row 5)" in entry.conversions


def long_hold(readings: int = 4000) -> str:
    lines = ["t,stress,strain", "0,0,0"]
    for index in range(1, readings):
        time = 0.5 * index
        stress = 0.5 * min(time, 10) / 10 * (1 - 0.05 * math.log10(1 + max(time - 10, 0)))
        lines.append(f"{time},{stress!r},{min(time, 10.0)!r}")
    return "\n".join(lines) + "\n"


def test_a_long_hold_is_thinned_and_every_raw_row_can_be_traced(single: Any) -> None:
    export = long_hold()
    record, entry = record_of(single(STRESS, {}, export))
    lines = export.splitlines()
    assert record.time.size < 200
    assert record.count.sum() == 3999
    assert record.first_row[0] == 3
    assert (record.first_row[1:] == record.last_row[:-1] + 1).all()
    assert record.last_row[-1] == len(lines)
    raw = [float(line.split(",")[1]) for line in lines[1:]]
    for index in (5, 50, record.time.size - 1):
        rows = range(record.first_row[index], record.last_row[index] + 1)
        assert record.response[index] == pytest.approx(np.mean([raw[row - 2] for row in rows]), rel=1e-13)
    assert any("readings of the hold averaged in log time into" in line for line in entry.conversions)


@pytest.mark.parametrize("method", ["stress relaxation", "strain history"])
def test_every_reading_is_a_knot_of_the_history(single: Any, method: str) -> None:
    record, _ = record_of(single(STRESS, {}, long_hold(), method=method))
    assert np.isin(record.time, record.history.time).all()
    np.testing.assert_allclose(record.history.at(record.time), np.minimum(record.time, 10) / 100, atol=1e-12)
    assert record.compliance.shape == record.history.time.shape
    assert record.history.duration == record.time[-1]


def test_a_strain_history_is_thinned_by_leaving_out_only(single: Any) -> None:
    record, entry = record_of(single(STRESS, {}, long_hold(), method="strain history"))
    assert (record.count == 1).all()
    assert record.time.size == 200
    # two straight parts: the history needs few knots besides the readings
    assert record.history.time.size <= 203
    assert "3799 readings of moving parts left out, 200 kept" in entry.conversions


def test_noise_of_the_drive_is_not_kept_as_knots(single: Any) -> None:
    generator = np.random.default_rng(3)
    lines = ["t,stress,strain"]
    for index in range(5000):
        strain = 5 * (1 - math.cos(0.01 * index))
        noise = 0.002 * float(generator.normal()) if index else 0.0
        lines.append(f"{0.1 * index:.1f},{0.3 * strain!r},{strain + noise!r}")
    record, _ = record_of(single(STRESS, {}, "\n".join(lines) + "\n", method="strain history"))
    assert record.time.size == 200
    assert record.history.time.size < 1000
    dense = np.linspace(0, 499, 2000)
    np.testing.assert_allclose(record.history.at(dense), 0.05 * (1 - np.cos(0.1 * dense)), atol=2e-4)


def test_hold_out_by_time_specimen_and_batch(folder: Any) -> None:
    study = folder.files["study.yaml"]
    flags = {}
    for rule in ("after: 4 s", "specimens: [A1]", "batches: [B]"):
        folder.files["study.yaml"] = study + f"hold out: {{{rule}}}\n"
        records = take_in(folder.write()).record_set.records
        flags[rule] = [record.held_out.tolist() for record in records]
    assert flags["after: 4 s"] == [[False, False, False, True, True], [True, True, True]]
    assert flags["specimens: [A1]"] == [[True] * 5, [False] * 3]
    assert flags["batches: [B]"] == [[False] * 5, [True] * 3]


def test_holding_everything_out_is_refused(folder: Any) -> None:
    folder.files["study.yaml"] += "hold out: {batches: [A, B]}\n"
    assert "every reading held out" in found(folder)


def test_noise_ranges_as_declared_and_from_the_handbook(folder: Any) -> None:
    north, south = take_in(folder.write()).record_set.instruments
    np.testing.assert_allclose(north.noise_absolute, [0.1 / 500, 1 / 500])
    ranges = {one.quantity: one for one in shipped_families()["filled rubber"].ranges}
    share, relative = ranges["noise absolute share"], ranges["noise relative"]
    np.testing.assert_allclose(south.noise_absolute, [share.low * 0.5, share.high * 0.5])
    assert north.noise_relative == south.noise_relative == (relative.low, relative.high)
    assert (north.u_force, north.u_strain, north.u_temperature) == (0.005, 0.003, 0.5)
    assert (south.u_force, south.u_strain, south.u_temperature) == (0.0, 0.0, 0.0)


def test_a_study_folder_is_not_written_to(folder: Any) -> None:
    path = folder.write()
    before = {item: item.stat().st_mtime_ns for item in path.rglob("*")}
    take_in(path)
    assert {item: item.stat().st_mtime_ns for item in path.rglob("*")} == before
