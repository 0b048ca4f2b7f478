"""Same digits on every instruction set: one golden digest per study, over every plant, controller and noise.

The digests in `golden_digests.json` were printed by `golden_studies.py`; they are the same for g++ and clang, for every
instruction set, block size and thread count. When one has to move, the commit that moves it says why.
"""

from __future__ import annotations

import json
import os
import subprocess
import sys
from pathlib import Path

import numpy as np
import pytest

import windage as wd
from windage._loader import instruction_sets, missing_features

HERE = Path(__file__).resolve().parent
GOLDEN = json.loads((HERE / "golden_digests.json").read_text())
RUNNABLE = [name for name in instruction_sets() if not missing_features(name)]


def print_digests(instruction_set: str) -> dict[str, str]:
    """Digests from a process of its own: exactly one engine module is loaded in each."""
    done = subprocess.run(
        [sys.executable, str(HERE / "golden_studies.py")],
        env={**os.environ, "WINDAGE_INSTRUCTION_SET": instruction_set},
        capture_output=True,
        text=True,
        check=False,
    )
    assert done.returncode == 0, done.stderr[-3000:]
    return json.loads(done.stdout)


@pytest.mark.parametrize("instruction_set", RUNNABLE)
def test_digests_are_the_golden_ones(instruction_set: str) -> None:
    found = print_digests(instruction_set)
    moved = [name for name in GOLDEN if found.get(name) != GOLDEN[name]]
    assert not moved
    assert found.keys() == GOLDEN.keys()


def test_a_product_is_rounded_before_the_sum_that_uses_it() -> None:
    """(1 + e)(1 - e) - 1 with e = 2^-30 is 0 in two roundings and -2^-60 if contracted into one."""
    plant = wd.Plant(
        states={"a": 1.0 + 2.0**-30, "b": 1.0 - 2.0**-30, "c": -1.0},
        equations={"a": "0*u", "b": "0*u", "c": "0*u"},
        input="u",
        output="a",
    )
    loop = wd.Loop(
        plant=plant,
        controller=wd.OutputADRC(order=1, controller_bandwidth=1.0, observer_bandwidth=5.0, b0=1.0),
        sample_period=0.1,
        duration=0.2,
        reference=wd.Constant(0.0),
        signals={"sum": "a*b + c", "difference": "a*b - (-c)", "reverse": "-c - a*b"},
        steps_per_sample=1,
    )
    replay = wd.Study(loop, requirements=[wd.peak("sum") <= 1.0]).replay(0)
    for signal in ("sum", "difference", "reverse"):
        np.testing.assert_array_equal(replay[signal], 0.0)
