"""The studies behind the golden digests: every plant, equation function, controller, reference, noise and spread.

Run as a program it prints name and digest of each; `golden_digests.json` holds what it printed when the digests were
last changed on purpose. A digest covers parameters, measures and status of all trials, bit for bit.
"""

from __future__ import annotations

import hashlib
import json
import sys

import numpy as np

import windage as wd

TRIALS = 72


def digest(study: wd.Study, threads: int = 1) -> str:
    """SHA-256 of all results, with one bit pattern for every undefined number."""
    outcome = study.run(TRIALS, threads=threads, progress=False)
    content = hashlib.sha256()
    for column in (*outcome.parameters.values(), *outcome.measures.values()):
        values = np.array(column)
        values[np.isnan(values)] = np.nan
        content.update(values.astype("<f8").tobytes())
    content.update(np.asarray(outcome.status).astype("u1").tobytes())
    return content.hexdigest()


def measured(loop: wd.Loop, seed: int = 5, **options: object) -> wd.Study:
    """A study that looks at the loop with many kinds of measure."""
    half = 0.5 * float(loop.duration) if isinstance(loop.duration, float) else 0.3
    measures = [
        wd.peak("error"),
        wd.rms("command", after=half),
        wd.standard_deviation("measured", after=half),
        wd.mean("input", before=half),
        wd.final("output"),
        wd.ise(),
        wd.iae(),
        wd.itae(),
        wd.total_variation("command"),
        wd.rms_change("command"),
        wd.time_outside("error", -0.01, 0.01),
        wd.settling_time(tolerance=0.5),
    ]
    return wd.Study(loop, requirements=[wd.peak("error") <= 1.0], measures=measures, seed=seed, **options)  # type: ignore[arg-type]


def loop_of(plant: object, controller: object, **options: object) -> wd.Loop:
    """A loop with noise, rounding, limits and a delay that is no whole number of samples."""
    settings: dict[str, object] = {
        "sample_period": 0.01,
        "duration": 0.6,
        "reference": wd.Step(1.0, at=0.1),
        "sensor": wd.Sensor(noise=1e-3, resolution=1e-4, gain=wd.uniform(0.99, 1.01)),
        "actuator": wd.Actuator(limits=(-40.0, 40.0), delay=wd.uniform(0.0, 0.025), rate_limit=4000.0),
        "steps_per_sample": 2,
    }
    return wd.Loop(plant=plant, controller=controller, **{**settings, **options})  # type: ignore[arg-type]


def chains() -> dict[str, wd.Study]:
    """Integrator chains of order 1 to 4 under both forms and both discretisations."""
    studies = {}
    for order in (1, 2, 3, 4):
        for controller in (wd.OutputADRC, wd.ErrorADRC):
            for kind in ("zero_order_hold", "euler"):
                adrc = controller(
                    order=order,
                    controller_bandwidth=wd.uniform(3.0, 4.0),
                    observer_bandwidth=12.0,
                    b0=1.0,
                    discretisation=kind,
                )
                plant = wd.IntegratorChain(order, gain=wd.normal(1.0, 0.1, sigmas=3))
                loop = loop_of(plant, adrc, disturbances={"load": wd.WhiteNoise(1e-4)})
                studies[f"chain {order} {controller.__name__} {kind}"] = measured(loop)
    return studies


