"""Results folders with invented numbers, as a run would leave them; nothing in them was measured or computed."""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import asdict, dataclass
from pathlib import Path

import numpy as np
import pytest

from perdure.border.store import write_json, write_table
from perdure.study.finding import Finding

DIGEST = "0123456789abcdef" * 4
YEAR = 31_557_600.0
BATCH_NAMES = ("B1", "B2", "B3", "B4")
LEVELS = (("population median", ""), *(("known batch", name) for name in BATCH_NAMES), ("new batch", ""))
VERDICTS = ("kept", "kept", "undecided", "kept", "not kept", "undecided")
MODULUS_FACTOR = {"": 1.0, "B1": 1.05, "B2": 0.97, "B3": 1.01, "B4": 0.93}

FINDINGS = (
    Finding("time order", "S01", "pass", 0.0, 0.0, "", "Times of S01 increase."),
    Finding("gaps", "S03", "caution", 2.4, 1.0, "decades", "S03 has no reading between 3 h and 31 d.", "Read more often.", False),
    Finding(
        "extrapolation", "winter mooring", "caution", 1.8, 0.0, "decades", "The duty ends 1.8 decades beyond the readings.", "Test longer."
    ),
    Finding(
        "posterior predictive", "S07", "fail", 0.62, 0.8, "", "The 90 % band of S07 holds 62 % of its readings.", "Look at its mounting."
    ),
    Finding("linearity", "study", "pass", None, None, "", "One strain level only: nothing to compare."),
)
GATE_FAILED = Finding("convergence", "study", "fail", 1.034, 1.01, "", "R-hat reached 1.034.", "Raise tune and draws.", blocking=True)


@dataclass(frozen=True)
class Recipe:
    """What a fake folder holds.

    Attributes:
        released: whether the gate was passed.
        holdout: with a hold-out.
        specimens, readings: how many, and how many readings each.
        title, batch, source: texts of users, to be made hostile.
        display: units.
    """

    released: bool = True
    holdout: bool = False
    specimens: int = 14
    readings: int = 40
    title: str = "Invented fender pads"
    batch: str = "B1"
    source: str = "from memory"
    stress: str = "MPa"


type Build = Callable[[Recipe], Path]


def _columns(names: str) -> tuple[str, ...]:
    return tuple(names.split(", "))


def _relaxed(seconds: float) -> float:
    return 0.55 + 0.45 / (1 + math.pow(seconds / 3e4, 0.35))


def _write_margins(folder: Path, recipe: Recipe) -> None:
    header = _columns(
        "duty, limit, kind, quantity, level, subject, limit value, unit, start [s], end [s], required share, "
        "confidence, share mean, share low, share high, probability, probability mcse, bound, difference, ratio, "
        "median response, verdict, released, records sha256"
    )
    limits = (
        ("winter mooring", "contact", "at least", "stress", 0.25, "MPa", 10 * YEAR, 10 * YEAR),
        ("winter mooring", "pile load", "at most", "stress", 0.62, "MPa", 0.0, 10 * YEAR),
        ("storm week", "hold", "at least", "retained", 0.7, "1", 3600.0 * 24 * 7, 3600.0 * 24 * 7),
    )
    rows = []
    for duty, limit, kind, quantity, value, unit, start, end in limits:
        for (level, subject), verdict in zip(LEVELS, VERDICTS, strict=True):
            shift = {"kept": 0.08, "not kept": -0.05, "undecided": 0.004}[verdict] * (1 if kind == "at least" else -1)
            gain = -1 if verdict == "not kept" else 1
            ratio = 1 + gain * abs(shift) / value
            head = (duty, limit, kind, quantity, level, _name(subject, recipe), value, unit, start, end, 0.9, 0.95)
            numbers = (0.962, 0.871, 0.998, 0.9312, 0.0041, value + shift, abs(shift) * gain, ratio, value * 1.21, verdict)
            rows.append((*head, *(numbers if recipe.released else (*[None] * 9, "not released")), recipe.released, DIGEST))
    write_table(folder / "margins.csv", header, rows)


def _name(subject: str, recipe: Recipe) -> str:
    return recipe.batch if subject == "B1" else subject


def _write_bands(folder: Path, recipe: Recipe) -> None:
    header = _columns(
        "duty, level, subject, time [s], strain, kind, median [MPa], low50 [MPa], high50 [MPa], low90 [MPa], "
        "high90 [MPa], released, records sha256"
    )
    rows = []
    for duty, end in (("winter mooring", 12 * YEAR), ("storm week", 8.0 * 86_400)):
        for level, subject in LEVELS:
            for time in np.concatenate([[0.0], np.geomspace(60.0, end, 60)]):
                ramp = min(1.0, time / 3600)
                median = 0.12 * 4.2 * ramp * _relaxed(time) * MODULUS_FACTOR[subject]
                spread = {"population median": 0.03, "known batch": 0.06, "new batch": 0.10}[level] * (
                    1 + 0.2 * max(0.0, math.log10(time / 3e6 + 1e-9))
                )
                kind = "credible" if level == "population median" else "prediction"
                widths = (1 - 0.41 * spread, 1 + 0.41 * spread, 1 - spread, 1 + spread)
                rows.append(
                    (duty, level, _name(subject, recipe), time, -0.12, kind, median, *(median * w for w in widths), recipe.released, DIGEST)
                )
    write_table(folder / "bands.csv", header, rows)


