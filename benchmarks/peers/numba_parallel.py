"""numba: one compiled function a loop, `prange` over the trials, a scalar loop over the samples of each.

Constants are closed over, so that the compiler knows them; each thread draws from numba's own generator.
"""

from __future__ import annotations

import math
from collections.abc import Callable, Mapping
from typing import Any

import numba
import numpy as np
from numba import njit, prange

from loops import Problem
from loops.problem import Values

from .gains import observer_gains

OPTIONS: dict[str, Any] = {"fastmath": {"contract", "arcp", "nsz", "reassoc", "afn"}, "error_model": "numpy"}
Simulate = Callable[[Values, Values, bool], Values]


class NumbaLoop:
    """One loop in numba."""

    grain = 8

    def __init__(self, problem: Problem, threads: int) -> None:
        numba.set_num_threads(min(threads, numba.config.NUMBA_NUM_THREADS))
        self._reference = np.ascontiguousarray(problem.reference())
        self._simulate = MAKERS[problem.letter](problem.constants)

    def simulate(self, parameters: Values, noise: bool, seed: int) -> Values:
        """Return the measures, shape (measures, trials)."""
        del seed
        return self._simulate(parameters, self._reference, noise)


def linear_plant(c: Mapping[str, float]) -> Simulate:
    """Return the compiled loop (a)."""
    ts, b0 = c["sample_period"], c["b0"]
    k1, k2 = c["controller_bandwidth"] ** 2, 2.0 * c["controller_bandwidth"]
    l1, l2, l3 = observer_gains(c["observer_bandwidth"], ts)
    peak_from = round(c["peak_after"] / ts)

    @njit(parallel=True, **OPTIONS)
    def simulate(p: Any, reference: Any, noise: Any) -> Any:  # noqa: ARG001  (as the other loops have it)
        trials, samples = p.shape[1], reference.shape[1]
        measures = np.empty((3, trials))
        for t in prange(trials):
            gain, natural, damping = p[0, t], 1.0 / p[1, t], p[2, t]
            decay = damping * natural
            omega = natural * math.sqrt(1.0 - damping**2)
            e, s, co = math.exp(-decay * ts), math.sin(omega * ts) / omega, math.cos(omega * ts)
            a11, a12, a21, a22 = e * (co + decay * s), e * s, -(natural**2) * e * s, e * (co - decay * s)
            b1, b2 = gain * (1.0 - a11), gain * natural**2 * a12
            y = speed = u = x1 = x2 = x3 = 0.0
            peak = square_sum = square_before = 0.0
            largest = -math.inf
            for k in range(samples):
                r = reference[0, k]
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
                    peak = max(peak, abs(error))
                square = error * error
                if k > 0:
                    square_sum += 0.5 * ts * (square_before + square)
                square_before = square
                largest = max(largest, y)
                y, speed = a11 * y + a12 * speed + b1 * u, a21 * y + a22 * speed + b2 * u
            measures[0, t], measures[1, t], measures[2, t] = peak, square_sum, largest
        return measures

    return simulate  # type: ignore[no-any-return]


