"""Can the scatter between specimens be told apart from what testing itself adds?"""

from __future__ import annotations

from collections import Counter

from perdure.inference.priors import Layout
from perdure.study.finding import Finding
from perdure.study.records import RecordSet
from perdure.study.study import Study

NAME = "one record a specimen"


def check(records: RecordSet, _study: Study, _layout: Layout) -> list[Finding]:
    """Caution where no specimen was tested twice: scatter is then the total less the stated uncertainties."""
    number = Counter(record.specimen for record in records.records)
    repeated = sum(times > 1 for times in number.values())
    if repeated:
        message = f"{repeated} of {len(number)} specimens have more than one record, which shows what mounting and testing add to scatter."
    else:
        message = (
            "Each specimen has one record, so only the total variance between specimens is seen: scatter is what the stated "
            "uncertainties of area, length, mounting and calibration leave of it, and is wrong where they are."
        )
    return [
        Finding(
            check=NAME,
            subject="all specimens",
            outcome="pass" if repeated else "caution",
            value=float(repeated),
            threshold=1.0,
            unit="specimens",
            message=message,
            remedy="" if repeated else "Take some specimens out, mount them again and repeat the test after full recovery.",
        )
    ]
