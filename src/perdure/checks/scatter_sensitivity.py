"""How much of the variance between specimens, and between batches, is scatter, and how much rests on stated uncertainties?"""

from __future__ import annotations

import math

import numpy as np

from perdure.checks.fitted import FittedStudy
from perdure.checks.words import percent
from perdure.inference.structure import Structure
from perdure.study.finding import Finding

NAME = "scatter sensitivity"
MODE = "stiffness"


def _specimen_variance(structure: Structure) -> float:
    """Mean over specimens of the type B variance that each specimen has to itself; mounting counts by its mean over the records."""
    totals = []
    for place, effects in enumerate(structure.local_effects):
        records = max(int((structure.specimen == place).sum()), 1)
        own = [effect for effect in effects if effect.kind != "reference"]
        totals.append(sum(effect.uncertainty**2 / (records**2 if effect.kind == "mounting" else 1) for effect in own))
    return float(np.mean(totals))


def _batch_variance(structure: Structure) -> float:
    """Variance between batches that calibration adds: that of the instruments' share in each batch, less what batches have in common."""
    uncertainty = {(effect.kind, effect.subject): effect.uncertainty for effect in structure.root_effects if effect.kind != "compliance"}
    if len(structure.batches) < 2 or not uncertainty:
        return 0.0
    gain = structure.gain.dense()[:, : len(structure.root_effects)]
    batch = structure.batch[structure.specimen]
    means = np.stack([gain[batch == b].mean(axis=0) for b in range(len(structure.batches))])
    return float(means.var(axis=0, ddof=1).sum())


def _what_if(total: float, type_b: float) -> str:
    half, twice = (math.sqrt(max(total - factor**2 * type_b, 0.0)) for factor in (0.5, 2.0))
    return f"were those uncertainties half as large, scatter would be near {percent(half)}, twice as large, near {percent(twice)}"


def _finding(level: str, scatter: float, type_b: float) -> Finding:
    total = scatter**2 + type_b
    doubtful = type_b >= scatter**2
    return Finding(
        check=NAME,
        subject=f"{MODE}, between {level}",
        outcome="caution" if doubtful else "pass",
        value=math.sqrt(type_b) / scatter,
        threshold=1.0,
        unit="",
        message=(
            f"Of the standard deviation of {percent(math.sqrt(total))} between {level}, scatter makes {percent(scatter)} and stated "
            f"uncertainties make {percent(math.sqrt(type_b))}; {_what_if(total, type_b)}."
        ),
        remedy="Lower the uncertainties that were stated, by calibration or by repeated mounting, or support them with evidence."
        if doubtful
        else "",
    )


def check(fitted: FittedStudy) -> list[Finding]:
    """Type B against scatter (posterior medians) for stiffness; caution where type B is as large as scatter or larger."""
    structure = fitted.density.structure
    stresses = any(not record.normalised and not record.held_out.all() for record in fitted.records.records)
    if MODE not in structure.modes or not stresses:
        why = "all responses are ratios, in which stiffness drops out" if not stresses else "the study lets no stiffness scatter"
        return [
            Finding(
                check=NAME,
                subject=MODE,
                outcome="pass",
                value=None,
                threshold=None,
                unit="",
                message=f"Nothing to divide between scatter and stated uncertainties: {why}.",
            )
        ]
    place = structure.modes.index(MODE)
    states = [fitted.density.packing.split(draw) for draw in fitted.draws]
    specimen = float(np.median([state.specimen_sd[place] for state in states]))
    batch = float(np.median([state.batch_sd[place] for state in states]))
    return [
        _finding("specimens", specimen, _specimen_variance(structure)),
        _finding("batches", batch, _batch_variance(structure)),
    ]
