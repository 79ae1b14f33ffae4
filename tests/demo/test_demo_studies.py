"""The invented studies that ship are what their scripts make, and their limits are those of the written truth."""

from __future__ import annotations

import hashlib
import importlib.util
import json
import math
import subprocess
import sys
from pathlib import Path
from types import ModuleType

import numpy as np
import pytest
import yaml

from perdure.border.intake import take_in
from perdure.rheology.history import History
from perdure.rheology.laws import LAWS

HERE = Path(__file__).resolve().parent
CONFIG = HERE.parents[1] / "config"
MADE = [
    ("make_fender.py", CONFIG / "studies" / "fender", "fender_truth.json"),
    ("make_template.py", CONFIG / "template", "template_truth.json"),
]


def load(name: str) -> ModuleType:
    """The module of this folder called ``name``, whatever the import mode of the test run."""
    spec = importlib.util.spec_from_file_location(name, HERE / f"{name}.py")
    if spec is None or spec.loader is None:
        raise ImportError(name)
    module = importlib.util.module_from_spec(spec)
    sys.modules[name] = module
    spec.loader.exec_module(module)
    return module


@pytest.mark.parametrize(("script", "shipped", "truth"), MADE, ids=["fender", "template"])
def test_regenerating_gives_identical_bytes(script: str, shipped: Path, truth: str, tmp_path: Path) -> None:
    folder = tmp_path / "study"
    subprocess.run([sys.executable, str(HERE / script), "--into", str(folder), "--truth", str(tmp_path / truth)], check=True)
    made = {path.relative_to(folder): path.read_bytes() for path in folder.rglob("*") if path.is_file()}
    kept = {path.relative_to(shipped): path.read_bytes() for path in shipped.rglob("*") if path.is_file()}
    kept.pop(Path("study.yaml"))
    assert made.keys() == kept.keys()
    assert [str(name) for name in made if made[name] != kept[name]] == []
    assert (tmp_path / truth).read_bytes() == (HERE / truth).read_bytes()


def test_fender_limits_are_those_of_the_truth() -> None:
    truth = json.loads((HERE / "fender_truth.json").read_text(encoding="utf-8"))["limits"]
    study = yaml.safe_load((CONFIG / "studies" / "fender" / "study.yaml").read_text(encoding="utf-8"))
    declared = {name: [limit["at least"] for limit in duty["limits"].values()] for name, duty in study["duties"].items()}
    assert declared == {name: [f"{entry['at least [MPa]']:g} MPa"] for name, entry in truth.items()}
    assert truth["winter mooring"]["new batch"]["share"] > 0.999
    assert truth["storm preload"]["new batch"]["share"] < 0.1


def test_share_of_new_parts_agrees_with_simulated_parts() -> None:
    rubber, fender = load("invented_rubber"), load("make_fender")
    limit = fender.LIMITS[1]
    duty = rubber.held_stress(limit.level, limit.ramp, limit.at)
    sds = rubber.new_batch_sds(fender.POPULATION)
    rng = np.random.default_rng(3)
    stresses = np.array([duty(rubber.specimen_terms(fender.POPULATION, tuple(rng.standard_normal(3) * sds))) for _ in range(4000)])
    law = rubber.parts(fender.POPULATION, (0.0, 0.0, 0.0), sds, duty)
    middle = law.exceeded_by(0.5)
    assert law.share_above(middle) == pytest.approx(0.5, abs=1e-9)
    for level in (0.95 * middle, middle, limit.at_least):
        expected = law.share_above(level)
        assert abs(np.mean(stresses >= level) - expected) < 4.0 * math.sqrt(expected * (1.0 - expected) / stresses.size)


