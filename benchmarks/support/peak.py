"""The most arithmetic that the cores of a run can do, for the roofline."""

from __future__ import annotations

import ctypes

from . import build


def measure(instruction_set: str, threads: int, repeats: int = 9) -> dict[str, float]:
    """Return 10^9 operations a second: `separate` multiplications and additions, and `fused` ones.

    One core is measured, the fastest of several runs since it is a limit, and multiplied by the number of threads.
    """
    library = build.load("peak.cpp", build.WINDAGE_FLAGS[instruction_set] + build.WINDAGE_ALWAYS)
    peaks = {}
    for name in ("separate", "fused"):
        function = getattr(library, name)
        function.restype = ctypes.c_double
        peaks[name] = max(function() for _ in range(repeats)) * threads / 1e9
    return peaks
