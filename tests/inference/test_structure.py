"""Who shares what: records, effects, loads, weights and knots of the packed model."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from perdure.inference.state import Packing
from perdure.inference.structure import Weights, pack_readings
from tests.inference.invented import Invented, Plan, invented, random_state


@pytest.fixture(scope="module")
def mixed() -> Invented:
    return invented(Plan(records=2, readings=8, normalised="some", held_out=True))


def test_records_stand_by_specimen_whatever_the_order_they_came_in(mixed: Invented) -> None:
    structure = mixed.structure
    assert [record.name for record in mixed.records.records] != list(structure.records)
    assert sorted(structure.records) == sorted(record.name for record in mixed.records.records)
    by_name = {record.name: record for record in mixed.records.records}
    assert (np.diff(structure.specimen) >= 0).all()
    for r, name in enumerate(structure.records):
        assert structure.specimens[structure.specimen[r]] == by_name[name].specimen
        assert structure.batches[structure.batch[structure.specimen[r]]] == by_name[name].batch


def test_readings_are_those_that_are_not_held_out_at_their_own_knots(mixed: Invented) -> None:
    structure, readings = mixed.structure, mixed.structure.readings
    drives = readings.drives
    for r, name in enumerate(structure.records):
        record = next(item for item in mixed.records.records if item.name == name)
        own = readings.run == r
        kept = ~record.held_out
        assert own.sum() == kept.sum()
        np.testing.assert_array_equal(drives.time[readings.knot[own]], record.time[kept])
        np.testing.assert_array_equal(readings.observed[own], record.response[kept])
        np.testing.assert_array_equal(readings.count[own], record.count[kept])
        assert (readings.knot[own] >= drives.offset[r]).all()
        assert (readings.knot[own] < drives.offset[r + 1]).all()
        assert {structure.instruments[k] for k in readings.instrument[own]} <= {record.instrument}
        knots = slice(drives.offset[r], drives.offset[r + 1])
        np.testing.assert_allclose(drives.base[knots], record.history.at(drives.time[knots]))
    # a record without a fitted reading stays, with its specimen's prior
    assert set(np.unique(readings.run)) < set(range(len(structure.records)))


def test_reference_knots(mixed: Invented) -> None:
    readings = mixed.structure.readings
    by_name = {record.name: record for record in mixed.records.records}
    seen = set()
    for r, name in enumerate(mixed.structure.records):
        reference = by_name[name].reference_time
        seen.add(reference is None)
        if reference is None:
            assert readings.reference_knot[r] == -1
        else:
            assert readings.drives.time[readings.reference_knot[r]] == reference
            assert readings.drives.offset[r] <= readings.reference_knot[r] < readings.drives.offset[r + 1]
    assert seen == {True, False}


def test_a_normalised_response_is_one_at_its_reference(mixed: Invented) -> None:
    density = invented(Plan(normalised="all", readings=8)).density
    state = random_state(density, 0)
    forward = density.forward(state)
    readings = density.structure.readings
    stress = density.structure.law.respond(
        forward.natural[density.structure.specimen], readings.drives, density.structure.coefficient.on_records(density.effects_of(state))
    ).stress
    gain = np.exp(density.structure.gain.on_records(density.effects_of(state)))
    expected = gain[readings.run] * stress[readings.knot] / stress[readings.reference_knot][readings.run]
    np.testing.assert_allclose(forward.predicted.value, expected, rtol=1e-13)


@pytest.mark.parametrize("records", [1, 3])
def test_effects_act_on_the_records_that_share_them(records: int) -> None:
    """Type B variance of every pair of records: what is common to instrument, specimen and record, and nothing else."""
    made = invented(Plan(records=records, normalised="some", readings=6))
    structure = made.structure
    effects = [*structure.root_effects, *(effect for own in structure.local_effects for effect in own)]
    assert len({effect.name for effect in effects}) == len(effects)
    gain, coefficient = structure.gain.dense(), structure.coefficient.dense()
    by_name = {record.name: record for record in made.records.records}
    ordered = [by_name[name] for name in structure.records]
    covariance = gain @ gain.T
    for i, one in enumerate(ordered):
        for j, other in enumerate(ordered):
            expected = 0.0
            if not (one.normalised or other.normalised):
                expected += (0.005**2 + 0.003**2) * (one.instrument == other.instrument)
                expected += (0.004**2 + 0.003**2) * (one.specimen == other.specimen)
                expected += 0.004**2 * (i == j)
            elif i == j:
                expected = 0.003**2
            assert covariance[i, j] == pytest.approx(expected, abs=1e-18), (one.name, other.name)
        moved = [effects[e].name for e in np.flatnonzero(coefficient[i])]
        assert moved == (["compliance, A"] if one.instrument == "A" and not one.normalised else [])


def test_what_acts_alike_is_one_effect() -> None:
    """Calibration of force and strain of an instrument, and all that a single record's specimen has: in quadrature."""
    structure = invented(Plan(records=1)).structure
    assert [effect.kind for effect in structure.root_effects] == ["force and strain", "compliance", "force and strain"]
    for own in structure.local_effects:
        assert [effect.kind for effect in own] == ["area and length and mounting"]
        assert own[0].uncertainty == pytest.approx(np.sqrt(0.004**2 + 0.003**2 + 0.004**2))


