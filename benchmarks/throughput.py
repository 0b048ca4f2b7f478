"""Measure windage by itself: trial-samples a second on one core, threads, block sizes, and lanes against one lane.

    python benchmarks/throughput.py                   the demonstration study and the geared servo axis
    python benchmarks/throughput.py --scalar          also an engine of one lane, compiled now (some minutes, once)

The figures of one line are measured in turn, so that a machine that changes its pace changes them together.
"""

from __future__ import annotations

import argparse
import importlib.util
import json
import os
import shutil
import statistics
import subprocess
import sys
import time
from collections.abc import Callable
from functools import partial
from pathlib import Path
from typing import Any

from loops import PROBLEMS
from support import build, machine

BLOCKS = (16, 32, 64, 128, 256, 512)
Timed = Callable[[], object]


def studies() -> dict[str, tuple[Any, int]]:
    """Return the studies with the samples of a trial."""
    from windage._demo import demo_study

    demo = demo_study()
    samples = len(demo.nominal().time)
    servo = PROBLEMS["d"]
    return {"demonstration study": (demo, samples), "geared servo axis": (servo.study(True), servo.samples)}


def use_module(path: Path) -> None:
    """Make windage use an engine module that is not the installed one."""
    name = f"windage.{path.name.partition('.')[0]}"
    spec = importlib.util.spec_from_file_location(name, path)
    if spec is None or spec.loader is None:
        raise SystemExit(f"{path} is no engine module")
    module = importlib.util.module_from_spec(spec)
    sys.modules[name] = module
    spec.loader.exec_module(module)


def alternately(runs: dict[str, Timed], repeats: int) -> dict[str, list[float]]:
    """Return the seconds of each run, all runs taken in turn."""
    taken: dict[str, list[float]] = {name: [] for name in runs}
    for run in runs.values():
        run()
    for _ in range(repeats):
        for name, run in runs.items():
            start = time.perf_counter()
            run()
            taken[name].append(time.perf_counter() - start)
    return taken


def trials_for(campaign: Any, seconds: float) -> int:
    """Return trials, a multiple of 512, that take about so long on one core."""
    campaign.run(0, 512, 1)
    start = time.perf_counter()
    campaign.run(0, 512, 1)
    return 512 * max(1, round(seconds / (time.perf_counter() - start)))


def one_core(seconds: float, repeats: int) -> dict[str, float]:
    """Return nanoseconds of a trial and sample on one core for each study."""
    found = {}
    for name, (study, samples) in studies().items():
        campaign = study._campaign
        trials = trials_for(campaign, seconds)
        taken = alternately({"": partial(campaign.run, 0, trials, 1)}, repeats)[""]
        found[name] = statistics.median(taken) / (trials * samples) * 1e9
    return found


def threads_line(campaign: Any, trials: int, threads: int, repeats: int) -> str:
    """Return how well several threads are used: time of one with its share over time of all with all.

    Cores that are all busy may each be slower (they share caches, power and, on a hired machine, neighbours); the share
    of the time in which they were busy tells what the distribution of the work loses.
    """
    busy = []

    def on_all() -> None:
        wall, processor = time.perf_counter(), time.process_time()
        campaign.run(0, threads * trials, threads)
        busy.append((time.process_time() - processor) / (threads * (time.perf_counter() - wall)))

    taken = alternately(
        {
            "one": partial(campaign.run, 0, trials, 1),
            "all": on_all,
        },
        repeats,
    )
    efficiency = sorted(a / b for a, b in zip(taken["one"], taken["all"], strict=True))
    return (
        f"  {threads} threads: efficiency {100 * statistics.median(efficiency):.1f} % "
        f"({100 * efficiency[0]:.1f} to {100 * efficiency[-1]:.1f} %), "
        f"busy {100 * statistics.median(busy):.1f} % of the time"
    )


def blocks_line(campaign: Any, trials: int, samples: int, repeats: int) -> str:
    """Return the nanoseconds of a trial and sample for each block size."""
    runs: dict[str, Timed] = {str(b): partial(campaign.run, 0, trials, 1, b) for b in BLOCKS}
    taken = alternately(runs, repeats)
    shown = [f"{b}: {statistics.median(t) / (trials * samples) * 1e9:.1f}" for b, t in taken.items()]
    return "  ns by block size: " + ", ".join(shown)


