"""Chooses the engine module for this processor, once.

The engine is compiled as one whole extension module per instruction set; the results are the same to the last
bit, only the speed differs. `WINDAGE_INSTRUCTION_SET` (v2, v3 or v4 on x86-64, neon on Arm) overrides the choice.
"""

from __future__ import annotations

import functools
import importlib
import importlib.util
import os
import platform
from types import ModuleType
from typing import Any

from windage._errors import EngineError

_OVERRIDE = "WINDAGE_INSTRUCTION_SET"


def instruction_sets() -> tuple[str, ...]:
    """Instruction sets of this kind of processor, the fastest first."""
    return ("neon",) if platform.machine().lower() in {"aarch64", "arm64"} else ("v4", "v3", "v2")


def missing_features(instruction_set: str) -> list[str]:
    """Features of an instruction set that this processor lacks."""
    from windage import _processor

    return list(_processor.missing(instruction_set))


@functools.cache
def choice() -> tuple[str, str]:
    """Return the instruction set to use and the reason for it.

    Raises
    ------
    EngineError
        The override names an instruction set that is unknown, not in this build, or not possible here.
    """
    wanted = os.environ.get(_OVERRIDE, "").strip()
    known = instruction_sets()
    if wanted:
        if wanted not in known:
            raise EngineError(f"{_OVERRIDE}: found {wanted!r}; expected one of {', '.join(known)} on this processor.")
        lacks = missing_features(wanted)
        if lacks:
            raise EngineError(
                f"{_OVERRIDE}: found {wanted!r}; this processor lacks {', '.join(lacks)}. "
                f"Unset it, or choose an older instruction set."
            )
        if not _is_built(wanted):
            raise EngineError(f"{_OVERRIDE}: found {wanted!r}; this installation was built without it.")
        return wanted, f"{_OVERRIDE} asks for it"
    for candidate in known:
        if _is_built(candidate) and not missing_features(candidate):
            return candidate, "the fastest that this processor can run"
    raise EngineError(
        f"No engine of this installation runs on this processor ({platform.machine()}); it lacks "
        f"{', '.join(missing_features(known[-1])) or 'a built engine'}. Build windage from source on it."
    )


def _is_built(instruction_set: str) -> bool:
    return importlib.util.find_spec(f"windage._engine_{instruction_set}") is not None


@functools.cache
def engine() -> Any:
    """Return the engine module, loading it on first use. Exactly one is ever loaded in a process."""
    module: ModuleType = importlib.import_module(f"windage._engine_{choice()[0]}")
    return module


def default_threads() -> int:
    """Threads that a run uses unless told: `WINDAGE_THREADS`, or every core this process may use."""
    text = os.environ.get("WINDAGE_THREADS", "").strip()
    if text:
        if not text.isdecimal() or not 1 <= int(text) <= 4096:
            raise EngineError(f"WINDAGE_THREADS: found {text!r}; expected a whole number from 1 to 4096.")
        return int(text)
    affinity = getattr(os, "sched_getaffinity", None)
    return len(affinity(0)) if affinity else os.cpu_count() or 1


def show_config() -> dict[str, str]:
    """Return what this installation is made of: version, instruction set and why, compiler, threads."""
    from windage import __version__

    name, reason = choice()
    module = engine()
    built = [s for s in instruction_sets() if _is_built(s)]
    return {
        "windage": __version__,
        "instruction set": f"{name} ({reason})",
        "instruction sets built": ", ".join(built),
        "lanes": str(module.lanes),
        "compiler": str(module.compiler),
        "oneTBB": str(module.tbb_version),
        "threads": str(default_threads()),
        "processor": platform.machine(),
    }
