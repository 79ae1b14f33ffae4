"""A study folder without its readings: ``study.yaml``, the register, the handbook and the service histories."""

from __future__ import annotations

import re
from collections.abc import Mapping
from dataclasses import dataclass
from pathlib import Path
from types import MappingProxyType
from typing import Any, get_args, get_origin

from pydantic import TypeAdapter, ValidationError

from perdure.border.duties import DECLARED_HORIZON, build_duty, horizon_problems
from perdure.border.handbook import choose_priors, ranges_of, read_handbook
from perdure.border.instruments import InstrumentDeclaration, declare
from perdure.border.model_problems import did_you_mean, problems_of
from perdure.border.readers import READERS
from perdure.border.register import Register, RegisterRow, read_register
from perdure.border.study_models import (
    ClockSection,
    DutySection,
    HoldOutSection,
    InstrumentSection,
    LawSection,
    MaterialSection,
    RangeSection,
    StudySection,
)
from perdure.border.yaml_file import YamlFile, read_yaml
from perdure.errors import Problem, StudyError, problem
from perdure.rheology.clock import CLOCKS
from perdure.rheology.laws import LAWS
from perdure.study.duty import Duty
from perdure.study.study import DisplayUnits, HoldOut, LawChoice, PriorRange, SamplerSettings, Study

STUDY_FILE = "study.yaml"
ISOTHERMAL_WITHIN = 5.0
"""K, the distance from the reference temperature up to which the isothermal clock takes a record as made at it."""
_FOLDER_NAME = re.compile(r"[A-Za-z0-9][A-Za-z0-9_.-]*")


@dataclass(frozen=True, slots=True, eq=False)
class StudyFile:
    """A study as its folder declares it, before any reading is looked at.

    Attributes:
        folder: the study folder.
        study: everything but the readings.
        instruments: declarations by name.
        register: rows of the register.
    """

    folder: Path
    study: Study
    instruments: Mapping[str, InstrumentDeclaration]
    register: tuple[RegisterRow, ...]


@dataclass(frozen=True, slots=True, eq=False)
class Draft:
    """What could be made of a study folder, and everything that is wrong with it.

    Attributes:
        folder: the study folder.
        study: None where study.yaml is not sound; built from what there is otherwise.
        instruments: those that are sound.
        register: see :class:`perdure.border.register.Register`.
        problems: empty for a study that can be used.
    """

    folder: Path
    study: Study | None
    instruments: Mapping[str, InstrumentDeclaration]
    register: Register
    problems: tuple[Problem, ...]


def load_study(folder: Path) -> StudyFile:
    """Read everything of a study but its readings.

    Raises:
        StudyError: with every problem of study.yaml, register, handbook, histories and duties.
    """
    draft = draft_study(folder)
    if draft.problems or draft.study is None:
        raise StudyError(draft.problems)
    return StudyFile(folder, draft.study, draft.instruments, draft.register.rows)


def draft_study(folder: Path) -> Draft:
    """As :func:`load_study`, without raising: what is sound is returned beside the problems."""
    if not folder.is_dir():
        missing = problem(folder.name or str(folder), "no such folder", "a study folder", "`perdure new FOLDER` writes one.")
        return Draft(folder, None, {}, Register((), (), ()), (missing,))
    problems: list[Problem] = _name_faults(folder)
    try:
        file = read_yaml(folder / STUDY_FILE, STUDY_FILE)
    except StudyError as error:
        register = read_register(folder, [])
        # without study.yaml nothing is known of instruments
        own = [fault for fault in register.problems if '"instrument"' not in fault.where]
        return Draft(folder, None, {}, register, (*problems, *error.problems, *own))
    sections, faults = _sections(file)
    sound = not faults
    problems.extend(faults)
    instruments, faults = _instruments(sections, file)
    problems.extend(faults)
    families, faults = read_handbook(folder)
    problems.extend(faults)
    priors, faults = _priors(sections, file, families)
    problems.extend(faults)
    duties, faults = _duties(sections, file, folder)
    problems.extend(faults)
    faults = _registry_faults(sections, file)
    sound = sound and not faults
    problems.extend(faults)
    raw = file.content.get("instruments")
    register = read_register(folder, [str(name) for name in raw] if isinstance(raw, dict) else [])
    problems.extend(register.problems)
    if not register.problems:
        problems.extend(_hold_out_faults(sections.get("hold out"), register.rows, file))
    problems.extend(_temperature_faults(sections.get("clock"), register.rows))
    study = _study(folder, StudySection.model_validate(file.content), priors, duties) if sound else None
    if study is not None and study.horizon is not None:
        problems.extend(horizon_problems(study, study.horizon, DECLARED_HORIZON))
    return Draft(folder, study, instruments, register, tuple(problems))


def _name_faults(folder: Path) -> list[Problem]:
    name = folder.resolve().name
    if _FOLDER_NAME.fullmatch(name):
        return []
    return [
        problem(
            f'folder "{name}"',
            f'the name "{name}"',
            "letters, digits, and - _ . inside: it also names the results",
            "Rename the folder.",
        )
    ]