def friction_drive(c: Mapping[str, float]) -> Simulate:
    """Return the compiled loop (b)."""
    ts, b0, limit = c["sample_period"], c["b0"], c["limit"]
    k1, k2 = c["controller_bandwidth"] ** 2, 2.0 * c["controller_bandwidth"]
    l1, l2, l3 = observer_gains(c["observer_bandwidth"], ts)
    peak_from = round(c["peak_after"] / ts)
    inverse_smoothing, resolution, sensor_noise = 1.0 / c["smoothing"], c["resolution"], c["noise"]
    keep = math.exp(-ts / c["correlation_time"])

    @njit(**OPTIONS)
    def acceleration(p: Any, rate: float, drive: float) -> float:
        return (drive - p[2] * rate - p[3] * math.tanh(rate * inverse_smoothing)) * p[0]

    @njit(**OPTIONS)
    def step(p: Any, angle: float, rate: float, h: float, torque: float, load: float) -> tuple[float, float]:
        drive = p[1] * torque + load
        a1 = acceleration(p, rate, drive)
        r2 = rate + 0.5 * h * a1
        a2 = acceleration(p, r2, drive)
        r3 = rate + 0.5 * h * a2
        a3 = acceleration(p, r3, drive)
        r4 = rate + h * a3
        a4 = acceleration(p, r4, drive)
        angle += h / 6.0 * (rate + 2.0 * r2 + 2.0 * r3 + r4)
        return angle, rate + h / 6.0 * (a1 + 2.0 * a2 + 2.0 * a3 + a4)

    @njit(parallel=True, **OPTIONS)
    def simulate(p: Any, reference: Any, noise: Any) -> Any:
        trials, samples = p.shape[1], reference.shape[1]
        measures = np.empty((5, trials))
        for t in prange(trials):
            plant = (1.0 / p[0, t], p[1, t], p[2, t], p[3, t])
            delay, intensity = p[4, t], p[5, t]
            whole = math.floor(delay / ts + 1e-9)
            fraction = delay - whole * ts
            splits = fraction > 1e-9 * ts
            before = fraction if splits else 0.5 * ts
            load_gain = intensity * math.sqrt(1.0 - keep**2)
            angle = rate = load = x1 = x2 = x3 = 0.0
            u0 = u1 = u2 = u3 = 0.0
            peak = torque_square = square_sum = square_before = variation = saturated = 0.0
            for k in range(samples):
                load_draw = np.random.standard_normal() if noise else 0.0  # noqa: NPY002
                sensor_draw = np.random.standard_normal() if noise else 0.0  # noqa: NPY002
                load = intensity * load_draw if k == 0 else keep * load + load_gain * load_draw
                error = reference[0, k] - angle
                measured = math.floor((angle + sensor_noise * sensor_draw) / resolution + 0.5) * resolution
                top = x3 - b0 * u0
                x1 += ts * (x2 + 0.5 * ts * top)
                x2 += ts * top
                innovation = reference[0, k] - measured - x1
                x1 += l1 * innovation
                x2 += l2 * innovation
                x3 += l3 * innovation
                u3, u2, u1 = u2, u1, u0
                u0 = min(max((k1 * x1 + k2 * x2 + x3) * (1.0 / b0), -limit), limit)
                late = u0 if whole == 0 else (u1 if whole == 1 else u2)
                early = late
                if splits:
                    early = u1 if whole == 0 else (u2 if whole == 1 else u3)
                if k >= peak_from:
                    peak = max(peak, abs(error))
                torque_square += early * early
                square = error * error
                if k > 0:
                    square_sum += 0.5 * ts * (square_before + square)
                    variation += abs(u0 - u1)
                square_before = square
                if k + 1 < samples:
                    if u0 <= -limit or u0 >= limit:
                        saturated += ts
                    angle, rate = step(plant, angle, rate, before, early, load)
                    angle, rate = step(plant, angle, rate, ts - before, late, load)
            measures[0, t], measures[1, t] = peak, math.sqrt(torque_square / samples)
            measures[2, t], measures[3, t], measures[4, t] = square_sum, variation, saturated
        return measures

    return simulate  # type: ignore[no-any-return]


