"""The licence texts of what a wheel carries are in it."""

from __future__ import annotations

import tomllib
from pathlib import Path

ROOT = Path(__file__).parents[2]
#: Each build requirement whose code ends up in a wheel, and how its licence texts begin or what they hold.
CARRIED = {
    "pybind11": ("pybind11-BSD-3-Clause.txt", "Copyright (c) 2016 Wenzel Jakob"),
    "cmeel-eigen": ("Eigen-MPL-2.0.txt", "Mozilla Public License Version 2.0"),
    "boost-headers": ("Boost-BSL-1.0.txt", "Boost Software License - Version 1.0"),
    "tbb-devel": ("oneTBB-Apache-2.0.txt", "Apache License"),
}
#: The tool that builds leaves nothing of itself behind.
NOT_CARRIED = {"scikit-build-core"}


def test_each_library_of_the_build_has_its_licence_in_the_wheel() -> None:
    settings = tomllib.loads((ROOT / "pyproject.toml").read_text(encoding="utf-8"))
    requirements = {line.split(">")[0].split(";")[0].strip() for line in settings["build-system"]["requires"]}
    assert requirements - NOT_CARRIED == set(CARRIED)
    shipped = {path for pattern in settings["project"]["license-files"] for path in ROOT.glob(pattern)}
    listed = (ROOT / "cpp" / "licences" / "README.md").read_text(encoding="utf-8")
    for name, words in CARRIED.values():
        path = ROOT / "cpp" / "licences" / name
        assert path in shipped
        assert words in path.read_text(encoding="utf-8")
        assert name in listed
    binary = ROOT / "cpp" / "licences" / "oneTBB-binary-Intel-Simplified.txt"
    assert {binary, ROOT / "LICENSE"} <= shipped
    assert "without modification" in binary.read_text(encoding="utf-8")


def test_every_licence_text_is_listed() -> None:
    folder = ROOT / "cpp" / "licences"
    listed = (folder / "README.md").read_text(encoding="utf-8")
    assert all(path.name in listed for path in folder.iterdir() if path.name != "README.md")
