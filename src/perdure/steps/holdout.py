"""Step: predicted against observed, for the readings that the fit never saw."""

from __future__ import annotations

import numpy as np

from perdure.border.store import finding_to_json, write_json, write_table
from perdure.checks.fitted import FittedStudy
from perdure.predictions.scores import inside, interval_score
from perdure.steps.model import load_fitted, load_posterior
from perdure.steps.runner import Place, run_step
from perdure.study.finding import Finding
from perdure.study.study import HoldOut

COLUMNS = (
    "record",
    "specimen",
    "batch",
    "time [s]",
    "observed",
    "unit",
    "median",
    "low50",
    "high50",
    "low90",
    "high90",
    "inside50",
    "inside90",
    "interval score 90",
    "records sha256",
)

CHECK = "hold-out"
# held-out readings hang together, so their share is a coarse measure: below these, chance is no excuse
ENOUGH = 0.8
HALF = 0.5


def said(hold_out: HoldOut | None) -> str:
    """What was held out, in words."""
    if hold_out is None:
        return "nothing"
    parts = []
    if hold_out.after is not None:
        parts.append(f"readings later than {hold_out.after:g} s")
    if hold_out.specimens:
        parts.append("specimens " + ", ".join(hold_out.specimens))
    if hold_out.batches:
        parts.append("batches " + ", ".join(hold_out.batches))
    return "; ".join(parts)


def evaluate(fitted: FittedStudy, sha256: str) -> tuple[list[tuple[object, ...]], dict[str, object]]:
    """Rows of holdout.csv and the summary over all of them."""
    p = fitted.predictive
    chosen = np.flatnonzero(p.held_out)
    inside50 = inside(p.observed, p.low50, p.high50)
    inside90 = inside(p.observed, p.low90, p.high90)
    score = interval_score(p.observed, p.low90, p.high90, 0.9)
    rows: list[tuple[object, ...]] = []
    for n in chosen:
        record = fitted.records.records[int(p.record[n])]
        rows.append(
            (
                record.name,
                record.specimen,
                record.batch,
                p.time[n],
                p.observed[n],
                "1" if record.normalised else "MPa",
                p.median[n],
                p.low50[n],
                p.high50[n],
                p.low90[n],
                p.high90[n],
                "yes" if inside50[n] else "no",
                "yes" if inside90[n] else "no",
                score[n],
                sha256,
            )
        )
    if chosen.size == 0:
        return rows, {}
    summary: dict[str, object] = {
        "readings": int(chosen.size),
        "coverage50": float(inside50[chosen].mean()),
        "coverage90": float(inside90[chosen].mean()),
        "interval score 90": float(score[chosen].mean()),
        "rows": said(fitted.study.hold_out),
    }
    return rows, summary


def coverage_finding(readings: int, coverage: float) -> Finding:
    """What the coverage of the 90 % bands over the held-out readings says of every band beyond the tests."""
    message = f"The 90 % bands hold {coverage:.0%} of the {readings} readings that the fit did not see"
    if coverage >= ENOUGH:
        return Finding(CHECK, "held-out readings", "pass", coverage, ENOUGH, "1", message + ".")
    return Finding(
        CHECK,
        "held-out readings",
        "fail" if coverage < HALF else "caution",
        coverage,
        ENOUGH,
        "1",
        message + ": what the law gets wrong is not in them, and bands beyond the tests are too narrow by as much.",
        "Test longer or at more conditions before a duty beyond the tests is judged, and do not rest a margin on these bands.",
    )


def run(place: Place) -> None:
    """Write holdout.csv and its summary; without a hold-out the table has a header alone."""
    fitted = load_fitted(place)
    rows, summary = evaluate(fitted, load_posterior(place).records_sha256)
    write_table(place.file("holdout.csv"), COLUMNS, rows)
    findings = [coverage_finding(len(rows), float(str(summary["coverage90"])))] if summary else []
    write_json(place.file("evidence/holdout.json"), {"findings": [finding_to_json(one) for one in findings], "summary": summary})


if __name__ == "__main__":
    raise SystemExit(run_step("holdout", run))
