"""A bench of two small studies to run and to change."""

from __future__ import annotations

import hashlib
import shutil
import subprocess
import sys
from dataclasses import dataclass
from pathlib import Path

from perdure.commands.forecast import Coming, forecast
from perdure.commands.snakemake import workflow_of
from perdure.steps.plan import plans

ROOT = Path(__file__).resolve().parents[2]
STUDIES = ("one", "two")
DRAWS = 800
"""Draws of each of two chains: enough for the gate."""
PERDURE = (sys.executable, "-c", "import sys; from perdure.commands import main; sys.exit(main())")

SECOND_DUTY = """\
duties:
  second cover:
    sense: tension
    temperature: 23 degC
    history:
      - ramp: {to: 10 %, over: 10 s}
      - hold: {for: 30 d}
    limits:
      stays down: {at least: 0.1 MPa, at: 30 d, required share: 90 %, confidence: 95 %}
"""


@dataclass(frozen=True)
class Bench:
    """Two studies side by side and a results folder, all of it free to be changed."""

    folder: Path

    @property
    def results(self) -> Path:
        return self.folder / "results"

    def study(self, name: str) -> Path:
        return self.folder / "studies" / name

    def edit(self, name: str, file: str, old: str, text: str) -> None:
        """Replace ``old`` by ``text`` in a file of the study; ``old`` must be there."""
        path = self.study(name) / file
        before = path.read_text(encoding="utf-8")
        assert old in before
        path.write_text(before.replace(old, text, 1), encoding="utf-8")

    def rewrite_reading(self, name: str, file: str, force: str | None = None) -> None:
        """Put ``force``, or another last digit, in place of the force of the second reading of a record."""
        path = self.study(name) / "records" / file
        lines = path.read_text(encoding="utf-8").splitlines()
        time, before, strain = lines[2].split(",")
        other = before[:-1] + ("1" if before[-1] != "1" else "2")
        lines[2] = ",".join([time, force or other, strain])
        path.write_text("\n".join(lines) + "\n", encoding="utf-8")

    def add_record(self, name: str) -> None:
        """Another record of the first specimen's kind: its export and a row of the register."""
        study = self.study(name)
        shutil.copyfile(study / "records" / "strip_1a.csv", study / "records" / "strip_1c.csv")
        register = study / "register.csv"
        lines = register.read_text(encoding="utf-8").splitlines()
        lines.append(lines[1].replace("1a", "1c"))
        register.write_text("\n".join(lines) + "\n", encoding="utf-8")

    def pending(self) -> set[tuple[str, str]]:
        """(study, step) of everything that would run."""
        return {(one.study, one.step) for one in self.coming()}

    def reasons(self) -> dict[tuple[str, str], str]:
        return {(one.study, one.step): one.reason for one in self.coming()}

    def coming(self) -> list[Coming]:
        planned = plans([self.study(name) for name in STUDIES])
        with workflow_of(planned, self.results, None, ()) as workflow:
            return forecast(workflow.summary(), planned, self.results)

    def run(self, *arguments: str) -> subprocess.CompletedProcess[str]:
        """``perdure run`` of both studies."""
        studies = [str(self.study(name)) for name in STUDIES]
        return perdure("run", *studies, "--results", str(self.results), *arguments, cwd=self.folder)

    def start(self) -> subprocess.Popen[str]:
        """``perdure run`` of both studies, under way."""
        studies = [str(self.study(name)) for name in STUDIES]
        command = [*PERDURE, "run", *studies, "--results", str(self.results)]
        return subprocess.Popen(command, cwd=self.folder, stdout=subprocess.PIPE, stderr=subprocess.PIPE, text=True)

    def plain_snakemake(self) -> subprocess.CompletedProcess[str]:
        """Plain ``snakemake`` in the checkout's way, with both studies."""
        studies = ", ".join(f'"{self.study(name)}"' for name in STUDIES)
        configuration = self.folder / "configuration.yaml"
        configuration.write_text(f'studies: [{studies}]\nresults: "{self.results}"\n', encoding="utf-8")
        command = [sys.executable, "-m", "snakemake", "--snakefile", str(ROOT / "Snakefile"), "--configfile", str(configuration)]
        return subprocess.run([*command, "--cores", "2", "--keep-going"], cwd=self.folder, capture_output=True, text=True, check=False)


def perdure(*arguments: str, cwd: Path) -> subprocess.CompletedProcess[str]:
    """The command line in a process of its own."""
    return subprocess.run([*PERDURE, *arguments], cwd=cwd, capture_output=True, text=True, check=False)


def digest_of(folder: Path) -> dict[str, str]:
    """SHA-256 of every file below ``folder``, and its folders."""
    return {
        path.relative_to(folder).as_posix(): hashlib.sha256(path.read_bytes()).hexdigest() if path.is_file() else "folder"
        for path in sorted(folder.rglob("*"))
    }


def small(study: Path) -> None:
    """One mode of scatter, a coarse grid and few draws: quick, and enough for the gate."""
    file = study / "study.yaml"
    text = file.read_text(encoding="utf-8")
    for old, less in (
        ("modes: [stiffness, strength]", "modes: [stiffness]"),
        ("terms per decade: 1.5 ", "terms per decade: 0.5 "),
        ("chains: 4 ", "chains: 2 "),
        ("draws: 1000 ", f"draws: {DRAWS} "),
        ("tune: 600 ", "tune: 300 "),
        ("target accept: 0.95 ", "target accept: 0.9 "),
    ):
        assert old in text
        text = text.replace(old, less)
    file.write_text(text, encoding="utf-8")


@dataclass(frozen=True)
class Finished:
    """The bench after its first run, with what that run said; not to be changed."""

    bench: Bench
    first: subprocess.CompletedProcess[str]
    before: dict[str, dict[str, str]]
