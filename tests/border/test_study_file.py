"""What a study folder declares, in internal units; the handbook and its overrides; the shipped parts."""

from __future__ import annotations

import importlib.util
from pathlib import Path
from typing import Any

import numpy as np
import pytest

from perdure.border import manual
from perdure.border import shipped as shipped_module
from perdure.border.handbook import read_handbook, shipped_families
from perdure.border.register import COLUMNS
from perdure.border.shipped import shipped
from perdure.border.study_file import load_study
from perdure.border.yaml_file import parse_yaml
from perdure.errors import ResultError, StudyError
from perdure.inference.priors import QUANTITIES, distribution
from perdure.study.study import DisplayUnits, HoldOut, LawChoice, SamplerSettings

YEAR = 31_557_600.0


def test_a_study_in_internal_units(folder: Any) -> None:
    loaded = load_study(folder.write())
    study = loaded.study
    assert (study.name, study.title, study.family, study.clock) == ("pads", "Pads of a test bench", "filled rubber", "isothermal")
    assert study.law == LawChoice("maxwell", True, None, 1.5)
    assert study.horizon == 20 * YEAR
    assert study.reference_temperature == pytest.approx(296.15)
    assert study.modes == ("stiffness", "strength", "pace")
    assert study.sampler == SamplerSettings()
    assert study.display == DisplayUnits()
    assert study.hold_out is None
    assert list(loaded.instruments) == ["north frame", "south frame"]
    assert [row.record for row in loaded.register] == ["n1", "s1", "s2"]
    assert loaded.register[0].area == 500.0


def test_a_duty_in_compression_is_negative_inside_and_its_limits_are_magnitudes(folder: Any) -> None:
    (duty,) = load_study(folder.write()).study.duties
    np.testing.assert_allclose(duty.history.time, [0, 3600, 3600 + 10 * YEAR])
    np.testing.assert_allclose(duty.history.value, [0, -0.12, -0.12])
    contact, kept = duty.limits
    assert (contact.kind, contact.quantity, contact.value, contact.start, contact.end) == ("at least", "stress", 0.25, 10 * YEAR, 10 * YEAR)
    assert (kept.quantity, kept.value, kept.reference, kept.start) == ("retained", 0.6, 3600.0, 86_400.0)
    assert kept.end == duty.history.duration
    assert contact.share == pytest.approx(0.9)
    assert contact.confidence == pytest.approx(0.95)


def test_optional_keys(folder: Any) -> None:
    folder.edit("study.yaml", "  name: maxwell\n", "  name: maxwell\n  equilibrium: false\n  relaxation times: 3\n")
    folder.files["study.yaml"] += (
        "hold out: {after: 850 h, specimens: [A1]}\nsampler: {chains: 2, seed: 7}\ndisplay: {stress: psi, time: a}\nreference time: 1 min\n"
    )
    study = load_study(folder.write()).study
    assert study.law == LawChoice("maxwell", False, 3, 1.5)
    assert study.hold_out == HoldOut(850 * 3600.0, ("A1",), ())
    assert study.sampler == SamplerSettings(chains=2, seed=7)
    assert study.display == DisplayUnits(stress="psi", time="a")
    assert study.reference_time == 60.0


def test_a_service_history_from_a_file(folder: Any) -> None:
    steps = "    history:\n      - ramp: {to: 12 %, over: 1 h}\n      - hold: {for: 10 a}\n"
    folder.edit("study.yaml", steps, "    history file: histories/winter.csv\n")
    folder.files["histories/winter.csv"] = 'time [a],"strain [%]"\n0,0\n1,12\n2,6\n12,6\n'
    (duty,) = load_study(folder.write()).study.duties
    np.testing.assert_allclose(duty.history.time, np.array([0, 1, 2, 12]) * YEAR)
    np.testing.assert_allclose(duty.history.value, [0, -0.12, -0.06, -0.06])


