"""NumPy: every line of the loop over all trials at once, in chunks that stay in the second-level cache.

With several threads each takes chunks of its own in a process of its own.
"""

from __future__ import annotations

import math
from collections.abc import Callable
from typing import Any

import numpy as np

from loops import Problem
from loops.problem import Values

from .gains import observer_gains
from .processes import Shares

Simulate = Callable[[Problem, Values, Values, Any], Values]


#: Trials of a chunk, the fastest of 256 to 8192 each.
CHUNKS = {"a": 8192, "b": 4096, "d": 2048}


class NumpyLoop:
    """One loop in NumPy."""

    def __init__(self, problem: Problem, threads: int) -> None:
        chunk = CHUNKS[problem.letter]
        self._shares = Shares(simulate_chunk, problem.letter, threads, chunk)
        self.grain = chunk * threads
        self.timed_samples = 400 if problem.letter == "d" else problem.samples

    def simulate(self, parameters: Values, noise: bool, seed: int, samples: int = 0) -> Values:
        """Return the measures, shape (measures, trials)."""
        return self._shares.simulate(parameters, noise, seed, samples)

    def close(self) -> None:
        """End the processes."""
        self._shares.close()


def simulate_chunk(problem: Problem, parameters: Values, noise: bool, seed: int, samples: int) -> Values:
    """Return the measures of a chunk of trials that end after some samples, shape (measures, trials)."""
    generator = np.random.Generator(np.random.SFC64(seed))
    trials = parameters.shape[1]

    def normal() -> Any:
        return generator.standard_normal(trials) if noise else 0.0

    reference = problem.reference()[:, : samples or problem.samples]
    return MAKERS[problem.letter](problem, parameters, reference, normal)


def linear_plant(problem: Problem, p: Values, reference: Values, normal: Any) -> Values:
    """Loop (a)."""
    del normal
    c = problem.constants
    ts, b0 = c["sample_period"], c["b0"]
    k1, k2 = c["controller_bandwidth"] ** 2, 2.0 * c["controller_bandwidth"]
    l1, l2, l3 = observer_gains(c["observer_bandwidth"], ts)
    peak_from = round(c["peak_after"] / ts)
    gain, natural, damping = p[0], 1.0 / p[1], p[2]
    decay, omega = damping * natural, natural * np.sqrt(1.0 - damping**2)
    e, s, co = np.exp(-decay * ts), np.sin(omega * ts) / omega, np.cos(omega * ts)
    a11, a12, a21, a22 = e * (co + decay * s), e * s, -(natural**2) * e * s, e * (co - decay * s)
    b1, b2 = gain * (1.0 - a11), gain * natural**2 * a12
    y, speed, u, x1, x2, x3, peak, square_sum, square_before = np.zeros((9, p.shape[1]))
    largest = np.full(p.shape[1], -np.inf)
    for k, r in enumerate(reference[0]):
        error = r - y
        top = x3 + b0 * u
        x1 += ts * (x2 + 0.5 * ts * top)
        x2 += ts * top
        innovation = y - x1
        x1 += l1 * innovation
        x2 += l2 * innovation
        x3 += l3 * innovation
        u = (k1 * (r - x1) - k2 * x2 - x3) * (1.0 / b0)
        if k >= peak_from:
            np.maximum(peak, np.abs(error), out=peak)
        square = error * error
        if k > 0:
            square_sum += square_before + square
        square_before = square
        np.maximum(largest, y, out=largest)
        y, speed = a11 * y + a12 * speed + b1 * u, a21 * y + a22 * speed + b2 * u
    return np.array([peak, 0.5 * ts * square_sum, largest])


