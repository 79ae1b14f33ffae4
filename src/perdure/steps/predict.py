"""Step: predict every duty at every level; shares, bounds and verdicts."""

from __future__ import annotations

from collections.abc import Iterable

import numpy as np
import xarray as xr

from perdure.border.duties import check_duties
from perdure.border.posterior_file import PosteriorFile
from perdure.border.store import atomic_path, read_records, write_findings, write_table
from perdure.border.study_file import load_study
from perdure.predictions.draws import PosteriorDraws
from perdure.predictions.margins import Margin, margin
from perdure.predictions.response import COVERAGES, Band, band
from perdure.steps.model import load_posterior
from perdure.steps.runner import Place, need, run_step
from perdure.study.duty import Duty
from perdure.study.finding import Finding

BAND_COLUMNS = (
    "duty",
    "level",
    "subject",
    "time [s]",
    "strain",
    "kind",
    "median [MPa]",
    "low50 [MPa]",
    "high50 [MPa]",
    "low90 [MPa]",
    "high90 [MPa]",
    "released",
    "records sha256",
)
MARGIN_COLUMNS = (
    "duty",
    "limit",
    "kind",
    "quantity",
    "level",
    "subject",
    "limit value",
    "unit",
    "start [s]",
    "end [s]",
    "required share",
    "confidence",
    "share mean",
    "share low",
    "share high",
    "probability",
    "probability mcse",
    "bound",
    "difference",
    "ratio",
    "median response",
    "verdict",
    "released",
    "records sha256",
)
BAND_DRAWS = 1000
# margins look at few moments: begin with these draws, and take all where the Monte Carlo error is too large for a verdict
MARGIN_DRAWS = 1000
CHECK = "monte carlo error"


def _margins(posterior: PosteriorDraws, duty: Duty, seed: int) -> list[Margin]:
    few = posterior.thinned(MARGIN_DRAWS)
    out = []
    for limit in duty.limits:
        for subject in posterior.subjects():
            found = margin(few, duty, limit, subject, seed)
            if not found.settled:
                found = margin(posterior, duty, limit, subject, seed + 1)
            out.append(found)
    return out


def _finding(found: Margin) -> Finding:
    subject = f"{found.duty}, {found.limit.name}, {found.subject.level} {found.subject.name}".strip()
    threshold = found.limit.confidence if found.probability > 0.5 else 1.0 - found.limit.confidence
    if found.settled:
        return Finding(
            CHECK,
            subject,
            "pass",
            found.probability_error,
            None,
            "1",
            f"The probability {found.probability:.3f} is known to {found.probability_error:.2g}, "
            "small against its distance from a verdict.",
        )
    return Finding(
        CHECK,
        subject,
        "fail",
        found.probability,
        threshold,
        "1",
        f"The probability {found.probability:.3f} lies within two Monte Carlo errors of {threshold:g}, so the draws decide nothing.",
        "Raise sampler: draws in study.yaml and run again.",
        blocking=True,
    )


def _margin_row(found: Margin, sha256: str, *, released: bool) -> tuple[object, ...]:
    limit = found.limit
    numbers: tuple[object, ...] = ("",) * 9
    if released:
        numbers = (
            found.share_mean,
            found.share_low,
            found.share_high,
            found.probability,
            found.probability_error,
            found.bound,
            found.difference,
            found.ratio,
            found.median,
        )
    return (
        found.duty,
        limit.name,
        limit.kind,
        limit.quantity,
        found.subject.level,
        found.subject.name,
        limit.value,
        "MPa" if limit.quantity == "stress" else "1",
        limit.start,
        limit.end,
        limit.share,
        limit.confidence,
        *numbers,
        found.verdict if released else "not released",
        "yes" if released else "no",
        sha256,
    )


