"""Duties: from the keys of ``study.yaml`` to histories and limits, and what only the records can tell about them."""

from __future__ import annotations

import math
from pathlib import Path

import numpy as np
from numpy.typing import NDArray

from perdure.border.csv_file import read_csv, split_heading
from perdure.border.study_models import DutySection, LimitSection
from perdure.border.units import Dimension, convert, parse_quantity
from perdure.border.yaml_file import YamlFile
from perdure.errors import Problem, StudyError, problem
from perdure.inference.priors import DEFAULT_HORIZON_FACTOR, resolved_times
from perdure.rheology.clock import CLOCKS
from perdure.rheology.history import History
from perdure.study.duty import Duty, Limit
from perdure.study.records import RecordSet
from perdure.study.study import Study

Array = NDArray[np.float64]
# a time that a limit names may miss the end of its history by rounding of units
_ROUNDING = 1e-9
_YEAR = 31_557_600.0
DECLARED_HORIZON = "the horizon that study.yaml declares"


def build_duty(section: DutySection, name: str, file: YamlFile, folder: Path) -> tuple[Duty | None, list[Problem]]:
    """The duty ``name``, or None, with everything that is wrong with it."""
    path = ("duties", name)
    problems: list[Problem] = []
    if section.history is not None:
        time, strain = _from_steps(section)
        where = file.where((*path, "history"))
    else:
        where = f"histories/{str(section.history_file).removeprefix('histories/')}"
        try:
            time, strain = _from_file(folder, str(section.history_file), file.where((*path, "history file")))
        except StudyError as error:
            return None, list(error.problems)
    if section.sense != "shear" and (strain < 0).any():
        magnitude = "compression is entered as a magnitude" if section.sense == "compression" else "tension is positive"
        problems.append(problem(where, f"a strain of {strain.min():g}", f"no negative strain: {magnitude}", "Leave the sign out."))
    if not (strain != 0).any():
        problems.append(problem(where, "a strain of zero throughout", "a strain", "Begin with a ramp to the strain of the part."))
    if problems:
        return None, problems
    history = History(time, 0.0 - strain if section.sense == "compression" else strain)
    limits: list[Limit] = []
    for limit_name, limit_section in section.limits.items():
        limit, faults = _limit(limit_section, limit_name, section, history, file, (*path, "limits", limit_name))
        problems.extend(faults)
        if limit is not None:
            limits.append(limit)
    if problems:
        return None, problems
    return Duty(name, section.about.strip(), history, section.sense, section.temperature, section.state, tuple(limits)), []


def _from_steps(section: DutySection) -> tuple[Array, Array]:
    time, strain = [0.0], [0.0]
    for step in section.history or ():
        if step.ramp is not None:
            time.append(time[-1] + step.ramp.over)
            strain.append(step.ramp.to)
        elif step.hold is not None:
            time.append(time[-1] + step.hold.for_)
            strain.append(strain[-1])
    return np.array(time), np.array(strain)


def _from_file(folder: Path, given: str, where_key: str) -> tuple[Array, Array]:
    root = (folder / "histories").resolve()
    name = given.removeprefix("histories/")
    path = (root / name).resolve()
    if not path.is_relative_to(root) or not path.is_file():
        raise StudyError([problem(where_key, f'"{given}"', "a file in histories/", "Put the history there and name it.")])
    where = f"histories/{name}"
    table = read_csv(path, where)
    wanted = {"time": Dimension.TIME, "strain": Dimension.RATIO}
    problems: list[Problem] = []
    found: dict[str, Array] = {}
    for index, heading in enumerate(table.header):
        word, unit = split_heading(heading)
        if word not in wanted or word in found:
            problems.append(
                problem(f'{where}, row {table.header_row}, column "{heading}"', f'"{heading}"', "time and strain, once each", "Remove it.")
            )
            continue
        values = []
        for row, cells in table.rows:
            number = _number(cells[index])
            if number is None:
                place = f'{where}, row {row}, column "{heading}"'
                problems.append(problem(place, f'"{cells[index]}"', "a number", "Write a number with a decimal point."))
            else:
                values.append(number)
        try:
            factor_unit = unit or ("1" if word == "strain" else "")
            found[word] = convert(np.array(values), factor_unit, wanted[word], f'{where}, column "{heading}"')
        except StudyError as error:
            problems.extend(error.problems)
    problems.extend(
        problem(f"{where}, row {table.header_row}", f"no column {word}", f"a column such as {word} [{unit}]", "Add it.")
        for word, unit in (("time", "h"), ("strain", "%"))
        if not any(split_heading(heading)[0] == word for heading in table.header)
    )
    if not problems:
        problems.extend(_history_faults(found["time"], found["strain"], [row for row, _ in table.rows], where))
    if problems:
        raise StudyError(problems)
    return found["time"], found["strain"]


def _number(text: str) -> float | None:
    try:
        number = float(text)
    except ValueError:
        return None
    return number if math.isfinite(number) else None


