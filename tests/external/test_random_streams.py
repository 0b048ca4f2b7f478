"""Random streams: published answers of the generator, the draws made from it, and the noises of a loop.

Philox4x32-10: J. K. Salmon, M. A. Moraes, R. O. Dror, D. E. Shaw, "Parallel random numbers: as easy as 1, 2,
3", SC11. Known answers: file kat_vectors of Random123 (transcribed second-hand, recomputed from the
algorithm).
"""

from __future__ import annotations

import math
from typing import Any

import numpy as np
import pytest
from numpy.typing import NDArray
from scipy import stats

import windage as wd
from windage._describe import fnv1a
from windage._loader import engine

Words = NDArray[np.uint64]
Values = NDArray[np.float64]

# counter (4 words), key (2 words), answer; zeros, ones, digits of pi.
KNOWN_ANSWERS = [
    ("00000000 00000000 00000000 00000000", "00000000 00000000", "6627e8d5 e169c58d bc57ac4c 9b00dbd8"),
    ("ffffffff ffffffff ffffffff ffffffff", "ffffffff ffffffff", "408f276d 41c83b0e a20bc7c6 6d5451fd"),
    ("243f6a88 85a308d3 13198a2e 03707344", "a4093822 299f31d0", "d16cfe09 94fdcceb 5001e420 24126ea1"),
]


def words(text: str) -> list[int]:
    return [int(word, 16) for word in text.split()]


@pytest.mark.parametrize(("counter", "key", "answer"), KNOWN_ANSWERS)
def test_philox_known_answers(counter: str, key: str, answer: str) -> None:
    assert list(engine().lane_philox(words(counter), words(key))) == words(answer)


def philox(counter: Words, key: tuple[int, int]) -> Words:
    """Philox4x32-10 of columns of counters, shape (4, n), from the paper."""
    mask = np.uint64(0xFFFFFFFF)
    c0, c1, c2, c3 = counter
    k0, k1 = key
    for _ in range(10):
        first, second = np.uint64(0xD2511F53) * c0, np.uint64(0xCD9E8D57) * c2
        c0, c1, c2, c3 = (
            (second >> np.uint64(32)) ^ c1 ^ np.uint64(k0),
            second & mask,
            (first >> np.uint64(32)) ^ c3 ^ np.uint64(k1),
            first & mask,
        )
        k0, k1 = (k0 + 0x9E3779B9) & 0xFFFFFFFF, (k1 + 0xBB67AE85) & 0xFFFFFFFF
    return np.array([c0, c1, c2, c3])


def uniforms(seed: int, stream: int, draw: int, trials: Words) -> Values:
    """Two uniforms a trial, (n + 1/2) 2^-52 with the upper 52 bits n of each pair of words; shape (2, n)."""
    counter = np.array(
        [
            trials & np.uint64(0xFFFFFFFF),
            trials >> np.uint64(32),
            np.full_like(trials, stream),
            np.full_like(trials, draw),
        ]
    )
    random = philox(counter, (seed & 0xFFFFFFFF, seed >> 32))
    pairs = ((random[1] << np.uint64(32)) | random[0], (random[3] << np.uint64(32)) | random[2])
    return np.array([((pair >> np.uint64(12)).astype(np.float64) + 0.5) * 2.0**-52 for pair in pairs])


def normals(seed: int, stream: int, draw: int, trials: Words) -> Values:
    """Box, Muller 1958, Ann. Math. Stat. 29, 610: two independent normal numbers a trial."""
    u, turn = uniforms(seed, stream, draw, trials)
    radius = np.sqrt(-2.0 * np.log(u))
    return np.array([radius * np.cos(2.0 * np.pi * turn), radius * np.sin(2.0 * np.pi * turn)])


def test_this_files_own_generator_gives_the_known_answers() -> None:
    counters = np.array([words(counter) for counter, _, _ in KNOWN_ANSWERS], dtype=np.uint64).T
    for i, (_, key, answer) in enumerate(KNOWN_ANSWERS):
        k0, k1 = words(key)
        assert philox(counters[:, i : i + 1], (k0, k1))[:, 0].tolist() == words(answer)


@pytest.mark.parametrize("seed", [0, 2026, 2**64 - 1, 0x0123456789ABCDEF])
@pytest.mark.parametrize(("stream", "draw"), [(0, 0), (2**32 - 1, 7), (12345, 2**32 - 1)])
@pytest.mark.parametrize("first", [0, 2**32 - 5, 2**40 + 3])
def test_lane_draws_are_functions_of_seed_stream_draw_and_trial(seed: int, stream: int, draw: int, first: int) -> None:
    trials = np.uint64(first) + np.arange(37, dtype=np.uint64)
    np.testing.assert_array_equal(
        engine().lane_uniforms(seed, stream, draw, first, 37), uniforms(seed, stream, draw, trials)
    )
    np.testing.assert_allclose(
        engine().lane_normals(seed, stream, draw, first, 37),
        normals(seed, stream, draw, trials),
        rtol=0,
        atol=4e-15,
    )