def _write_fitted(folder: Path, recipe: Recipe) -> None:
    header = _columns(
        "record, specimen, batch, method, instrument, time [s], observed, count, held out, median, low50, high50, "
        "low90, high90, residual z, unit, strain"
    )
    generator = np.random.default_rng(5)
    rows, held = [], []
    for specimen in range(1, recipe.specimens + 1):
        name, batch = f"S{specimen:02}", _name(BATCH_NAMES[(specimen - 1) % 4], recipe)
        frame = "north frame" if specimen % 2 else "south frame"
        stiffness = 4.2 * (1 + 0.04 * generator.standard_normal())
        for time in np.geomspace(1.0, 2.6e6, recipe.readings):
            median = -0.12 * stiffness * _relaxed(time)
            z = float(generator.standard_normal())
            out = recipe.holdout and time > 1e6
            bands = (median * 1.005, median * 0.995, median * 1.012, median * 0.988)
            z += 2.0 if out else 0.0
            observed = median * (1 + 0.0073 * z)
            rows.append(
                (f"R{specimen:02}", name, batch, "stress relaxation", frame, time, observed, 1, out, median, *bands, z, "MPa", -0.12)
            )
            if out:
                inside = (abs(z) < 0.67, abs(z) < 1.64)
                score = abs(0.024 * median) + max(0.0, abs(z) - 1.64) * 20 * 0.0073 * abs(median)
                held.append((f"R{specimen:02}", name, batch, time, observed, "MPa", median, *bands, *inside, score, DIGEST))
    write_table(folder / "evidence" / "fitted.csv", header, rows)
    if recipe.holdout:
        head = _columns(
            "record, specimen, batch, time [s], observed, unit, median, low50, high50, low90, high90, inside50, inside90, "
            "interval score 90, records sha256"
        )
        write_table(folder / "holdout.csv", head, held)
        summary = {
            "readings": len(held),
            "coverage50": 0.213,
            "coverage90": 0.388,
            "interval score 90": 0.0457,
            "rows": "readings after 278 h",
        }
        write_json(folder / "evidence" / "holdout.json", {"findings": [], "summary": summary})


def _write_parameters(folder: Path, recipe: Recipe) -> None:
    header = _columns(
        "quantity, label, level, subject, unit, median, low, high, prior median, prior low, prior high, contraction, identified"
    )
    rows: list[tuple[object, ...]] = [
        ("modulus", "modulus at 10 s", "population", "", "MPa", 4.2137, 4.021, 4.433, 4.24, 3.0, 6.0, 0.93, "yes")
    ]
    rows += [
        (
            f"strength {decade}",
            f"strength at {10.0**decade:g} s",
            "population",
            "",
            "1",
            *values,
            0.04,
            0.012,
            0.11,
            contraction,
            "no" if decade > 6 else "yes",
        )
        for decade, values, contraction in (
            (decade, (0.04, 0.033, 0.047) if decade < 7 else (0.041, 0.013, 0.108), 0.9 if decade < 7 else 0.02) for decade in range(-1, 10)
        )
    ]
    rows += [
        (
            f"{mode} {who} scatter",
            f"{mode}, sd between {plural}",
            "population",
            "",
            "1",
            0.041,
            0.012,
            0.117,
            0.034,
            0.003,
            0.1,
            0.31,
            "yes",
        )
        for mode in ("stiffness", "strength", "pace")
        for who, plural in (("batch", "batches"), ("specimen", "specimens"))
    ]
    rows += [
        ("stiffness", "modulus at 10 s", "batch", _name(name, recipe), "MPa", 4.2, 4.0, 4.4, None, None, None, None, "yes")
        for name in BATCH_NAMES
    ]
    rows += [
        ("stiffness", "modulus at 10 s", "specimen", f"S{n:02}", "MPa", 4.2, 4.1, 4.3, None, None, None, None, "yes")
        for n in range(1, recipe.specimens + 1)
    ]
    write_table(folder / "parameters.csv", header, rows)
    modulus = [
        (level, _name(subject, recipe), time, m := 4.4 * _relaxed(time) * MODULUS_FACTOR[subject], m * 0.95, m * 1.05, time < 2.6e6)
        for level, subject in (("population", ""), *(("batch", name) for name in BATCH_NAMES))
        for time in np.geomspace(0.1, 6e8, 60)
    ]
    write_table(
        folder / "evidence" / "modulus.csv",
        ("level", "subject", "time [s]", "median [MPa]", "low90 [MPa]", "high90 [MPa]", "in tests"),
        modulus,
    )
    write_table(
        folder / "priors.csv",
        ("quantity", "unit", "low", "high", "coverage", "source", "origin", "distribution", "median", "q05", "q95"),
        [
            ("modulus", "MPa", 3.0, 6.0, 0.9, recipe.source, "study", "log-normal(median 4.243, sd of log 0.211)", 4.243, 3.0, 6.0),
            (
                "pace batch scatter",
                "1",
                0.0,
                0.4,
                0.9,
                "from memory",
                "handbook filled rubber",
                "half-normal(scale 0.2432)",
                0.164,
                0.0153,
                0.477,
            ),
        ],
    )


