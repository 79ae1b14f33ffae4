"""Make the register and the records of the shipped study ``fender``, and write down the truth behind them.

    python tests/demo/make_fender.py [--into FOLDER] [--truth FILE]

Without options it writes ``config/studies/fender`` and ``tests/demo/fender_truth.json``. The truth comes from the seed
alone; it was committed before anything was fitted, and is never adapted to a fit.
"""

from __future__ import annotations

import argparse
import csv
import json
import sys
from dataclasses import asdict, dataclass
from pathlib import Path

import invented_rubber as rubber
import numpy as np
from invented_rubber import DAY, MODES, YEAR, Modes, Population

SEED = 20_261_107
POPULATION = Population(
    modulus=4.6,
    loss=0.045,
    bump=2.5,
    centre=300.0,
    width=0.7,
    batch=(0.06, 0.12, 0.25),
    specimen=(0.025, 0.06, 0.12),
)
NOISE_ABSOLUTE = 0.0008  # MPa
NOISE_RELATIVE = 0.003
U_FORCE = 0.005
U_STRAIN = 0.003
U_AREA = 0.005
U_LENGTH = 0.003
U_MOUNTING = 0.005
COMPLIANCE = 6.0e-5  # mm/N, as declared
U_COMPLIANCE = 1.0e-5
BATCHES = {
    "batch A": ("A1", "A2", "A3", "A4"),
    "batch B": ("B1", "B2", "B3", "B4"),
    "batch C": ("C1", "C2", "C3"),
    "batch D": ("D1", "D2", "D3", "D4"),  # D4 was tested, but its only record is left out
}
LEFT_OUT = "D4"
SLIP = 7_400.0  # s, when its platen slipped
BLANKS = ("B3", (151, 152, 153, 154, 230))  # specimen, readings without a stress


@dataclass(frozen=True, slots=True)
class Plan:
    """How one specimen was tested: frame, strain held, ramp in s, hold in days, size as measured (mm2, mm)."""

    instrument: str
    level: float
    ramp: float
    days: float
    area: float
    length: float


PLANS = {
    "A1": Plan("north frame", 0.08, 4.0, 7, 660.5, 12.52),
    "A2": Plan("south frame", 0.12, 3.0, 2, 662.1, 12.48),
    "A3": Plan("north frame", 0.16, 6.0, 1, 659.8, 12.55),
    "A4": Plan("south frame", 0.10, 4.0, 4, 661.4, 12.50),
    "B1": Plan("south frame", 0.12, 4.0, 1, 658.9, 12.61),
    "B2": Plan("north frame", 0.08, 3.0, 7, 660.0, 12.57),
    "B3": Plan("south frame", 0.14, 5.0, 3, 661.0, 12.60),
    "B4": Plan("north frame", 0.16, 5.0, 2, 659.2, 12.58),
    "C1": Plan("north frame", 0.10, 4.0, 5, 663.4, 12.43),
    "C2": Plan("south frame", 0.16, 6.0, 1, 662.8, 12.45),
    "C3": Plan("north frame", 0.12, 4.0, 7, 663.0, 12.41),
    "D1": Plan("south frame", 0.14, 5.0, 2, 660.7, 12.53),
    "D2": Plan("north frame", 0.10, 3.0, 7, 661.9, 12.49),
    "D3": Plan("south frame", 0.08, 3.0, 3, 660.3, 12.54),
    "D4": Plan("south frame", 0.12, 4.0, 2, 661.2, 12.51),
}


@dataclass(frozen=True, slots=True)
class Limit:
    """One limit of the study: strain, ramp in s, the time it holds at in s, and the least contact stress in MPa."""

    duty: str
    level: float
    ramp: float
    at: float
    at_least: float


# about 55 % and 115 % of what the middle one of all new parts carries: see "of true median" in the truth
LIMITS = (
    Limit("winter mooring", 0.12, 3_600.0, 10.0 * YEAR, 0.2),
    Limit("storm preload", 0.15, 60.0, 30.0 * DAY, 0.565),
)


@dataclass(frozen=True, slots=True)
class Errors:
    """Relative errors drawn from the declared standard uncertainties; the compliance in mm/N is the true one."""

    force: dict[str, float]
    strain: dict[str, float]
    compliance: float
    area: dict[str, float]
    length: dict[str, float]
    mounting: dict[str, float]


