"""Measures that are fractions of a change: where there is no change, and percent written for a fraction."""

from __future__ import annotations

import math

import pytest

import windage as wd


def study(reference: wd.Pulse | wd.Step, *requirements: wd.Requirement) -> wd.Study:
    loop = wd.Loop(
        wd.FirstOrder(gain=2.0, time_constant=wd.uniform(0.2, 0.4)),
        wd.OutputADRC(1, b0=6.0, controller_bandwidth=6.0, observer_bandwidth=40.0),
        sample_period=0.01,
        duration=2.0,
        reference=reference,
    )
    return wd.Study(loop, requirements, seed=4)


def test_without_a_change_there_is_no_rise_and_no_requirement_on_it_is_met() -> None:
    # The reference ends where the output began, and the output moved: every fraction is crossed at once.
    came_back = wd.Pulse(1.0, 0.0, 1.0)
    measures = [wd.rise_time() <= 0.5, wd.overshoot() <= 0.5, wd.rise_time(before=0.9) <= 1.0]
    outcome = study(came_back, *measures).run(20, progress=False)
    rise, over, in_window = outcome.measures.values()
    assert (rise == math.inf).all()
    assert (over == math.inf).all()
    assert len(outcome.failed(0)) == 20
    assert ((in_window > 0.1) & (in_window < 0.9)).all()


def test_a_limit_of_more_than_the_whole_change_is_pointed_out() -> None:
    percent = [wd.overshoot() <= 5.0, wd.undershoot() <= wd.uniform(2.0, 3.0), wd.overshoot(before=1.0) <= 0.05]
    advice = study(wd.Step(1.0), *percent).warnings()
    assert [text for text in advice if "fraction" in text] == [
        "requirements: 'overshoot of output <= 5' allows 500 % of the change; it is a fraction, and 5 % would be 0.05",
        "requirements: 'undershoot of output <= uniform(low=2.0, high=3.0)' allows 200 % of the change; it is a "
        "fraction, and 2 % would be 0.02",
    ]
    assert not [text for text in study(wd.Step(1.0), wd.overshoot() <= 1.0).warnings() if "fraction" in text]


def test_a_band_wider_than_the_change_is_refused() -> None:
    assert wd.settling_time(band=1.0).band == 1.0
    for band in (2, 1.01, wd.uniform(0.5, 1.5)):
        with pytest.raises(wd.DescriptionError, match=r"settling_time.band: .* at most 1 \(2 % is 0.02\)"):
            wd.settling_time(band=band)
