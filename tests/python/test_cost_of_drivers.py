"""Drivers are worked out once, however many rows, pictures and hints ask for them."""

from __future__ import annotations

from typing import Any

import pytest

import windage as wd
from windage import _drivers
from windage._demo import demo_study


def test_every_parameter_and_result_is_ranked_once(monkeypatch: pytest.MonkeyPatch) -> None:
    requirements = [wd.peak("error", after=5.0) <= 1e-3, wd.rms("torque") <= 12.0, wd.peak("torque") <= 50.0]
    outcome = demo_study().with_(requirements=requirements).run(400, progress=False)
    ranked, sizes = _drivers.ranked, list[int]()

    def counted(values: Any) -> Any:
        sizes.append(len(values))
        return ranked(values)

    monkeypatch.setattr(_drivers, "ranked", counted)
    outcome.plot()
    outcome.plot(parameters=6)
    assert outcome.drivers() is outcome.drivers()
    assert len(sizes) == len(outcome.parameters) + len(requirements) + 1
