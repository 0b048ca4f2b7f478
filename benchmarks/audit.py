"""What the audit of a verdict costs: its time over that of the run it examines, side by side.

python benchmarks/audit.py                        20 000 trials of every loop
python benchmarks/audit.py --output benchmarks/results/audit
"""

from __future__ import annotations

import argparse
import json
import statistics
import time
from pathlib import Path
from typing import Any

import windage as wd
from loops import PROBLEMS
from support import machine
from windage._demo import demo_study

HEADER = "| loop | steps | run, s | audit, s | audit of run (smallest to largest) | trials run again |"


def studies() -> dict[str, wd.Study]:
    """Return the studies, each with requirements so near its own measures that some trials fail."""
    chosen = {"demonstration study": demo_study()}
    for letter in ("a", "b", "c", "d"):
        study = PROBLEMS[letter].study(True)
        values = study.run(500, progress=False).measures
        measures = [r.measure for r in study.requirements] + list(study.measures)
        limits = [float(sorted(values[m.label])[475]) for m in measures[:2]]
        requirements = [m <= limit for m, limit in zip(measures[:2], limits, strict=True)]
        chosen[f"({letter}) {PROBLEMS[letter].title}"] = study.with_(requirements=requirements, measures=measures[2:])
    return chosen


def measure(study: wd.Study, trials: int, repeats: int) -> dict[str, Any]:
    """Time run and audit in turn."""
    study.resolved_steps()
    rows: list[tuple[float, float, int]] = []
    for _ in range(repeats + 1):
        start = time.perf_counter()
        outcome = study.run(trials, progress=False)
        between = time.perf_counter()
        audit = outcome.audit()
        rows.append((between - start, time.perf_counter() - between, audit.trials))
    rows = rows[1:]  # the first one loads modules
    ratios = [audit / run for run, audit, _ in rows]
    return {
        "steps": study.resolved_steps(),
        "run": statistics.median(run for run, _, _ in rows),
        "audit": statistics.median(audit for _, audit, _ in rows),
        "ratio": [statistics.median(ratios), min(ratios), max(ratios)],
        "trials": rows[0][2],
    }


def main() -> None:
    """Print and keep the table."""
    parser = argparse.ArgumentParser(description=(__doc__ or "").split("\n", maxsplit=1)[0])
    parser.add_argument("--trials", type=int, default=20_000)
    parser.add_argument("--repeats", type=int, default=3)
    parser.add_argument("--output", type=Path, help="file name without ending for the Markdown and JSON results")
    options = parser.parse_args()
    found = machine.describe(len(machine.available_cores()))
    result: dict[str, Any] = {"machine": found, "trials": options.trials, "loops": {}}
    lines = [HEADER, "|---" * 6 + "|"]
    for name, study in studies().items():
        row = result["loops"][name] = measure(study, options.trials, options.repeats)
        middle, least, most = (f"{100 * ratio:.1f}" for ratio in row["ratio"])
        times = f"{row['run']:.2f} | {row['audit']:.3f} | {middle} % ({least} to {most})"
        lines.append(f"| {name} | {row['steps']} | {times} | {row['trials']} |")
        print(lines[-1], flush=True)
    if options.output:
        options.output.parent.mkdir(parents=True, exist_ok=True)
        text = "\n".join([f"{options.trials} trials; {json.dumps(found)}", "", *lines, ""])
        options.output.with_suffix(".md").write_text(text)
        options.output.with_suffix(".json").write_text(json.dumps(result, indent=1) + "\n")


if __name__ == "__main__":
    main()