def build_scalar_engine() -> Path:
    """Return an engine module of one lane, compiled for the instruction set in use unless that was done before."""
    from windage._loader import choice

    cmake, ninja = shutil.which("cmake"), shutil.which("ninja")
    if cmake is None or importlib.util.find_spec("pybind11") is None:
        raise SystemExit("cmake and the build requirements of pyproject.toml are needed for --scalar")
    import pybind11

    name, source = choice()[0], build.BENCHMARKS.parent
    folder = build.cache_folder() / f"scalar-{name}"
    configure = [
        *(cmake, "-S", str(source), "-B", str(folder), *(["-G", "Ninja"] if ninja else [])),
        "-DWINDAGE_PYTHON=ON",
        f"-DWINDAGE_INSTRUCTION_SETS={name}",
        "-DCMAKE_CXX_FLAGS=-DWINDAGE_LANES=1",
        f"-DPython_EXECUTABLE={sys.executable}",
        f"-Dpybind11_DIR={pybind11.get_cmake_dir()}",
    ]
    for command in (configure, [cmake, "--build", str(folder), "--target", f"_engine_{name}"]):
        done = subprocess.run(command, capture_output=True, text=True)
        if done.returncode != 0:
            raise SystemExit(f"the engine of one lane could not be built:\n{done.stdout[-3000:]}{done.stderr[-3000:]}")
    return next(folder.glob(f"cpp/bindings/_engine_{name}*.so"))


def compare_with_scalar(seconds: float, repeats: int, module: Path) -> list[str]:
    """Return what lanes gain over one lane, the two engines measured in turn."""
    rounds: dict[str, list[dict[str, float]]] = {"lanes": [], "one lane": []}
    for _ in range(repeats):
        for name, given in (("lanes", []), ("one lane", ["--engine-module", str(module)])):
            command = [sys.executable, __file__, "--one-core", "--seconds", str(seconds), "--repeats", "1", *given]
            told = subprocess.run(command, capture_output=True, text=True, check=True, env=os.environ.copy()).stdout
            rounds[name].append(json.loads(told))
    lines = []
    for study in rounds["lanes"][0]:
        pairs = zip(rounds["one lane"], rounds["lanes"], strict=True)
        ratios = sorted(one[study] / many[study] for one, many in pairs)
        slow = statistics.median(r[study] for r in rounds["one lane"])
        spread = f"{ratios[0]:.2f} to {ratios[-1]:.2f}"
        lines.append(
            f"{study}: one lane {slow:.1f} ns a trial and sample, lanes are "
            f"{statistics.median(ratios):.2f} times as fast ({spread})"
        )
    return lines


def main() -> int:
    """Measure and print."""
    cores = machine.available_cores()
    parser = argparse.ArgumentParser(description=(__doc__ or "").split("\n", maxsplit=1)[0])
    parser.add_argument("--seconds", type=float, default=0.5, help="length that a timed run aims at")
    parser.add_argument("--repeats", type=int, default=7)
    parser.add_argument("--threads", type=int, default=len(cores))
    parser.add_argument("--scalar", action="store_true", help="compare with an engine of one lane")
    parser.add_argument("--engine-module", type=Path, help="measure this engine module instead")
    parser.add_argument("--one-core", action="store_true", help="only ns a trial and sample on one core, as JSON")
    options = parser.parse_args()
    if options.engine_module:
        use_module(options.engine_module)
    if options.one_core:
        print(json.dumps(one_core(options.seconds, options.repeats)))
        return 0
    for name, value in machine.describe(options.threads).items():
        print(f"{name}: {value}")
    for name, (study, samples) in studies().items():
        campaign = study._campaign
        trials = trials_for(campaign, options.seconds)
        taken = alternately({"": partial(campaign.run, 0, trials, 1)}, options.repeats)[""]
        ns = statistics.median(taken) / (trials * samples) * 1e9
        print(f"\n{name}, {samples} samples a trial")
        print(f"  one core: {1e9 / ns / 1e6:.1f} million trial-samples a second, {ns:.1f} ns each")
        if options.threads > 1:
            print(threads_line(campaign, trials, options.threads, options.repeats))
        print(blocks_line(campaign, min(trials, 1024), samples, options.repeats))
    if options.scalar:
        print()
        print("\n".join(compare_with_scalar(options.seconds, options.repeats, build_scalar_engine())))
    return 0


if __name__ == "__main__":
    sys.exit(main())
