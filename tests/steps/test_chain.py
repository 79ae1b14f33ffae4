"""The chain in Python and the rules of the workflow say the same."""

from __future__ import annotations

import ast
import re

import pytest

from perdure.border.shipped import shipped
from perdure.steps.chain import CHAIN, files, later

RULES = shipped("workflow") / "rules"


def block(rule: str, name: str) -> tuple[str, ...]:
    """Files in the block ``name`` of the rule, without the study's folder."""
    text = (RULES / f"{rule}.smk").read_text(encoding="utf-8")
    found = re.search(rf"^    {name}:\n((?:        .*\n)+)", text, re.MULTILINE)
    if found is None:
        return ()
    written = ast.literal_eval(f"({found.group(1).strip()})")
    return tuple(file.removeprefix("{study}/") for file in written)


@pytest.mark.parametrize("step", CHAIN)
def test_rule_makes_what_the_chain_says(step: str) -> None:
    assert block(step, "output") == files(step)


@pytest.mark.parametrize("step", [step for step in CHAIN if step != "report"])
def test_rule_reads_only_what_earlier_steps_make(step: str) -> None:
    read = block(step, "input")
    makers = {maker for name in read for maker in CHAIN if name in files(maker)}
    assert makers == set(CHAIN[step].after)
    assert step == "intake" or "records.nc" in read


@pytest.mark.parametrize("step", CHAIN)
def test_rule_starts_its_step_and_depends_on_its_parts(step: str) -> None:
    text = (RULES / f"{step}.smk").read_text(encoding="utf-8")
    assert f"rule {step}:" in text
    assert f'needs=needs("{step}")' in text
    assert f"python -m perdure.steps.{step} --study {{params.study:q}} --results {{wildcards.study:q}} --cores {{threads}}" in text


def test_every_rule_is_a_step() -> None:
    assert {path.stem for path in RULES.glob("*.smk")} == {*CHAIN, "verdict"}


def test_no_two_steps_write_one_file() -> None:
    written = [name for step in CHAIN for name in files(step)]
    assert len(written) == len(set(written))


def test_later_steps() -> None:
    assert later("intake") == ("priors", "fit", "checks", "parameters", "predict", "holdout", "report")
    assert later("predict") == ("report",)
    assert later("report") == ()