def _history_faults(time: Array, strain: Array, rows: list[int], where: str) -> list[Problem]:
    if time.size < 2:
        return [problem(where, f"{time.size} rows", "two rows or more", "Describe the history from rest to its end.")]
    faults = []
    if time[0] != 0 or strain[0] != 0:
        faults.append(
            problem(f"{where}, row {rows[0]}", f"time {time[0]:g}, strain {strain[0]:g}", "0 and 0", "Begin at rest with the row 0,0.")
        )
    remedy = "A step is a short ramp: give it time."
    faults.extend(
        problem(f"{where}, row {rows[index + 1]}", "a time that doesn't grow", "increasing times", remedy)
        for index in np.flatnonzero(np.diff(time) <= 0)
    )
    return faults


def _limit(
    section: LimitSection, name: str, duty: DutySection, history: History, file: YamlFile, path: tuple[str, ...]
) -> tuple[Limit | None, list[Problem]]:
    kind = "at least" if section.at_least is not None else "at most"
    text = section.at_least if section.at_least is not None else section.at_most
    dimension = Dimension.STRESS if section.quantity == "stress" else Dimension.RATIO
    problems: list[Problem] = []
    value = 0.0
    where = file.where((*path, kind))
    try:
        value = parse_quantity(str(text), dimension, where)
        if value <= 0:
            sign = "a magnitude above zero" if duty.sense == "compression" else "a value above zero"
            problems.append(
                problem(where, f'"{text}" in a duty in {duty.sense}', f"{sign}: the sense gives the sign", "Leave the sign out.")
            )
    except StudyError as error:
        fault = error.problems[0]
        hint = "For a ratio add quantity: retained and reference: 1 h." if dimension is Dimension.STRESS else fault.remedy
        problems.append(problem(where, fault.got, fault.expected, hint))
    end_of_history = history.duration
    start = section.at if section.at is not None else section.from_
    end = section.at if section.at is not None else (section.until if section.until is not None else end_of_history)
    if start is None or end is None:  # excluded by the model; says so to the type checker
        return None, problems
    for key, time in (("at", section.at), ("from", section.from_), ("until", section.until), ("reference", section.reference)):
        if time is not None and time > end_of_history * (1 + _ROUNDING):
            problems.append(
                problem(
                    file.where((*path, key)),
                    f"{time:g} s",
                    f"a time within the history, which ends at {end_of_history:g} s",
                    "Lengthen the last hold, or choose an earlier time.",
                )
            )
    if section.reference is not None and float(history.at(np.array(section.reference))) == 0:
        problems.append(
            problem(
                file.where((*path, "reference")), "a reference time at which the strain is 0", "a time under strain", "Choose a later one."
            )
        )
    if start >= end and section.at is None:
        problems.append(
            problem(file.where((*path, "from")), f"{start:g} s", f"earlier than the end, {end:g} s", "Choose an earlier start.")
        )
    if problems:
        return None, problems
    start, end = min(start, end_of_history), min(end, end_of_history)
    limit = Limit(
        name=name,
        kind="at least" if section.at_least is not None else "at most",
        quantity=section.quantity,
        value=value,
        start=start,
        end=end,
        share=section.required_share,
        confidence=section.confidence,
        reference=section.reference,
    )
    return limit, []


def horizon_problems(study: Study, horizon: float, stated: str) -> list[Problem]:
    """Duties that end beyond ``horizon`` (s of reduced time), with the key to change; ``stated`` says where it comes from."""
    problems: list[Problem] = []
    clock = CLOCKS[study.clock]
    for duty in study.duties:
        shift = float(np.exp(clock.log_shift(np.array(duty.temperature))))
        reduced = duty.history.duration / shift
        if reduced > horizon * (1 + 1e-6):
            years = math.ceil(reduced / _YEAR * 1e3) / 1e3
            problems.append(
                problem(
                    f"study.yaml, key duties > {duty.name} > history",
                    f"{reduced:.4g} s of reduced time ({reduced / _YEAR:.3g} a)",
                    f"at most {horizon:.4g} s ({horizon / _YEAR:.3g} a): {stated}",
                    f'Set the key "horizon" to {years:g} a or more; the fit is then made anew.',
                )
            )
    return problems


def duty_problems(study: Study, records: RecordSet) -> list[Problem]:
    """What the records say against the duties: times beyond the horizon, and limits in MPa without any absolute stress."""
    if study.horizon is not None:
        problems = horizon_problems(study, study.horizon, DECLARED_HORIZON)
    else:
        horizon = DEFAULT_HORIZON_FACTOR * resolved_times(records)[1]
        problems = horizon_problems(study, horizon, f"{DEFAULT_HORIZON_FACTOR:g} times the longest fitted record")
    if not all(record.normalised for record in records.records):
        return problems
    problems.extend(
        problem(
            f"study.yaml, key duties > {duty.name} > limits > {limit.name}",
            f"a limit of {limit.value:g} MPa, while every record is normalised",
            "a limit on the share of stress retained",
            "Write quantity: retained with a reference time, or add a record in MPa.",
        )
        for duty in study.duties
        for limit in duty.limits
        if limit.quantity == "stress"
    )
    return problems


def check_duties(study: Study, records: RecordSet) -> None:
    """Refuse duties that the records can't carry.

    Raises:
        StudyError: with every such duty and the key to change.
    """
    problems = duty_problems(study, records)
    if problems:
        raise StudyError(problems)
