"""One engine module per instruction set: the right one is chosen, others are refused, none leaks into another."""

from __future__ import annotations

import os
import platform
import re
import shutil
import subprocess
import sys
from pathlib import Path

import pytest

import windage as wd
from windage import _loader

PACKAGE = Path(wd.__file__).resolve().parent
IS_X86 = platform.machine() in {"x86_64", "AMD64"}


def loaded_in_new_process(**environment: str) -> str:
    code = (
        "import sys, windage._loader as l; l.engine();"
        "print(','.join(sorted(m for m in sys.modules if '_engine_' in m)))"
    )
    done = subprocess.run(
        [sys.executable, "-c", code], env={**os.environ, **environment}, capture_output=True, text=True, check=False
    )
    return done.stdout.strip() if done.returncode == 0 else done.stderr


@pytest.mark.parametrize("name", [s for s in _loader.instruction_sets() if not _loader.missing_features(s)])
def test_exactly_the_module_asked_for_is_loaded(name: str) -> None:
    assert loaded_in_new_process(WINDAGE_INSTRUCTION_SET=name) == f"windage._engine_{name}"


def test_an_unknown_instruction_set_is_refused_with_the_known_ones() -> None:
    message = loaded_in_new_process(WINDAGE_INSTRUCTION_SET="v9")
    assert "EngineError" in message
    assert "'v9'" in message
    assert all(name in message for name in _loader.instruction_sets())


def test_an_impossible_instruction_set_is_refused_with_the_missing_feature(
    monkeypatch: pytest.MonkeyPatch,
) -> None:
    newest = _loader.instruction_sets()[0]
    monkeypatch.setenv("WINDAGE_INSTRUCTION_SET", newest)
    monkeypatch.setattr(_loader, "missing_features", lambda name: ["avx512f"] if name == newest else [])
    _loader.choice.cache_clear()
    try:
        with pytest.raises(wd.EngineError, match="lacks avx512f"):
            _loader.choice()
    finally:
        monkeypatch.undo()
        _loader.choice.cache_clear()


def test_the_fastest_possible_one_is_the_default(monkeypatch: pytest.MonkeyPatch) -> None:
    known = _loader.instruction_sets()
    monkeypatch.delenv("WINDAGE_INSTRUCTION_SET", raising=False)
    monkeypatch.setattr(_loader, "missing_features", lambda name: [] if name == known[-1] else ["avx2"])
    _loader.choice.cache_clear()
    try:
        assert _loader.choice()[0] == known[-1]
    finally:
        monkeypatch.undo()
        _loader.choice.cache_clear()


def test_the_configuration_names_what_was_chosen() -> None:
    config = wd.show_config()
    assert config["instruction set"].split()[0] in _loader.instruction_sets()
    assert int(config["lanes"]) >= 2
    assert config["oneTBB"]


def registers_used(module: str) -> set[str]:
    """Widest registers and instruction prefixes in the code of a module, by disassembly."""
    objdump = shutil.which("objdump")
    assert objdump, "binutils come with the compiler that built the package"
    file = next(PACKAGE.glob(f"{module}.*so"))
    text = subprocess.run([objdump, "-d", "--no-show-raw-insn", str(file)], capture_output=True, text=True, check=True)
    return {kind for kind in ("zmm", "ymm") if f"%{kind}" in text.stdout} | (
        {"vex"} if re.search(r"^\s+[0-9a-f]+:\s+v[a-z]+", text.stdout, re.MULTILINE) else set()
    )


@pytest.mark.skipif(not IS_X86, reason="registers of x86-64")
@pytest.mark.parametrize(
    ("module", "forbidden"),
    [
        ("_processor", {"zmm", "ymm", "vex"}),
        ("_statistics", {"zmm", "ymm", "vex"}),
        ("_engine_v2", {"zmm", "ymm", "vex"}),
        ("_engine_v3", {"zmm"}),
    ],
)
def test_no_module_holds_instructions_newer_than_its_own(module: str, forbidden: set[str]) -> None:
    assert not registers_used(module) & forbidden


@pytest.mark.skipif(not IS_X86, reason="registers of x86-64")
def test_the_disassembly_would_see_newer_instructions() -> None:
    assert "ymm" in registers_used("_engine_v3")
    assert "zmm" in registers_used("_engine_v4")


def test_libtbb_travels_with_the_package() -> None:
    assert (PACKAGE / "libtbb.so.12").is_file()
    maps = subprocess.run(
        [
            sys.executable,
            "-c",
            "import windage._loader as l; l.engine(); print(open('/proc/self/maps').read())",
        ],
        capture_output=True,
        text=True,
        check=True,
    ).stdout
    loaded = {line.split()[-1] for line in maps.splitlines() if "libtbb.so" in line}
    assert loaded == {str(PACKAGE / "libtbb.so.12")}
