"""Count the machine instructions of the engine's kernels and loops with callgrind: figures that no busy machine moves.

    python benchmarks/instructions.py                 count, and compare with the committed figures
    python benchmarks/instructions.py --write         count, and write benchmarks/results/instructions.json

The engine is the one for AVX2 (v3), since Valgrind does not know AVX-512. A figure is the difference of two runs of
different length over the difference of their work, so that what happens once (describing the study, starting threads)
drops out. Instructions are not time: a division counts like an addition. What changes by more than two per cent without
a reason wants an explanation.
"""

from __future__ import annotations

import argparse
import ctypes
import gc
import json
import os
import re
import shutil
import subprocess
import sys
import tempfile
from collections.abc import Callable
from functools import partial
from pathlib import Path
from typing import Any

import numpy as np

from loops import PROBLEMS
from loops.dc_drive import make_study as make_dc_study
from support import build, machine

INSTRUCTION_SET = "v3"
COMMITTED = build.BENCHMARKS / "results" / "instructions.json"
NOTABLE = 0.02
BLOCK = 64
ELEMENTS = 16384
FUNCTIONS = ("hyperbolic_tangent", "exponential", "logarithm", "sine", "square_root", "power")


def cases() -> dict[str, tuple[Callable[[int], object], int, int]]:
    """Return what is counted: a run of some length, a short length, and the work of one unit of length."""
    from windage._loader import engine

    found: dict[str, tuple[Callable[[int], object], int, int]] = {}
    x = np.linspace(0.1, 3.0, 2 * ELEMENTS)
    for name in FUNCTIONS:
        second = x if name == "power" else None
        found[f"function {name}, an element"] = (
            partial(apply_function, name, x, second),
            ELEMENTS,
            1,
        )
    found["normal number, a draw"] = (lambda n: engine().lane_normals(1, 2, 3, 0, n), ELEMENTS, 2)
    studies = {f"loop ({letter})": PROBLEMS[letter].study(True) for letter in PROBLEMS}
    studies["loop (c), stock plant"] = make_dc_study(True, stock=True)
    for name, study in studies.items():
        samples = PROBLEMS[name[6]].samples
        campaign = study._campaign
        found[f"{name}, a trial and sample"] = (
            partial(run_block, campaign),
            BLOCK,
            samples,
        )
    return found


def apply_function(name: str, x: Any, y: Any, n: int) -> object:
    """Apply an elementary function to n elements."""
    from windage._loader import engine

    return engine().lane_function(name, x[:n], None if y is None else y[:n])


def run_block(campaign: Any, trials: int) -> object:
    """Run trials on one thread in blocks of one size."""
    return campaign.run(0, trials, 1, BLOCK)


def count_under_callgrind() -> None:
    """Run every case twice and mark the counts; in the process that callgrind watches."""
    requests = build.load("callgrind_requests.cpp", build.NATIVE[:1])
    if not requests.is_counting():
        raise SystemExit("this runs under callgrind only")
    gc.disable()
    requests.begin_count()
    requests.end_count(b"before the first case")
    for name, (run, length, _) in cases().items():
        for factor in (1, 2):
            run(length)  # what the interpreter does only once is done before
            requests.begin_count()
            run(factor * length)
            requests.end_count(ctypes.c_char_p(f"{name}|{factor}".encode()))


def count() -> dict[str, float]:
    """Return the instructions of each case for one unit of its work."""
    with tempfile.TemporaryDirectory() as folder:
        out = Path(folder) / "counts"
        command = ["valgrind", "--tool=callgrind", f"--callgrind-out-file={out}", sys.executable, __file__, "--inside"]
        environment = os.environ | {"WINDAGE_INSTRUCTION_SET": INSTRUCTION_SET, "PYTHONHASHSEED": "0"}
        done = subprocess.run(command, env=environment, capture_output=True, text=True)
        if done.returncode != 0:
            raise SystemExit(f"callgrind failed:\n{done.stderr[-3000:]}")
        totals = dict(filter(None, map(read_dump, Path(folder).iterdir())))
    figures = {}
    for name, (_, length, work) in cases().items():
        figures[name] = round((totals[f"{name}|2"] - totals[f"{name}|1"]) / (length * work), 2)
    return figures


def read_dump(path: Path) -> tuple[str, int] | None:
    """Return name and instructions of one dump of callgrind; None for the last one, which has no name."""
    text = path.read_text()
    name = re.search(r"^desc: Trigger: Client Request: (.*)$", text, re.MULTILINE)
    total = re.search(r"^(?:totals|summary): (\d+)", text, re.MULTILINE)
    return (name[1], int(total[1])) if name and total else None


def table(figures: dict[str, float], committed: dict[str, float]) -> str:
    """Return the figures beside the committed ones."""
    lines = ["| counted | instructions | committed | change |", "|---|---|---|---|"]
    for name, value in figures.items():
        before = committed.get(name)
        change = "" if not before else f"{100 * (value / before - 1):+.1f} %"
        lines.append(f"| {name} | {value:g} | {before or ''} | {change} |")
    return "\n".join(lines)


def main() -> int:
    """Count; return 1 if a figure differs notably from the committed one and is not being written."""
    parser = argparse.ArgumentParser(description=(__doc__ or "").split("\n", maxsplit=1)[0])
    parser.add_argument("--write", action="store_true", help=f"write {COMMITTED.name}")
    parser.add_argument("--inside", action="store_true", help=argparse.SUPPRESS)
    options = parser.parse_args()
    if options.inside:
        count_under_callgrind()
        return 0
    if shutil.which("valgrind") is None or build.compiler() is None:
        print("valgrind and a C++ compiler are needed; nothing was counted.", file=sys.stderr)
        return 2
    committed: dict[str, Any] = json.loads(COMMITTED.read_text()) if COMMITTED.exists() else {"figures": {}}
    figures = count()
    print(table(figures, committed["figures"]))
    if options.write:
        COMMITTED.parent.mkdir(parents=True, exist_ok=True)
        result = {"instruction set": INSTRUCTION_SET, **compiled_by(), "commit": machine.commit(), "figures": figures}
        COMMITTED.write_text(json.dumps(result, indent=1) + "\n")
        return 0
    known = {n: v for n, v in committed["figures"].items() if n in figures}
    return 1 if any(abs(figures[n] / before - 1) > NOTABLE for n, before in known.items()) else 0


def compiled_by() -> dict[str, str]:
    """Return the compiler of the engine that was counted."""
    from windage._loader import engine

    return {"engine compiler": str(engine().compiler)}


if __name__ == "__main__":
    sys.exit(main())
