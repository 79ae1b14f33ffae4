"""Snakemake as ``perdure run`` starts it: in a process of its own, with its notes below the results folder."""

from __future__ import annotations

import fcntl
import json
import os
import signal
import subprocess
import sys
from collections.abc import Iterator, Sequence
from contextlib import contextmanager
from dataclasses import dataclass
from pathlib import Path
from types import FrameType

import psutil
import yaml

from perdure.border.shipped import shipped
from perdure.errors import Problem, ResultError, problem
from perdure.steps.plan import Plan

NOTES = ".snakemake"
"""Snakemake's own folder below the results folder: its notes say how each file was made."""


@dataclass(frozen=True, slots=True)
class Workflow:
    """The workflow over some studies.

    Attributes:
        results: folder that holds one folder a study, absolute.
        configuration: file that tells the workflow which studies and which results folder.
        cores: number of cores, None for all.
        options: further options of Snakemake, as the user gave them.
        lock: open file that is locked as long as a process of this run lives.
    """

    results: Path
    configuration: Path
    cores: int | None
    options: tuple[str, ...]
    lock: int

    def summary(self) -> str:
        """Snakemake's table of all files of the run and whether they are up to date, tab-separated.

        Raises:
            ResultError: Snakemake refused, with its words.
        """
        done = subprocess.run(  # noqa: S603 (our own interpreter; the options are the user's own)
            self._command("--quiet", "all", "--summary"), cwd=self.results, capture_output=True, text=True, check=False
        )
        if done.returncode != 0:
            said = done.stderr.strip() or done.stdout.strip() or f"exit code {done.returncode} without a word"
            # a refused option comes after a page of usage
            refused = [line for line in said.splitlines() if line.startswith("__main__.py: error: ")]
            raise ResultError(
                [
                    problem(
                        "workflow",
                        refused[-1].removeprefix("__main__.py: error: ") if refused else said,
                        "a workflow and options that Snakemake accepts",
                        "Options after -- are Snakemake's: see python -m snakemake --help.",
                    )
                ]
            )
        return done.stdout

    def run(self) -> int:
        """Run the workflow and return Snakemake's exit code. A signal to stop reaches every process of the run.

        What Snakemake prints to stdout is shown only where the user asked it for something.
        """
        process = subprocess.Popen(  # noqa: S603 (as above)
            self._command("--quiet", "all"),
            cwd=self.results,
            stdout=None if self.options else subprocess.DEVNULL,
            pass_fds=(self.lock,),
            start_new_session=True,
        )
        with _passed_on(process):
            return process.wait()

    def _command(self, *own: str) -> list[str]:
        workflow = shipped("workflow")
        return [
            *(sys.executable, "-m", "snakemake"),
            *("--snakefile", str(workflow / "Snakefile")),
            *("--directory", str(self.results)),
            *("--configfile", str(self.configuration)),
            *("--workflow-profile", "none"),
            *_settings(workflow / "profiles" / "default" / "config.yaml", self.cores),
            *own,
            *self.options,
        ]


def _settings(profile: Path, cores: int | None) -> list[str]:
    """The settings of the workflow's own ``profile`` as options: naming it would make Snakemake say so on every run."""
    chosen: dict[str, object] = yaml.safe_load(profile.read_text(encoding="utf-8"))
    if cores is not None:
        chosen["cores"] = cores
    options: list[str] = []
    for key, value in chosen.items():
        if value is True:
            options.append(f"--{key}")
        elif value is not False:
            options.extend((f"--{key}", str(value)))
    return options


@contextmanager
def _passed_on(process: subprocess.Popen[bytes]) -> Iterator[None]:
    """While inside, signals that ask this process to stop go to the whole run, which has a session of its own."""

    def stop(_number: int, _frame: FrameType | None) -> None:
        if process.poll() is None:
            os.killpg(process.pid, signal.SIGINT)

    before = {number: signal.signal(number, stop) for number in (signal.SIGINT, signal.SIGTERM, signal.SIGHUP)}
    try:
        yield
    finally:
        for number, handler in before.items():
            signal.signal(number, handler)


@contextmanager
def workflow_of(plans: dict[str, Plan], results: Path, cores: int | None, options: Sequence[str]) -> Iterator[Workflow]:
    """The workflow over ``plans`` with ``results`` held for this run alone.

    A lock that a killed run left is removed, and said to be. Where notes on how files were made are gone, everything runs again:
    without them Snakemake would compare dates only and take old results for new ones.

    Raises:
        ResultError: another run uses the results folder, or the folder cannot be written.
    """
    notes = results / NOTES
    try:
        forgotten = [name for name in plans if (results / name / "records.nc").exists() and not (notes / "metadata").is_dir()]
        (notes / "perdure").mkdir(parents=True, exist_ok=True)
        lock = os.open(notes / "perdure" / "lock", os.O_RDWR | os.O_CREAT, 0o666)
    except OSError as error:
        raise ResultError(
            [problem(str(results), error.strerror or str(error), "a folder that can be written", "Name another folder with --results.")]
        ) from error
    try:
        _hold(lock, results)
        _clear_stale_lock(results)
        if forgotten:
            sys.stderr.write(f"{', '.join(forgotten)}: no notes on how the files there were made; everything runs again\n")
        configuration = notes / "perdure" / "configuration.json"
        part = configuration.with_name(f"{configuration.name}.part")
        part.write_text(json.dumps({"studies": [str(plan.study) for plan in plans.values()], "results": str(results)}), encoding="utf-8")
        part.replace(configuration)
        extra = ("--forceall",) if forgotten else ()
        yield Workflow(results, configuration, cores, (*extra, *options), lock)
    finally:
        os.close(lock)


def _hold(lock: int, results: Path) -> None:
    try:
        fcntl.flock(lock, fcntl.LOCK_EX | fcntl.LOCK_NB)
    except BlockingIOError as error:
        raise ResultError([_busy(results)]) from error


def _clear_stale_lock(results: Path) -> None:
    """Remove Snakemake's lock where no process is left that could hold it."""
    locks = [path for path in (results / NOTES / "locks").glob("*") if path.is_file()]
    if not locks:
        return
    if _snakemake_at_work(results):
        raise ResultError([_busy(results)])
    for path in locks:
        path.unlink(missing_ok=True)
    sys.stderr.write("A run that was stopped left its lock behind: removed; what it left half done is made again.\n")


def _snakemake_at_work(results: Path) -> bool:
    for process in psutil.process_iter(["cwd", "cmdline"]):
        words = process.info["cmdline"] or ()
        if process.pid != os.getpid() and any("snakemake" in word for word in words) and process.info["cwd"] == str(results):
            return True
    return False


def _busy(results: Path) -> Problem:
    return problem(
        str(results),
        "another run at work there",
        "one run at a time in a results folder",
        "Wait for it to end, or name another folder with --results.",
    )