@pytest.mark.parametrize(
    ("text", "where", "got"),
    [
        ("time [a],strain [%]\n1,0\n12,12\n", "histories/winter.csv, row 2", "time 3.15576e+07"),
        ("time [a],strain [%]\n0,0\n12,12\n12,6\n", "histories/winter.csv, row 4", "doesn't grow"),
        ("time [a],strain [%]\n0,0\n12,x\n", 'histories/winter.csv, row 3, column "strain [%]"', '"x"'),
        ("time [a],strain [%]\n0,0\n12,nan\n", 'histories/winter.csv, row 3, column "strain [%]"', '"nan"'),
        ("time [a],stress [MPa]\n0,0\n12,1\n", 'histories/winter.csv, row 1, column "stress [MPa]"', "stress"),
        ("time [a]\n0\n12\n", "histories/winter.csv, row 1", "no column strain"),
        ("time,strain [%]\n0,0\n12,1\n", 'histories/winter.csv, column "time"', "unit"),
        ("time [a],strain [%]\n0,0\n", "histories/winter.csv", "1 rows"),
        ("time [a],strain [%]\n0,0\n12,-1\n", "histories/winter.csv", "-0.01"),
    ],
)
def test_a_faulty_service_history_is_refused(folder: Any, text: str, where: str, got: str) -> None:
    steps = "    history:\n      - ramp: {to: 12 %, over: 1 h}\n      - hold: {for: 10 a}\n"
    folder.edit("study.yaml", steps, "    history file: winter.csv\n")
    folder.files["histories/winter.csv"] = text
    with pytest.raises(StudyError) as caught:
        load_study(folder.write())
    assert any(item.where == where and got in item.got for item in caught.value.problems), caught.value


def test_priors_come_from_the_handbook_and_the_study_replaces_them(folder: Any) -> None:
    priors = {prior.quantity: prior for prior in load_study(folder.write()).study.priors}
    assert list(priors) == list(QUANTITIES)
    assert (priors["modulus"].low, priors["modulus"].high, priors["modulus"].origin) == (3.0, 6.0, "study")
    assert priors["loss per decade"].origin == "handbook filled rubber"


def test_an_own_family_replaces_a_shipped_one(folder: Any) -> None:
    ranges = "".join(
        f"  {key}: {{low: {'0' if item.family == 'half-normal' else '10 %'}, high: 20 %, source: own tests}}\n"
        for key, item in QUANTITIES.items()
        if key != "modulus"
    )
    folder.files["handbook/mine.yaml"] = "format: 1\nfamily: filled rubber\nranges:\n" + ranges
    priors = {prior.quantity: prior for prior in load_study(folder.write()).study.priors}
    assert priors["loss per decade"].source == "own tests"
    assert priors["stiffness batch scatter"].high == pytest.approx(0.2)
    folder.edit("study.yaml", "priors:\n  modulus: {low: 3 MPa, high: 6 MPa, coverage: 0.9, source: own records}\n", "")
    with pytest.raises(StudyError, match='no range for "modulus"'):
        load_study(folder.write())


def test_two_own_families_of_one_name_are_refused(folder: Any) -> None:
    text = "format: 1\nfamily: mine\nranges:\n  modulus: {low: 1 MPa, high: 2 MPa, source: own tests}\n"
    folder.files["handbook/a.yaml"] = folder.files["handbook/b.yaml"] = text
    _, problems = read_handbook(folder.write())
    assert [item.where for item in problems] == ["handbook/b.yaml, key family"]


def test_a_family_must_cover_every_quantity_that_is_used() -> None:
    for family in shipped_families().values():
        assert {item.quantity for item in family.ranges} == set(QUANTITIES), family.name


@pytest.mark.parametrize(
    "name",
    [
        "filled rubber",
        "unfilled rubber",
        "epoxy",
        "PTFE",
        "PEEK",
        "PA66 dry",
        "PA66 conditioned",
        "PC",
        "POM",
        "polyurethane",
        "stressed metal spring",
    ],
)
def test_every_shipped_family_makes_distributions_and_names_its_sources(name: str) -> None:
    for item in shipped_families()[name].ranges:
        assert distribution(item).quantile(0.5) > 0
        assert "from memory" in item.source
        assert item.origin == f"handbook {name}"


