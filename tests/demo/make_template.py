"""Make the register and the records of the small study that ``perdure new`` copies, and write down the truth behind them.

    python tests/demo/make_template.py [--into FOLDER] [--truth FILE]

Without options it writes ``config/template`` and ``tests/demo/template_truth.json``.
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
from invented_rubber import DAY, YEAR, Modes, Population

SEED = 20_261_108
POPULATION = Population(
    modulus=3.0,
    loss=0.05,
    bump=2.5,
    centre=100.0,
    width=0.7,
    batch=(0.05, 0.10, 0.0),
    specimen=(0.025, 0.05, 0.0),
)
NOISE_ABSOLUTE = 0.0008  # MPa
NOISE_RELATIVE = 0.003
U_FORCE = 0.005
U_STRAIN = 0.005
U_AREA = 0.01
FRAME = "bench frame"
BATCHES = {"batch 1": ("1a", "1b"), "batch 2": ("2a", "2b")}


@dataclass(frozen=True, slots=True)
class Plan:
    """How one strip was tested: strain held, ramp in s, hold in days, area as measured in mm2."""

    level: float
    ramp: float
    days: float
    area: float


PLANS = {
    "1a": Plan(0.10, 4.0, 1.0, 40.2),
    "1b": Plan(0.15, 5.0, 0.5, 39.8),
    "2a": Plan(0.10, 4.0, 0.5, 40.5),
    "2b": Plan(0.15, 5.0, 1.0, 40.1),
}


def export(name: str, modes: Modes, gains: tuple[float, float], area_error: float, rng: np.random.Generator) -> str:
    """The export of one strip: seconds, newtons and percent; ``gains`` are the relative errors of force and strain."""
    plan = PLANS[name]
    time = np.round(rubber.reading_times(plan.ramp, plan.days * DAY, 0.2, 2.0, 35), 1)
    strain = rubber.ramp_strain(time, plan.ramp, plan.level)
    true = rubber.stress(rubber.specimen_terms(POPULATION, modes), time, strain)
    force = true * plan.area * (1.0 + area_error) * (1.0 + gains[0])
    force = rubber.noisy(rng, force, NOISE_ABSOLUTE * plan.area, NOISE_RELATIVE)
    percent = 100.0 * strain * (1.0 + gains[1])
    body = [
        ",".join((rubber.decimal(float(t), 1), rubber.decimal(float(f), 3), rubber.decimal(float(e), 3)))
        for t, f, e in zip(time, force, percent, strict=True)
    ]
    return "\n".join(["time,force,strain", *body, ""])


def register() -> list[dict[str, str]]:
    """The rows of the register."""
    return [
        {
            "record": f"strip {name}",
            "specimen": name,
            "batch": batch,
            "method": "stress relaxation",
            "instrument": FRAME,
            "file": f"strip_{name}.csv",
            "where": "",
            "sense": "tension",
            "temperature [degC]": "23",
            "area [mm2]": f"{PLANS[name].area:.1f}",
            "length [mm]": "50",
            "state": "virgin",
            "use": "yes",
            "from [s]": "",
            "until [s]": "",
            "reason": "",
            "area uncertainty [%]": f"{100 * U_AREA:.1f}",
        }
        for batch, specimens in BATCHES.items()
        for name in specimens
    ]


def make(folder: Path, truth_file: Path) -> None:
    """Write the truth, then the register and the records into ``folder``."""
    draws, noise = np.random.default_rng([SEED, 0]), np.random.default_rng([SEED, 1])
    of_batch, of_specimen = rubber.draw_specimens(draws, POPULATION, BATCHES)
    gains = (U_FORCE * draws.standard_normal(), U_STRAIN * draws.standard_normal())
    area = {name: U_AREA * draws.standard_normal() for name in PLANS}
    pulled = rubber.held_stress(0.15, 10.0, YEAR)
    new = rubber.parts(POPULATION, (0.0, 0.0, 0.0), rubber.new_batch_sds(POPULATION), pulled)
    truth = {
        "about": "Truth behind config/template, written by tests/demo/make_template.py from the seed alone.",
        "seed": SEED,
        "population": {
            **asdict(POPULATION),
            "order of modes": list(rubber.MODES),
            "noise absolute [MPa]": NOISE_ABSOLUTE,
            "noise relative": NOISE_RELATIVE,
            "modulus [MPa] at [s]": rubber.moduli_at_times(rubber.population_terms(POPULATION)),
        },
        "batches, relative to the population": of_batch,
        "specimens, relative to the population": of_specimen,
        "relative errors": {"force": gains[0], "strain": gains[1], "area": area},
        "stress after a year at 15 % that 10, 50, 90 % of new parts reach [MPa]": [new.exceeded_by(p) for p in (0.1, 0.5, 0.9)],
    }
    truth_file.write_text(json.dumps(rubber.rounded(truth), indent=1) + "\n", encoding="utf-8", newline="\n")
    records = folder / "records"
    records.mkdir(parents=True, exist_ok=True)
    for name, modes in of_specimen.items():
        text = export(name, modes, gains, area[name], noise)
        (records / f"strip_{name}.csv").write_text(text, encoding="utf-8", newline="\n")
    rows = register()
    with (folder / "register.csv").open("w", encoding="utf-8", newline="") as file:
        writer = csv.DictWriter(file, rows[0].keys(), lineterminator="\n")
        writer.writeheader()
        writer.writerows(rows)


def main(arguments: list[str]) -> None:
    """Read the options and make the study."""
    here = Path(__file__).resolve().parent
    parser = argparse.ArgumentParser(description="Make the study that new studies start from.")
    parser.add_argument("--into", type=Path, default=here.parents[1] / "config" / "template")
    parser.add_argument("--truth", type=Path, default=here / "template_truth.json")
    options = parser.parse_args(arguments)
    make(options.into, options.truth)


if __name__ == "__main__":
    main(sys.argv[1:])
