"""A second simulation of the loop, in plain NumPy and SciPy, that shares no code with the engine.

It follows the loop one sample after another and one trial at a time:

    reference -> sensor -> controller -> limits, rate limit, resolution -> transport delay -> lag -> plant

Linear plants move by `scipy.linalg.expm`, others by `scipy.integrate.solve_ivp` (DOP853). Gains are computed
from their pole conditions in 60 digits instead of by a formula. Sources of the controller: Gao 2003, ACC, doi
10.1109/ACC.2003.1242516; Miklosovic, Radke, Gao 2006, ACC, doi 10.1109/ACC.2006.1656547 (current observer);
Herbst 2013, Electronics 2(3) 246-279, doi 10.3390/electronics2030246 (output form); Madonski, Herbst,
Stankovic 2023, Control Theory Technol., doi 10.1007/s11768-023-00129-y (error form).
"""

from __future__ import annotations

import itertools
import math
from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass, field
from functools import lru_cache
from typing import Protocol

import mpmath
import numpy as np
from numpy.typing import NDArray
from scipy.integrate import solve_ivp
from scipy.linalg import expm

Values = NDArray[np.float64]
OfTime = Callable[[float], float]


def controller_gains(order: int, bandwidth: float) -> Values:
    """Return k_1 ... k_n from the polynomial (s + bandwidth)^n, lowest power first (Gao 2003)."""
    return np.poly([-bandwidth] * order)[:0:-1]


@lru_cache(maxsize=256)
def observer_gains(order: int, bandwidth: float, period: float, kind: str) -> tuple[float, ...]:
    """Return the gains that give A - l c A all its eigenvalues at exp(-bandwidth * period).

    The characteristic polynomial is affine in l; its values at n + 1 points off the pole make linear
    equations.
    """
    with mpmath.workdps(60):
        n, ts = order + 1, mpmath.mpf(period)
        a = mpmath.matrix(n, n)
        for i in range(n):
            for j in range(i, n if kind == "zero_order_hold" else min(i + 2, n)):
                a[i, j] = ts ** (j - i) / mpmath.factorial(j - i)
        pole = mpmath.exp(-mpmath.mpf(bandwidth) * ts)
        points = [pole + mpmath.mpf(i + 1) / 7 for i in range(n)]

        def value(z: mpmath.mpf, which: int | None) -> mpmath.mpf:
            m = z * mpmath.eye(n) - a
            for j in range(n if which is not None else 0):
                m[which, j] += a[0, j]
            return mpmath.det(m)

        rows = mpmath.matrix(n, n)
        right = mpmath.matrix(n, 1)
        for p, z in enumerate(points):
            open_loop = value(z, None)
            right[p] = (z - pole) ** n - open_loop
            for i in range(n):
                rows[p, i] = value(z, i) - open_loop
        return tuple(float(x) for x in mpmath.lu_solve(rows, right))


@dataclass
class Adrc:
    """Linear ADRC with a current observer; `k` and `l` are its gains."""

    form: str
    order: int
    b0: float
    k: Sequence[float] | Values
    l: Sequence[float] | Values  # noqa: E741 (the name of the papers)
    discretisation: str = "zero_order_hold"
    observer_input: str = "limited"
    observer_start: str = "zero"
    reference_derivatives: int | None = None  # how many are fed; None: all
    cancel_disturbance: bool = True
    estimates: Values = field(init=False)
    output: float = field(init=False, default=0.0)

    def start(self, period: float, initial: float) -> None:
        """Discretise the model: states y, y', ..., f of the chain of integrators."""
        n = self.order + 1
        a, b = np.eye(n, k=1), np.zeros((n, 1))
        b[self.order - 1] = self.b0 if self.form == "output" else -self.b0
        if self.discretisation == "zero_order_hold":
            both = expm(period * np.block([[a, b], [np.zeros((1, n + 1))]]))
            self._a, self._b = both[:n, :n], both[:n, n]
        else:
            self._a, self._b = np.eye(n) + period * a, period * b[:, 0]
        self.estimates, self.output = np.zeros(n), initial

    def sample(self, first: bool, r: Sequence[float], measured: float, applied: float) -> float:
        """Predict, correct, and return the command; `r` holds the reference and its derivatives."""
        fed = applied if self.observer_input == "limited" else self.output
        followed = measured if self.form == "output" else r[0] - measured
        if first and self.observer_start == "measured":
            drive = self.b0 * fed
            x = np.zeros(self.order + 1)
            x[0], x[-1] = followed, -drive if self.form == "output" else drive
        else:
            x = self._a @ self.estimates + self._b * fed
        self.estimates = x + np.asarray(self.l) * (followed - x[0])
        self.output = self._law(r) / self.b0
        return self.output

    def _law(self, r: Sequence[float]) -> float:
        x, n = self.estimates, self.order
        if self.form == "error":
            return float(np.dot(self.k, x[:n]) + (x[n] if self.cancel_disturbance else 0.0))
        fed = n if self.reference_derivatives is None else self.reference_derivatives
        wanted = np.array([r[i] if i <= fed else 0.0 for i in range(n)])
        forward = r[n] if fed == n else 0.0
        return float(np.dot(self.k, wanted - x[:n]) + forward - (x[n] if self.cancel_disturbance else 0.0))