def stock_plants() -> dict[str, wd.Study]:
    """Every stock plant, with references of every kind and gusts."""
    adrc = wd.OutputADRC(order=2, controller_bandwidth=8.0, observer_bandwidth=40.0, b0=50.0)
    first = wd.OutputADRC(order=1, controller_bandwidth=8.0, observer_bandwidth=40.0, b0=5.0)
    gust = {"load": wd.Gust(intensity=wd.lognormal(0.1, 0.3), correlation_time=0.2)}
    lag = wd.Actuator(time_constant=wd.uniform(0.005, 0.02))
    drive = {"sample_period": 1e-3, "duration": 0.1, "actuator": wd.Actuator(limits=(-24.0, 24.0), delay=1e-3)}
    motor = wd.DCDrive(2.0, 5e-3, 0.05, wd.triangular(2e-5, 3e-5, 5e-5), 1e-5, 2e-3, 0.5)
    shaft = wd.TwoMassDrive(
        wd.tolerance(4e-4, percent=5), 6e-4, 150.0, 0.02, 0.02, 0.03, 0.5, 0.1, 1e-3, output="load_angle"
    )
    servo = wd.ErrorADRC(order=2, controller_bandwidth=60.0, observer_bandwidth=240.0, b0=900.0)
    return {
        "first order": measured(
            loop_of(wd.FirstOrder(1.0, wd.beta(2, 3, 0.2, 0.4), dead_time=0.013), first, disturbances=gust)
        ),
        "second order": measured(
            loop_of(
                wd.SecondOrder(1.0, 0.15, wd.choice([0.3, 0.7], [0.25, 0.75])),
                adrc,
                disturbances=gust,
                actuator=lag,
                reference=wd.Quintic(1.0, 0.05, 0.3),
            )
        ),
        "transfer function": measured(
            loop_of(
                wd.TransferFunction([2.0, 30.0], [1.0, wd.samples([2.0, 3.0, 4.0]), 30.0]),
                first,
                disturbances=gust,
                reference=wd.Sine(0.5, 0.4, phase=0.3, offset=0.1),
            )
        ),
        "fast lags": measured(  # some lanes with twice the digits, some without
            loop_of(
                wd.TransferFunction([20.0], [wd.samples([1e-13, 1e-8, 1e-4]), 3e-8, 3e-4, wd.uniform(0.5, 2.0), 1.0]),
                first,
                disturbances={"load": wd.Step(1.0, at=0.3)},
                reference=wd.Step(0.5, at=0.1),
            )
        ),
        "moving loads": measured(
            loop_of(
                wd.StateSpace(
                    [[0.0, 1.0], [-4.0, wd.uniform(-0.8, -0.2)]], [0.0, 50.0], [1.0, 0.0], e=[[0.0, 0.2], [1.0, 0.0]]
                ),
                adrc,
                disturbances={
                    "load_1": wd.Pulse(9.0, start=wd.uniform(0.1, 0.2), width=wd.uniform(0.001, 0.1)),
                    "load_2": wd.Sine(2.0, wd.uniform(0.01, 0.5), start=wd.uniform(0.0, 0.2)),
                },
            )
        ),
        "state space": measured(
            loop_of(
                wd.StateSpace([[0.0, 1.0], [-4.0, -0.4]], [0.0, 50.0], [1.0, 0.0], e=[[0.0], [1.0]]),
                adrc,
                disturbances={"load": wd.Sine(2.0, 0.3)},
                reference=wd.Table([0.0, 0.2, 0.4], [0.0, 1.0, 0.5]),
            )
        ),
        **{
            f"dc drive {integrator}": measured(
                loop_of(
                    motor,
                    servo,
                    disturbances={"load": wd.Pulse(0.01, 0.03, 0.02)},
                    integrator=integrator,
                    reference=wd.JerkLimited(0.5, 0.01, 20.0, 2000.0, 4e5),
                    **drive,
                )
            )
            for integrator in ("euler", "rk4", "cash_karp5")
        },
        "two-mass drive": measured(
            loop_of(shaft, servo, disturbances={"load": wd.Ramp(1.0, 0.02, 0.06)}, reference=wd.Constant(0.2), **drive)
        ),
    }


