"""SciPy: one trial after the other, `solve_ivp` from each change of the command to the next.

The method is RK45, which is the default, with a relative tolerance of 1e-6; all else is as SciPy has it. It chooses its
own steps, so its numbers differ from those of the fixed steps by the integration error. With several threads the trials
are shared out over processes.
"""

from __future__ import annotations

import math
from collections.abc import Callable
from typing import Any

import numpy as np
from scipy.integrate import solve_ivp

from loops import Problem
from loops.problem import Values

from .gains import observer_gains
from .processes import Shares

Trial = Callable[[Problem, Values, Values, Any, int], list[float]]
OPTIONS: dict[str, Any] = {"method": "RK45", "rtol": 1e-6, "atol": 1e-9}


class ScipyTrials:
    """One loop in SciPy. For timing, trials end after `timed_samples`."""

    grain = 1
    timed_samples = 200

    def __init__(self, problem: Problem, threads: int) -> None:
        self._problem = problem
        self._shares = Shares(simulate_chunk, problem.letter, threads, chunk=1)
        self.grain = threads

    def simulate(self, parameters: Values, noise: bool, seed: int, samples: int = 0) -> Values:
        """Return the measures, shape (measures, trials)."""
        return self._shares.simulate(parameters, noise, seed, samples)

    def close(self) -> None:
        """End the processes."""
        self._shares.close()


def simulate_chunk(problem: Problem, parameters: Values, noise: bool, seed: int, samples: int) -> Values:
    """Return the measures of some trials, shape (measures, trials)."""
    generator = np.random.default_rng(seed)
    reference = problem.reference()

    def normal() -> float:
        return generator.standard_normal() if noise else 0.0

    count = samples or problem.samples
    trials = [MAKERS[problem.letter](problem, p, reference, normal, count) for p in parameters.T]
    return np.array(trials).T


class Observer:
    """Extended state observer of order 2."""

    def __init__(self, bandwidth: float, ts: float) -> None:
        self._ts, self._gains = ts, observer_gains(bandwidth, ts)
        self.x1 = self.x2 = self.x3 = 0.0

    def update(self, measured: float, drive: float) -> None:
        """Move on by one sample; `drive` is b0 times the last command."""
        ts, (l1, l2, l3) = self._ts, self._gains
        top = self.x3 + drive
        x1, x2 = self.x1 + ts * (self.x2 + 0.5 * ts * top), self.x2 + ts * top
        innovation = measured - x1
        self.x1, self.x2, self.x3 = x1 + l1 * innovation, x2 + l2 * innovation, self.x3 + l3 * innovation


def linear_plant(problem: Problem, p: Values, reference: Values, normal: Any, samples: int) -> list[float]:
    """Loop (a)."""
    del normal
    c = problem.constants
    ts, b0 = c["sample_period"], c["b0"]
    k1, k2 = c["controller_bandwidth"] ** 2, 2.0 * c["controller_bandwidth"]
    peak_from = round(c["peak_after"] / ts)
    gain, time_constant, damping = p.tolist()

    def rates(t: float, x: Any, u: float) -> tuple[float, float]:
        del t
        return x[1], (gain * u - x[0] - 2.0 * damping * time_constant * x[1]) / time_constant**2

    observer, x, u = Observer(c["observer_bandwidth"], ts), np.zeros(2), 0.0
    peak = square_sum = square_before = 0.0
    largest = -math.inf
    for k in range(samples):
        r = reference[0, k]
        error = r - x[0]
        observer.update(x[0], b0 * u)
        u = (k1 * (r - observer.x1) - k2 * observer.x2 - observer.x3) / b0
        if k >= peak_from:
            peak = max(peak, abs(error))
        if k > 0:
            square_sum += 0.5 * ts * (square_before + error**2)
        square_before = error**2
        largest = max(largest, x[0])
        x = solve_ivp(rates, (0.0, ts), x, args=(u,), **OPTIONS).y[:, -1]
    return [peak, square_sum, largest]