class Motion(Protocol):
    """What moves the state of a plant."""

    def output(self, t: float, x: Values) -> float: ...

    def move(self, t: float, h: float, x: Values, u: float, lag: float, held: Sequence[float]) -> Values: ...


@dataclass
class Linear:
    """x' = a x + b u + e w, y = c x, by the matrix exponential; disturbances are held over the move."""

    a: Values
    b: Values
    e: Values
    c: Values

    def output(self, t: float, x: Values) -> float:  # noqa: ARG002
        return float(self.c @ x[: len(self.c)])

    def move(self, t: float, h: float, x: Values, u: float, lag: float, held: Sequence[float]) -> Values:  # noqa: ARG002
        n, w = len(self.a), len(held)
        size = n + 1 if lag else n
        m = np.zeros((size + 1 + w, size + 1 + w))
        m[:n, :n], m[:n, n], m[:n, size + 1 :] = self.a, self.b, self.e
        if lag:
            m[n, n], m[n, n + 1] = -1.0 / lag, 1.0 / lag
        return (_exponential((h * m).tobytes(), len(m)) @ np.concatenate([x, [u], held]))[:size]


@lru_cache(maxsize=4096)
def _exponential(numbers: bytes, size: int) -> Values:
    return expm(np.frombuffer(numbers).reshape(size, size))


@dataclass
class Smooth:
    """x' = f(t, x, u, w(t)) and y = h(t, x), by DOP853 at tolerances near rounding."""

    f: Callable[[float, Values, float, Sequence[float]], Sequence[float]]
    h: Callable[[float, Values], float]
    w: Sequence[OfTime] = ()

    def output(self, t: float, x: Values) -> float:
        return float(self.h(t, x))

    def move(self, t: float, h: float, x: Values, u: float, lag: float, held: Sequence[float]) -> Values:  # noqa: ARG002
        def rate(s: float, z: Values) -> list[float]:
            w = [each(t + s) for each in self.w]
            if not lag:
                return list(self.f(t + s, z, u, w))
            return [*self.f(t + s, z[:-1], z[-1], w), (u - z[-1]) / lag]

        moved = solve_ivp(rate, (0.0, h), x, method="DOP853", rtol=1e-12, atol=1e-14)
        assert moved.success
        return moved.y[:, -1]


