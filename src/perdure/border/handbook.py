"""The handbook: prior ranges by family of materials, shipped in ``config/handbook`` and added to by a study's ``handbook``."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from pathlib import Path

from pydantic import ValidationError

from perdure.border.model_problems import did_you_mean, problems_of
from perdure.border.shipped import shipped
from perdure.border.study_models import HandbookSection, RangeSection
from perdure.border.units import Dimension, parse_quantity
from perdure.border.yaml_file import YamlFile, read_yaml
from perdure.errors import Problem, StudyError, problem
from perdure.inference.priors import QUANTITIES
from perdure.study.study import PriorRange

_DIMENSIONS: Mapping[str, Dimension] = {"MPa": Dimension.STRESS, "1": Dimension.RATIO}


@dataclass(frozen=True, slots=True)
class Family:
    """One family of materials.

    Attributes:
        name: as study.yaml uses it.
        about: what belongs to it.
        ranges: one a quantity that the family knows.
        file: where it is written, for messages.
    """

    name: str
    about: str
    ranges: tuple[PriorRange, ...]
    file: str


def dimension_of(quantity: str) -> Dimension:
    """What the prior ``quantity``, a key of :data:`perdure.inference.priors.QUANTITIES`, measures."""
    return _DIMENSIONS[QUANTITIES[quantity].unit]


def ranges_of(sections: Mapping[str, RangeSection], file: YamlFile, key: str, origin: str) -> tuple[tuple[PriorRange, ...], list[Problem]]:
    """The ranges below ``key`` of ``file`` in internal units, and everything that is wrong with them."""
    ranges: list[PriorRange] = []
    problems: list[Problem] = []
    for quantity, section in sections.items():
        where = file.where((key, quantity))
        if quantity not in QUANTITIES:
            problems.append(problem(where, f'the quantity "{quantity}"', "a known quantity", did_you_mean(quantity, list(QUANTITIES))))
            continue
        ends: list[float] = []
        for name, text in (("low", section.low), ("high", section.high)):
            try:
                # a bare zero needs no unit
                zero = text.strip() in ("0", "0.0")
                ends.append(0.0 if zero else parse_quantity(text, dimension_of(quantity), file.where((key, quantity, name))))
            except StudyError as error:
                problems.extend(error.problems)
        if len(ends) < 2:
            continue
        scatter = QUANTITIES[quantity].family == "half-normal"
        if scatter and not (ends[0] == 0 < ends[1]):
            problems.append(
                problem(where, f"{section.low} to {section.high}", "low: 0 and a high end above it", "A scatter states its upper end only.")
            )
        elif not scatter and not 0 < ends[0] < ends[1]:
            problems.append(problem(where, f"{section.low} to {section.high}", "0 < low < high", "Exchange the ends or correct them."))
        else:
            ranges.append(PriorRange(quantity, ends[0], ends[1], section.coverage, section.source, origin))
    return tuple(ranges), problems


def read_family(path: Path, name: str) -> Family:
    """The family in ``path``, called ``name`` in messages.

    Raises:
        StudyError: with everything that is wrong with the file.
    """
    file = read_yaml(path, name)
    try:
        section = HandbookSection.model_validate(file.content)
    except ValidationError as error:
        raise StudyError(problems_of(error, file, HandbookSection)) from None
    ranges, problems = ranges_of(section.ranges, file, "ranges", f"handbook {section.family}")
    if problems:
        raise StudyError(problems)
    return Family(section.family, section.about, ranges, name)


def shipped_families() -> dict[str, Family]:
    """Every family that ships with the tool, by name."""
    paths = sorted((shipped("config") / "handbook").glob("*.yaml"))
    families = [read_family(path, f"shipped handbook/{path.name}") for path in paths]
    return {family.name: family for family in families}


def read_handbook(folder: Path) -> tuple[dict[str, Family], list[Problem]]:
    """Shipped families and those of the study in ``folder``; a study's family replaces a shipped one of the same name."""
    families = shipped_families()
    problems: list[Problem] = []
    own: dict[str, str] = {}
    for path in sorted((folder / "handbook").glob("*.y*ml")):
        name = f"handbook/{path.name}"
        try:
            family = read_family(path, name)
        except StudyError as error:
            problems.extend(error.problems)
            continue
        if family.name in own:
            problems.append(
                problem(
                    f"{name}, key family", f'"{family.name}"', f"another name than in {own[family.name]}", "Rename or merge one of them."
                )
            )
        own[family.name] = name
        families[family.name] = family
    return families, problems


def choose_priors(family: Family, own: tuple[PriorRange, ...], where: str) -> tuple[tuple[PriorRange, ...], list[Problem]]:
    """The ranges of a study: those of ``family`` with the user's ``own`` in their place, in the order of QUANTITIES."""
    chosen = {item.quantity: item for item in (*family.ranges, *own)}
    missing = [quantity for quantity in QUANTITIES if quantity not in chosen]
    problems = [
        problem(
            where,
            f'no range for "{quantity}"',
            f"a range in {family.file} or under priors",
            f'Add "{quantity}" under priors with low, high and source.',
        )
        for quantity in missing
    ]
    return tuple(chosen[quantity] for quantity in QUANTITIES if quantity in chosen), problems