def _sections(file: YamlFile) -> tuple[dict[str, Any], list[Problem]]:
    """Every top-level section that is sound by itself, so that further checks can go on beside a faulty one."""
    problems: list[Problem] = []
    try:
        StudySection.model_validate(file.content)
    except ValidationError as error:
        problems = problems_of(error, file, StudySection)
    sections: dict[str, Any] = {}
    for name, field in StudySection.model_fields.items():
        key = field.alias or name
        if key not in file.content:
            continue
        raw, annotation = file.content[key], field.annotation
        if get_origin(annotation) is dict and isinstance(raw, dict):
            adapter: TypeAdapter[Any] = TypeAdapter(get_args(annotation)[1])
            kept = {str(entry): _sound(adapter, value) for entry, value in raw.items()}
            sections[key] = {entry: value for entry, value in kept.items() if value is not None}
        else:
            sound = _sound(TypeAdapter[Any](annotation or Any), raw)
            if sound is not None:
                sections[key] = sound
    return sections, problems


def _sound(adapter: TypeAdapter[Any], value: object) -> Any:
    try:
        return adapter.validate_python(value)
    except ValidationError:
        return None


def _instruments(sections: Mapping[str, Any], file: YamlFile) -> tuple[Mapping[str, InstrumentDeclaration], list[Problem]]:
    instruments: dict[str, InstrumentDeclaration] = {}
    problems: list[Problem] = []
    declared: dict[str, InstrumentSection] = sections.get("instruments", {})
    for name, section in declared.items():
        declaration, faults = declare(section, name, file, tuple(READERS))
        problems.extend(faults)
        if not faults:
            instruments[name] = declaration
    return MappingProxyType(instruments), problems


def _priors(sections: Mapping[str, Any], file: YamlFile, families: Mapping[str, Any]) -> tuple[tuple[PriorRange, ...], list[Problem]]:
    raw: dict[str, RangeSection] = sections.get("priors", {})
    own, problems = ranges_of(raw, file, "priors", "study")
    material: MaterialSection | None = sections.get("material")
    if material is None:
        return own, problems
    where = file.where(("material", "family"))
    if material.family not in families:
        problems.append(
            problem(where, f'the family "{material.family}"', "a family of the handbook", did_you_mean(material.family, list(families)))
        )
        return own, problems
    chosen, missing = choose_priors(families[material.family], own, where)
    # a faulty range of the user's is already reported
    return chosen, problems + [fault for fault in missing if not problems]


def _duties(sections: Mapping[str, Any], file: YamlFile, folder: Path) -> tuple[tuple[Duty, ...], list[Problem]]:
    duties: list[Duty] = []
    problems: list[Problem] = []
    declared: dict[str, DutySection] = sections.get("duties", {})
    for name, section in declared.items():
        duty, faults = build_duty(section, name, file, folder)
        problems.extend(faults)
        if duty is not None:
            duties.append(duty)
    return tuple(duties), problems


def _registry_faults(sections: Mapping[str, Any], file: YamlFile) -> list[Problem]:
    problems: list[Problem] = []
    law: LawSection | None = sections.get("law")
    if law is not None and law.name not in LAWS:
        problems.append(problem(file.where(("law", "name")), f'the law "{law.name}"', "a known law", did_you_mean(law.name, list(LAWS))))
    clock: ClockSection | None = sections.get("clock")
    if clock is not None and clock.name not in CLOCKS:
        where = file.where(("clock", "name"))
        problems.append(problem(where, f'the clock "{clock.name}"', "a known clock", did_you_mean(clock.name, list(CLOCKS))))
    return problems


def _hold_out_faults(section: HoldOutSection | None, rows: tuple[RegisterRow, ...], file: YamlFile) -> list[Problem]:
    if section is None or not rows:
        return []
    problems = []
    for key, names, known in (
        ("specimens", section.specimens, {row.specimen for row in rows if row.use}),
        ("batches", section.batches, {row.batch for row in rows if row.use}),
    ):
        for name in names:
            if name not in known:
                where = file.where(("hold out", key))
                problems.append(problem(where, f'"{name}"', f"one of the {key} in use", did_you_mean(name, sorted(known))))
    return problems


def _temperature_faults(section: ClockSection | None, rows: tuple[RegisterRow, ...]) -> list[Problem]:
    """Records that the isothermal clock would pool in silence although their temperature differs."""
    if section is None or section.name != "isothermal":
        return []
    return [
        problem(
            row.place("temperature"),
            f"{row.temperature:.2f} K",
            f"within {ISOTHERMAL_WITHIN:g} K of the reference temperature {section.reference_temperature:.2f} K: the clock is isothermal",
            "Keep the records of one temperature in a study, or leave this one out with a reason.",
        )
        for row in rows
        if row.use and abs(row.temperature - section.reference_temperature) > ISOTHERMAL_WITHIN
    ]


def _study(folder: Path, section: StudySection, priors: tuple[PriorRange, ...], duties: tuple[Duty, ...]) -> Study:
    times = section.law.relaxation_times
    sampler, display, hold_out = section.sampler, section.display, section.hold_out
    return Study(
        name=folder.resolve().name,
        title=section.title,
        about=section.about.strip(),
        family=section.material.family,
        law=LawChoice(section.law.name, section.law.equilibrium, times if isinstance(times, int) else None, section.law.terms_per_decade),
        clock=section.clock.name,
        horizon=section.horizon,
        reference_time=section.reference_time,
        reference_temperature=section.clock.reference_temperature,
        priors=priors,
        modes=section.scatter.modes,
        duties=duties,
        hold_out=None if hold_out is None else HoldOut(hold_out.after, hold_out.specimens, hold_out.batches),
        sampler=SamplerSettings(sampler.chains, sampler.draws, sampler.tune, sampler.seed, sampler.target_accept),
        display=DisplayUnits(display.stress, display.time, display.temperature, display.strain),
    )