def friction_drive(problem: Problem, p: Values, reference: Values, normal: Any) -> Values:
    """Loop (b)."""
    c = problem.constants
    ts, b0, limit = c["sample_period"], c["b0"], c["limit"]
    k1, k2 = c["controller_bandwidth"] ** 2, 2.0 * c["controller_bandwidth"]
    l1, l2, l3 = observer_gains(c["observer_bandwidth"], ts)
    keep = math.exp(-ts / c["correlation_time"])
    peak_from = round(c["peak_after"] / ts)
    inverse_inertia, gear, drag, coulomb, delay, intensity = 1.0 / p[0], *p[1:]
    gear, drag, coulomb = gear * inverse_inertia, drag * inverse_inertia, coulomb * inverse_inertia
    intensity = intensity * inverse_inertia  # the load is kept as an acceleration
    load_gain = intensity * math.sqrt(1.0 - keep**2)
    whole = np.floor(delay / ts + 1e-9)
    fraction = delay - whole * ts
    splits = fraction > 1e-9 * ts
    before = np.where(splits, fraction, 0.5 * ts)
    oldest = whole + splits
    is_late = [whole == i for i in range(3)]
    is_early = [oldest == i for i in range(4)]

    def acceleration(rate: Any, drive: Any) -> Any:
        return drive - drag * rate - coulomb * np.tanh(rate * (1.0 / c["smoothing"]))

    def step(angle: Any, rate: Any, h: Any, half: Any, sixth: Any, drive: Any) -> Any:
        a1 = acceleration(rate, drive)
        r2 = rate + half * a1
        a2 = acceleration(r2, drive)
        r3 = rate + half * a2
        a3 = acceleration(r3, drive)
        r4 = rate + h * a3
        a4 = acceleration(r4, drive)
        angle = angle + sixth * (rate + 2.0 * (r2 + r3) + r4)
        return angle, rate + sixth * (a1 + 2.0 * (a2 + a3) + a4)

    lengths = [(h, 0.5 * h, h / 6.0) for h in (before, ts - before)]
    angle, rate, load, x1, x2, x3, u0, u1, u2, peak, torque_square = np.zeros((11, p.shape[1]))
    square_sum, square_before, variation, saturated = np.zeros((4, p.shape[1]))
    for k, r in enumerate(reference[0]):
        load = intensity * normal() if k == 0 else keep * load + load_gain * normal()
        error = r - angle
        measured = np.floor((angle + c["noise"] * normal()) * (1.0 / c["resolution"]) + 0.5) * c["resolution"]
        top = x3 - b0 * u0
        x1 += ts * (x2 + 0.5 * ts * top)
        x2 += ts * top
        innovation = (r - measured) - x1
        x1 += l1 * innovation
        x2 += l2 * innovation
        x3 += l3 * innovation
        u3, u2, u1 = u2, u1, u0
        u0 = np.clip((k1 * x1 + k2 * x2 + x3) * (1.0 / b0), -limit, limit)
        late = np.select(is_late, (u0, u1, u2))
        early = np.select(is_early, (u0, u1, u2, u3))
        if k >= peak_from:
            np.maximum(peak, np.abs(error), out=peak)
        torque_square += early * early
        square = error * error
        if k > 0:
            square_sum += square_before + square
            variation += np.abs(u0 - u1)
        square_before = square
        if k + 1 == reference.shape[1]:
            break
        saturated += np.abs(u0) >= limit
        angle, rate = step(angle, rate, *lengths[0], gear * early + load)
        angle, rate = step(angle, rate, *lengths[1], gear * late + load)
    rms = np.sqrt(torque_square / reference.shape[1])
    return np.array([peak, rms, 0.5 * ts * square_sum, variation, ts * saturated])


