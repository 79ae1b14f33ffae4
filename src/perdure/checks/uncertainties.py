"""Are the uncertainties that readings share declared at all?"""

from __future__ import annotations

from perdure.checks.words import listed
from perdure.inference.priors import Layout
from perdure.study.finding import Finding
from perdure.study.records import RecordSet
from perdure.study.study import Study

NAME = "declared uncertainties"


def _instruments(records: RecordSet) -> list[Finding]:
    # calibration drops out of a normalised response
    used = {record.instrument for record in records.records if not record.normalised}
    return [
        Finding(
            check=NAME,
            subject=instrument.name,
            outcome="caution",
            value=0.0,
            threshold=None,
            unit="",
            message=(
                f'Instrument "{instrument.name}" declares no standard uncertainty of force or strain: '
                "what its calibration adds counts as scatter of the material, or goes unseen where it is common to all."
            ),
            remedy="State the standard uncertainties of the calibration certificate under instruments in study.yaml.",
        )
        for instrument in records.instruments
        if instrument.name in used and instrument.u_force == 0 and instrument.u_strain == 0 and not instrument.has_compliance
    ]


def _specimens(records: RecordSet) -> list[Finding]:
    none = {
        name: all(
            record.uncertainty.area == 0 and record.uncertainty.length == 0 and record.uncertainty.mounting == 0
            for record in records.records
            if record.specimen == name and not record.normalised
        )
        for name in dict.fromkeys(record.specimen for record in records.records if not record.normalised)
    }
    names = [name for name, missing in none.items() if missing]
    if not names:
        return []
    return [
        Finding(
            check=NAME,
            subject="dimensions and mounting",
            outcome="caution",
            value=float(len(names)),
            threshold=0.0,
            unit="specimens",
            message=f"No uncertainty of area, length or mounting is declared for {listed(names)}: it counts as scatter of the material.",
            remedy="State the standard uncertainties of area, length and mounting in the register.",
        )
    ]


def _references(records: RecordSet) -> list[Finding]:
    names = [record.name for record in records.records if record.normalised and record.uncertainty.reference == 0]
    if not names:
        return []
    return [
        Finding(
            check=NAME,
            subject="reference readings",
            outcome="caution",
            value=float(len(names)),
            threshold=0.0,
            unit="records",
            message=(
                f"No uncertainty of the reference reading is declared for {listed(names)}: "
                "its error, common to all readings of a record, counts as scatter of the material."
            ),
            remedy="State the standard uncertainty of the reference reading in the register.",
        )
    ]


def check(records: RecordSet, _study: Study, _layout: Layout) -> list[Finding]:
    """Caution for instruments, specimens and reference readings whose uncertainties are all 0, that is, not declared."""
    found = [*_instruments(records), *_specimens(records), *_references(records)]
    if found:
        return found
    return [
        Finding(
            check=NAME,
            subject="all records",
            outcome="pass",
            value=None,
            threshold=None,
            unit="",
            message="Uncertainties of calibration, dimensions, mounting or reference readings are declared wherever they matter.",
        )
    ]