def test_invented_stress_agrees_with_the_law() -> None:
    """Two independent pieces of code for the same physics: stress under a ragged history, and the meaning of the modes."""
    rubber, fender = load("invented_rubber"), load("make_fender")
    times, spacing = rubber.grid()
    base = rubber.population_terms(fender.POPULATION)
    law = LAWS["maxwell"](times, True, rubber.REFERENCE, False)
    modes = (0.05, -0.2, 0.3)
    terms = rubber.specimen_terms(fender.POPULATION, modes)
    # what remains after each arm, and the share of it that the next one takes
    remaining = base.equilibrium + np.cumsum(np.concatenate([[0.0], base.moduli[::-1]]))[::-1]
    levels = np.log(-np.diff(np.log(remaining)) / spacing)
    natural = law.natural(levels, np.array([[math.log(fender.POPULATION.modulus) + modes[0], *modes[1:]]]))
    time = np.array([0.0, 0.5, 3.0, 3.1, 40.0, 2e3, 2.5e3, 6e5, 1e8])
    strain = -np.array([0.0, 0.02, 0.1, 0.1, 0.1, 0.12, 0.05, 0.05, 0.05])
    got = law.simulate(natural, History(time, strain))[0]
    assert np.max(np.abs(got - rubber.stress(terms, time, strain))) < 1e-9 * np.max(np.abs(got))


def test_fender_is_taken_in_whole() -> None:
    intake = take_in(CONFIG / "studies" / "fender")
    assert [entry.record for entry in intake.log if entry.status != "accepted"] == ["D4 hold"]
    assert {record.name: record.missing for record in intake.record_set.records if record.missing} == {"B3 hold": 5}
    frames = {
        batch: {record.instrument for record in intake.record_set.records if record.batch == batch} for batch in intake.record_set.batches
    }
    assert len(frames) == 4
    assert all(len(used) == 2 for used in frames.values()), "batches and instruments must not be confounded"


def test_fender_records_follow_the_truth() -> None:
    """With every true error taken out, what the intake makes of the exports differs from the truth by reading noise alone."""
    rubber, fender = load("invented_rubber"), load("make_fender")
    truth = json.loads((HERE / "fender_truth.json").read_text(encoding="utf-8"))
    errors = truth["relative errors; compliance in mm/N"]
    misfit, readings = 0.0, 0
    for record in take_in(CONFIG / "studies" / "fender").record_set.records:
        name, plan = record.specimen, fender.PLANS[record.specimen]
        drawn = truth["specimens, relative to the population"][name]
        terms = rubber.specimen_terms(fender.POPULATION, tuple(drawn[mode] for mode in rubber.MODES))
        # the record's compliance is strain by one standard uncertainty: what the frame gave beyond its declared value
        beyond = (errors["compliance"] - fender.COMPLIANCE) / fender.U_COMPLIANCE
        strain = -(record.history.value + beyond * record.compliance)
        strain = strain / (1.0 + errors["length"][name]) / (1.0 + errors["strain"][plan.instrument])
        stress = rubber.stress(terms, record.history.time, strain)[np.isin(record.history.time, record.time)]
        shown = stress * (1.0 + errors["mounting"][name]) * (1.0 + errors["area"][name]) * (1.0 + errors["force"][plan.instrument])
        sd = np.hypot(fender.NOISE_ABSOLUTE, fender.NOISE_RELATIVE * shown) / np.sqrt(record.count)
        z = (-record.response - shown) / sd
        assert abs(float(np.mean(z))) < 5.0 / math.sqrt(z.size) + 0.1, name
        misfit += float(np.sum(z**2))
        readings += z.size
    # chi-square: mean 1, standard deviation sqrt(2 / readings)
    assert misfit / readings == pytest.approx(1.0, abs=0.1)


def test_connector_is_taken_in_with_its_hold_out() -> None:
    records = take_in(CONFIG / "studies" / "connector").record_set.records
    assert [record.missing for record in records] == [0, 1, 0, 0, 0, 0]
    assert sum(int((~record.held_out).sum()) for record in records) == 24
    assert sum(int(record.held_out.sum()) for record in records) == 41


def test_template_is_taken_in_whole() -> None:
    intake = take_in(CONFIG / "template")
    assert [entry.status for entry in intake.log] == ["accepted"] * 4


def test_connector_records_are_unchanged() -> None:
    file = CONFIG / "studies" / "connector" / "records" / "stress_loss_65C.csv"
    digest = hashlib.sha256(file.read_bytes()).hexdigest()
    assert digest == "bb1274981b8d2c96efc7d6bc67c71065abc668388e7fc7c57041e31ef7084bbe", "the published table was changed"
