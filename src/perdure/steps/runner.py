"""What all steps share: arguments, the log, errors without a traceback, and the withdrawal of what has become old.

A step's module holds its work and three closing lines::

    def run(place: Place) -> None: ...

    if __name__ == "__main__":
        raise SystemExit(run_step("fit", run))
"""

from __future__ import annotations

import argparse
import json
import os
import platform
import signal
import sys
import time
import traceback
from collections.abc import Callable, Iterable, Iterator, Sequence
from contextlib import contextmanager
from dataclasses import dataclass
from datetime import UTC, datetime
from importlib.metadata import version
from pathlib import Path
from types import FrameType

from perdure.errors import PerdureError, ResultError, problem
from perdure.steps.chain import CHAIN, files, later, log, note
from perdure.steps.plan import dependencies, plan

PACKAGES = ("perdure", "numpy", "scipy", "numba", "pandas", "xarray", "pymc", "pytensor", "nutpie", "arviz", "snakemake")
"""Packages whose versions go into the note of every step."""

STARTED, DONE, FAILED = "started", "done", "failed"


class Stopped(BaseException):
    """The step was told to stop by a signal.

    Not a ``KeyboardInterrupt``: a sampler that meets one returns the draws it has so far, which would pass for a whole fit.
    """


@dataclass(frozen=True, slots=True)
class Place:
    """Where a step works.

    Attributes:
        study: the study's folder; only read.
        results: ``results/<study>``; exists, with its ``evidence`` folder.
        cores: number of cores that the step may use, at least 1.
    """

    study: Path
    results: Path
    cores: int

    @property
    def name(self) -> str:
        """Name of the study: of its folder."""
        return self.study.name

    def file(self, name: str) -> Path:
        """Path of the results file ``name``, as ``records.nc`` or ``evidence/fit.json``."""
        return self.results / name


def available_cores() -> int:
    """Number of cores that this process may use."""
    if sys.version_info >= (3, 13):
        return os.process_cpu_count() or 1
    return os.cpu_count() or 1


def run_step(step: str, work: Callable[[Place], None], arguments: Sequence[str] | None = None) -> int:
    """Run ``work`` for the study and results folder named in ``arguments`` (default: the command line).

    Files of the steps that follow are withdrawn first: they belong to earlier inputs, and a crash must not leave them standing
    as if they were results. Returns the exit code: 0, or 1 after an error, which is printed and kept in the step's log;
    an error that is not the user's has its traceback in the log alone. 130 where a signal stopped it.
    """
    place = _parse(step, arguments)
    log_file = place.file(log(step))
    log_file.parent.mkdir(parents=True, exist_ok=True)
    withdraw(place.results, (step, *later(step)))
    for other in later(step):
        place.file(log(other)).unlink(missing_ok=True)
    depends = dependencies(plan(place.study), step)
    started = datetime.now(UTC)
    clock = time.perf_counter()
    log_file.write_text(f"{STARTED} {started.isoformat(timespec='seconds')}\n", encoding="utf-8")
    _say(f"{place.name}: {step} {CHAIN[step].about} …")
    try:
        with _stoppable():
            work(place)
        missing = [name for name in CHAIN[step].makes if not place.file(name).is_file()]
        if missing:
            raise RuntimeError(f"step {step} did not write {', '.join(missing)}")  # noqa: TRY301 (a fault of the step, told like any other)
    except PerdureError as error:
        _fail(place, step, "\n".join(str(one) for one in error.problems), "")
        return 1
    except Stopped:
        _say(f"{place.name}: {step} stopped")
        return 130
    except Exception as error:  # noqa: BLE001 (the last line of defence: whatever it is, it is logged and the step fails)
        text = f"unexpected {type(error).__name__}: {error}\nThis is a fault of perdure or of its surroundings; traceback in {log_file}"
        _fail(place, step, text, traceback.format_exc())
        return 1
    seconds = time.perf_counter() - clock
    _write_note(place, step, started, seconds, depends)
    with log_file.open("a", encoding="utf-8") as handle:
        handle.write(f"{DONE} after {seconds:.1f} s\n")
    _say(f"{place.name}: {step} done in {seconds:.1f} s")
    return 0


