"""The automatic number of integration steps: no pilot is left out, and none is a scale for another."""

from __future__ import annotations

from typing import Any

import numpy as np
import pytest

import windage as wd
from windage import _accuracy, _pilots


def study(plant: wd.Plant, requirements: Any, seed: int = 0, measures: Any = (), **loop: Any) -> wd.Study:
    settings: dict[str, Any] = {
        "plant": plant,
        "controller": wd.ErrorADRC(1, controller_bandwidth=4.0, observer_bandwidth=20.0, b0=1.0),
        "sample_period": 1e-2,
        "duration": 4.0,
        "reference": wd.Step(1.0),
        "actuator": wd.Actuator(limits=(-3.0, 3.0)),
    }
    return wd.Study(wd.Loop(**(settings | loop)), requirements, seed=seed, measures=measures)


def flexible(limit: float, seed: int = 0, **loop: Any) -> wd.Study:
    """A light mode of 200 rad/s sampled at 10 ms, beside a plant that one unit in ten makes unstable."""
    plant = wd.Plant(
        {"y": 0.0, "q": 1.0, "p": 0.0},
        {"y": "grow*y + u", "q": "p", "p": "-200**2*(q - 0.1*y) - 0.4*p"},
        input="u",
        output="y",
        parameters={"grow": wd.choice([-1.0, 8.0], [0.9, 0.1])},
    )
    requirements = [wd.peak("error", after=2.0) <= 0.05, wd.standard_deviation("q", after=2.0) <= limit]
    return study(plant, requirements, seed, **loop)


def stiff(limit: float) -> wd.Study:
    plant = wd.Plant({"x": 0.0}, {"x": "-k*(x - u)"}, "u", "x", parameters={"k": wd.uniform(900.0, 1100.0)})
    controller = wd.ErrorADRC(1, b0=1e3, controller_bandwidth=4.0, observer_bandwidth=20.0)
    return study(plant, [wd.peak("error") <= limit], 3, controller=controller, actuator=wd.Actuator(), duration=2.0)


def settled(**requires: Any) -> wd.Study:
    plant = wd.Plant(
        {"x": 0.0, "v": 0.0},
        {"x": "v", "v": "(u - 0.5*v - 2*x)/m"},
        input="u",
        output="x",
        parameters={"m": wd.uniform(0.9, 1.1)},
    )
    controller = wd.OutputADRC(2, controller_bandwidth=5.0, observer_bandwidth=30.0, b0=1.0)
    whole = {"controller": controller, "duration": 20.0, "reference": wd.Step(1.0, at=0.1), "actuator": wd.Actuator()}
    return study(plant, requires.get("requirements", ()), 1, requires.get("measures", ()), **whole)


@pytest.mark.parametrize("limit", [0.05, 0.35])
@pytest.mark.parametrize("seed", [0, 5])
def test_pilots_that_miss_a_limit_widely_are_compared_too(limit: float, seed: int) -> None:
    # At 0.05 every pilot misses its limit by more than the limit; with seed 5 some pilots grow without bound.
    chosen = flexible(limit, seed)
    many = flexible(limit, seed, steps_per_sample=64)
    assert np.array_equal(chosen.run(200, progress=False).passed, many.run(200, progress=False).passed)


def test_a_tighter_limit_does_not_make_the_choice_worse() -> None:
    chosen = [stiff(limit).resolved_steps() for limit in (2.0, 0.6, 0.4, 0.1)]
    assert chosen == sorted(chosen)
    assert len(stiff(0.1).run(100, progress=False).diverged) == 0


@pytest.mark.parametrize(
    "measures", [[wd.final("error")], [wd.rms("error", after=15.0)], [wd.final("v"), wd.peak("error")]]
)
def test_a_measure_near_zero_has_the_scale_of_its_signals(measures: list[wd.Measure]) -> None:
    assert settled(measures=measures).resolved_steps() == 1
    assert settled(requirements=[measure <= 1e-9 for measure in measures]).resolved_steps() == 1


