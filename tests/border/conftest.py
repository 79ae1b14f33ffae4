"""A small study of invented pads, written to a temporary folder and altered by the tests."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from pathlib import Path

import pytest

STUDY = """\
format: 1
title: Pads of a test bench
material:
  family: filled rubber
law:
  name: maxwell
clock:
  name: isothermal
  reference temperature: 23 degC
horizon: 20 a
scatter:
  modes: [stiffness, strength, pace]
priors:
  modulus: {low: 3 MPa, high: 6 MPa, coverage: 0.9, source: own records}
instruments:
  north frame:
    separator: ";"
    decimal: ","
    columns:
      time: {column: Zeit, unit: s}
      force: {column: Kraft, unit: N}
      displacement: {column: Weg, unit: mm}
    strain source: {kind: crosshead, frame compliance: 2e-4 mm/N, standard uncertainty: 1e-5 mm/N}
    standard uncertainties: {force: 0.5 %, strain: 0.3 %, temperature: 0.5 K}
    noise:
      absolute: {low: 0.1 N, high: 1 N}
  south frame:
    columns:
      time: {column: t, unit: min}
      stress: {column: stress, unit: kPa}
      strain: {column: strain, unit: "%"}
duties:
  mooring:
    sense: compression
    temperature: 23 degC
    history:
      - ramp: {to: 12 %, over: 1 h}
      - hold: {for: 10 a}
    limits:
      contact: {at least: 0.25 MPa, at: 10 a, required share: 90 %, confidence: 95 %}
      kept: {at least: 60 %, quantity: retained, reference: 1 h, from: 1 d, required share: 0.9, confidence: 0.95}
"""

HEADINGS = (
    "record,specimen,batch,method,instrument,file,where,sense,temperature [degC],area [mm2],length [mm],state,use,from [s],until [s],reason"
)
REGISTER = f"""\
{HEADINGS}
n1,A1,A,stress relaxation,north frame,n1.csv,,compression,23,500,10,virgin,yes,,,
s1,B1,B,stress relaxation,south frame,sub/s1.csv,,compression,23,,,virgin,yes,,,
s2,B2,B,stress relaxation,south frame,s2.csv,,compression,23,,,virgin,no,,,fell from the bench
"""

NORTH = """\
Bericht
Zeit;Kraft;Weg
0;0;0
1;100;0,5
2;200;1
4;190;1
8;180;1
16;;1
32;170;1
"""
SOUTH = """\
t,stress,strain
0,0,0
0.1,-500,-10
1,-450,-10
10,-400,-10
"""


@dataclass
class Folder:
    """A study folder in the making: ``files`` by path, written by :meth:`write`."""

    path: Path
    files: dict[str, str]

    def edit(self, file: str, old: str, new: str) -> Folder:
        """Replace ``old``, which must stand in ``file`` exactly once."""
        assert self.files[file].count(old) == 1, f"{old!r} stands {self.files[file].count(old)} times in {file}"
        self.files[file] = self.files[file].replace(old, new)
        return self

    def write(self) -> Path:
        """Write all files and return the folder."""
        for name, text in self.files.items():
            path = self.path / name
            path.parent.mkdir(parents=True, exist_ok=True)
            path.write_text(text, encoding="utf-8")
        return self.path


@pytest.fixture
def folder(tmp_path: Path) -> Folder:
    """The study as it is, not yet written."""
    files = {"study.yaml": STUDY, "register.csv": REGISTER, "records/n1.csv": NORTH, "records/sub/s1.csv": SOUTH}
    return Folder(tmp_path / "pads", files)


@pytest.fixture
def single(tmp_path: Path) -> Callable[..., Folder]:
    """A study of one record: columns of the export, further register cells, the export."""

    def build(columns: str, cells: dict[str, str], export: str, *, method: str = "stress relaxation", extra: str = "") -> Folder:
        study = f"""\
format: 1
title: One record
material: {{family: filled rubber}}
clock: {{reference temperature: 23 degC}}
instruments:
  bench:
{extra}    columns:
{columns}
duties:
  use:
    sense: tension
    temperature: 23 degC
    history: [{{ramp: {{to: 1 %, over: 1 s}}}}, {{hold: {{for: 20 s}}}}]
    limits:
      kept: {{at least: 50 %, quantity: retained, reference: 1 s, at: 20 s, required share: 0.9, confidence: 0.9}}
"""
        row = {
            "record": "r",
            "specimen": "A1",
            "batch": "A",
            "method": method,
            "instrument": "bench",
            "file": "r.csv",
            "sense": "tension",
            "temperature [degC]": "23",
            "state": "virgin",
            "use": "yes",
            **cells,
        }
        register = ",".join(row) + "\n" + ",".join(row.values()) + "\n"
        return Folder(tmp_path / "one", {"study.yaml": study, "register.csv": register, "records/r.csv": export})

    return build
