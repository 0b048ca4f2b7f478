"""Compare windage with what users would write instead: the same loops, the same numbers, side by side in one run.

    python benchmarks/compare.py                      every loop, every program that can run here
    python benchmarks/compare.py --check              only whether their measures agree; nothing is timed
    python benchmarks/compare.py --loops b --threads 1 --output benchmarks/results/NAME

`benchmarks/README.md` tells what each program is and how to read the result.
"""

from __future__ import annotations

import argparse
import json
import os
import statistics
import sys
from pathlib import Path
from typing import Any

from loops import PROBLEMS
from peers import PEERS, WINDAGE, Program
from support import build, machine, peak, report
from support.agreement import Agreement, compare
from support.worker import ProgramError, Worker

POOL = 4096  # trials whose drawn parameters the peers take in turn


def arguments() -> argparse.Namespace:
    """Return the arguments of the command line."""
    cores = len(machine.available_cores())
    parser = argparse.ArgumentParser(description=(__doc__ or "").split("\n", maxsplit=1)[0])
    parser.add_argument("--loops", default="a,b,c,d", help="letters, separated by commas")
    parser.add_argument("--programs", default="", help="names of peers, separated by commas; default: all")
    parser.add_argument("--trials", type=int, default=1_000_000, help="most trials of one timed run")
    parser.add_argument("--seconds", type=float, default=1.0, help="length that a timed run aims at")
    parser.add_argument("--repeats", type=int, default=7)
    parser.add_argument("--threads", type=int, default=cores, help=f"cores for every program, default {cores}")
    parser.add_argument("--check", action="store_true", help="compare the measures, time nothing")
    parser.add_argument("--output", type=Path, help="file name without ending for the Markdown and JSON results")
    options = parser.parse_args()
    options.loops = [letter.strip() for letter in options.loops.split(",")]
    unknown = [letter for letter in options.loops if letter not in PROBLEMS]
    names = [p.name for p in PEERS]
    options.programs = [name.strip() for name in options.programs.split(",") if name.strip()] or names
    unknown += [name for name in options.programs if name not in names]
    if unknown or not 1 <= options.threads <= cores or options.repeats < 1 or options.seconds <= 0:
        parser.error(
            f"unknown: {', '.join(unknown)}; loops are {', '.join(PROBLEMS)}, programs {', '.join(names)}"
            if unknown
            else f"threads from 1 to {cores}, at least one repeat, and a length above 0 are expected"
        )
    return options


def main() -> int:
    """Run the comparison; return 1 if a program's measures differ."""
    options = arguments()
    cores = machine.available_cores()[: options.threads]
    warn_if_busy(options.check)
    result: dict[str, Any] = {"machine": machine.describe(options.threads), "loops": []}
    can_measure_peak = build.compiler() is not None and not options.check
    if can_measure_peak:
        result["peak"] = peak.measure(result["machine"]["instruction set"], options.threads)
    agrees = True
    for letter in options.loops:
        loop = compare_loop(letter, cores, options)
        result["loops"].append(loop)
        agrees = agrees and not any(row.get("differs") for row in loop["programs"])
    if can_measure_peak:
        again = peak.measure(result["machine"]["instruction set"], options.threads)
        result["peak"] = {name: max(value, again[name]) for name, value in result["peak"].items()}
    text = report.markdown(result)
    print("\n" + text)
    if options.output:
        options.output.parent.mkdir(parents=True, exist_ok=True)
        options.output.with_suffix(".md").write_text(text)
        options.output.with_suffix(".json").write_text(json.dumps(result, indent=1) + "\n")
    return 0 if agrees else 1


def compare_loop(letter: str, cores: list[int], options: argparse.Namespace) -> dict[str, Any]:
    """Check and time every program on one loop."""
    problem = PROBLEMS[letter]
    say(f"loop ({letter}): {problem.title}")
    wanted = [p for p in PEERS if letter in p.loops and p.name in options.programs]
    windage = Worker(WINDAGE, letter, cores)
    workers: list[Worker] = []
    rows: list[dict[str, Any]] = [{"name": "windage", "label": "windage", "agreement": ""}]
    try:
        for program in wanted:
            row = start(program, letter, cores, windage, workers)
            rows.append(row)
            say(f"  {program.label}: {row.get('missing') or row['agreement']}")
        if not options.check:
            columns = problem.columns(windage.drawn(POOL, problem.has_noise))
            measure(windage, workers, rows, columns, options)
    finally:
        for worker in (windage, *workers):
            worker.close()
    return {
        "letter": letter,
        "title": problem.title,
        "operations": problem.operations,
        "samples": problem.samples,
        "programs": rows,
    }


def start(program: Program, letter: str, cores: list[int], windage: Worker, workers: list[Worker]) -> dict[str, Any]:
    """Start a program and compare its measures; only one that agrees joins the workers."""
    row: dict[str, Any] = {"name": program.name, "label": program.label}
    missing = program.missing()
    if missing:
        return row | {"missing": missing}
    worker: Worker | None = None
    try:
        worker = Worker(program, letter, cores)
        found: Agreement = compare(worker, windage, letter)
    except ProgramError as error:
        if worker:
            worker.close()
        return row | {"agreement": f"failed: {str(error).splitlines()[-1]}", "differs": True}
    row |= {"agreement": found.words, "difference": found.difference, "standard errors": found.standard_errors}
    if not found.agrees:
        worker.close()
        return row | {"differs": True}
    workers.append(worker)
    return row


def measure(
    windage: Worker, workers: list[Worker], rows: list[dict[str, Any]], columns: Any, options: argparse.Namespace
) -> None:
    """Time all programs in turn, windage before and after each, and write the figures into the rows."""
    by_name = {row["name"]: row for row in rows}
    for worker in (windage, *workers):
        trials, samples = worker.calibrate(columns, options.seconds, options.trials)
        by_name[worker.program.name] |= {"trials": trials, "samples timed": samples}
    ours: list[float] = []
    theirs: dict[str, list[float]] = {w.program.name: [] for w in workers}
    ratios: dict[str, list[float]] = {w.program.name: [] for w in workers}
    for repeat in range(options.repeats):
        say(f"  repeat {repeat + 1} of {options.repeats}")
        ours.append(windage.nanoseconds())
        for worker in workers:
            before = ours[-1]
            taken = worker.nanoseconds()
            ours.append(windage.nanoseconds())
            theirs[worker.program.name].append(taken)
            ratios[worker.program.name].append(taken / (0.5 * (before + ours[-1])))
    by_name["windage"]["nanoseconds"] = summary(ours)
    for worker in workers:
        name = worker.program.name
        by_name[name] |= {"nanoseconds": summary(theirs[name]), "ratio": summary(ratios[name])}


def summary(values: list[float]) -> dict[str, Any]:
    """Return median, smallest and largest, and the values themselves."""
    rounded = [float(f"{v:.5g}") for v in values]
    return {"median": statistics.median(rounded), "min": min(rounded), "max": max(rounded), "values": rounded}


def warn_if_busy(only_checks: bool) -> None:
    """Tell the user if other work would disturb the timing."""
    load = os.getloadavg()[0] if hasattr(os, "getloadavg") else 0.0
    if load > 0.3 and not only_checks:
        say(f"the machine is busy (load average {load:.1f}): ratios will scatter, and single figures mean little")


def say(text: str) -> None:
    """Tell the user how far the run is."""
    print(text, file=sys.stderr, flush=True)


if __name__ == "__main__":
    sys.exit(main())
