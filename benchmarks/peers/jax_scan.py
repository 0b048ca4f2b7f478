"""JAX: `lax.scan` over the samples, one sample of one trial under `vmap`, jitted, float64, on the processor.

The noise of a sample is drawn for the whole batch at once, which costs a third less than a key for each trial, and the
trials are the last axis of every array; a state of five is one array, which is three times as fast as five arrays.
With several threads the trials are shared out over as many host devices, each with its part of the batch.
"""

from __future__ import annotations

import math
from collections.abc import Callable
from typing import Any

import jax
import jax.numpy as jnp
import numpy as np
from jax import lax, random

from loops import Problem
from loops.problem import Values

from .gains import observer_gains

#: Start and sample of one trial, and what its measures are at the end.
Trial = tuple[Callable[..., Any], Callable[..., Any], Callable[..., Any]]


class JaxLoop:
    """One loop in JAX."""

    grain = 2048

    def __init__(self, problem: Problem, threads: int) -> None:
        jax.config.update("jax_enable_x64", True)
        jax.config.update("jax_platforms", "cpu")
        if threads > 1:
            jax.config.update("jax_num_cpu_devices", threads)
        self.grain = JaxLoop.grain * threads
        mesh = jax.sharding.Mesh(np.array(jax.devices()), ("trials",))
        self._by_trial = jax.sharding.NamedSharding(mesh, jax.sharding.PartitionSpec(None, "trials"))
        self._devices = len(jax.devices())
        self._simulate = jax.jit(over_trials(problem, *MAKERS[problem.letter](problem)), static_argnums=2)

    def simulate(self, parameters: Values, noise: bool, seed: int) -> Values:
        """Return the measures, shape (measures, trials)."""
        trials = parameters.shape[1]
        padded = -(-trials // self._devices) * self._devices
        columns = np.take(parameters, range(padded), axis=1, mode="clip")
        placed = jax.device_put(columns, self._by_trial)
        key = random.key(seed, impl=GENERATOR)
        return np.asarray(self._simulate(placed, key, noise))[:, :trials]


def over_trials(problem: Problem, start: Any, sample: Any, finish: Any) -> Callable[[Any, Any, bool], Any]:
    """Return the simulation of a batch: a scan over the samples of `sample` mapped over the trials."""
    reference = jnp.asarray(problem.reference().T)
    index = jnp.arange(problem.samples)
    draws = DRAWS[problem.letter]

    def simulate(columns: Any, key: Any, noise: bool) -> Any:
        trials = columns.shape[1]

        def normals(k: Any) -> Any:
            if not noise or draws == 0:
                return jnp.zeros((draws, trials))
            return random.normal(random.fold_in(key, k), (draws, trials))

        def body(carry: Any, now: Any) -> Any:
            k, r = now
            return jax.vmap(sample, in_axes=(1, -1, 1, None, None), out_axes=-1)(columns, carry, normals(k), k, r), None

        carry = jax.vmap(start, in_axes=(1, 1), out_axes=-1)(columns, normals(problem.samples))
        carry, _ = lax.scan(body, carry, (index, reference))
        return jax.vmap(finish, in_axes=-1, out_axes=-1)(carry)

    return simulate


def linear_plant(problem: Problem) -> Trial:
    """Return loop (a) for one trial."""
    c = problem.constants
    ts, b0 = c["sample_period"], c["b0"]
    k1, k2 = c["controller_bandwidth"] ** 2, 2.0 * c["controller_bandwidth"]
    l1, l2, l3 = observer_gains(c["observer_bandwidth"], ts)
    peak_from = round(c["peak_after"] / ts)

    def start(p: Any, draws: Any) -> Any:
        del draws
        gain, natural, damping = p[0], 1.0 / p[1], p[2]
        decay = damping * natural
        omega = natural * jnp.sqrt(1.0 - damping**2)
        e, s, co = jnp.exp(-decay * ts), jnp.sin(omega * ts) / omega, jnp.cos(omega * ts)
        a11, a12, a21, a22 = e * (co + decay * s), e * s, -(natural**2) * e * s, e * (co - decay * s)
        sampled = (a11, a12, a21, a22, gain * (1.0 - a11), gain * natural**2 * a12)
        zero = jnp.zeros(())
        return sampled, (*[zero] * 9, jnp.full((), -jnp.inf))

    def sample(p: Any, carry: Any, draws: Any, k: Any, r: Any) -> Any:
        del p, draws
        (a11, a12, a21, a22, b1, b2), state = carry
        y, speed, u, x1, x2, x3, peak, square_sum, square_before, largest = state
        error = r[0] - y
        top = x3 + b0 * u
        x1 = x1 + ts * (x2 + 0.5 * ts * top)
        x2 = x2 + ts * top
        innovation = y - x1
        x1, x2, x3 = x1 + l1 * innovation, x2 + l2 * innovation, x3 + l3 * innovation
        u = (k1 * (r[0] - x1) - k2 * x2 - x3) * (1.0 / b0)
        peak = jnp.maximum(peak, jnp.where(k >= peak_from, jnp.abs(error), 0.0))
        square = error * error
        square_sum = square_sum + jnp.where(k > 0, 0.5 * ts * (square_before + square), 0.0)
        largest = jnp.maximum(largest, y)
        y, speed = a11 * y + a12 * speed + b1 * u, a21 * y + a22 * speed + b2 * u
        return carry[0], (y, speed, u, x1, x2, x3, peak, square_sum, square, largest)

    def finish(carry: Any) -> Any:
        return jnp.stack([carry[1][6], carry[1][7], carry[1][9]])

    return start, sample, finish


def friction_drive(problem: Problem) -> Trial:
    """Return loop (b) for one trial."""
    c = problem.constants
    ts, b0, limit = c["sample_period"], c["b0"], c["limit"]
    k1, k2 = c["controller_bandwidth"] ** 2, 2.0 * c["controller_bandwidth"]
    l1, l2, l3 = observer_gains(c["observer_bandwidth"], ts)
    keep = math.exp(-ts / c["correlation_time"])
    peak_from = round(c["peak_after"] / ts)

    def start(p: Any, draws: Any) -> Any:
        zero = jnp.zeros(())
        return (zero, zero, p[5] * draws[0], *[zero] * 6, (zero,) * 6)

    def acceleration(p: Any, rate: Any, drive: Any) -> Any:
        return (drive - p[2] * rate - p[3] * jnp.tanh(rate * (1.0 / c["smoothing"]))) / p[0]

    def step(p: Any, angle: Any, rate: Any, h: Any, torque: Any, load: Any) -> Any:
        drive = p[1] * torque + load
        a1 = acceleration(p, rate, drive)
        r2 = rate + 0.5 * h * a1
        a2 = acceleration(p, r2, drive)
        r3 = rate + 0.5 * h * a2
        a3 = acceleration(p, r3, drive)
        r4 = rate + h * a3
        a4 = acceleration(p, r4, drive)
        angle = angle + h / 6.0 * (rate + 2.0 * r2 + 2.0 * r3 + r4)
        return angle, rate + h / 6.0 * (a1 + 2.0 * a2 + 2.0 * a3 + a4)

    def sample(p: Any, carry: Any, draws: Any, k: Any, r: Any) -> Any:
        angle, rate, load, x1, x2, x3, u0, u1, u2, m = carry
        delay, intensity = p[4], p[5]
        whole = jnp.floor(delay / ts + 1e-9)
        fraction = delay - whole * ts
        splits = fraction > 1e-9 * ts
        before = jnp.where(splits, fraction, 0.5 * ts)

        error = r[0] - angle
        noisy = angle + c["noise"] * draws[0]
        measured = jnp.floor(noisy * (1.0 / c["resolution"]) + 0.5) * c["resolution"]
        top = x3 - b0 * u0
        x1 = x1 + ts * (x2 + 0.5 * ts * top)
        x2 = x2 + ts * top
        innovation = r[0] - measured - x1
        x1, x2, x3 = x1 + l1 * innovation, x2 + l2 * innovation, x3 + l3 * innovation
        u3, u2, u1 = u2, u1, u0
        u0 = jnp.clip((k1 * x1 + k2 * x2 + x3) * (1.0 / b0), -limit, limit)
        late = jnp.where(whole == 0, u0, jnp.where(whole == 1, u1, u2))
        early = jnp.where(splits, jnp.where(whole == 0, u1, jnp.where(whole == 1, u2, u3)), late)
        square = error * error
        at_limit = (k + 1 < problem.samples) & (jnp.abs(u0) >= limit)
        m = (
            jnp.maximum(m[0], jnp.where(k >= peak_from, jnp.abs(error), 0.0)),
            m[1] + early * early,
            m[2] + jnp.where(k > 0, 0.5 * ts * (m[5] + square), 0.0),
            m[3] + jnp.where(k > 0, jnp.abs(u0 - u1), 0.0),
            m[4] + jnp.where(at_limit, ts, 0.0),
            square,
        )
        angle, rate = step(p, angle, rate, before, early, load)
        angle, rate = step(p, angle, rate, ts - before, late, load)
        load = keep * load + intensity * math.sqrt(1.0 - keep**2) * draws[1]
        return (angle, rate, load, x1, x2, x3, u0, u1, u2, m)

    def finish(carry: Any) -> Any:
        m = carry[-1]
        return jnp.stack([m[0], jnp.sqrt(m[1] / problem.samples), m[2], m[3], m[4]])

    return start, sample, finish


def geared_servo(problem: Problem) -> Trial:
    """Return loop (d) for one trial."""
    c = problem.constants
    ts, b0, limit, steps = c["sample_period"], c["b0"], c["limit"], int(c["steps"])
    k1, k2 = c["controller_bandwidth"] ** 2, 2.0 * c["controller_bandwidth"]
    l1, l2, l3 = observer_gains(c["observer_bandwidth"], ts)
    moved, tolerance, h = c["move_start"] + c["move_time"], c["settle_tolerance"], ts / steps
    move_from, move_to = round(c["move_start"] / ts), round(moved / ts)
    still_from, loaded_from = round(c["standstill"] / ts), round(c["loaded"] / ts)

    def start(p: Any, draws: Any) -> Any:
        del draws
        damping = 2.0 * p[3] * p[2] / jnp.sqrt(p[2] * (p[0] + p[1]) / (p[0] * p[1]))
        numbers = (1.0 / p[0], 1.0 / p[1], damping, 1.0 / p[4], (p[7] - 1.0) * p[6])
        zero = jnp.zeros(())
        m = (*[zero] * 6, jnp.zeros((), bool), zero)
        return numbers, (jnp.zeros(5), (zero,) * 3, zero, zero, m)

    def derivative(p: Any, numbers: Any, x: Any, command: Any, load: Any) -> Any:
        inverse_motor, inverse_load, damping, inverse_current_time, breakaway = numbers
        shaft = p[2] * (x[0] - x[2]) + damping * (x[1] - x[3])
        level = p[6] + breakaway * jnp.exp(-((x[3] * (1.0 / c["stribeck_speed"])) ** 2))
        friction = level * jnp.tanh(x[3] * (1.0 / c["smoothing"])) + p[8] * x[3]
        cog = p[9] * jnp.sin(c["cogging_periods"] * x[0] + p[10])
        motor = (p[5] * x[4] - shaft + cog) * inverse_motor
        load_side = (shaft - friction - load) * inverse_load
        return jnp.stack([x[1], motor, x[3], load_side, (command - x[4]) * inverse_current_time])

    def step(p: Any, numbers: Any, x: Any, command: Any, load: Any) -> Any:
        d1 = derivative(p, numbers, x, command, load)
        d2 = derivative(p, numbers, x + (0.5 * h) * d1, command, load)
        d3 = derivative(p, numbers, x + (0.5 * h) * d2, command, load)
        d4 = derivative(p, numbers, x + h * d3, command, load)
        return x + (h / 6.0) * (d1 + 2.0 * d2 + 2.0 * d3 + d4)

    def sample(p: Any, carry: Any, draws: Any, k: Any, r: Any) -> Any:
        numbers, (x, (x1, x2, x3), u0, u1, m) = carry
        (following, since, loaded, first_command, total, squares, outside, deviation_before) = m
        time = k * ts
        measured = jnp.floor((x[0] + c["noise"] * draws[0]) * (1.0 / c["resolution"]) + 0.5) * c["resolution"]
        top = x3 + b0 * u0
        x1 = x1 + ts * (x2 + 0.5 * ts * top)
        x2 = x2 + ts * top
        innovation = measured - x1
        x1, x2, x3 = x1 + l1 * innovation, x2 + l2 * innovation, x3 + l3 * innovation
        u2, u1 = u1, u0
        wanted = k1 * (r[0] - x1) + k2 * (r[1] - x2) + r[2] - x3
        u0 = jnp.clip(wanted * (1.0 / b0), -limit, limit)

        deviation = jnp.abs(r[0] - x[0])
        following = jnp.maximum(following, jnp.where((k >= move_from) & (k <= move_to), deviation, 0.0))
        is_outside, settling = deviation > tolerance, (k >= move_to) & (k <= loaded_from)
        part = (deviation_before - tolerance) / (deviation_before - deviation)
        since = jnp.where(settling & outside & ~is_outside, time - moved - ts + ts * part, since)
        outside = jnp.where(settling, is_outside, outside)
        loaded = jnp.maximum(loaded, jnp.where(k >= loaded_from, deviation, 0.0))
        first_command = jnp.where(k == still_from, u0, first_command)
        swing = jnp.where((k >= still_from) & (k <= loaded_from), u0 - first_command, 0.0)
        m = (following, since, loaded, first_command, total + swing, squares + swing**2, outside, deviation)

        command = jnp.where(p[12] > 1.5 * ts, u2, u1)
        load = jnp.where(k >= loaded_from, p[11], 0.0)
        x = lax.fori_loop(0, steps, lambda _, x: step(p, numbers, x, command, load), x)
        return numbers, (x, (x1, x2, x3), u0, u1, m)

    def finish(carry: Any) -> Any:
        m = carry[1][-1]
        count = loaded_from - still_from + 1
        ripple = jnp.sqrt(jnp.maximum(m[5] / count - (m[4] / count) ** 2, 0.0))
        return jnp.stack([m[0], jnp.where(m[6], jnp.inf, m[1]), m[2], ripple])

    return start, sample, finish


MAKERS: dict[str, Callable[[Problem], Trial]] = {"a": linear_plant, "b": friction_drive, "d": geared_servo}
#: Normal numbers a sample.
DRAWS = {"a": 0, "b": 2, "d": 1}
#: JAX's usual generator.
GENERATOR = "threefry2x32"