def test_extremes_of_the_spreads_are_among_the_pilots() -> None:
    plant = wd.Plant(
        {"i": 0.0, "x": 0.0},
        {"i": "(u - i)/tau", "x": "i - 0.5*x"},
        input="u",
        output="x",
        parameters={"tau": wd.lognormal(0.02, 0.8)},
    )
    chosen = study(plant, [wd.peak("error", after=2.0) <= 0.05])
    outcome = chosen.with_(steps_per_sample=1).run(_pilots.LOOKED_AT, progress=False)
    pilots = _pilots.pilots_of((*chosen._bound, {}, chosen.seed))
    tau = outcome.parameters["tau"]
    assert {int(np.argmin(tau)), int(np.argmax(tau)), *range(8)} == set(pilots.trials.tolist())
    # Only the extremes need more than the first pilots do, and no trial diverges with what is chosen.
    assert tau[: _pilots.FIRST_TRIALS].min() * 2.78 > chosen.loop.sample_period  # type: ignore[operator]
    assert tau.min() * 2.78 < chosen.loop.sample_period  # type: ignore[operator]
    assert chosen.resolved_steps() >= 2
    assert len(chosen.run(_pilots.LOOKED_AT, progress=False).diverged) == 0


def test_where_every_pilot_diverges_the_choice_says_so() -> None:
    plant = wd.Plant({"y": 1.0}, {"y": "y**3 + 0*u"}, "u", "y", parameters={"unused": wd.uniform(0.0, 1.0)})
    lost = study(plant, [wd.peak("error") <= 0.05])
    assert lost.resolved_steps() == _accuracy.UNCOMPARED_STEPS == 16
    assert "could not be chosen by comparison" in lost._choice.caution


def test_failing_pilots_on_a_limit_cycle_are_compared_coarsely_and_that_is_said() -> None:
    # Lorenz 1963, J. Atmos. Sci. 20, eqs. 25-27: chaotic motion, whose path no two integrators share for long.
    plant = wd.Plant(
        {"a": 1.0, "b": 1.0, "c": 20.0},
        {"a": "10*(b - a) + 0*u", "b": "a*(28 - c) - b", "c": "a*b - 8*c/3"},
        input="u",
        output="a",
        parameters={"d": wd.uniform(0.0, 1.0)},
    )
    chaotic = study(plant, [wd.rms("c") <= 1.0], duration=30.0)
    assert "irregularly" in chaotic._choice.caution
    assert len(chaotic.run(20, progress=False).failures) == 20
    # Where such a trial does not fail, its path has to be right, and nothing is chosen.
    with pytest.raises(wd.DescriptionError, match=r"steps_per_sample: found 'auto'"):
        chaotic.with_(requirements=(), measures=[wd.final("c")]).resolved_steps()


@pytest.mark.parametrize("seed", [0, 1])
def test_steps_at_drawn_instants_between_samples_cost_no_further_steps(seed: int) -> None:
    plant = wd.Plant(
        {"x": 0.0, "v": 0.0},
        {"x": "v", "v": "(force - 3*v - 5*tanh(v/0.05) - load)/m"},
        input="force",
        output="x",
        disturbances=["load"],
        parameters={"m": wd.uniform(10.0, 14.0)},
    )
    loads = {"load": wd.Step(4.0, at=wd.uniform(3.0, 3.5))}
    controller = wd.OutputADRC(2, b0=1 / 12, controller_bandwidth=6.0, observer_bandwidth=30.0)
    measures = [wd.peak("error", after=3.0), wd.iae()]
    settings = {"controller": controller, "duration": 4.0, "reference": wd.Step(0.2), "actuator": wd.Actuator()}
    assert study(plant, (), seed, measures, disturbances=loads, **settings).resolved_steps() <= 2


def test_a_limit_decides_as_under_the_reference() -> None:
    # The measure may differ by a thousandth of its limit; a pilot whose slack is larger has to come out the same.
    chosen = flexible(0.35)
    pilots = _pilots.pilots_of((*chosen._bound, {}, chosen.seed))
    columns = pilots.with_steps(chosen.resolved_steps(), "rk4")
    assert not _accuracy._complaint(pilots, columns, pilots.allowed)
    assert "differs" in _accuracy._complaint(pilots, pilots.with_steps(4, "rk4"), pilots.allowed)
    assert "differently" in _accuracy._complaint(pilots, pilots.with_steps(1, "rk4"), pilots.allowed + 1e12)


