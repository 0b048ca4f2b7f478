"""The programs of the comparison. Each is imported only in the process that runs it."""

from __future__ import annotations

import importlib
import importlib.util
from dataclasses import dataclass
from typing import Any

from loops import Problem


@dataclass(frozen=True)
class Program:
    """One way of simulating a loop.

    Attributes
    ----------
    name, label : str
        On the command line, and in tables.
    module, factory : str
        Where its class is; made with a problem and a number of threads.
    loops : str
        Letters of the loops it has.
    tolerance : float
        Largest relative difference of a measure from windage's without noise.
    check_trials : int
        Trials of the agreement check.
    shares_noise : bool
        Its trials have windage's own noise, so that measures are compared trial by trial with noise too.
    needs : str
        Package that has to be installed, empty for none.
    """

    name: str
    label: str
    module: str
    factory: str
    loops: str
    tolerance: float = 1e-6
    check_trials: int = 128
    shares_noise: bool = False
    needs: str = ""

    def missing(self) -> str:
        """Return what stands in the way of running it, empty if nothing does."""
        if self.needs and importlib.util.find_spec(self.needs) is None:
            return f"the Python package {self.needs} is not installed"
        if self.module == "compiled":
            from support.build import compiler

            return "" if compiler() else "there is no C++ compiler (g++, or the one named by CXX)"
        return ""

    def make(self, problem: Problem, threads: int) -> Any:
        """Return the program made ready for a problem."""
        module = importlib.import_module(f"peers.{self.module}")
        return getattr(module, self.factory)(problem, threads)


WINDAGE = Program("windage", "windage", "windage_study", "WindageStudy", "abcd")

PEERS = (
    Program(
        "stock", "windage, stock plant", "windage_study", "WindageStockPlant", "c", tolerance=1e-9, shares_noise=True
    ),
    Program("fused", "SIMD kernel fused by hand", "compiled", "FusedKernel", "b", shares_noise=True),
    Program("scalar", "plain C++ loop", "compiled", "ScalarLoop", "abd"),
    Program("numba", "numba, prange over trials", "numba_parallel", "NumbaLoop", "abd", needs="numba"),
    Program("jax", "JAX, scan of vmap, jitted", "jax_scan", "JaxLoop", "abd", needs="jax"),
    Program("numpy", "NumPy over trials", "numpy_arrays", "NumpyLoop", "abd"),
    Program(
        "scipy",
        "SciPy solve_ivp per trial",
        "scipy_trials",
        "ScipyTrials",
        "abd",
        tolerance=1e-2,
        check_trials=12,
        needs="scipy",
    ),
)
