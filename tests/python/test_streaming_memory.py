"""Ten million counted trials fit in less memory than a browser tab: `Study.count` keeps no columns."""

from __future__ import annotations

import subprocess
import sys

import pytest

COUNT = """
import sys
import windage as wd

loop = wd.Loop(
    plant=wd.IntegratorChain(order=1, gain=wd.uniform(0.5, 1.5)),
    controller=wd.OutputADRC(order=1, controller_bandwidth=2.0, observer_bandwidth=10.0, b0=1.0),
    sample_period=0.1,
    duration=0.3,
    reference=wd.Step(1.0),
    disturbances={"load": 0.0},
)
study = wd.Study(loop, requirements=[wd.final("output") >= 0.5], seed=1)
tally = study.count(int(sys.argv[1]), progress=False)
# Not the resource usage, which begins with that of the process that started this one.
fields = dict(line.split(":", 1) for line in open("/proc/self/status"))
print(1024 * int(fields["VmHWM"].split()[0]), tally.failures)
"""


def counted(trials: int) -> tuple[int, int]:
    """Largest memory of a process that counts so many trials, and the failures."""
    done = subprocess.run(
        [sys.executable, "-c", COUNT, str(trials)], capture_output=True, text=True, check=False, timeout=600
    )
    assert done.returncode == 0, done.stderr[-2000:]
    memory, failures = map(int, done.stdout.split())
    return memory, failures


@pytest.mark.skipif(sys.platform != "linux", reason="no /proc")
def test_ten_million_trials_need_less_than_500_megabytes_and_no_more_than_a_hundred_thousand() -> None:
    few, failures_of_few = counted(100_000)
    many, failures_of_many = counted(10_000_000)
    assert many < 500e6
    assert many - few < 50e6
    # The same seed, a hundred times as many trials: the shares agree within five standard deviations.
    share = failures_of_few / 1e5
    assert 0.01 < share < 0.99
    assert abs(failures_of_many / 1e7 - share) < 5 * (share * (1 - share) / 1e5) ** 0.5