def test_scales_are_those_of_each_trial_and_its_signals() -> None:
    bound = settled(measures=[wd.final("error"), wd.rms("v", after=15.0), wd.overshoot(), wd.ise()])
    pilots = _pilots.pilots_of((*bound._bound, {}, bound.seed))
    final, rms, overshoot, ise = pilots.allowed
    np.testing.assert_allclose(final, 1e-6, rtol=0.2)
    peak = pilots.with_steps(1, "rk4").measures[pilots.sized.whole[1][0]]
    np.testing.assert_allclose(rms, 1e-9 * peak, rtol=0.1)  # at rest: what the transient leaves behind
    np.testing.assert_allclose(overshoot, 1e-6, rtol=0.2)
    np.testing.assert_allclose(ise, 1e-6 * pilots.columns.measures[3] + 20.0 * 1e-9, rtol=0.1)
    limited = bound.with_(requirements=[wd.final("error") <= 0.5, wd.overshoot() <= 1e9], measures=())
    allowed = _pilots.pilots_of((*limited._bound, {}, bound.seed)).allowed
    np.testing.assert_allclose(allowed[0], 0.5 * 1e-3, rtol=0.01)
    np.testing.assert_allclose(allowed[1], 1e-3, rtol=0.1)  # a limit far away widens nothing
    still = settled(measures=[wd.rms("v")]).with_(reference=0.0)
    np.testing.assert_allclose(_pilots.pilots_of((*still._bound, {}, 1)).allowed, 1e-12)


def test_pilots_that_may_jump_are_few_and_compared_with_many_fixed_steps() -> None:
    plant = wd.Plant(
        {"x": 0.1, "v": 0.0},
        {"x": "v", "v": "2*(u - c*sign(v))/(m + a + b + d)"},
        input="u",
        output="x",
        parameters={name: wd.uniform(0.2, 0.3) for name in "abcdm"},
    )
    controller = wd.ErrorADRC(2, controller_bandwidth=4.0, observer_bandwidth=20.0, b0=1.0)
    jumping = study(plant, [wd.peak("error") <= 2.0], controller=controller, reference=0.0, duration=0.2)
    pilots = _pilots.pilots_of((*jumping._bound, {}, jumping.seed))
    assert len(pilots.trials) == 16
    again = pilots.with_steps(512, "cash_karp5")
    assert np.array_equal(again.measures, pilots.columns.measures)


def test_failing_pilots_are_allowed_a_tenth_of_their_size_in_the_second_pass() -> None:
    chosen = flexible(0.05)
    pilots = _pilots.pilots_of((*chosen._bound, {}, chosen.seed))
    np.testing.assert_allclose(_accuracy._allowed_coarsely(pilots), 0.1 * pilots.size)
    passing = flexible(1e9).with_(requirements=[wd.peak("q") <= 1e15])
    pilots = _pilots.pilots_of((*passing._bound, {}, chosen.seed))
    assert np.array_equal(_accuracy._allowed_coarsely(pilots), pilots.allowed)


@pytest.mark.parametrize(
    ("derivative", "integrator", "words"),
    [
        ("-900*(x - u)", "euler", "Euler's method is of order 1: take integrator='rk4'; or set steps_per_sample"),
        ("-900*(x - u) - sign(x)", "rk4", "Jumps in the equations may be the reason (write tanh for sign); or set"),
        ("-900*(x - u)", "rk4", "The equations do not jump, but a loop that swings between limits"),
    ],
)
def test_where_no_steps_are_enough_the_likely_reason_is_named(
    derivative: str, integrator: str, words: str, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.setattr(_accuracy, "CANDIDATES", (1,))
    plant = wd.Plant({"x": 0.0}, {"x": derivative}, "u", "x")
    too_coarse = study(plant, [wd.peak("error") <= 1.5], sample_period=5e-3, duration=1.0, integrator=integrator)
    with pytest.raises(wd.DescriptionError, match="to be enough") as caught:
        too_coarse.resolved_steps()
    assert words in caught.value.mend