def test_uniform_and_normal_draws_have_their_distributions() -> None:
    count = 100_000
    u = engine().lane_uniforms(5, 9, 0, 0, count).ravel()
    z = engine().lane_normals(5, 9, 1, 0, count)
    assert 0.0 < np.min(u) < np.max(u) < 1.0
    assert stats.kstest(u, "uniform").pvalue > 1e-6
    assert stats.kstest(z.ravel(), "norm").pvalue > 1e-6
    assert abs(np.corrcoef(z)[0, 1]) < 5.0 / math.sqrt(count)
    assert abs(np.corrcoef(z[0] ** 2, z[1] ** 2)[0, 1]) < 5.0 / math.sqrt(count)
    assert abs(np.corrcoef(z[0][1:], z[0][:-1])[0, 1]) < 5.0 / math.sqrt(count)


def test_stream_names_are_hashed_by_fnv1a() -> None:
    """Test vectors of the FNV authors, 32 bits (Fowler, Noll, Vo; from memory)."""
    assert [fnv1a(text) for text in ("", "a", "foobar")] == [0x811C9DC5, 0xE40C292C, 0xBF9CF968]


def noisy(load: Any, seed: int = 77, period: float = 0.01, duration: float = 40.0, **parts: Any) -> wd.Study:
    loop = wd.Loop(
        plant=wd.FirstOrder(gain=wd.uniform(0.9, 1.1), time_constant=1.0),
        controller=wd.OutputADRC(order=1, controller_bandwidth=0.2, observer_bandwidth=1.0, b0=1.0),
        sample_period=period,
        duration=duration,
        reference=0.0,
        disturbances={"load": load},
        **parts,
    )
    return wd.Study(loop, measures=[wd.rms("load"), wd.mean("load")], seed=seed)


def test_noise_and_parameters_of_a_trial_come_from_their_named_streams() -> None:
    """Sample k takes one of the two numbers of draw k // 2; a parameter takes draw 0."""
    replay = noisy(wd.Gust(0.5, 2.0), sensor=wd.Sensor(noise=0.03), duration=1.0).replay(123)
    trial = np.array([123], dtype=np.uint64)

    def noise(purpose: str) -> Values:
        return np.array([normals(77, fnv1a(purpose), k // 2, trial)[k % 2, 0] for k in range(len(replay.time))])

    added = (replay["measured"] - replay["output"]) / 0.03
    np.testing.assert_allclose(added, noise("noise:sensor"), rtol=0, atol=1e-12)
    # Gauss-Markov, exactly sampled, from its stationary distribution on (Gelb 1974, section 3.8, from
    # memory).
    load, keep, drive = 0.0, math.exp(-0.01 / 2.0), 0.5 * math.sqrt(-math.expm1(-2.0 * 0.01 / 2.0))
    for k, z in enumerate(noise("noise:disturbances.load")):
        load = 0.5 * z if k == 0 else keep * load + drive * z
        assert abs(replay["load"][k] - load) < 1e-14
    u = uniforms(77, fnv1a("spread:plant.gain"), 0, trial)[0, 0]
    assert replay.parameters["gain"] == 0.9 + u * (1.1 - 0.9)


def test_gust_is_stationary_with_its_correlation_time() -> None:
    """Standard deviation sigma at every instant, correlation exp(-dt/T); 2000 trials of 20 T each."""
    study = noisy(wd.Gust(0.5, 2.0))
    outcome = study.run(2000, progress=False)
    square = np.mean(outcome.measures["rms of load"] ** 2)
    # Variance of the time average of the square of a Gauss-Markov process: 2 sigma^4 T / duration, each
    # trial.
    assert abs(square / 0.25 - 1.0) < 5.0 * math.sqrt(2.0 * 2.0 / 40.0 / 2000)
    spread = np.var(outcome.measures["mean of load"]) / (0.25 * 2.0 * 2.0 / 40.0 * (1.0 - 2.0 / 40.0))
    assert abs(spread - 1.0) < 5.0 * math.sqrt(2.0 / 2000)
    loads = np.array([study.replay(i)["load"] for i in range(60)])
    assert abs(np.std(loads[:, 0]) / 0.5 - 1.0) < 5.0 / math.sqrt(2 * 60)
    for lag in (1, 50, 200):
        correlation = np.mean(loads[:, lag:] * loads[:, :-lag]) / np.mean(loads**2)
        assert abs(correlation - math.exp(-lag * 0.01 / 2.0)) < 0.1


@pytest.mark.parametrize("period", [0.01, 0.0025])
def test_white_noise_has_its_density_at_any_sample_period(period: float) -> None:
    """Variance density / Ts, uncorrelated, so that its effect does not depend on the sample period."""
    replay = noisy(wd.WhiteNoise(density=0.004), period=period).replay(4)
    load = replay["load"]
    n = len(load)
    assert abs(np.var(load) * period / 0.004 - 1.0) < 5.0 * math.sqrt(2.0 / n)
    assert abs(np.mean(load[1:] * load[:-1])) * period / 0.004 < 5.0 / math.sqrt(n)
    assert stats.kstest(load / math.sqrt(0.004 / period), "norm").pvalue > 1e-6


def test_seeds_and_trials_differ() -> None:
    a, b = noisy(wd.WhiteNoise(1.0), seed=1), noisy(wd.WhiteNoise(1.0), seed=2)
    loads = [a.replay(0)["load"], a.replay(1)["load"], b.replay(0)["load"]]
    for i in range(3):
        for j in range(i):
            assert abs(np.corrcoef(loads[i], loads[j])[0, 1]) < 5.0 / math.sqrt(len(loads[0]))
