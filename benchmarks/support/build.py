"""Compiles the C++ programs of the benchmark into the user's cache, once for each source and set of flags."""

from __future__ import annotations

import ctypes
import hashlib
import os
import shutil
import subprocess
from collections.abc import Mapping, Sequence
from pathlib import Path

BENCHMARKS = Path(__file__).resolve().parents[1]
CPP = BENCHMARKS / "peers" / "cpp"
ENGINE_HEADERS = BENCHMARKS.parent / "cpp" / "include"

#: What a user gives the compiler for a program of their own.
NATIVE = ("-O3", "-march=native")
#: Flags of windage's own modules (cpp/cmake), for the kernel that is to be compared with them.
WINDAGE_FLAGS = {
    "v2": ("-O3", "-march=x86-64-v2"),
    "v3": ("-O3", "-march=x86-64-v3"),
    "v4": ("-O3", "-march=x86-64-v4", "-mprefer-vector-width=512"),
    "neon": ("-O3", "-march=armv8-a"),
}
WINDAGE_ALWAYS = ("-ffp-contract=off", "-fno-math-errno", "-fno-trapping-math", "-Wno-psabi")


def compiler() -> str | None:
    """Return the C++ compiler: the one that CXX names, else g++."""
    return shutil.which(os.environ.get("CXX", "g++"))


def cache_folder() -> Path:
    """Return the folder that built programs are kept in."""
    base = os.environ.get("XDG_CACHE_HOME")
    return (Path(base) if base else Path.home() / ".cache") / "windage-benchmarks"


def load(source: str, flags: Sequence[str], constants: Mapping[str, float] | None = None) -> ctypes.CDLL:
    """Compile one source of `peers/cpp` as a shared library, unless that was done before, and load it.

    Parameters
    ----------
    source : str
        File name in `peers/cpp`.
    flags : sequence of str
        Compiler flags.
    constants : mapping of str to float, optional
        Reach the source as `constants.hpp`, so that the compiler knows them.

    Raises
    ------
    RuntimeError
        If there is no compiler, or it refuses the source.
    """
    program = compiler()
    if program is None:
        raise RuntimeError("no C++ compiler: install g++ or set CXX")
    header = _constants_header(constants or {})
    command = [program, "-std=c++20", *flags, "-shared", "-fPIC", "-pthread", f"-I{ENGINE_HEADERS}", f"-I{CPP}"]
    folder = cache_folder() / _digest(program, command, source, header)
    library = folder / (Path(source).stem + ".so")
    if not library.exists():
        folder.mkdir(parents=True, exist_ok=True)
        (folder / "constants.hpp").write_text(header)
        unfinished = library.with_suffix(f".{os.getpid()}")
        done = subprocess.run(
            [*command, f"-I{folder}", str(CPP / source), "-o", str(unfinished)], capture_output=True, text=True
        )
        if done.returncode != 0:
            raise RuntimeError(f"{program} refused {source}:\n{done.stderr}")
        unfinished.rename(library)
    return ctypes.CDLL(str(library))


def _constants_header(constants: Mapping[str, float]) -> str:
    lines = [f"inline constexpr double {name} = {value!r};" for name, value in constants.items()]
    return "\n".join(["#pragma once", "namespace constants {", *lines, "}", ""])


def _digest(program: str, command: Sequence[str], source: str, header: str) -> str:
    """Return a name that changes with everything that goes into the library."""
    version = subprocess.run([program, "--version"], capture_output=True, text=True).stdout
    hashed = hashlib.sha256("\n".join([version, *command, header]).encode())
    headers = sorted(CPP.glob("*.hpp")) + sorted((ENGINE_HEADERS / "windage" / "lanes").glob("*.hpp"))
    for path in [CPP / source, *headers]:
        hashed.update(path.read_bytes())
    if "-march=native" in command:
        target = subprocess.run([program, "-march=native", "-Q", "--help=target"], capture_output=True, text=True)
        hashed.update(target.stdout.encode())
    return hashed.hexdigest()[:16]