def draw_errors(rng: np.random.Generator) -> Errors:
    """Calibration errors by instrument, then area, length and mounting by specimen (one record each)."""
    frames = ("north frame", "south frame")
    force = {frame: U_FORCE * rng.standard_normal() for frame in frames}
    strain = {frame: U_STRAIN * rng.standard_normal() for frame in frames}
    compliance = COMPLIANCE + U_COMPLIANCE * rng.standard_normal()
    area = {name: U_AREA * rng.standard_normal() for name in PLANS}
    length = {name: U_LENGTH * rng.standard_normal() for name in PLANS}
    mounting = {name: U_MOUNTING * rng.standard_normal() for name in PLANS}
    return Errors(force, strain, compliance, area, length, mounting)


def run_test(name: str, modes: Modes, errors: Errors, rng: np.random.Generator) -> str:
    """The export of one specimen as its frame writes it."""
    plan = PLANS[name]
    north = plan.instrument == "north frame"
    time = rubber.reading_times(plan.ramp, plan.days * DAY, *((0.1, 0.5, 70) if north else (0.2, 1.0, 75)))
    # what counts is the time as written; the south frame writes minutes
    time = np.round(time, 2) if north else np.round(time / 60.0, 5) * 60.0
    strain = rubber.ramp_strain(time, plan.ramp, plan.level)
    if name == LEFT_OUT:
        strain = np.where(time > SLIP, 0.83 * strain, strain)
    true = rubber.stress(rubber.specimen_terms(POPULATION, modes), time, strain)
    # mounting acts on the pad; gauge area and length were measured with an error, e.g. true area = measured · (1 + error)
    force = true * (1.0 + errors.mounting[name]) * plan.area * (1.0 + errors.area[name])
    moved = strain * plan.length * (1.0 + errors.length[name])
    gauge, scale = 1.0 + errors.force[plan.instrument], 1.0 + errors.strain[plan.instrument]
    noise_force = NOISE_ABSOLUTE * plan.area
    if north:
        readings = rubber.noisy(rng, force * gauge, noise_force, NOISE_RELATIVE)
        travel = (moved + force * errors.compliance) * scale
        return north_export(name, plan, time, readings, travel)
    readings = rubber.noisy(rng, force * gauge, noise_force, NOISE_RELATIVE) / plan.area
    return south_export(name, time, readings, moved * scale / plan.length)


def north_export(name: str, plan: Plan, time: rubber.Array, force: rubber.Array, travel: rubber.Array) -> str:
    """Semicolons, decimal commas, a preamble; compression counted positive."""
    head = [
        "Relaxation im Druckversuch;Nordrahmen",
        f"Probe;{name}",
        "Kraftaufnehmer;1 kN",
        "Weg;Traverse, Rahmen nicht abgezogen",
        f"Fläche;{rubber.decimal(plan.area, 1, comma=True)} mm²",
        f"Höhe;{rubber.decimal(plan.length, 2, comma=True)} mm",
        "Temperatur;23 °C",
        "",
        "Zeit;Kraft;Weg",
    ]
    body = [
        ";".join(
            (
                rubber.decimal(float(t), 2, comma=True),
                rubber.decimal(float(f), 2, comma=True),
                rubber.decimal(float(u), 4, comma=True),
            )
        )
        for t, f, u in zip(time, force, travel, strict=True)
    ]
    return "\n".join([*head, *body, ""])


def south_export(name: str, time: rubber.Array, stress: rubber.Array, strain: rubber.Array) -> str:
    """Commas, minutes, MPa and percent; compression counted negative."""
    blank = BLANKS[1] if name == BLANKS[0] else ()
    body = [
        ",".join(
            (
                rubber.decimal(float(t) / 60.0, 5),
                "" if row in blank else rubber.decimal(-float(s), 5),
                rubber.decimal(-100.0 * float(e), 4),
            )
        )
        for row, (t, s, e) in enumerate(zip(time, stress, strain, strict=True))
    ]
    return "\n".join(["elapsed,stress,strain", *body, ""])


def register() -> list[dict[str, str]]:
    """The rows of the register."""
    rows = []
    for batch, specimens in BATCHES.items():
        for name in specimens:
            plan = PLANS[name]
            slipped = name == LEFT_OUT
            rows.append(
                {
                    "record": f"{name} hold",
                    "specimen": name,
                    "batch": batch,
                    "method": "stress relaxation",
                    "instrument": plan.instrument,
                    "file": f"{name}.csv",
                    "where": "",
                    "sense": "compression",
                    "temperature [degC]": "23",
                    "area [mm2]": f"{plan.area:.1f}",
                    "length [mm]": f"{plan.length:.2f}",
                    "state": "virgin",
                    "use": "no" if slipped else "yes",
                    "from [s]": "",
                    "until [s]": "",
                    "reason": "loading platen slipped after about two hours" if slipped else "",
                    "area uncertainty [%]": f"{100 * U_AREA:.1f}",
                    "length uncertainty [%]": f"{100 * U_LENGTH:.1f}",
                    "mounting uncertainty [%]": f"{100 * U_MOUNTING:.1f}",
                }
            )
    return rows