def geared_servo(c: Mapping[str, float]) -> Simulate:
    """Return the compiled loop (d)."""
    ts, b0, limit, steps = c["sample_period"], c["b0"], c["limit"], int(c["steps"])
    k1, k2 = c["controller_bandwidth"] ** 2, 2.0 * c["controller_bandwidth"]
    l1, l2, l3 = observer_gains(c["observer_bandwidth"], ts)
    moved = c["move_start"] + c["move_time"]
    move_from, move_to = round(c["move_start"] / ts), round(moved / ts)
    still_from, loaded_from = round(c["standstill"] / ts), round(c["loaded"] / ts)
    inverse_smoothing, inverse_stribeck = 1.0 / c["smoothing"], 1.0 / c["stribeck_speed"]
    periods, tolerance = c["cogging_periods"], c["settle_tolerance"]
    resolution, sensor_noise = c["resolution"], c["noise"]

    @njit(**OPTIONS)
    def derivative(p: Any, x: Any, command: float, load: float) -> Any:
        shaft = p[2] * (x[0] - x[2]) + p[3] * (x[1] - x[3])
        ratio = x[3] * inverse_stribeck
        friction = (p[6] + p[7] * math.exp(-ratio * ratio)) * math.tanh(x[3] * inverse_smoothing) + p[8] * x[3]
        cog = p[9] * math.sin(periods * x[0] + p[10])
        return (
            x[1],
            (p[5] * x[4] - shaft + cog) * p[0],
            x[3],
            (shaft - friction - load) * p[1],
            (command - x[4]) * p[4],
        )

    @njit(**OPTIONS)
    def moved_by(x: Any, k: Any, h: float) -> Any:
        return (x[0] + h * k[0], x[1] + h * k[1], x[2] + h * k[2], x[3] + h * k[3], x[4] + h * k[4])

    @njit(**OPTIONS)
    def step(p: Any, x: Any, h: float, command: float, load: float) -> Any:
        a = derivative(p, x, command, load)
        b = derivative(p, moved_by(x, a, 0.5 * h), command, load)
        d = derivative(p, moved_by(x, b, 0.5 * h), command, load)
        e = derivative(p, moved_by(x, d, h), command, load)
        s = h / 6.0
        return (
            x[0] + s * (a[0] + 2.0 * b[0] + 2.0 * d[0] + e[0]),
            x[1] + s * (a[1] + 2.0 * b[1] + 2.0 * d[1] + e[1]),
            x[2] + s * (a[2] + 2.0 * b[2] + 2.0 * d[2] + e[2]),
            x[3] + s * (a[3] + 2.0 * b[3] + 2.0 * d[3] + e[3]),
            x[4] + s * (a[4] + 2.0 * b[4] + 2.0 * d[4] + e[4]),
        )

    @njit(parallel=True, **OPTIONS)
    def simulate(p: Any, reference: Any, noise: Any) -> Any:
        trials, samples = p.shape[1], reference.shape[1]
        measures = np.empty((4, trials))
        h = ts / steps
        for t in prange(trials):
            resonance = math.sqrt(p[2, t] * (p[0, t] + p[1, t]) / (p[0, t] * p[1, t]))
            plant = (
                1.0 / p[0, t],
                1.0 / p[1, t],
                p[2, t],
                2.0 * p[3, t] * p[2, t] / resonance,
                1.0 / p[4, t],
                p[5, t],
                p[6, t],
                (p[7, t] - 1.0) * p[6, t],
                p[8, t],
                p[9, t],
                p[10, t],
                p[11, t],
            )
            late = p[12, t] > 1.5 * ts
            x = (0.0, 0.0, 0.0, 0.0, 0.0)
            x1 = x2 = x3 = u0 = u1 = u2 = 0.0
            following = loaded = first_command = total = squares = 0.0
            since = deviation_before = time_before = 0.0
            outside = False
            for k in range(samples):
                time = k * ts
                error = reference[0, k] - x[0]
                draw = np.random.standard_normal() if noise else 0.0  # noqa: NPY002
                measured = math.floor((x[0] + sensor_noise * draw) / resolution + 0.5) * resolution
                top = x3 + b0 * u0
                x1 += ts * (x2 + 0.5 * ts * top)
                x2 += ts * top
                innovation = measured - x1
                x1 += l1 * innovation
                x2 += l2 * innovation
                x3 += l3 * innovation
                wanted = k1 * (reference[0, k] - x1) + k2 * (reference[1, k] - x2) + reference[2, k] - x3
                u2, u1 = u1, u0
                u0 = min(max(wanted * (1.0 / b0), -limit), limit)
                deviation = abs(error)
                if move_from <= k <= move_to:
                    following = max(following, deviation)
                if move_to <= k <= loaded_from:
                    if deviation > tolerance:
                        outside = True
                    elif outside:
                        outside = False
                        part = (deviation_before - tolerance) / (deviation_before - deviation)
                        since = time_before + (time - moved - time_before) * part
                    deviation_before, time_before = deviation, time - moved
                if k >= loaded_from:
                    loaded = max(loaded, deviation)
                if still_from <= k <= loaded_from:
                    if k == still_from:
                        first_command = u0
                    total += u0 - first_command
                    squares += (u0 - first_command) ** 2
                if k + 1 < samples:
                    command = u2 if late else u1
                    load = plant[11] if k >= loaded_from else 0.0
                    for _ in range(steps):
                        x = step(plant, x, h, command, load)
            count = loaded_from - still_from + 1
            variance = squares / count - (total / count) ** 2
            measures[0, t], measures[1, t] = following, math.inf if outside else since
            measures[2, t], measures[3, t] = loaded, math.sqrt(max(variance, 0.0))
        return measures

    return simulate  # type: ignore[no-any-return]


MAKERS: dict[str, Callable[[Mapping[str, float]], Simulate]] = {
    "a": linear_plant,
    "b": friction_drive,
    "d": geared_servo,
}
