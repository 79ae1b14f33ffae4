"""The Maxwell kernels against values and methods from outside; sources in SOURCES.md."""

from __future__ import annotations

import json
from decimal import Decimal, localcontext
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from numpy.typing import NDArray
from scipy.integrate import quad, solve_ivp

from perdure.rheology.history import History, ramp_and_hold
from perdure.rheology.law import Drives
from perdure.rheology.maxwell import GeneralisedMaxwell

Array = NDArray[np.float64]

CLOSED: dict[str, Any] = json.loads((Path(__file__).parent / "closed_forms.json").read_text(encoding="utf-8"))
MATERIAL = CLOSED["material"]
MODULI = np.array(MATERIAL["E"])
TIMES = np.array(MATERIAL["tau"])
LAW = GeneralisedMaxwell(TIMES)
NATURAL = np.log(np.concatenate([[MATERIAL["Einf"]], MODULI, TIMES]))[None, :]
PRECISION = 1e-6


def table(key: str) -> tuple[Array, Array]:
    """Arguments and values of one entry of the reference file."""
    return np.array([float(argument) for argument in CLOSED[key]]), np.array(list(CLOSED[key].values()))


def stress_at(history: History, time: Array) -> Array:
    """Stress by the fitting kernel, which must be what the prediction kernel says too."""
    fine = history.with_knots(time)
    stress = LAW.respond(NATURAL, Drives.pack([fine]), np.zeros(1)).stress
    np.testing.assert_allclose(LAW.simulate(NATURAL, fine)[0], stress, rtol=0.0, atol=1e-13 * np.max(np.abs(stress)))
    return stress[np.searchsorted(fine.time, time)]


# --- closed forms -------------------------------------------------------------------------------------------------


def test_relaxation_modulus() -> None:
    time, expected = table("relaxation")
    np.testing.assert_allclose(LAW.modulus(NATURAL, time)[0], expected, rtol=1e-12)
    assert LAW.modulus(NATURAL, np.zeros(1))[0, 0] == pytest.approx(MATERIAL["E0"], rel=1e-14)


def test_relaxation_after_a_fast_ramp() -> None:
    time, expected = table("relaxation")
    ramp = 1e-9
    stress = stress_at(ramp_and_hold(0.05, ramp, 2000.0), ramp + time)
    np.testing.assert_allclose(stress / 0.05, expected, rtol=0.0, atol=PRECISION * expected.max())


def test_constant_rate() -> None:
    time, expected = table("constant_rate_0.01")
    stress = stress_at(History(np.array([0.0, 100.0]), np.array([0.0, 1.0])), time)
    np.testing.assert_allclose(stress, expected, rtol=PRECISION)


def test_ramp_and_hold() -> None:
    time, expected = table("ramp_hold_rate0.05_t1=2")
    stress = stress_at(ramp_and_hold(0.1, 2.0, 200.0), time)
    np.testing.assert_allclose(stress, expected, rtol=PRECISION)


@pytest.mark.parametrize("frequency", CLOSED["DMA"])
def test_storage_and_loss_modulus(frequency: str) -> None:
    """The last of many cycles of a finely divided sine, projected on sine and cosine; start-up has died away by then."""
    omega, per_cycle = float(frequency), 4000
    cycles = int(np.ceil(1.0 + min(400.0, 900.0 * omega / (2 * np.pi))))
    turn = np.arange(cycles * per_cycle + 1) / per_cycle
    history = History(2 * np.pi * turn / omega, np.sin(2 * np.pi * turn))
    last = slice(-per_cycle, None)
    stress, angle = LAW.simulate(NATURAL, history)[0, last], 2 * np.pi * turn[last]
    storage, loss = 2 * np.mean(stress * np.sin(angle)), 2 * np.mean(stress * np.cos(angle))
    expected = np.array(CLOSED["DMA"][frequency])
    np.testing.assert_allclose([storage, loss], expected[:2], rtol=0.0, atol=PRECISION * np.hypot(*expected[:2]))
    assert loss / storage == pytest.approx(expected[2], abs=PRECISION)


def test_energy_dissipated_in_a_steady_cycle() -> None:
    per_cycle = 4000
    turn = np.arange(200 * per_cycle + 1) / per_cycle
    history = History(2 * np.pi * turn, np.sin(2 * np.pi * turn))
    stress = LAW.simulate(NATURAL, history)[0, -per_cycle - 1 :]
    work = np.sum(0.5 * (stress[1:] + stress[:-1]) * np.diff(history.value[-per_cycle - 1 :]))
    assert work == pytest.approx(CLOSED["dissipated energy per unit-strain cycle w=1: pi E''"], rel=PRECISION)


