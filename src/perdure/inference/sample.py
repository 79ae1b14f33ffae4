"""Sampling: NUTS on the whitened density, the convergence gate, and automatic retries.

The sampler is nutpie's, given the compiled density directly: nothing is built symbolically, so a fresh process samples
within seconds. A run that fails the gate is repeated with stated changes; what still fails is not released.
"""

from __future__ import annotations

import multiprocessing
import os
import signal
import threading
import time
from collections.abc import Callable, Iterator
from concurrent.futures import ProcessPoolExecutor, wait
from contextlib import contextmanager
from dataclasses import dataclass, replace
from typing import Any, Protocol

import arviz_stats as az
import numpy as np
import nutpie
import xarray as xr
from numpy.typing import NDArray

from perdure.inference.density import Density
from perdure.inference.gate import Attempt, Diagnosis
from perdure.inference.start import Start
from perdure.inference.whitening import WhitenedDensity
from perdure.study.study import SamplerSettings

Array = NDArray[np.float64]

# what each attempt changes, in order: (target acceptance at least, factor on tuning and draws, what is said about it)
RETRIES = (
    (0.0, 1, "first attempt, settings as declared"),
    (0.97, 1, "target acceptance raised to 0.97"),
    (0.99, 2, "target acceptance raised to 0.99, twice the tuning and twice the draws"),
)
INITIAL_SPREAD = 0.5
THREAD_VARIABLES = ("OMP_NUM_THREADS", "OPENBLAS_NUM_THREADS", "MKL_NUM_THREADS", "NUMBA_NUM_THREADS")
STATISTICS = ("energy", "diverging", "n_steps", "step_size", "logp")


@dataclass(frozen=True, slots=True)
class Progress:
    """How far sampling is.

    Attributes:
        done, total: draws over all chains, tuning included.
        divergences: so far. seconds: since sampling began.
    """

    done: int
    total: int
    divergences: int
    seconds: float

    @property
    def seconds_left(self) -> float:
        """Estimated from the draws so far; infinite before the first."""
        return float("inf") if self.done == 0 else self.seconds * (self.total - self.done) / self.done


@dataclass(frozen=True, slots=True, eq=False)
class Fit:
    """Draws in natural coordinates with the attempts that led to them.

    Attributes:
        draws: (chain, draw, n) flat vectors in the order of ``Packing``.
        statistics: sampler statistics, (chain, draw) each.
        attempts: in order; the last one's draws are kept.
    """

    draws: Array
    statistics: xr.Dataset
    attempts: tuple[Attempt, ...]

    @property
    def released(self) -> bool:
        """True when the last attempt passed the gate."""
        return self.attempts[-1].diagnosis.passed


def coordinate_names(density: Density) -> tuple[str, ...]:
    """A name for each place of the flat vector."""
    structure = density.structure
    names = ["stiffness, population", *structure.law.shape_names, *(effect.name for effect in structure.root_effects)]
    names += [f"{mode}, batch {batch}" for batch in structure.batches for mode in structure.modes]
    for specimen, effects in zip(structure.specimens, structure.local_effects, strict=True):
        names += [f"{mode}, specimen {specimen}" for mode in structure.modes]
        names += [effect.name for effect in effects]
    names += [f"{mode} batch scatter" for mode in structure.modes] + [f"{mode} specimen scatter" for mode in structure.modes]
    names += [f"noise {name}, {instrument}" for instrument in structure.instruments for name in density.noise.parameter_names]
    return tuple(names)


def diagnose(draws: Array, statistics: xr.Dataset, names: tuple[str, ...]) -> Diagnosis:
    """Gate figures of draws (chain, draw, n)."""
    data = xr.Dataset({"x": (("chain", "draw", "name"), draws)}, coords={"name": list(names)})
    # a constant parameter gives 0/0 here, and is failed below
    with np.errstate(invalid="ignore", divide="ignore"):
        rhat = az.rhat(data)["x"].to_numpy()
        bulk = az.ess(data, method="bulk")["x"].to_numpy()
        tail = az.ess(data, method="tail")["x"].to_numpy()
    energy = statistics["energy"].to_numpy()
    ebfmi = np.square(np.diff(energy, axis=1)).mean(axis=1) / energy.var(axis=1)
    # a parameter whose draws are all alike or not finite has no R-hat: that is a failure, not a pass
    rhat = np.where(np.isfinite(rhat), rhat, np.inf)
    bulk, tail = np.where(np.isfinite(bulk), bulk, 0.0), np.where(np.isfinite(tail), tail, 0.0)
    return Diagnosis(
        rhat=float(rhat.max()),
        ess_bulk=float(bulk.min()),
        ess_tail=float(tail.min()),
        divergences=int(statistics["diverging"].to_numpy().sum()),
        ebfmi=float(ebfmi.min()),
        worst_rhat=names[int(rhat.argmax())],
        worst_ess=names[int(np.minimum(bulk, tail).argmin())],
        steps=float(statistics["n_steps"].to_numpy().mean()),
    )


class _Shared(Protocol):
    """What a shared array offers here."""

    def __setitem__(self, index: int, value: float) -> None: ...

    def __getitem__(self, index: int) -> float: ...


_progress: _Shared | None = None


def _follow_parent(parent: int) -> None:
    """End this process when its parent is gone: a killed run must not leave chains behind that nobody waits for."""
    while os.getppid() == parent:
        time.sleep(1.0)
    os._exit(1)


