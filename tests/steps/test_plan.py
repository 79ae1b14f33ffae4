"""Digests of a study: what changes them, and that nothing in the folder can make them fail."""

from __future__ import annotations

from collections.abc import Callable
from pathlib import Path

import pytest

from perdure.errors import StudyError
from perdure.steps.chain import CHAIN
from perdure.steps.plan import keep_apart, made, made_before_report, plan, plans

STUDY = """\
format: 1
title: Pads
material: {family: filled rubber}
law: {name: maxwell}
clock: {name: isothermal, reference temperature: 23 degC}
instruments: {frame: {reader: delimited}}
duties: {winter: {sense: tension}}
sampler: {seed: 3}
"""


@pytest.fixture
def study(tmp_path: Path) -> Path:
    folder = tmp_path / "studies" / "pads"
    for part in ("records", "histories", "handbook"):
        (folder / part).mkdir(parents=True)
    (folder / "study.yaml").write_text(STUDY, encoding="utf-8")
    (folder / "register.csv").write_text("record,file\nr1,a.csv\n", encoding="utf-8")
    (folder / "records" / "a.csv").write_text("1,2\n", encoding="utf-8")
    return folder


def rewrite(old: str, new: str) -> Callable[[Path], None]:
    def change(study: Path) -> None:
        assert old in STUDY
        (study / "study.yaml").write_text(STUDY.replace(old, new), encoding="utf-8")

    return change


def put(name: str, text: str) -> Callable[[Path], None]:
    def change(study: Path) -> None:
        (study / name).write_text(text, encoding="utf-8")

    return change


@pytest.mark.parametrize(
    ("change", "parts"),
    [
        (rewrite("title: Pads\n", "title:   Pads   # a comment\n\n"), set()),
        (rewrite("title: Pads", "title: Buffers"), {"text"}),
        (rewrite("seed: 3", "seed: '3'"), {"sampler"}),
        (rewrite("seed: 3", "seed: 4"), {"sampler"}),
        (rewrite("winter: {", "summer: {"), {"duties"}),
        (rewrite("name: maxwell", "name: other"), {"law", "model"}),
        (rewrite("filled rubber", "solder"), {"model", "noise"}),
        (rewrite("sampler:", "priors: {modulus: {low: 3 MPa}}\nsampler:"), {"model"}),
        (rewrite("sampler:", "priors: {noise relative: {low: 1 %}}\nsampler:"), {"model", "noise"}),
        (rewrite("sampler:", "hold out: {after: 3 h}\nsampler:"), {"hold out"}),
        (rewrite("delimited", "other"), {"instruments"}),
        (put("register.csv", "record,file\nr2,a.csv\n"), {"register"}),
        (put("records/a.csv", "1,3\n"), {"records"}),
        (put("records/b.csv", ""), {"records"}),
        (put("histories/h.csv", "0,0\n"), {"duties"}),
        (put("handbook/own.yaml", "x: 1\n"), {"handbook"}),
        (put("notes.txt", "anything"), set()),
    ],
)
def test_a_change_shows_in_its_parts_alone(study: Path, change: Callable[[Path], None], parts: set[str]) -> None:
    before = plan(study).parts
    change(study)
    after = plan(study).parts
    assert {part for part in before if before[part] != after[part]} == parts


def test_every_part_is_read_by_a_step_and_every_step_reads_known_parts(study: Path) -> None:
    parts = set(plan(study).parts)
    assert {part for step in CHAIN.values() for part in step.parts} == parts


@pytest.mark.parametrize(
    "content", [b"", b"title: [", b"\xff\xfe\x00", b"- a list", b"a: &x [*x]", b"when: 2026-13-45", b"\x00", b"hold out: 3\npriors: 4\n"]
)
def test_a_broken_study_file_has_a_plan_that_changes_with_it(study: Path, content: bytes) -> None:
    file = study / "study.yaml"
    sound = plan(study).parts
    file.write_bytes(content)
    broken = plan(study)
    assert not broken.holds_out
    assert broken.parts["instruments"] != sound["instruments"]
    assert plan(study).parts == broken.parts


def test_a_missing_folder_has_a_plan_and_none_of_it_is_made(tmp_path: Path) -> None:
    nowhere = plan(tmp_path / "nowhere")
    assert nowhere.name == "nowhere"
    assert list(tmp_path.iterdir()) == []


@pytest.mark.parametrize(
    ("written", "holds_out"),
    [
        ("{after: 850 h}", True),
        ("{specimens: [a]}", True),
        ("{specimens: [], batches: []}", False),
        ("null", False),
        ("{after: null}", False),
    ],
)
def test_hold_out_is_part_of_the_chain_only_where_it_holds_something(study: Path, written: str, *, holds_out: bool) -> None:
    rewrite("sampler:", f"hold out: {written}\nsampler:")(study)
    found = plan(study)
    assert found.holds_out is holds_out
    assert ("pads/holdout.csv" in made_before_report(found)) is holds_out
    assert "pads/report.html" in made(found)


def test_two_studies_of_one_name_are_refused_with_both_folders(study: Path, tmp_path: Path) -> None:
    other = tmp_path / "elsewhere" / "Pads"
    other.mkdir(parents=True)
    with pytest.raises(StudyError) as refused:
        plans([study, other])
    assert str(study) in str(refused.value)
    assert str(other) in str(refused.value)
    assert list(plans([study, study])) == ["pads"]


def test_a_run_without_studies_is_refused() -> None:
    with pytest.raises(StudyError, match=r"study\.yaml"):
        plans([])


def test_results_never_go_into_a_study(study: Path, tmp_path: Path) -> None:
    planned = plans([study])
    keep_apart(planned, tmp_path / "results")
    for results in (study, study / "results", study.parent):
        with pytest.raises(StudyError, match="--results"):
            keep_apart(planned, results)