def limits(of_batch: dict[str, Modes]) -> dict[str, object]:
    """For each limit: what new parts of new batches truly carry, and the true share that keeps it, new batch and known ones."""
    out: dict[str, object] = {}
    for limit in LIMITS:
        duty = rubber.held_stress(limit.level, limit.ramp, limit.at)
        new = rubber.parts(POPULATION, (0.0, 0.0, 0.0), rubber.new_batch_sds(POPULATION), duty)
        known = {batch: rubber.parts(POPULATION, modes, POPULATION.specimen, duty) for batch, modes in of_batch.items()}
        median = new.exceeded_by(0.5)
        out[limit.duty] = {
            "at [s]": limit.at,
            "at least [MPa]": limit.at_least,
            "of true median": limit.at_least / median,
            "population [MPa]": duty(rubber.population_terms(POPULATION)),
            "new batch": {
                "stress that 5, 10, 50, 90, 95 % reach [MPa]": [new.exceeded_by(share) for share in (0.05, 0.1, 0.5, 0.9, 0.95)],
                "share": new.share_above(limit.at_least),
            },
            "known batch": {batch: {"share": law.share_above(limit.at_least)} for batch, law in known.items()},
        }
    return out


def described(modes: dict[str, Modes]) -> dict[str, object]:
    """Modes by name, and the moduli that follow from them."""
    return {
        name: {
            **dict(zip(MODES, values, strict=True)),
            "modulus [MPa] at [s]": rubber.moduli_at_times(rubber.specimen_terms(POPULATION, values)),
        }
        for name, values in modes.items()
    }


def make(folder: Path, truth_file: Path) -> None:
    """Write the truth, then the register and the records into ``folder``."""
    draws, noise = np.random.default_rng([SEED, 0]), np.random.default_rng([SEED, 1])
    of_batch, of_specimen = rubber.draw_specimens(draws, POPULATION, BATCHES)
    errors = draw_errors(draws)
    terms = rubber.population_terms(POPULATION)
    truth = {
        "about": "Truth behind config/studies/fender, written by tests/demo/make_fender.py from the seed alone.",
        "seed": SEED,
        "population": {
            **asdict(POPULATION),
            "order of modes": list(MODES),
            "noise absolute [MPa]": NOISE_ABSOLUTE,
            "noise relative": NOISE_RELATIVE,
            "equilibrium modulus [MPa]": terms.equilibrium,
            "modulus [MPa] at [s]": rubber.moduli_at_times(terms),
        },
        "batches, relative to the population": described(of_batch),
        "specimens, relative to the population": described(of_specimen),
        "relative errors; compliance in mm/N": asdict(errors),
        "limits": limits(of_batch),
    }
    truth_file.write_text(json.dumps(rubber.rounded(truth), indent=1) + "\n", encoding="utf-8", newline="\n")
    records = folder / "records"
    records.mkdir(parents=True, exist_ok=True)
    for name, modes in of_specimen.items():
        # the north frame's program writes the Windows code page, ° and ² included
        encoding = "cp1252" if PLANS[name].instrument == "north frame" else "utf-8"
        (records / f"{name}.csv").write_text(run_test(name, modes, errors, noise), encoding=encoding, newline="\n")
    rows = register()
    with (folder / "register.csv").open("w", encoding="utf-8", newline="") as file:
        writer = csv.DictWriter(file, rows[0].keys(), lineterminator="\n")
        writer.writeheader()
        writer.writerows(rows)


def main(arguments: list[str]) -> None:
    """Read the options and make the study."""
    here = Path(__file__).resolve().parent
    parser = argparse.ArgumentParser(description="Make the shipped study fender.")
    parser.add_argument("--into", type=Path, default=here.parents[1] / "config" / "studies" / "fender")
    parser.add_argument("--truth", type=Path, default=here / "fender_truth.json")
    options = parser.parse_args(arguments)
    make(options.into, options.truth)


if __name__ == "__main__":
    main(sys.argv[1:])