@contextmanager
def _stoppable() -> Iterator[None]:
    """While inside, the first signal to stop raises :class:`Stopped`.

    Further ones are ignored from then on: whoever stops a run may well say it twice, and the process ends anyway.
    """

    def stop(_number: int, _frame: FrameType | None) -> None:
        for number in before:
            signal.signal(number, signal.SIG_IGN)
        raise Stopped

    before = {number: signal.getsignal(number) for number in (signal.SIGINT, signal.SIGTERM)}
    for number in before:
        signal.signal(number, stop)
    try:
        yield
    except Stopped:
        raise
    except BaseException:
        for number, handler in before.items():
            signal.signal(number, handler)
        raise
    else:
        for number, handler in before.items():
            signal.signal(number, handler)


def _parse(step: str, arguments: Sequence[str] | None) -> Place:
    parser = argparse.ArgumentParser(prog=f"python -m perdure.steps.{step}", description=f"perdure {step}: {CHAIN[step].about}")
    parser.add_argument("--study", required=True, type=Path, metavar="FOLDER", help="the study's folder; only read")
    parser.add_argument("--results", required=True, type=Path, metavar="FOLDER", help="results folder of this study")
    parser.add_argument("--cores", type=int, default=available_cores(), metavar="N", help="cores to use (default: all)")
    parsed = parser.parse_args(arguments)
    if parsed.cores < 1:
        parser.error("--cores: at least 1")
    return Place(study=parsed.study.resolve(), results=parsed.results.resolve(), cores=parsed.cores)


def withdraw(results: Path, steps: Iterable[str]) -> bool:
    """Remove what ``steps`` made below ``results`` (``results/<study>``); True where there was anything."""
    there = [path for step in steps for path in (results / name for name in files(step)) if path.exists()]
    for path in there:
        path.unlink(missing_ok=True)
    return bool(there)


def _fail(place: Place, step: str, text: str, details: str) -> None:
    with place.file(log(step)).open("a", encoding="utf-8") as handle:
        handle.write(f"{FAILED}\n{text}\n{details}")
    _say(f"{place.name}: {step} failed\n" + "\n".join(f"  {line}" for line in text.splitlines()))


def _write_note(place: Place, step: str, started: datetime, seconds: float, depends: dict[str, str]) -> None:
    content = {
        "step": step,
        "started": started.isoformat(timespec="seconds"),
        "seconds": round(seconds, 2),
        "python": platform.python_version(),
        "versions": {name: version(name) for name in PACKAGES},
        "depends": depends,
    }
    target = place.file(note(step))
    part = target.with_name(target.name + ".part")
    part.write_text(json.dumps(content, indent=2) + "\n", encoding="utf-8")
    part.replace(target)


def _say(text: str) -> None:
    sys.stderr.write(text + "\n")  # one write, so that lines of steps that run side by side stay whole
    sys.stderr.flush()


@dataclass(frozen=True, slots=True)
class Outcome:
    """How a step of a study ended when it last ran.

    Attributes:
        step: its name.
        state: "done", "failed", or "started" for one that was stopped before it could say anything.
        text: what it said when it failed, else "".
    """

    step: str
    state: str
    text: str


def outcome(results: Path, step: str) -> Outcome | None:
    """How ``step`` ended last, read from its log below ``results`` (``results/<study>``); None where it has not run."""
    try:
        lines = (results / log(step)).read_text(encoding="utf-8").splitlines()
    except FileNotFoundError:
        return None
    if FAILED in lines:
        at = lines.index(FAILED)
        said = lines[at + 1 :]
        end = next((row for row, line in enumerate(said) if line.startswith("Traceback ")), len(said))
        return Outcome(step, FAILED, "\n".join(said[:end]))
    return Outcome(step, DONE if lines and lines[-1].startswith(DONE) else STARTED, "")


def need(path: Path, step: str) -> Path:
    """``path`` when it exists.

    Raises:
        ResultError: it does not; the message names the ``step`` that writes it.
    """
    if not path.is_file():
        raise ResultError([problem(str(path), "no file", f"a file written by step {step}", "Run the study again with perdure run.")])
    return path