def _band_rows(duty: Duty, bands: Iterable[Band], sha256: str, *, released: bool) -> list[tuple[object, ...]]:
    return [
        (
            duty.name,
            one.subject.level,
            one.subject.name,
            one.time[t],
            one.strain[t],
            one.kind,
            one.median[t],
            one.low[0, t],
            one.high[0, t],
            one.low[1, t],
            one.high[1, t],
            "yes" if released else "no",
            sha256,
        )
        for one in bands
        for t in range(one.time.size)
    ]


def _dataset(bands: list[Band], margins: list[Margin], *, released: bool) -> xr.Dataset:
    subjects = [f"{one.subject.level}|{one.subject.name}" for one in bands]
    edges = {"unit": "MPa", "about": "tension positive; magnitudes in a compression duty"}
    found = [(one.limit.name, f"{one.subject.level}|{one.subject.name}") for one in margins]
    hidden = np.nan if not released else 1.0
    return xr.Dataset(
        {
            "median": (("subject", "time"), np.stack([one.median for one in bands]), edges),
            "low": (("subject", "coverage", "time"), np.stack([one.low for one in bands]), edges),
            "high": (("subject", "coverage", "time"), np.stack([one.high for one in bands]), edges),
            "share_mean": (("margin",), hidden * np.array([one.share_mean for one in margins]), {"unit": "1"}),
            "probability": (("margin",), hidden * np.array([one.probability for one in margins]), {"unit": "1"}),
            "bound": (("margin",), hidden * np.array([one.bound for one in margins]), {"unit": "MPa or 1"}),
        },
        coords={
            "subject": subjects,
            "time": ("time", bands[0].time, {"unit": "s"}),
            "coverage": list(COVERAGES),
            "limit": ("margin", [limit for limit, _ in found]),
            "margin_subject": ("margin", [subject for _, subject in found]),
        },
        attrs={"released": "yes" if released else "no"},
    )


def _write_predictions(place: Place, groups: dict[str, xr.Dataset], posterior: PosteriorFile) -> None:
    root = xr.Dataset(attrs={"duties": list(groups), "records sha256": posterior.records_sha256})
    # a duty's name may hold what a path of groups may not
    tree = xr.DataTree.from_dict(
        {"/": root, **{f"duty_{number}": data.assign_attrs(duty=name) for number, (name, data) in enumerate(groups.items())}}
    )
    with atomic_path(place.file("predictions.nc")) as temporary:
        tree.to_netcdf(temporary, engine="h5netcdf")


def run(place: Place) -> None:
    """Write predictions.nc, bands.csv, margins.csv and the findings on Monte Carlo error."""
    study, posterior = load_study(place.study).study, load_posterior(place)
    # a duty may have changed since the intake looked at it
    check_duties(study, read_records(need(place.file("records.nc"), "intake")))
    band_rows: list[tuple[object, ...]] = []
    margin_rows: list[tuple[object, ...]] = []
    findings: list[Finding] = []
    groups: dict[str, xr.Dataset] = {}
    thinned = posterior.draws.thinned(BAND_DRAWS)
    sha256 = posterior.records_sha256
    for number, duty in enumerate(study.duties):
        seed = study.sampler.seed + 100 * number
        bands = [band(thinned, duty, subject, seed) for subject in thinned.subjects()]
        margins = _margins(posterior.draws, duty, seed)
        band_rows += _band_rows(duty, bands, sha256, released=posterior.released)
        margin_rows += [_margin_row(found, sha256, released=posterior.released and found.settled) for found in margins]
        findings += [_finding(found) for found in margins]
        groups[duty.name] = _dataset(bands, margins, released=posterior.released)
    write_table(place.file("bands.csv"), BAND_COLUMNS, band_rows)
    write_table(place.file("margins.csv"), MARGIN_COLUMNS, margin_rows)
    write_findings(place.file("evidence/predict.json"), findings)
    _write_predictions(place, groups, posterior)


if __name__ == "__main__":
    raise SystemExit(run_step("predict", run))
