"""What a result depends on besides the programs: machine, instruction set, versions, commit."""

from __future__ import annotations

import os
import platform
import subprocess
from importlib import metadata
from pathlib import Path
from typing import Any

from . import build

PACKAGES = ("numpy", "scipy", "numba", "jax")


def describe(threads: int) -> dict[str, Any]:
    """Return the description of this run."""
    from windage._loader import choice, engine

    return {
        "processor": processor_model(),
        "cores": len(available_cores()),
        "threads": threads,
        "system": f"{platform.system()} {platform.machine()}",
        "instruction set": choice()[0],
        "lanes": int(engine().lanes),
        "engine compiler": str(engine().compiler),
        "C++ compiler of the peers": compiler_version(),
        "Python": platform.python_version(),
        "packages": {name: version for name in PACKAGES if (version := installed(name))},
        "commit": commit(),
        "load before": os.getloadavg()[0] if hasattr(os, "getloadavg") else None,
    }


def available_cores() -> list[int]:
    """Return the cores that this process may use."""
    if hasattr(os, "sched_getaffinity"):
        return sorted(os.sched_getaffinity(0))
    return list(range(os.cpu_count() or 1))


def processor_model() -> str:
    """Return the processor's name as the system tells it."""
    info = Path("/proc/cpuinfo")
    if info.exists():
        for line in info.read_text().splitlines():
            if line.startswith("model name"):
                return line.partition(":")[2].strip()
    return platform.processor() or platform.machine()


def compiler_version() -> str:
    """Return the first line of what the C++ compiler says of itself."""
    program = build.compiler()
    if program is None:
        return "none"
    told = subprocess.run([program, "--version"], capture_output=True, text=True).stdout
    return told.splitlines()[0] if told else program


def installed(package: str) -> str:
    """Return the version of a package, empty if it is not installed."""
    try:
        return metadata.version(package)
    except metadata.PackageNotFoundError:
        return ""


def commit() -> str:
    """Return the commit of the source tree, and whether files differ from it."""

    def git(*arguments: str) -> str:
        done = subprocess.run(
            ["git", "-C", str(build.BENCHMARKS), *arguments], capture_output=True, text=True, check=False
        )
        return done.stdout.strip()

    try:
        name = git("rev-parse", "--short=12", "HEAD")
        changed = git("status", "--porcelain", "--untracked-files=no", "--", ":/cpp", ":/python", ":/benchmarks")
    except OSError:
        return "unknown"
    return (name or "unknown") + (" with changes" if changed else "")
