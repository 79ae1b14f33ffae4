"""Intake: a study folder becomes records in consistent units, with a log of everything done on the way."""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from dataclasses import dataclass, replace
from pathlib import Path

import numpy as np

from perdure.border.channels import BuildLog
from perdure.border.duties import duty_problems
from perdure.border.instruments import InstrumentDeclaration, NoiseRange
from perdure.border.readers import READERS
from perdure.border.record_builder import build_record
from perdure.border.record_rows import row_faults
from perdure.border.register import RegisterRow
from perdure.border.store import sha256_of
from perdure.border.study_file import Draft, draft_study
from perdure.border.units import Dimension
from perdure.errors import Problem, ResultError, StudyError, problem
from perdure.study.records import Instrument, Record, RecordSet
from perdure.study.study import PriorRange, Study

_NOISE = ("noise absolute share", "noise relative")
INTAKE_COLUMNS = (
    "row",
    "record",
    "specimen",
    "batch",
    "method",
    "instrument",
    "file",
    "status",
    "readings",
    "missing",
    "used",
    "reason",
    "conversions",
    "sha256",
)


@dataclass(frozen=True, slots=True)
class IntakeRow:
    """One line of ``intake.csv``: a row of the register, or a file that no row names.

    Attributes:
        row: line of the register; None for a file.
        status: "accepted", "left out" (the user's reason), "refused" (ours) or "file".
        readings: raw readings with a time; None where the export wasn't read.
        missing: of these without a response.
        used: readings of the record after thinning.
        reason: why left out or refused.
        conversions: everything done to the numbers.
        sha256: of the export, "" where it can't be read.
    """

    row: int | None
    record: str
    specimen: str
    batch: str
    method: str
    instrument: str
    file: str
    status: str
    readings: int | None
    missing: int | None
    used: int | None
    reason: str
    conversions: tuple[str, ...]
    sha256: str

    def cells(self) -> tuple[object, ...]:
        """Entries in the order of :data:`INTAKE_COLUMNS`."""
        return (
            self.row,
            self.record,
            self.specimen,
            self.batch,
            self.method,
            self.instrument,
            self.file,
            self.status,
            self.readings,
            self.missing,
            self.used,
            self.reason,
            "; ".join(self.conversions),
            self.sha256,
        )


@dataclass(frozen=True, slots=True, eq=False)
class Intake:
    """A study that was taken in.

    Attributes:
        record_set: accepted records with their instruments.
        study: everything but the readings.
        log: one entry a row of the register, then one a file that no row names.
    """

    record_set: RecordSet
    study: Study
    log: tuple[IntakeRow, ...]


@dataclass(frozen=True, slots=True, eq=False)
class Examination:
    """What an intake found, whether or not the study can be used.

    Attributes:
        intake: None where there are problems.
        log: as of :class:`Intake`, with refused rows.
        problems: empty for a study that can be used.
    """

    intake: Intake | None
    log: tuple[IntakeRow, ...]
    problems: tuple[Problem, ...]


def take_in(folder: Path) -> Intake:
    """Read a study folder whole.

    Raises:
        StudyError: with every problem of the folder, found in one pass.
    """
    found = examine(folder)
    if found.intake is None:
        raise StudyError(found.problems)
    return found.intake


def examine(folder: Path) -> Examination:
    """As :func:`take_in`, without raising: the log is complete even where records are refused."""
    draft = draft_study(folder)
    problems = list(draft.problems)
    records: list[Record] = []
    log = [_log(row, "refused", reason, "") for row, reason in draft.register.refused]
    claimed: dict[tuple[str, int], RegisterRow] = {}
    for row in draft.register.rows:
        digest = _digest(folder / "records" / row.file)
        if not row.use:
            log.append(_log(row, "left out", row.reason, digest))
            continue
        record, entry, faults = _take_row(row, draft, digest, claimed)
        problems.extend(faults)
        log.append(entry)
        if record is not None:
            records.append(record)
    log.sort(key=lambda entry: entry.row or 0)
    names = {row.file for row in draft.register.rows} | {row.file for row, _ in draft.register.refused}
    log.extend(_unnamed_files(folder, names))
    record_set = _record_set(draft, records)
    if draft.study is not None and not any(entry.status == "refused" for entry in log):
        # with a refused record they would speak of another study than the user's
        problems.extend(_record_problems(draft.study, record_set))
    problems = list(dict.fromkeys(problems))
    if problems or draft.study is None:
        return Examination(None, tuple(log), tuple(problems))
    return Examination(Intake(record_set, draft.study, tuple(log)), tuple(log), ())


def _record_set(draft: Draft, records: list[Record]) -> RecordSet:
    """The records with their instruments, in order of first appearance."""
    priors = {prior.quantity: prior for prior in draft.study.priors} if draft.study is not None else {}
    if any(quantity not in priors for quantity in _NOISE):
        return RecordSet(tuple(records), ())
    rows = {row.record: row for row in draft.register.rows}
    names = dict.fromkeys(record.instrument for record in records)
    return RecordSet(tuple(records), tuple(_instrument(draft.instruments[name], priors, records, rows) for name in names))


