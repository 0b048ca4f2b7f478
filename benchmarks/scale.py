"""Measure how cost and memory grow with the number of trials: from 10^4 to 10^7 of a short loop, counted as they run.

    python benchmarks/scale.py [--largest 10000000] [--output benchmarks/results/scale]

Each number of trials has a process of its own, since the largest memory of a process never falls.
"""

from __future__ import annotations

import argparse
import json
import subprocess
import sys
from pathlib import Path

from support import machine

ONE_RUN = """
import resource, sys, time
import windage as wd

trials = int(sys.argv[1])
loop = wd.Loop(
    plant=wd.SecondOrder(gain=wd.uniform(0.8, 1.2), time_constant=wd.uniform(0.8, 1.25), damping=wd.uniform(0.3, 0.9)),
    controller=wd.OutputADRC(order=2, controller_bandwidth=6.0, observer_bandwidth=40.0, b0=1.0),
    sample_period=0.02,
    duration=2.0,
    reference=wd.Step(1.0),
    sensor=wd.Sensor(noise=1e-3),
    disturbances={"load": 0.0},
)
study = wd.Study(loop, requirements=[wd.overshoot() <= 0.004, wd.settling_time(band=0.05) <= 1.9], seed=5)
study.count(200_000, progress=False)
start = time.perf_counter()
tally = study.count(trials, progress=False)
taken = time.perf_counter() - start
peak = resource.getrusage(resource.RUSAGE_SELF).ru_maxrss * 1024
print(taken, peak, tally.failures)
"""


def measure(trials: int) -> dict[str, float]:
    """Return time a trial (ns), largest memory of the process (MB) and failures of one run."""
    done = subprocess.run(
        [sys.executable, "-c", ONE_RUN, str(trials)], stdout=subprocess.PIPE, text=True, check=True
    ).stdout.split()
    seconds, memory, failed = map(float, done)
    return {"trials": trials, "ns a trial": seconds / trials * 1e9, "peak MB": memory / 1e6, "failures": failed}


def main() -> None:
    """Print the table; with --output write it."""
    parser = argparse.ArgumentParser(description=__doc__.splitlines()[0])
    parser.add_argument("--largest", type=int, default=10_000_000)
    parser.add_argument("--output", type=Path)
    options = parser.parse_args()
    lines = ["| trials | ns a trial | largest memory, MB | failures |", "|---|---|---|---|"]
    rows, trials = [], 10_000
    while trials <= options.largest:
        # Short runs are repeated: one of 10^4 trials takes some hundredths of a second.
        repeats = max(1, min(9, 10**6 // trials))
        found = sorted((measure(trials) for _ in range(repeats)), key=lambda row: row["ns a trial"])
        row = found[len(found) // 2]
        rows.append(row)
        lines.append(f"| {trials:.0e} | {row['ns a trial']:.0f} | {row['peak MB']:.0f} | {row['failures']:.0f} |")
        print(lines[-1], flush=True)
        trials *= 10
    about = machine.describe(len(machine.available_cores()))
    text = "# Cost and memory by number of trials\n\n" + "\n".join(lines) + "\n"
    print("\n" + text)
    if options.output:
        options.output.with_suffix(".json").write_text(json.dumps({"machine": about, "rows": rows}, indent=1) + "\n")
        shown = "\n".join(f"* {name}: {value}" for name, value in about.items())
        options.output.with_suffix(".md").write_text(f"{text}\nMedian of several runs, all cores.\n\n{shown}\n")


if __name__ == "__main__":
    main()
