"""The programs in C++: a plain scalar loop for each problem, and the kernel fused by hand for loop (b)."""

from __future__ import annotations

import ctypes
from typing import Any

import numpy as np

from loops import Problem
from loops.problem import Values
from support import build

SOURCES = {"a": "linear_plant.cpp", "b": "friction_drive.cpp", "d": "geared_servo.cpp"}


class ScalarLoop:
    """Plain C++, one trial after the other on each thread."""

    grain = 8

    def __init__(self, problem: Problem, threads: int) -> None:
        self._problem, self._threads = problem, threads
        self._library = build.load(SOURCES[problem.letter], build.NATIVE, problem.constants)
        self._reference = np.ascontiguousarray(problem.reference())

    def simulate(self, parameters: Values, noise: bool, seed: int) -> Values:
        """Return the measures, shape (measures, trials)."""
        return self._call(parameters, ctypes.c_uint64(seed), ctypes.c_int(noise))

    def _call(self, parameters: Values, *rest: Any) -> Values:
        trials = parameters.shape[1]
        measures = np.empty((len(self._problem.scales), trials))
        self._library.simulate(
            _address(parameters),
            ctypes.c_long(trials),
            _address(self._reference),
            ctypes.c_long(self._problem.samples),
            _address(measures),
            ctypes.c_int(self._threads),
            *rest,
        )
        return measures


class FusedKernel(ScalarLoop):
    """One pack of trials at a time in registers, by hand, for loop (b) alone; windage's flags and noise."""

    grain = 64

    def __init__(self, problem: Problem, threads: int) -> None:
        from windage._loader import choice

        flags = build.WINDAGE_FLAGS[choice()[0]] + build.WINDAGE_ALWAYS
        self._problem, self._threads = problem, threads
        self._library = build.load("fused_friction_drive.cpp", flags, problem.constants)
        self._reference = np.ascontiguousarray(problem.reference())
        study = problem.study(True)._run_description.study
        self._seed = ctypes.c_uint64(study["seed"])
        streams = (study["loop"]["disturbances"][0]["stream"], study["loop"]["sensor"]["stream"])
        self._streams = [ctypes.c_uint32(stream) for stream in streams]

    def simulate(self, parameters: Values, noise: bool, seed: int) -> Values:
        """Return the measures, shape (measures, trials), with the noise of windage's own trials."""
        del seed
        return self._call(parameters, self._seed, *self._streams, ctypes.c_int(noise))


def _address(array: Values) -> ctypes.c_void_p:
    return array.ctypes.data_as(ctypes.c_void_p)