def _take_row(
    row: RegisterRow, draft: Draft, digest: str, claimed: dict[tuple[str, int], RegisterRow]
) -> tuple[Record | None, IntakeRow, list[Problem]]:
    instrument = draft.instruments.get(row.instrument)
    if instrument is None:
        return None, _log(row, "refused", "its instrument is not declared as it should be", digest), []
    faults = row_faults(row, instrument)
    if faults:
        return None, _log(row, "refused", _reasons(faults), digest), faults
    label = f"records/{row.file}"
    hold_out = draft.study.hold_out if draft.study is not None else None
    try:
        reader = READERS[instrument.reader]
        path = draft.folder / "records" / row.file
        raw = reader.read(path, label, instrument.columns, row.where, instrument.settings)
        record, built = build_record(row, instrument, raw, digest, hold_out)
    except StudyError as error:
        return None, _log(row, "refused", _reasons(error.problems), digest), list(error.problems)
    shared = _claim(row, built, claimed)
    if shared:
        return None, _log(row, "refused", _reasons(shared), digest), shared
    entry = replace(
        _log(row, "accepted", row.reason, digest),
        readings=built.readings,
        missing=built.missing,
        used=int(record.time.size),
        conversions=tuple(built.conversions),
    )
    return record, entry, []


def _claim(row: RegisterRow, built: BuildLog, claimed: dict[tuple[str, int], RegisterRow]) -> list[Problem]:
    """Refuse readings that another record already has: they would count twice."""
    keys = [(row.file, line) for line in built.rows]
    taken = [key for key in keys if key in claimed]
    if taken:
        other = claimed[taken[0]]
        return [
            problem(
                row.place("where"),
                f'{len(taken)} readings of records/{row.file} that record "{other.record}" (row {other.row}) has already',
                "readings that belong to one record",
                'Select its own rows under "where", or set from and until apart.',
            )
        ]
    claimed.update(dict.fromkeys(keys, row))
    return []


def _reasons(problems: Iterable[Problem]) -> str:
    return "; ".join(f"{item.got} ({item.where})" for item in problems)


def _log(row: RegisterRow, status: str, reason: str, digest: str) -> IntakeRow:
    return IntakeRow(
        row.row,
        row.record,
        row.specimen,
        row.batch,
        row.method,
        row.instrument,
        f"records/{row.file}",
        status,
        None,
        None,
        None,
        reason,
        (),
        digest,
    )


def _digest(path: Path) -> str:
    try:
        return sha256_of(path)
    except ResultError:
        # only a record that is left out may lack its file; others were refused before
        return ""


def _unnamed_files(folder: Path, named: set[str]) -> list[IntakeRow]:
    """Files below ``records/`` that no row of the register names."""
    root = folder / "records"
    entries = []
    for path in sorted(root.rglob("*")):
        name = path.relative_to(root).as_posix()
        if path.is_file() and not path.is_symlink() and name not in named:
            reason = "no row of the register names it"
            entries.append(IntakeRow(None, "", "", "", "", "", f"records/{name}", "file", None, None, None, reason, (), _digest(path)))
    return entries


def _record_problems(study: Study, record_set: RecordSet) -> list[Problem]:
    """What can only be said with all records at hand."""
    records = record_set.records
    if not records:
        # the register or the instruments are to blame, and said so
        return []
    if all(record.held_out.all() for record in records):
        remedy = "Hold fewer readings out: some must be left to fit."
        return [problem("study.yaml, key hold out", "every reading held out", "readings to fit", remedy)]
    return duty_problems(study, record_set)


def _instrument(
    declaration: InstrumentDeclaration, priors: Mapping[str, PriorRange], records: list[Record], rows: Mapping[str, RegisterRow]
) -> Instrument:
    own = [record for record in records if record.instrument == declaration.name]
    relative = declaration.noise_relative
    return Instrument(
        name=declaration.name,
        u_force=declaration.u_force,
        u_strain=declaration.u_strain,
        has_compliance=declaration.crosshead and declaration.u_frame_compliance > 0,
        u_temperature=declaration.u_temperature,
        noise_absolute=_noise_absolute(declaration.noise_absolute, priors["noise absolute share"], own, rows),
        noise_relative=(relative.low, relative.high) if relative is not None else _ends(priors["noise relative"]),
    )


def _ends(prior: PriorRange) -> tuple[float, float]:
    return prior.low, prior.high


def _noise_absolute(
    declared: NoiseRange | None, share: PriorRange, records: list[Record], rows: Mapping[str, RegisterRow]
) -> tuple[float, float]:
    """Range of the absolute noise in the unit of the response: as declared, or the handbook's share of the median peak."""
    if declared is None:
        peak = float(np.median([np.abs(record.response).max() for record in records]))
        return share.low * peak, share.high * peak
    if declared.dimension is not Dimension.FORCE:
        return declared.low, declared.high
    # a force spreads over the area, and a shape factor divides the stress
    areas = []
    for record in records:
        row = rows[record.name]
        areas.append((row.area or 1.0) * (1 + 2 * (row.shape_factor or 0.0) ** 2))
    typical = float(np.median(areas))
    return declared.low / typical, declared.high / typical