def friction_drive(problem: Problem, p: Values, reference: Values, normal: Any, samples: int) -> list[float]:
    """Loop (b)."""
    c = problem.constants
    ts, b0, limit, resolution = c["sample_period"], c["b0"], c["limit"], c["resolution"]
    k1, k2 = c["controller_bandwidth"] ** 2, 2.0 * c["controller_bandwidth"]
    keep = math.exp(-ts / c["correlation_time"])
    peak_from = round(c["peak_after"] / ts)
    inertia, gear, drag, coulomb, delay, intensity = p.tolist()
    whole = math.floor(delay / ts + 1e-9)
    fraction = delay - whole * ts
    if fraction < 1e-9 * ts:
        fraction = 0.0

    def rates(t: float, x: Any, torque: float, load: float) -> tuple[float, float]:
        del t
        friction = drag * x[1] + coulomb * math.tanh(x[1] / c["smoothing"])
        return x[1], (gear * torque - friction + load) / inertia

    observer, x, load = Observer(c["observer_bandwidth"], ts), np.zeros(2), 0.0
    u = [0.0] * (whole + 2)
    peak = torque_square = square_sum = square_before = variation = saturated = 0.0
    for k in range(samples):
        gain = intensity * (1.0 if k == 0 else math.sqrt(1.0 - keep**2))
        load = keep * load + gain * normal()
        r = reference[0, k]
        error = r - x[0]
        measured = math.floor((x[0] + c["noise"] * normal()) / resolution + 0.5) * resolution
        observer.update(r - measured, -b0 * u[0])
        wanted = (k1 * observer.x1 + k2 * observer.x2 + observer.x3) / b0
        u = [min(max(wanted, -limit), limit), *u[:-1]]
        late, early = u[whole], u[whole + 1] if fraction > 0.0 else u[whole]
        if k >= peak_from:
            peak = max(peak, abs(error))
        torque_square += early**2
        if k > 0:
            square_sum += 0.5 * ts * (square_before + error**2)
            variation += abs(u[0] - u[1])
        square_before = error**2
        if k + 1 == samples:
            break
        if abs(u[0]) >= limit:
            saturated += ts
        if fraction > 0.0:
            x = solve_ivp(rates, (0.0, fraction), x, args=(early, load), **OPTIONS).y[:, -1]
        x = solve_ivp(rates, (fraction, ts), x, args=(late, load), **OPTIONS).y[:, -1]
    return [peak, math.sqrt(torque_square / samples), square_sum, variation, saturated]


def geared_servo(problem: Problem, p: Values, reference: Values, normal: Any, samples: int) -> list[float]:
    """Loop (d)."""
    c = problem.constants
    ts, b0, limit, resolution = c["sample_period"], c["b0"], c["limit"], c["resolution"]
    k1, k2 = c["controller_bandwidth"] ** 2, 2.0 * c["controller_bandwidth"]
    moved, tolerance = c["move_start"] + c["move_time"], c["settle_tolerance"]
    move_from, move_to = round(c["move_start"] / ts), round(moved / ts)
    still_from, loaded_from = round(c["standstill"] / ts), round(c["loaded"] / ts)
    motor, inertia, stiffness, ratio, current_time, gain = p[:6].tolist()
    coulomb, breakaway, viscous, cogging, phase, load_torque, delay = p[6:].tolist()
    damping = 2.0 * ratio * stiffness / math.sqrt(stiffness * (motor + inertia) / (motor * inertia))
    whole = round(delay / ts)

    def rates(t: float, x: Any, command: float, load: float) -> tuple[float, ...]:
        del t
        motor_angle, motor_speed, load_angle, load_speed, torque = x
        shaft = stiffness * (motor_angle - load_angle) + damping * (motor_speed - load_speed)
        level = coulomb * (1.0 + (breakaway - 1.0) * math.exp(-((load_speed / c["stribeck_speed"]) ** 2)))
        friction = level * math.tanh(load_speed / c["smoothing"]) + viscous * load_speed
        cog = cogging * math.sin(c["cogging_periods"] * motor_angle + phase)
        return (
            motor_speed,
            (gain * torque - shaft + cog) / motor,
            load_speed,
            (shaft - friction - load) / inertia,
            (command - torque) / current_time,
        )

    observer, x, u = Observer(c["observer_bandwidth"], ts), np.zeros(5), [0.0, 0.0, 0.0]
    following = loaded = since = deviation = 0.0
    outside = False
    still: list[float] = []
    for k in range(samples):
        time, (r, speed, acceleration) = k * ts, reference[:, k]
        measured = math.floor((x[0] + c["noise"] * normal()) / resolution + 0.5) * resolution
        observer.update(measured, b0 * u[0])
        wanted = k1 * (r - observer.x1) + k2 * (speed - observer.x2) + acceleration - observer.x3
        u = [min(max(wanted / b0, -limit), limit), *u[:-1]]
        deviation_before, deviation = deviation, abs(r - x[0])
        if move_from <= k <= move_to:
            following = max(following, deviation)
        if move_to <= k <= loaded_from:
            if outside and deviation <= tolerance:
                part = (deviation_before - tolerance) / (deviation_before - deviation)
                since = time - moved - ts + ts * part
            outside = deviation > tolerance
        if k >= loaded_from:
            loaded = max(loaded, deviation)
        if still_from <= k <= loaded_from:
            still.append(u[0])
        if k + 1 < samples:
            load = load_torque if k >= loaded_from else 0.0
            x = solve_ivp(rates, (time, time + ts), x, args=(u[whole], load), **OPTIONS).y[:, -1]
    ripple = float(np.std(still)) if still else 0.0
    return [following, math.inf if outside else since, loaded, ripple]


MAKERS: dict[str, Trial] = {"a": linear_plant, "b": friction_drive, "d": geared_servo}