def test_a_readings_own_noise_does_not_enter_the_strain_of_the_compliance() -> None:
    """Moving the compliance's strain at one reading moves its neighbours' direction, never its own."""
    made = invented(Plan(readings=8))
    record = next(item for item in made.records.records if item.instrument == "A")
    at, neighbour = np.searchsorted(record.history.time, record.time[[4, 5]])
    bumped = record.compliance.copy()
    bumped[at] *= 1.01
    keep = [~record.held_out]
    before, after = (
        pack_readings([replace(record, compliance=compliance)], made.structure.instruments, keep).drives.direction
        for compliance in (record.compliance, bumped)
    )
    assert after[at] == before[at] != 0
    assert after[neighbour] != before[neighbour]


def test_a_smooth_strain_of_the_compliance_is_left_alone() -> None:
    """What falls with the logarithm of time in a hold comes back as it was, the corner between ramp and hold included."""
    made = invented(Plan(readings=8))
    record = next(item for item in made.records.records if item.instrument == "A")
    time = np.maximum(record.history.time, record.time[0])
    falling = replace(record, compliance=1e-3 - 1e-5 * np.log(time))
    drives = pack_readings([falling], made.structure.instruments, [~record.held_out]).drives
    at = np.searchsorted(drives.time, record.time)
    np.testing.assert_allclose(drives.direction[at], 1e-3 - 1e-5 * np.log(record.time), rtol=1e-12)


def test_a_ratio_has_no_calibration_effects() -> None:
    structure = invented(Plan(normalised="all")).structure
    assert structure.root_effects == ()
    assert {effect.kind for own in structure.local_effects for effect in own} == {"reference"}


def test_nothing_declared_means_no_effects() -> None:
    structure = invented(Plan(type_b=False, compliance=False)).structure
    assert structure.root_effects == ()
    assert structure.local_start.tolist() == [0] * 5
    assert not structure.gain.dense().any()


@pytest.mark.parametrize("modes", [("stiffness", "strength", "pace"), ("pace", "stiffness"), ("strength",), ()])
def test_loads_say_which_root_variable_is_the_mean_of_a_mode(modes: tuple[str, ...]) -> None:
    structure = invented(Plan(modes=modes)).structure
    expected = np.zeros((len(modes), structure.root_size))
    if "stiffness" in modes:
        expected[modes.index("stiffness"), 0] = 1.0
    np.testing.assert_array_equal(structure.loads, expected)
    assert [structure.law.mode_names[index] for index in structure.mode_index] == list(modes)


def test_weights_are_their_matrix() -> None:
    dense = np.array([[0.0, 2.0, 0.0], [1.0, 0.0, 0.0], [0.0, 0.0, 0.0], [3.0, 4.0, 0.0]])
    weights = Weights.of(dense)
    np.testing.assert_array_equal(weights.dense(), dense)
    np.testing.assert_array_equal(weights.on_records(np.array([1.0, 10.0, 100.0])), dense @ [1.0, 10.0, 100.0])
    np.testing.assert_array_equal(weights.on_effects(np.array([1.0, 2.0, 3.0, 4.0])), dense.T @ [1.0, 2.0, 3.0, 4.0])


def test_packing_splits_what_it_joins() -> None:
    density = invented(Plan(records=2, specimens=1, readings=6, normalised="some")).density
    packing = Packing.of(density.structure, len(density.noise.parameter_names))
    flat = np.arange(float(packing.total))
    np.testing.assert_array_equal(packing.join(packing.split(flat)), flat)
    state = random_state(density, 0)
    again = packing.split(packing.join(state))
    np.testing.assert_array_equal(again.specimen, state.specimen)
    np.testing.assert_array_equal(again.log_noise, state.log_noise)
    assert not again.specimen[~packing.mask].any()
