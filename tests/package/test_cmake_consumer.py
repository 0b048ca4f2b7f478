"""The C++ library installs with a CMake package that another project can use, with the digits of the Python package."""

from __future__ import annotations

import os
import shutil
import subprocess
import sys
from importlib.metadata import files
from pathlib import Path

import numpy as np
import pytest

from windage import _evidence
from windage._loader import engine

ROOT = Path(__file__).resolve().parents[2]
CONSUMER = Path(__file__).resolve().parent / "consumer"

STUDY = {
    "seed": 7,
    "spreads": [{"name": "gain", "kind": "uniform", "numbers": [0.8, 1.3], "stream": 11}],
    "loop": {
        "sample_period": 0.01,
        "duration": 3.0,
        "plant": {
            "kind": "first_order",
            "states": ["x"],
            "initial_state": [0.0],
            "numbers": [("drawn", 0), 1.0],
        },
        "controller": {"controller_bandwidth": 4.0, "observer_bandwidth": 40.0},
        "reference": {"kind": "step", "numbers": [1.0, 0.0, 0.0]},
        "sensor": {"noise": 1e-3},
    },
    "measures": [{"kind": "peak", "signal": "error", "after": 1.0}],
}


def run(*command: str | Path) -> str:
    done = subprocess.run([str(c) for c in command], capture_output=True, text=True, check=False)
    assert done.returncode == 0, f"{command}\n{done.stdout[-4000:]}\n{done.stderr[-4000:]}"
    return done.stdout


def tool(name: str) -> str:
    found = shutil.which(name, path=f"{Path(sys.executable).parent}{os.pathsep}{os.environ['PATH']}")
    assert found, f"{name} is part of the test requirements"
    return found


def onetbb_prefix() -> list[str]:
    """Where the package index put oneTBB; nothing where the system provides it."""
    try:
        listed = files("tbb-devel") or []
    except ModuleNotFoundError:
        return []
    config = [f for f in listed if f.name == "TBBConfig.cmake"]
    return [f"-DTBB_DIR={Path(str(config[0].locate())).resolve().parent}"] if config else []


@pytest.fixture(scope="module")
def built(tmp_path_factory: pytest.TempPathFactory) -> Path:
    work = tmp_path_factory.mktemp("library")
    cmake, common = tool("cmake"), ["-G", "Ninja", f"-DCMAKE_MAKE_PROGRAM={tool('ninja')}", *onetbb_prefix()]
    run(cmake, "-S", ROOT, "-B", work / "build", *common, f"-DPython_EXECUTABLE={sys.executable}", "-DWINDAGE_TESTS=ON")
    run(cmake, "--build", work / "build")
    run(cmake, "--install", work / "build", "--prefix", work / "installed")
    run(cmake, "-S", CONSUMER, "-B", work / "consumer", *common, f"-DCMAKE_PREFIX_PATH={work / 'installed'}")
    run(cmake, "--build", work / "consumer")
    return work


def test_elementary_functions_have_the_same_bits_in_one_lane_and_in_a_pack(built: Path) -> None:
    program = next((built / "build").rglob("lanes_check"))
    assert run(program, "hash", "1") == run(program, "hash", "wide")


def test_installed_library_gives_the_digits_of_the_python_package(built: Path) -> None:
    printed = [float(line) for line in run(built / "consumer" / "consumer").split()]
    _, measures, _, completed = engine().Campaign(STUDY).run(0, 40)
    assert completed == 40
    np.testing.assert_array_equal(printed[:40], measures[0])
    failures = int(np.count_nonzero(measures[0] > 0.03))
    lower = _evidence.pass_probability_bounds(failures, 40, 0.95, side="lower")
    assert printed[40] == pytest.approx(lower.lower, rel=1e-12)