# --- other methods: that they agree is common practice --------------------------------------------------------------


def wander(seed: int) -> History:
    rng = np.random.default_rng(seed)
    return History(
        np.concatenate([[0.0], np.cumsum(10.0 ** rng.uniform(-1.5, 1.5, 10))]), np.concatenate([[0.0], rng.uniform(-0.1, 0.1, 10)])
    )


@pytest.mark.parametrize("seed", [1, 2, 3])
def test_springs_and_dashpots_integrated_by_scipy(seed: int) -> None:
    """The arrangement itself: a dashpot of viscosity E τ in series with each spring, its strain as the state."""
    history = wander(seed)
    viscosity = MODULI * TIMES
    flowed = np.zeros((history.time.size, TIMES.size))
    for n in range(1, history.time.size):
        start, end = history.time[n - 1], history.time[n]
        rate = (history.value[n] - history.value[n - 1]) / (end - start)

        def flow(time: float, strain: Array, begin: float = start, base: float = history.value[n - 1], rate: float = rate) -> Array:
            return np.asarray(MODULI * (base + rate * (time - begin) - strain) / viscosity)

        solution = solve_ivp(flow, (start, end), flowed[n - 1], method="Radau", rtol=1e-9, atol=1e-12, jac=np.diag(-1.0 / TIMES))
        flowed[n] = solution.y[:, -1]
    expected = MATERIAL["Einf"] * history.value + (history.value[:, None] - flowed) @ MODULI
    np.testing.assert_allclose(stress_at(history, history.time), expected, rtol=0.0, atol=PRECISION * np.max(np.abs(expected)))


@pytest.mark.parametrize("seed", [4, 5, 6])
def test_hereditary_integral_by_quadrature(seed: int) -> None:
    """σ(t) = ∫ E(t − s) dε(s), segment by segment, from the formula of the modulus written out here."""
    history = wander(seed)

    def modulus(age: float) -> float:
        return float(MATERIAL["Einf"] + MODULI @ np.exp(-age / TIMES))

    time = np.sort(np.concatenate([history.time[1:], 0.5 * (history.time[1:] + history.time[:-1])]))
    expected = np.zeros(time.size)
    for row, now in enumerate(time):
        for n in range(1, history.time.size):
            start, end = history.time[n - 1], min(history.time[n], now)
            if end <= start:
                break
            rate = (history.value[n] - history.value[n - 1]) / (history.time[n] - start)
            ages = (now - end, now - start)
            cuts = [age for age in (0.1, 1.0, 10.0) if ages[0] < age < ages[1]] or None
            expected[row] += rate * quad(modulus, *ages, points=cuts, epsabs=1e-12, epsrel=1e-10)[0]
    np.testing.assert_allclose(stress_at(history, time), expected, rtol=0.0, atol=PRECISION * np.max(np.abs(expected)))


# --- simple time stepping: common practice ------------------------------------------------------------------------


def euler(history: History, *, backward: bool) -> Array:
    """Stress at the knots by Euler's rule for ḣ = ε̇ − h/τ, forward or backward."""
    arms = np.zeros(TIMES.size)
    stress = [0.0]
    for n in range(1, history.time.size):
        step, strain = history.time[n] - history.time[n - 1], history.value[n] - history.value[n - 1]
        arms = (arms + strain) / (1 + step / TIMES) if backward else arms + strain - step / TIMES * arms
        stress.append(float(MATERIAL["Einf"] * history.value[n] + MODULI @ arms))
    return np.array(stress)


@pytest.mark.parametrize("backward", [False, True], ids=["forward", "backward"])
def test_euler_converges_to_the_kernel_at_first_order(backward: bool) -> None:
    corners = History(np.array([0.0, 1.0, 2.5, 3.0, 4.0]), np.array([0.0, 0.1, 0.1, -0.05, 0.02]))
    errors = []
    for count in (800, 1600, 3200):
        fine = corners.with_knots(np.linspace(0.0, 4.0, count + 1))
        errors.append(np.max(np.abs(euler(fine, backward=backward) - LAW.simulate(NATURAL, fine)[0])))
    orders = np.log2(np.array(errors[:-1]) / errors[1:])
    np.testing.assert_allclose(orders, 1.0, atol=0.1)
    assert errors[-1] < 1e-2 * 0.3


