"""An installed wheel runs a study that lies anywhere, and nothing is written into the installation."""

from __future__ import annotations

import os
import subprocess
import sys
from pathlib import Path

import pytest

from tests.workflow.bench import PERDURE, ROOT, digest_of, small


@pytest.mark.slow
def test_installed_wheel_makes_and_runs_a_study(tmp_path: Path) -> None:
    wheels, site = tmp_path / "wheels", tmp_path / "site"
    build = [sys.executable, "-m", "hatchling", "build", "--target", "wheel", "--directory", str(wheels)]
    subprocess.run(build, cwd=ROOT, check=True, capture_output=True)
    (wheel,) = wheels.glob("*.whl")
    install = [
        sys.executable,
        "-m",
        "pip",
        "install",
        "--quiet",
        "--no-deps",
        "--no-index",
        "--no-compile",
        "--target",
        str(site),
        str(wheel),
    ]
    subprocess.run(install, check=True, capture_output=True)
    installed = digest_of(site)
    assert "perdure/shipped/workflow/Snakefile" in installed
    path = os.pathsep.join([str(site), os.environ.get("PYTHONPATH", "")])
    environment = os.environ | {"PYTHONPATH": path, "PYTHONDONTWRITEBYTECODE": "1"}

    def say(*arguments: str) -> subprocess.CompletedProcess[str]:
        return subprocess.run([*PERDURE, *arguments], cwd=tmp_path, env=environment, capture_output=True, text=True, check=False)

    where = [sys.executable, "-c", "import perdure; print(perdure.__file__)"]
    assert str(site) in subprocess.run(where, cwd=tmp_path, env=environment, capture_output=True, text=True, check=True).stdout
    assert say("new", "anywhere/straps").returncode == 0
    small(tmp_path / "anywhere" / "straps")
    study = digest_of(tmp_path / "anywhere")
    checked = say("check", "anywhere/straps")
    assert checked.returncode == 0, checked.stderr
    done = say("run", "anywhere/straps")
    assert done.returncode == 0, done.stdout + done.stderr
    assert (tmp_path / "results" / "straps" / "report.html").is_file()
    assert digest_of(tmp_path / "anywhere") == study
    assert digest_of(site) == installed