def _write_intake(folder: Path, recipe: Recipe) -> None:
    header = _columns(
        "row, record, specimen, batch, method, instrument, file, status, readings, missing, used, reason, conversions, sha256"
    )
    rows: list[tuple[object, ...]] = [
        (n + 1, f"R{n:02}", f"S{n:02}", _name(BATCH_NAMES[(n - 1) % 4], recipe), "stress relaxation", "north frame",
         f"records/R{n:02}.txt", "accepted",
         612, 3, recipe.readings, "", "force in N over area in mm2 to MPa; compression entered positive, sign turned", DIGEST)
        for n in range(1, recipe.specimens + 1)
    ]  # fmt: skip
    rows.append(
        (
            30,
            "R30",
            "S30",
            "B2",
            "stress relaxation",
            "north frame",
            "records/R30.txt",
            "left out",
            0,
            0,
            0,
            "slipped in the grips",
            "",
            DIGEST,
        )
    )
    rows.append(
        (
            31,
            "R31",
            "S31",
            "B2",
            "stress relaxation",
            "north frame",
            "records/R31.txt",
            "refused",
            None,
            None,
            None,
            "time runs back",
            "",
            "",
        )
    )
    write_table(folder / "intake.csv", header, rows)


def _write_documents(folder: Path, recipe: Recipe) -> None:
    findings = [*FINDINGS, *([] if recipe.released else [GATE_FAILED])]
    columns = ("check", "subject", "outcome", "value", "threshold", "unit", "message", "remedy", "blocking")
    write_table(folder / "findings.csv", columns, [tuple(asdict(finding).values()) for finding in findings])
    diagnosis = {"rhat": 1.0034 if recipe.released else 1.034, "ess bulk": 2113.0, "ess tail": 1804.0, "divergences": 0, "ebfmi": 0.88}
    write_json(
        folder / "evidence" / "fit.json",
        {
            "released": recipe.released,
            "diagnosis": diagnosis,
            "attempts": [
                {"draws": 1000, "tune": 600, "target accept": 0.9, "diagnosis": {**diagnosis, "divergences": 2}, "change": ""},
                {"draws": 1000, "tune": 1200, "target accept": 0.95, "diagnosis": diagnosis, "change": "longer adaptation, smaller steps"},
            ],
            "worst": {"rhat": "pace of S07", "ess bulk": "strength at 1e+07 s"},
            "seconds": {"start": 2.31, "sampling": 41.7},
            "findings": [],
            "grid": {"terms": 15, "shortest": 0.5, "longest": 3.2e9},
            "records sha256": DIGEST,
            "seed": 20261,
        },
    )
    write_json(
        folder / "run.json",
        {
            "study": "fender",
            "title": recipe.title,
            "about": "Rubber pads that keep a pontoon pressed against its guide piles.",
            "versions": {"perdure": "0.1.0", "numpy": "2.5.5"},
            "inputs": {"study.yaml": DIGEST, "register.csv": DIGEST[::-1]},
            "seed": 20261,
            "settings": {"chains": 4, "draws": 1000, "tune": 600, "target accept": 0.9},
            "durations": {"intake": 1.8, "fit": 47.25, "predict": 12.0},
            "released": recipe.released,
            "display": {"stress": recipe.stress, "time": "h", "temperature": "degC", "strain": "%"},
        },
    )


def write_results(folder: Path, recipe: Recipe) -> Path:
    """Write every file that the page reads."""
    (folder / "evidence").mkdir(parents=True)
    for write in (_write_margins, _write_bands, _write_fitted, _write_parameters, _write_intake, _write_documents):
        write(folder, recipe)
    return folder


@pytest.fixture(scope="session")
def build(tmp_path_factory: pytest.TempPathFactory) -> Build:
    """Writes a fake results folder and returns its path."""
    return lambda recipe: write_results(tmp_path_factory.mktemp("results") / "fender", recipe)


@pytest.fixture(scope="session")
def make_recipe() -> type[Recipe]:
    """The recipe of a fake folder."""
    return Recipe
