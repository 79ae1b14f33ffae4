"""``perdure new``: a study that runs as it is, to start from."""

from __future__ import annotations

import shutil
from pathlib import Path

import yaml

from perdure.border.shipped import shipped
from perdure.errors import StudyError, problem


def new(folder: Path, name: str | None) -> int:
    """Copy the template study into ``folder``, with ``name`` as its title, and say what to do next.

    The copy appears whole or not at all.

    Raises:
        StudyError: ``folder`` exists and isn't an empty folder, or cannot be written.
    """
    target = folder.expanduser().resolve()
    if target.exists() and (not target.is_dir() or any(target.iterdir())):
        found = "a folder that isn't empty" if target.is_dir() else "a file of this name"
        raise StudyError([problem(str(target), found, "a folder that doesn't exist yet, or an empty one", "Name another folder.")])
    part = target.with_name(f".{target.name}.part")
    try:
        target.parent.mkdir(parents=True, exist_ok=True)
        shutil.rmtree(part, ignore_errors=True)
        shutil.copytree(shipped("config") / "template", part, copy_function=shutil.copyfile)
        _entitle(part / "study.yaml", name or target.name)
        if target.exists():
            target.rmdir()
        part.replace(target)
    except OSError as error:
        shutil.rmtree(part, ignore_errors=True)
        raise StudyError(
            [problem(str(target), error.strerror or str(error), "a folder that can be written", "Name a folder of your own.")]
        ) from error
    print(f"A new study is in {target}\n{_next(folder)}")
    return 0


def _entitle(study_file: Path, title: str) -> None:
    """Replace the value of ``title`` and nothing else: the comments of the template are there to be read."""
    lines = study_file.read_text(encoding="utf-8").splitlines(keepends=True)
    quoted = yaml.safe_dump(title, allow_unicode=True, width=10_000, default_style='"').strip()
    renamed = [f"title: {quoted}\n" if line.startswith("title:") else line for line in lines]
    study_file.write_text("".join(renamed), encoding="utf-8")


def _next(folder: Path) -> str:
    return (
        f"  perdure check {folder}    says what it holds\n"
        f"  perdure run {folder}      runs it\n"
        "Then put your own exports into records/, list them in register.csv, and describe material, instruments and duties in study.yaml."
    )