def test_forward_euler_blows_up_beyond_twice_the_relaxation_time_and_the_kernel_does_not() -> None:
    shortest = TIMES[0]
    peaks = {}
    for factor in (1.9, 2.1):
        hold = ramp_and_hold(0.1, 1e-3, 1e-3 + 300 * factor * shortest)
        hold = hold.with_knots(1e-3 + factor * shortest * np.arange(1, 300))
        exact = LAW.simulate(NATURAL, hold)[0]
        peaks[factor] = np.max(np.abs(euler(hold, backward=False)))
        assert np.max(exact) < 0.1 * MATERIAL["E0"]
        assert np.all(np.diff(exact[1:]) < 0)
        expected = LAW.modulus(NATURAL, hold.time[1:] - 0.5e-3)[0] * 0.1
        np.testing.assert_allclose(exact[1:], expected, rtol=1e-5)  # a ramp of 1 ms acts as a step at its middle
    assert peaks[1.9] <= 0.1 * MATERIAL["E0"] * (1 + 1e-12)  # the elastic answer to the ramp
    assert peaks[2.1] > 1e6


# --- extreme spacings ---------------------------------------------------------------------------------------------


def exact_ramps(times: Array, moduli: Array, history: History) -> tuple[Array, Array]:
    """Stress and dσ/d ln τ_i at the knots from superposed ramps, Σ E τ ε̇ (e^{−(t−b)/τ} − e^{−(t−a)/τ}), in 60 digits."""
    with localcontext() as context:
        context.prec = 60
        time = [Decimal(float(t)) for t in history.time]
        value = [Decimal(float(v)) for v in history.value]
        stress = [Decimal(float(moduli[0])) * v for v in value]
        by_time = [[Decimal(0)] * times.size for _ in time]
        for i, (modulus, tau) in enumerate(zip(moduli[1:], times, strict=True)):
            viscosity, tau_exact = Decimal(float(modulus)) * Decimal(float(tau)), Decimal(float(tau))
            for n in range(1, len(time)):
                ages = [(time[n] - knot) / tau_exact for knot in time[: n + 1]]
                decays = [(-age).exp() for age in ages]
                slopes = [decay * (1 + age) for decay, age in zip(decays, ages, strict=True)]
                rates = [(value[m] - value[m - 1]) / (time[m] - time[m - 1]) for m in range(1, n + 1)]
                stress[n] += viscosity * sum((rates[m - 1] * (decays[m] - decays[m - 1]) for m in range(1, n + 1)), Decimal(0))
                by_time[n][i] = viscosity * sum((rates[m - 1] * (slopes[m] - slopes[m - 1]) for m in range(1, n + 1)), Decimal(0))
    return np.array([float(s) for s in stress]), np.array([[float(s) for s in row] for row in by_time])


def uneven(seed: int) -> History:
    """Steps of 1e-6 s to 1e9 s in random order."""
    rng = np.random.default_rng(seed)
    steps = 10.0 ** rng.permutation(np.linspace(-6.0, 9.0, 24))
    return History(np.concatenate([[0.0], np.cumsum(steps)]), np.concatenate([[0.0], rng.uniform(-0.1, 0.1, 24)]))


def growing() -> History:
    """A step within 1 µs, then a hold read from 2 µs to 1e9 s."""
    return ramp_and_hold(0.1, 1e-6, 1e9).with_knots(np.geomspace(2e-6, 5e8, 22))


@pytest.mark.parametrize("history", [growing(), uneven(7), uneven(8)], ids=["step and hold", "random 7", "random 8"])
def test_spacings_from_a_microsecond_to_decades(history: History) -> None:
    times = 10.0 ** np.arange(-6.0, 10.0, 3.0)
    moduli = np.array([0.5, 3.0, 2.0, 1.0, 1.5, 0.7, 0.4])
    natural = np.log(np.concatenate([moduli, times]))[None, :]
    law = GeneralisedMaxwell(times)
    stress, by_time = exact_ramps(times, moduli, history)
    peak = np.max(np.abs(stress))
    response = law.respond(natural, Drives.pack([history]), np.zeros(1))
    np.testing.assert_allclose(response.stress, stress, rtol=0.0, atol=PRECISION * peak)
    np.testing.assert_allclose(law.simulate(natural, history)[0], stress, rtol=0.0, atol=PRECISION * peak)
    np.testing.assert_allclose(response.by_natural[:, 1 + times.size :], by_time, rtol=0.0, atol=PRECISION * peak)
    np.testing.assert_allclose(response.by_clock, -by_time.sum(axis=1), rtol=0.0, atol=PRECISION * peak)
