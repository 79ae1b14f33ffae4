"""What a study's chain depends on, as digests: the workflow compares them to see what must run again.

Cheap and tolerant on purpose. A study that cannot be read gets digests too: its intake then runs and says what is wrong, and the
other studies of the run are none the worse for it. Digests of ``study.yaml`` are of its content: comments and layout don't count.
"""

from __future__ import annotations

import hashlib
import json
from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass
from pathlib import Path
from types import MappingProxyType
from typing import Any

from perdure.border.shipped import shipped
from perdure.border.yaml_file import read_yaml
from perdure.errors import StudyError, problem
from perdure.steps.chain import CHAIN, files
from perdure.steps.code import code_digest

SECTIONS: Mapping[str, tuple[str, ...]] = MappingProxyType(
    {
        "instruments": ("instruments",),
        "hold out": ("hold out",),
        "law": ("law", "clock"),
        "model": ("material", "law", "clock", "horizon", "reference time", "scatter", "priors"),
        "sampler": ("sampler",),
        "duties": ("duties",),
    }
)
"""Keys of ``study.yaml`` behind each part; every key not named here belongs to the part "text", which only the report reads."""

NOISE = "noise"
"""Beginning of the quantities whose prior ranges the intake writes into the records, with the instruments."""


@dataclass(frozen=True, slots=True)
class Plan:
    """What the workflow has to know of a study before it runs.

    Attributes:
        name: of the study, the name of its folder.
        study: its folder, absolute.
        parts: digest of each part of the study, by name.
        holds_out: True where the study declares readings that the fit must not see.
    """

    name: str
    study: Path
    parts: Mapping[str, str]
    holds_out: bool

    def depends(self, step: str) -> dict[str, str]:
        """Digests of the parts that ``step`` reads, for the ``params`` of its rule."""
        return {part: self.parts[part] for part in CHAIN[step].parts}


def plan(study: Path) -> Plan:
    """The :class:`Plan` of the study in the folder ``study``. Never fails because of what the folder holds."""
    folder = Path(study).resolve()
    written, readable = _study_file(folder / "study.yaml")
    parts = {part: _digest([_section(written, keys)]) for part, keys in SECTIONS.items()}
    named = {key for keys in SECTIONS.values() for key in keys}
    priors = written.get("priors")
    noise = {key: value for key, value in priors.items() if str(key).startswith(NOISE)} if isinstance(priors, dict) else {}
    parts["noise"] = _digest([written.get("material"), noise])
    parts["text"] = _digest([{key: value for key, value in written.items() if key not in named}])
    parts["register"] = _digest([_file_digest(folder / "register.csv")])
    parts["records"] = _folder_digest(folder / "records")
    parts["duties"] = _digest([parts["duties"], _folder_digest(folder / "histories")])
    parts["handbook"] = _digest([_folder_digest(folder / "handbook"), _folder_digest(shipped("config") / "handbook")])
    if not readable:
        # nothing can be told apart in a file that cannot be read: every part changes with it
        parts = {part: _digest([value, _file_digest(folder / "study.yaml")]) for part, value in parts.items()}
    held_out = written.get("hold out")
    holds_out = any(held_out.values()) if isinstance(held_out, dict) else False
    return Plan(name=folder.name, study=folder, parts=MappingProxyType(parts), holds_out=holds_out)


def plans(studies: Iterable[str | Path]) -> dict[str, Plan]:
    """Plans of several studies by name.

    Raises:
        StudyError: two studies share a name, or there is none at all. Names that differ in capitals alone count as equal,
            because they would share a results folder on some file systems. A folder named twice counts once.
    """
    found: dict[str, Plan] = {}
    seen: dict[str, Path] = {}
    problems = []
    for study in studies:
        one = plan(Path(study))
        key = one.name.casefold()
        if key in seen and seen[key] != one.study:
            problems.append(
                problem(
                    f"study {one.name}",
                    f"two folders of this name, {seen[key]} and {one.study}",
                    "a name that is unique in a run: it names the results folder",
                    "Rename one of the folders, or run them with different --results.",
                )
            )
        seen[key] = one.study
        found[one.name] = one
    if not found:
        problems.append(problem("studies", "none", "one study folder or more", "Name a folder that holds a study.yaml."))
    if problems:
        raise StudyError(problems)
    return found


def keep_apart(plans_of_run: Mapping[str, Plan], results: Path) -> None:
    """Make sure that no results are written into a study's folder.

    Raises:
        StudyError: the results folder of a study lies in the folder of a study, or is or holds one.
    """
    problems = []
    for one in plans_of_run.values():
        inside = results == one.study or one.study in results.parents
        covered = [name for name in plans_of_run if results / name == one.study or results / name in one.study.parents]
        if inside or covered:
            problems.append(
                problem(
                    f"results folder {results}",
                    f"the study folder {one.study}" if inside else f"results of {covered[0]} over the study folder {one.study}",
                    "a folder apart from every study: nothing is ever written into a study",
                    "Name another folder with --results.",
                )
            )
    if problems:
        raise StudyError(problems)


def dependencies(plan_of_study: Plan, step: str) -> dict[str, str]:
    """Everything beside its input files that makes ``step`` run again: parts of the study, and the code of the step."""
    return {**plan_of_study.depends(step), "code": code_digest(step)}


def shipped_studies() -> list[Path]:
    """Folders of the studies that ship with the tool, sorted by name."""
    return sorted(path.parent for path in (shipped("config") / "studies").glob("*/study.yaml"))


def made_before_report(plan_of_study: Plan) -> list[str]:
    """Files, below the results folder, of every step that the study's report reads: the hold-out's only where there is one."""
    steps = [step for step in CHAIN["report"].after if step != "holdout" or plan_of_study.holds_out]
    return [f"{plan_of_study.name}/{name}" for step in steps for name in files(step)]


def made(plan_of_study: Plan) -> list[str]:
    """Every file, below the results folder, that the study's chain makes."""
    return [*made_before_report(plan_of_study), *(f"{plan_of_study.name}/{name}" for name in files("report"))]


def _study_file(path: Path) -> tuple[Mapping[str, Any], bool]:
    # read as the border reads it: another reader would see "010", "yes" and the like with other eyes, and miss their changes
    try:
        return read_yaml(path, path.name).content, True
    except (StudyError, OSError):
        return {}, False


def _section(written: Mapping[str, Any], keys: Sequence[str]) -> dict[str, Any]:
    return {key: written[key] for key in keys if key in written}


def _digest(content: Sequence[object]) -> str:
    # the order of keys is kept: it is the order of rows in the tables
    text = json.dumps(content, ensure_ascii=False, default=repr)
    return hashlib.sha256(text.encode("utf-8", "surrogatepass")).hexdigest()[:16]


def _file_digest(path: Path) -> str:
    try:
        with path.open("rb") as handle:
            return hashlib.file_digest(handle, "sha256").hexdigest()
    except OSError as error:
        return f"unreadable: {type(error).__name__}"


def _folder_digest(folder: Path) -> str:
    found = sorted(path for path in folder.rglob("*") if path.is_file()) if folder.is_dir() else []
    return _digest([[path.relative_to(folder).as_posix(), _file_digest(path)] for path in found])
