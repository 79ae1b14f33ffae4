"""Whether a row of the register and its instrument say enough, and not too much, to turn an export into a record."""

from __future__ import annotations

from perdure.border.instruments import InstrumentDeclaration
from perdure.border.register import COLUMNS, RegisterRow
from perdure.errors import Problem, problem
from perdure.study.methods import METHODS


def _needed(row: RegisterRow, column: str, why: str) -> Problem:
    return problem(row.place(column), "an empty cell", f"a value: {why}", f"Fill it in: {COLUMNS[column].about}")


def _unwanted(row: RegisterRow, column: str, why: str) -> Problem:
    return problem(row.place(column), "a value", f"an empty cell: {why}", "Remove it, or correct the instrument's columns.")


def row_faults(row: RegisterRow, instrument: InstrumentDeclaration) -> list[Problem]:
    """Everything that is missing or contradicts the instrument's columns, without opening the export."""
    problems: list[Problem] = []
    observed, columns = instrument.observed, instrument.columns
    export = f'the export of "{instrument.name}" holds'
    if observed == "force" and row.area is None:
        problems.append(_needed(row, "area", f"{export} a force"))
    if "displacement" in columns and row.length is None:
        problems.append(_needed(row, "length", f"{export} a displacement"))
    if observed != "force":
        given = (("zero", row.zero), ("preload", row.preload))
        problems.extend(_unwanted(row, column, f"{export} no force") for column, value in given if value is not None)
    if instrument.normalised and row.reference is None:
        problems.append(_needed(row, "reference", f"{export} a normalised response"))
    if not instrument.normalised and row.reference is not None:
        problems.append(_unwanted(row, "reference", f"{export} an absolute response"))
    if row.sense == "shear" and row.shape_factor is not None:
        problems.append(_unwanted(row, "shape factor", "it applies to tension and compression"))
    problems.extend(_start_faults(row, instrument, has_drive="strain" in columns or "displacement" in columns))
    return problems


def _start_faults(row: RegisterRow, instrument: InstrumentDeclaration, *, has_drive: bool) -> list[Problem]:
    """What a record that starts after its ramp must say, and what others must not."""
    problems: list[Problem] = []
    if row.ramp is None:
        if row.strain is not None:
            problems.append(_unwanted(row, "strain", "it belongs to records that start after the ramp, and no ramp is given"))
        if not has_drive:
            why = "the export holds neither strain nor displacement, so the record must start after a ramp"
            problems.append(_needed(row, "ramp", why))
        return problems
    if not METHODS[row.method].late_start:
        problems.append(_unwanted(row, "ramp", f"a record of the method {row.method} starts at rest"))
    if row.preload is not None:
        problems.append(_unwanted(row, "preload", "the record starts after the ramp"))
    if has_drive and row.strain is not None:
        problems.append(_unwanted(row, "strain", "the export holds the strain itself"))
    if not has_drive and row.strain is None and not instrument.normalised:
        problems.append(_needed(row, "strain", "the export holds none"))
    if row.strain is not None and (row.strain == 0 or (row.strain < 0 and row.sense == "tension")):
        problems.append(
            problem(row.place("strain"), f"{row.strain:g} in {row.sense}", "a strain above zero", "Write the magnitude of the strain held.")
        )
    if row.reference is not None and row.reference < row.ramp:
        problems.append(
            problem(
                row.place("reference"), f"{row.reference:g} s", f"not before the end of the ramp, {row.ramp:g} s", "Correct one of the two."
            )
        )
    return problems