def test_shares_of_the_handbook_lie_below_one() -> None:
    for family in shipped_families().values():
        ranges = {item.quantity: item for item in family.ranges}
        assert ranges["loss per decade"].high < 0.5
        assert ranges["noise relative"].high < 0.1


def test_shipped_parts_are_found_and_others_refused() -> None:
    assert (shipped("config") / "handbook").is_dir()
    assert shipped("workflow").is_dir()
    with pytest.raises(ResultError):
        shipped("secrets")


def test_shipped_parts_of_a_wheel_lie_inside_the_package(tmp_path: Path) -> None:
    source = Path(str(shipped_module.__file__))
    copy = tmp_path / "site" / "perdure" / "border" / "shipped.py"
    copy.parent.mkdir(parents=True)
    copy.write_bytes(source.read_bytes())
    inside = tmp_path / "site" / "perdure" / "shipped" / "config"
    inside.mkdir(parents=True)
    spec = importlib.util.spec_from_file_location("shipped_copy", copy)
    assert spec is not None
    assert spec.loader is not None
    module = importlib.util.module_from_spec(spec)
    spec.loader.exec_module(module)
    assert module.shipped("config") == inside
    with pytest.raises(ResultError, match="workflow"):
        module.shipped("workflow")


def test_the_manual_and_the_schema_are_in_step_with_the_models() -> None:
    assert (shipped("config") / "README.md").read_text(encoding="utf-8") == manual.render()
    assert (shipped("config") / "study.schema.json").read_text(encoding="utf-8") == manual.schema()


def test_the_manual_documents_every_key_and_column() -> None:
    text = manual.render()
    for key in (*COLUMNS, *QUANTITIES, "format", "duties > NAME > limits > NAME > required share", "sampler > target accept", "family"):
        assert f"`{key}`" in text, key


def test_writing_the_manual_gives_both_files(tmp_path: Path) -> None:
    manual.write(tmp_path)
    assert sorted(item.name for item in tmp_path.iterdir()) == ["README.md", "study.schema.json"]


@pytest.mark.parametrize(
    ("text", "value"),
    [
        ("no", "no"),
        ("yes", "yes"),
        ("true", True),
        ("1:30", "1:30"),
        ("012", 12),
        ("1e-5", 1e-5),
        ("1_000", "1_000"),
        ("0x10", "0x10"),
        ("2026-01-02", "2026-01-02"),
        ("'12'", "12"),
        ("~", None),
        (".inf", ".inf"),
    ],
)
def test_yaml_words_mean_what_they_say(text: str, value: object) -> None:
    found = parse_yaml(f"key: {text}\n", "study.yaml").content["key"]
    assert found == value
    assert type(found) is type(value)


@pytest.mark.parametrize(
    "text", ["", "- a\n- b\n", "just words\n", "a: " + "[" * 50 + "]" * 50 + "\n", "a: 1\n---\nb: 2\n", "? [x]\n: 1\n"]
)
def test_other_yaml_is_refused(text: str) -> None:
    with pytest.raises(StudyError):
        parse_yaml(text, "study.yaml")


def test_long_cells_and_quantities_are_refused_at_once(folder: Any) -> None:
    folder.edit("register.csv", "until [s]", "until" + " " * 50_000 + "x")
    folder.edit("study.yaml", "horizon: 20 a", "horizon: '1" + " " * 50_000 + "x'")
    with pytest.raises(StudyError) as caught:
        load_study(folder.write())
    assert len(caught.value.problems) == 2


def test_deep_nesting_is_refused_without_exhausting_the_stack() -> None:
    with pytest.raises(StudyError, match="deep nesting"):
        parse_yaml("a: " + "[" * 20_000 + "]" * 20_000 + "\n", "study.yaml")