def geared_servo(problem: Problem, p: Values, reference: Values, normal: Any) -> Values:
    """Loop (d)."""
    c = problem.constants
    ts, b0, limit, steps = c["sample_period"], c["b0"], c["limit"], int(c["steps"])
    k1, k2 = c["controller_bandwidth"] ** 2, 2.0 * c["controller_bandwidth"]
    l1, l2, l3 = observer_gains(c["observer_bandwidth"], ts)
    h, moved, tolerance = ts / steps, c["move_start"] + c["move_time"], c["settle_tolerance"]
    move_from, move_to = round(c["move_start"] / ts), round(moved / ts)
    still_from, loaded_from = round(c["standstill"] / ts), round(c["loaded"] / ts)
    stiffness, gain, viscous, cogging, phase, load_torque = p[2], p[5], p[8], p[9], p[10], p[11]
    damping = 2.0 * p[3] * stiffness / np.sqrt(stiffness * (p[0] + p[1]) / (p[0] * p[1]))
    inverse_motor, inverse_load, inverse_current_time = 1.0 / p[0], 1.0 / p[1], 1.0 / p[4]
    coulomb, breakaway, is_two = p[6], (p[7] - 1.0) * p[6], p[12] > 1.5 * ts

    def derivative(x: Values, command: Any, load: Any) -> Values:
        shaft = stiffness * (x[0] - x[2]) + damping * (x[1] - x[3])
        ratio = x[3] * (1.0 / c["stribeck_speed"])
        level = coulomb + breakaway * np.exp(-ratio * ratio)
        friction = level * np.tanh(x[3] * (1.0 / c["smoothing"])) + viscous * x[3]
        d = np.empty_like(x)
        d[0] = x[1]
        d[1] = (gain * x[4] - shaft + cogging * np.sin(c["cogging_periods"] * x[0] + phase)) * inverse_motor
        d[2] = x[3]
        d[3] = (shaft - friction - load) * inverse_load
        d[4] = (command - x[4]) * inverse_current_time
        return d

    def step(x: Values, command: Any, load: Any) -> Values:
        d1 = derivative(x, command, load)
        d2 = derivative(x + (0.5 * h) * d1, command, load)
        d3 = derivative(x + (0.5 * h) * d2, command, load)
        d4 = derivative(x + h * d3, command, load)
        return x + (h / 6.0) * (d1 + 2.0 * (d2 + d3) + d4)

    x = np.zeros((5, p.shape[1]))
    x1, x2, x3, u0, u1, u2, following, since, loaded, total, squares, deviation = np.zeros((12, p.shape[1]))
    outside, first_command = np.zeros(p.shape[1], bool), np.zeros(p.shape[1])
    for k in range(reference.shape[1]):
        time, r = k * ts, reference[:, k]
        measured = np.floor((x[0] + c["noise"] * normal()) * (1.0 / c["resolution"]) + 0.5) * c["resolution"]
        top = x3 + b0 * u0
        x1 += ts * (x2 + 0.5 * ts * top)
        x2 += ts * top
        innovation = measured - x1
        x1 += l1 * innovation
        x2 += l2 * innovation
        x3 += l3 * innovation
        u2, u1 = u1, u0
        wanted = k1 * (r[0] - x1) + k2 * (r[1] - x2) + r[2] - x3
        u0 = np.clip(wanted * (1.0 / b0), -limit, limit)
        deviation_before, deviation = deviation, np.abs(r[0] - x[0])
        if move_from <= k <= move_to:
            np.maximum(following, deviation, out=following)
        if move_to <= k <= loaded_from:
            is_outside = deviation > tolerance
            settles = outside & ~is_outside
            if settles.any():
                part = (deviation_before - tolerance)[settles] / (deviation_before - deviation)[settles]
                since[settles] = time - moved - ts + ts * part
            outside = is_outside
        if k >= loaded_from:
            np.maximum(loaded, deviation, out=loaded)
        if still_from <= k <= loaded_from:
            if k == still_from:
                first_command = u0
            total += u0 - first_command
            squares += (u0 - first_command) ** 2
        if k + 1 == reference.shape[1]:
            break
        command = np.where(is_two, u2, u1)
        load = load_torque if k >= loaded_from else 0.0
        for _ in range(steps):
            x = step(x, command, load)
    count = loaded_from - still_from + 1
    ripple = np.sqrt(np.maximum(squares / count - (total / count) ** 2, 0.0))
    return np.array([following, np.where(outside, np.inf, since), loaded, ripple])


MAKERS: dict[str, Simulate] = {"a": linear_plant, "b": friction_drive, "d": geared_servo}