def _join(shared: _Shared) -> None:
    """Give a worker process the array that its progress goes to, and tie its life to its parent's."""
    # the keyboard's signal goes to all processes of a run: the parent decides, and says so once
    signal.signal(signal.SIGINT, signal.SIG_IGN)
    threading.Thread(target=_follow_parent, args=(os.getppid(),), daemon=True).start()
    global _progress  # noqa: PLW0603 - the only way for an initialiser to leave something in its process
    _progress = shared


def run_chain(whitened: WhitenedDensity, settings: SamplerSettings, chain: int) -> tuple[Array, dict[str, Array]]:
    """One chain: draws in natural coordinates, (draw, n), and statistics, (draw,) each."""
    size = whitened.size
    # one seed a chain: the draws don't depend on how many run side by side
    seed = int(np.random.SeedSequence([settings.seed, chain]).generate_state(1)[0])

    def make_expand(_seed1: int, _seed2: int, _chain: int) -> Callable[[Array], dict[str, Array]]:
        return lambda u: {"x": whitened.density.packing.join(whitened.state(u))}

    def initial_point(own_seed: int) -> Array:
        return INITIAL_SPREAD * np.random.default_rng(own_seed).standard_normal(size)

    def on_progress(chains: list[Any]) -> None:
        if _progress is not None:
            _progress[2 * chain] = float(chains[0].finished_draws)
            _progress[2 * chain + 1] = float(chains[0].divergences)

    model = nutpie.compiled_pyfunc.from_pyfunc(
        size,
        lambda: whitened,
        make_expand,
        [np.dtype("float64")],
        [(size,)],
        ["x"],
        make_initial_point_fn=initial_point,
    )
    trace = nutpie.sample(
        model,
        draws=settings.draws,
        tune=settings.tune,
        chains=1,
        cores=1,
        seed=seed,
        target_accept=settings.target_accept,
        save_warmup=False,
        progress_bar=False,
        progress_callback=on_progress,
        progress_rate=500,
    )
    statistics = trace["sample_stats"]
    return (
        np.asarray(trace["posterior"]["x"].to_numpy())[0],
        {name: np.asarray(statistics[name].to_numpy())[0] for name in STATISTICS},
    )


@contextmanager
def _single_threaded() -> Iterator[None]:
    """Processes that start within get one thread each for linear algebra: the cores belong to the chains."""
    before = {name: os.environ.get(name) for name in THREAD_VARIABLES}
    os.environ.update(dict.fromkeys(THREAD_VARIABLES, "1"))
    try:
        yield
    finally:
        for name, value in before.items():
            if value is None:
                os.environ.pop(name, None)
            else:
                os.environ[name] = value


@contextmanager
def _ended_when_stopped() -> Iterator[None]:
    """End the workers started inside where it is left by an exception: the pool would wait until their chains are through."""
    before = set(multiprocessing.active_children())
    try:
        yield
    except BaseException:
        for worker in set(multiprocessing.active_children()) - before:
            worker.terminate()
        raise


def run_once(
    density: Density, start: Start, settings: SamplerSettings, cores: int, report: Callable[[Progress], None] | None
) -> tuple[Array, xr.Dataset]:
    """One run of the sampler; draws in natural coordinates, (chain, draw, n), and statistics.

    Chains run in processes of their own: the density is called from Python, and threads would wait for one another.
    """
    whitened = WhitenedDensity(density, start.quadratic)
    context = multiprocessing.get_context("spawn")
    shared = context.Array("d", 2 * settings.chains, lock=False)
    began = time.perf_counter()

    def tell() -> None:
        if report is not None:
            done = int(sum(shared[2 * chain] for chain in range(settings.chains)))
            divergences = int(sum(shared[2 * chain + 1] for chain in range(settings.chains)))
            total = settings.chains * (settings.tune + settings.draws)
            report(Progress(min(done, total), total, divergences, time.perf_counter() - began))

    workers = max(1, min(cores, settings.chains))
    with (
        _single_threaded(),
        ProcessPoolExecutor(workers, mp_context=context, initializer=_join, initargs=(shared,)) as pool,
        _ended_when_stopped(),
    ):
        futures = [pool.submit(run_chain, whitened, settings, chain) for chain in range(settings.chains)]
        while wait(futures, timeout=1.0).not_done:
            tell()
        chains = [future.result() for future in futures]
    tell()
    statistics = xr.Dataset({name: (("chain", "draw"), np.stack([chain[1][name] for chain in chains])) for name in STATISTICS})
    return np.stack([chain[0] for chain in chains]), statistics


def sample(
    density: Density,
    start: Start,
    settings: SamplerSettings,
    cores: int = 2,
    report: Callable[[Progress], None] | None = None,
) -> Fit:
    """Sample until the gate passes or the retries are used up.

    Args:
        density: the model.
        start: optimum and whitening.
        settings: as declared by the study.
        cores: most processes at a time.
        report: called about once a second.
    """
    names = coordinate_names(density)
    attempts: list[Attempt] = []
    draws, statistics = np.empty(0), xr.Dataset()
    for number, (accept, factor, change) in enumerate(RETRIES):
        tried = replace(
            settings,
            target_accept=max(settings.target_accept, accept),
            draws=settings.draws * factor,
            tune=settings.tune * factor,
            seed=settings.seed + number,
        )
        began = time.perf_counter()
        draws, statistics = run_once(density, start, tried, cores, report)
        diagnosis = diagnose(draws, statistics, names)
        attempts.append(Attempt(tried, change, diagnosis, time.perf_counter() - began))
        if diagnosis.passed:
            break
    return Fit(draws, statistics, tuple(attempts))