@dataclass
class ReferenceLoop:
    """The loop; times in s. `reference` holds r and its derivatives, `disturbances` are functions of time."""

    plant: Motion
    controller: Adrc
    period: float
    samples: int
    reference: Sequence[OfTime]
    initial_state: Sequence[float]
    disturbances: Mapping[str, OfTime] = field(default_factory=dict)
    gain: float = 1.0
    bias: float = 0.0
    filter_frequency: float = 0.0
    sensor_resolution: float = 0.0
    sensor_range: tuple[float, float] = (-math.inf, math.inf)
    limits: tuple[float, float] = (-math.inf, math.inf)
    rate_limit: float = math.inf
    resolution: float = 0.0
    delay: float = 0.0
    lag: float = 0.0
    initial_command: float = 0.0
    breaks: Sequence[float] = ()  # instants at which a disturbance jumps

    def run(self) -> dict[str, Values]:
        """Return every signal at every sample instant."""
        x = np.array([*self.initial_state, *([self.initial_command] if self.lag else [])], dtype=np.float64)
        self.controller.start(self.period, self.initial_command)
        command, filtered = self.initial_command, math.nan
        arrivals: list[tuple[float, float]] = [(-math.inf, command)]  # when each command reaches the plant
        rows: dict[str, list[float]] = {}
        for k in range(self.samples):
            t = k * self.period
            y = self.plant.output(t, x)
            r = [each(t) for each in self.reference]
            measured, filtered = self._measure(y, filtered)
            command = self._limit(self.controller.sample(k == 0, r, measured, command), command)
            arrivals.append((t + self.delay, command))
            acting = x[-1] if self.lag else self._acting(arrivals, t)
            row = {"time": t, "reference": r[0], "error": r[0] - y, "output": y, "measured": measured}
            row |= {"command": command, "input": acting}
            row |= {f"state_{i + 1}": v for i, v in enumerate(x[: len(self.initial_state)])}
            row |= {name: w(t) for name, w in self.disturbances.items()}
            row |= {f"estimate_{i + 1}": v for i, v in enumerate(self.controller.estimates)}
            for name, value in row.items():
                rows.setdefault(name, []).append(float(value))
            x = self._advance(t, x, arrivals)
        return {name: np.array(values) for name, values in rows.items()}

    def _measure(self, y: float, filtered: float) -> tuple[float, float]:
        value = self.gain * y + self.bias
        if self.filter_frequency:
            # Backward Euler of a first-order low pass; it starts settled on the first reading.
            ratio = 2.0 * math.pi * self.filter_frequency * self.period
            value = value if math.isnan(filtered) else (filtered + ratio * value) / (1.0 + ratio)
            filtered = value
        value = _rounded(value, self.sensor_resolution)
        return min(max(value, self.sensor_range[0]), self.sensor_range[1]), filtered

    def _limit(self, wanted: float, before: float) -> float:
        value = min(max(wanted, self.limits[0]), self.limits[1])
        change = self.rate_limit * self.period
        value = min(max(value, before - change), before + change)
        if value in self.limits:
            return value
        return min(max(_rounded(value, self.resolution), self.limits[0]), self.limits[1])

    def _acting(self, arrivals: Sequence[tuple[float, float]], t: float) -> float:
        """Return the command that reached the plant last; within 1e-9 of a period counts as now."""
        return next(u for at, u in reversed(arrivals) if at <= t + 1e-9 * self.period)

    def _advance(self, t: float, x: Values, arrivals: Sequence[tuple[float, float]]) -> Values:
        end, small = t + self.period, 1e-9 * self.period
        inside = {at for at in (*(at for at, _ in arrivals), *self.breaks) if t + small < at < end - small}
        for start, stop in itertools.pairwise([t, *sorted(inside), end]):
            held = [w(0.5 * (start + stop)) for w in self.disturbances.values()]
            x = self.plant.move(start, stop - start, x, self._acting(arrivals, start), self.lag, held)
        return x


def _rounded(value: float, resolution: float) -> float:
    return math.floor(value / resolution + 0.5) * resolution if resolution else value


def assert_same_signals(
    found: Mapping[str, Values],
    expected: Mapping[str, Values],
    tolerance: float,
    scales: Mapping[str, float] | None = None,
) -> None:
    """Check each expected signal to a part of its largest magnitude, or of a scale where that is larger."""
    for name, wanted in expected.items():
        difference = np.max(np.abs(found[name] - wanted))
        scale = max(np.max(np.abs(wanted)), (scales or {}).get(name, 0.0))
        assert difference <= tolerance * scale, (
            f"{name}: off by {difference:.3g}, allowed {tolerance * scale:.3g} ({tolerance:g} of {scale:.3g})"
        )
