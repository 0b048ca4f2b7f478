"""Clear drivers: at most one study in twenty shows one where nothing matters, and real ones are found."""

from __future__ import annotations

import math
from types import SimpleNamespace
from typing import Any

import numpy as np
import pytest
from scipy import stats

import windage as wd
from windage._drivers import FAILING, find_drivers
from windage._rank_correlation import holm, p_value, ranked

STUDIES = 400


def outcome(parameters: dict[str, Any], slack: np.ndarray) -> Any:
    """What `find_drivers` reads of an outcome."""
    passed = (slack >= 0.0).all(axis=1)
    return SimpleNamespace(
        requirements=tuple(f"r{i}" for i in range(slack.shape[1])),
        slack=slack,
        passed=passed,
        parameters=parameters,
        trials=len(slack),
        failures=np.flatnonzero(~passed),
    )


def rare(rng: np.random.Generator, chance: float, count: int) -> np.ndarray:
    return (rng.uniform(size=count) < chance).astype(float)


@pytest.mark.parametrize("kind", ["smooth", "few failures", "ties"])
def test_where_nothing_matters_at_most_one_study_in_twenty_shows_a_clear_driver(kind: str) -> None:
    rng = np.random.default_rng(7)
    found = single = 0
    for _ in range(STUDIES):
        n = 200
        common = rng.normal(size=n)
        slack = 0.6 * common[:, None] + rng.normal(size=(n, 3)) + (2.6 if kind == "few failures" else 0.8)
        parameters = {f"p{i}": rng.uniform(size=n) for i in range(8)}
        if kind == "ties":
            parameters |= {f"c{i}": rare(rng, chance, n) for i, chance in enumerate((0.005, 0.02, 0.1, 0.4))}
            slack = np.round(np.minimum(slack, 0.5))
        drivers = find_drivers(outcome(parameters, slack))
        found += any(row.is_clear for row in drivers)
        single += any(row.low > 0.0 or row.high < 0.0 for row in drivers)
    # Three standard errors above 5 % for the fixed seed; intervals by themselves call most studies clear.
    assert found <= STUDIES * 0.05 + 3.0 * math.sqrt(STUDIES * 0.05 * 0.95)
    assert single > 0.4 * STUDIES


def test_a_real_driver_is_clear_and_the_others_are_not() -> None:
    rng = np.random.default_rng(3)
    n = 1000
    parameters = {f"p{i}": rng.uniform(size=n) for i in range(12)}
    slack = (0.4 * parameters["p3"] + 0.3 * rng.normal(size=n))[:, None]
    drivers = find_drivers(outcome(parameters, slack))
    assert [row.parameter for row in drivers.of("r0") if row.is_clear] == ["p3"]
    assert [row.parameter for row in drivers.of(FAILING) if row.is_clear] == ["p3"]
    text = str(drivers)
    assert "* clear at 95 %, all 24 rows together" in text
    assert sum(line.startswith("* ") for line in text.splitlines()) == 2


@pytest.mark.parametrize("strength", [0.0, 0.05, 0.2, 0.6])
@pytest.mark.parametrize("count", [5, 40, 3000])
def test_p_values_are_those_of_an_independent_program(strength: float, count: int) -> None:
    """scipy.stats.spearmanr, which uses the same law."""
    rng = np.random.default_rng(count)
    a = rng.normal(size=count)
    b = strength * a + rng.normal(size=count)
    first, second = ranked(a), ranked(b)
    assert first is not None
    assert second is not None
    expected = stats.spearmanr(a, b)
    if count == 5:  # fewer coincidences than the law needs
        assert p_value(first, second, float(expected.statistic)) == 1.0
    else:
        assert p_value(first, second, float(expected.statistic)) == pytest.approx(expected.pvalue, rel=1e-8, abs=1e-300)


def test_adjusted_p_values_are_those_of_the_published_procedure() -> None:
    # Worked by hand after Holm 1979: 4 x 0.01, then 3 x 0.02, 2 x 0.03 raised to it, and 0.9.
    assert holm([0.02, 0.9, 0.01, 0.03]) == pytest.approx([0.06, 0.9, 0.04, 0.06])
    assert holm([]) == []
    assert holm([0.7, 0.8]) == [1.0, 1.0]


def test_a_few_coincidences_of_rare_values_are_not_called_clear() -> None:
    # Two of a thousand units have the rare part, and both fail, as do eight others: r = 0.45, and no proof of anything.
    part, slack = np.zeros(1000), np.ones((1000, 1))
    part[:2] = 1.0
    slack[:10] = -1.0
    assert not any(row.is_clear for row in find_drivers(outcome({"part": part}, slack)))


@pytest.mark.parametrize(("failures", "is_told"), [(39, False), (40, True)])
def test_rare_values_have_to_coincide_twenty_times_on_average(failures: int, is_told: bool) -> None:
    part = np.repeat([0.0, 1.0], 500)
    failed = np.zeros(1000)
    failed[-failures:] = 1.0
    first, second = ranked(part), ranked(failed)
    assert first is not None
    assert second is not None
    assert (p_value(first, second, 0.2) < 1e-6) is is_told


def test_the_command_hints_at_no_driver_where_nothing_matters(capsys: pytest.CaptureFixture[str]) -> None:
    from windage._command_output import _print_hints

    rng = np.random.default_rng(5)
    hinted = 0
    for _ in range(100):
        parameters = {f"p{i}": rng.uniform(size=100) for i in range(10)}
        fake = outcome(parameters, rng.normal(size=(100, 2)))
        fake.drivers = lambda fake=fake: find_drivers(fake)
        _print_hints(fake)
        hinted += "First hint" in capsys.readouterr().out
    assert hinted <= 12


def test_drivers_of_a_study_are_found() -> None:
    loop = wd.Loop(
        plant=wd.FirstOrder(gain=wd.uniform(0.8, 1.2), time_constant=wd.uniform(0.9, 1.1)),
        controller=wd.ErrorADRC(1, controller_bandwidth=1.0, observer_bandwidth=5.0, b0=1.0),
        sample_period=0.1,
        duration=1.0,
        reference=wd.Step(1.0),
        disturbances={"load": wd.Constant(wd.uniform(-1e-9, 1e-9))},
    )
    drivers = wd.Study(loop, [wd.peak("error", after=0.9) <= 0.36], seed=2).run(500, progress=False).drivers()
    assert drivers["gain"].is_clear
    assert not drivers["disturbances.load.value"].is_clear