def equations() -> dict[str, wd.Study]:
    """Every function of the equation language, in a plant and in signals, with correlated and shared numbers."""
    bounded = (
        "0.1*sin(a*x) + 0.1*cos(v) + 0.01*tan(0.3*sin(x)) + 0.1*asin(0.9*sin(v)) + 0.1*acos(0.9*cos(x))"
        " + 0.1*atan(v) + 0.1*atan2(x, 1 + v**2) + exp(-x**2) + 0.1*log(1 + x**2) + 0.1*(1 + x**2)**0.3"
        " + 0.1*tanh(v/0.2) + 0.01*sinh(sin(v)) + 0.01*cosh(cos(x)) + 0.1*sqrt(1 + abs(v)) + 0.1*sign(v)"
        " + 0.1*min(x, v, a) + 0.1*max(x, 0.2) + 0.1*clip(v, -1, 1) + 0.1*step(t - 0.2) + 0.1*deadzone(x, 0.1)"
        " + where(x > 0.5 and not v < 0, 0.1, 0.2) + 0.1*(0.2 <= x) + (0.1 if x == v or x != 0 else 0.3)"
    )
    plant = wd.Plant(
        states={"x": wd.uniform(-0.1, 0.1), "v": 0.0},
        equations={"x": "v", "v": "-d*v - k*shape/m + (u + push)/m"},
        auxiliaries={"shape": bounded},
        input="u",
        output="x",
        disturbances=["push"],
        parameters={
            "a": 1.3,
            "m": wd.shared("mass", wd.normal(1.0, 0.05, sigmas=4)),
            "d": wd.uniform(0.5, 1.5),
            "k": wd.triangular(0.5, 1.0, 2.0),
        },
    )
    adrc = wd.ErrorADRC(
        order=2,
        controller_bandwidth=5.0,
        observer_bandwidth=25.0,
        b0=wd.shared("mass", wd.normal(1.0, 0.05, sigmas=4)),
        observer_gain_factor=0.5,
        observer_start="measured",
    )
    loop = loop_of(
        plant,
        adrc,
        disturbances={"push": wd.Gust(0.3, 0.2)},
        sensor=wd.Sensor(noise=1e-3, filter_frequency=30.0, bias=wd.normal(0.0, 1e-3), range=(-3.0, 3.0)),
        signals={"power": "u*v", "strain": "abs(x - reference)"},
    )
    study = wd.Study(
        loop,
        requirements=[wd.peak("strain") <= 2.0],
        measures=[wd.mean("power"), wd.maximum("shape"), wd.minimum("v"), wd.overshoot(), wd.rise_time()],
        correlations={("plant.d", "plant.k"): -0.6},
        seed=2**63,
    )
    runaway = wd.Plant(
        states={"x": 0.1},
        equations={"x": "x**3*growth + 0*u"},
        input="u",
        output="x",
        parameters={"growth": wd.uniform(0.0, 300.0)},
    )
    first = wd.OutputADRC(order=1, controller_bandwidth=2.0, observer_bandwidth=10.0, b0=1.0)
    period = wd.uniform(0.008, 0.012)
    return {
        "every function": study,
        "diverging": measured(loop_of(runaway, first)),
        "drawn period": measured(
            loop_of(wd.FirstOrder(1.0, 0.3), first, sample_period=period, disturbances={"load": wd.Step(0.2, at=0.3)})
        ),
    }


def roundings() -> dict[str, wd.Study]:
    """Roundings in equations and in the actuator, windows at steps, and measures made of two."""
    plant = wd.Plant(
        states={"x": 0.0, "v": 0.0},
        equations={"x": "v", "v": "u - 0.5*v - 0.2*floor(4*x)/4 - 0.1*round(3*v) - 0.1*mod(x, size)"},
        input="u",
        output="x",
        parameters={"size": wd.uniform(0.2, 0.4)},
    )
    adrc = wd.OutputADRC(order=2, controller_bandwidth=8.0, observer_bandwidth=40.0, b0=1.0, reference_derivatives=1)
    actuator = wd.Actuator(limits=(wd.uniform(-20.0, -10.0), 15.1), resolution=0.25, rate_limit=2000.0, initial=-12.0)
    loop = loop_of(
        plant, adrc, actuator=actuator, reference=wd.Table([0.0, 0.1, 0.3], [0.0, 1.0, 3.0], interpolation="hold")
    )
    early, late = wd.peak("error", before=0.3), wd.peak("error", after=0.3)
    measures = [
        wd.overshoot(before=0.3),
        wd.settling_time(band=0.5, before=wd.uniform(0.25, 0.35)),
        wd.time_in_saturation(),
        wd.peak_to_peak("command"),
        wd.reversals("measured", dead_band=wd.uniform(0.0, 0.01)),
        wd.time_of_peak("v", after=0.1),
        (early - late) / wd.rms("error"),
    ]
    return {"roundings": wd.Study(loop, [early <= 2.0], measures=measures, seed=6)}


def all_studies() -> dict[str, wd.Study]:
    """Name and study of every golden digest."""
    return {**chains(), **stock_plants(), **equations(), **roundings()}


if __name__ == "__main__":
    json.dump({name: digest(study) for name, study in all_studies().items()}, sys.stdout, indent=1)
    print()
