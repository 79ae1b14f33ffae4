"""Digests of the code behind each step."""

from __future__ import annotations

import shutil
from pathlib import Path

import pytest

from perdure.steps.chain import CHAIN
from perdure.steps.code import PACKAGE, code_digest, modules_of


@pytest.fixture
def package(tmp_path: Path) -> Path:
    copy = tmp_path / "perdure"
    shutil.copytree(PACKAGE, copy, ignore=shutil.ignore_patterns("__pycache__"))
    return copy


def edited(package: Path, name: str) -> set[str]:
    """Steps whose digest changes when the file ``name`` of ``package`` does."""
    before = {step: code_digest(step, package) for step in CHAIN}
    path = package / name
    path.write_text(path.read_text(encoding="utf-8") + "\n# edited\n", encoding="utf-8")
    code_digest.cache_clear()
    return {step for step in CHAIN if code_digest(step, package) != before[step]}


def test_code_of_the_report_touches_the_report_alone(package: Path) -> None:
    assert edited(package, "report/page.py") == {"report"}


def test_templates_count_with_the_package_that_keeps_them(package: Path) -> None:
    name = next(path for path in sorted((package / "report" / "templates").iterdir()) if path.suffix != ".py")
    assert edited(package, f"report/templates/{name.name}") == {"report"}


def test_physics_touches_every_step_that_computes(package: Path) -> None:
    assert {"intake", "priors", "fit", "checks", "parameters", "predict"} <= edited(package, "rheology/history.py")


def test_sampling_touches_no_intake(package: Path) -> None:
    steps = edited(package, "inference/sample.py")
    assert "fit" in steps
    assert "intake" not in steps


@pytest.mark.parametrize("name", ["steps/runner.py", "steps/plan.py", "commands/run.py"])
def test_wiring_touches_nothing(package: Path, name: str) -> None:
    assert edited(package, name) == set()


@pytest.mark.parametrize("step", CHAIN)
def test_the_digest_covers_the_step_and_what_it_imports(step: str) -> None:
    found = modules_of(step)
    assert f"steps/{step}.py" in found
    assert "errors.py" in found
    assert not [name for name in found if name.startswith("commands/") or "__pycache__" in name]


def test_relative_imports_and_imports_in_functions_are_followed(tmp_path: Path) -> None:
    package = tmp_path / "perdure"
    (package / "steps").mkdir(parents=True)
    (package / "border").mkdir()
    for name, text in {
        "__init__.py": "",
        "steps/__init__.py": "",
        "steps/fit.py": "def run():\n    from ..border import deep\n",
        "border/__init__.py": "from . import other\n",
        "border/deep.py": "import perdure.lone as lone\n",
        "border/other.py": "",
        "border/unused.py": "",
        "lone.py": "",
    }.items():
        (package / name).write_text(text, encoding="utf-8")
    expected = ("__init__.py", "border/__init__.py", "border/deep.py", "border/other.py", "lone.py", "steps/__init__.py", "steps/fit.py")
    assert modules_of("fit", package) == expected
