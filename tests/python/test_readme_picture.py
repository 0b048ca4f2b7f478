"""The picture in the README is that of the demonstration as it is now."""

from __future__ import annotations

import importlib.util
import struct
import zlib
from pathlib import Path
from typing import Any

ROOT = Path(__file__).resolve().parents[2]
LARGEST = 150_000


def drawing() -> Any:
    """The script that draws it."""
    spec = importlib.util.spec_from_file_location("draw_demo", ROOT / "notebooks-examples" / "draw_demo.py")
    assert spec is not None
    assert spec.loader is not None
    module = importlib.util.module_from_spec(spec)
    spec.loader.exec_module(module)
    return module


def chunks(png: bytes) -> dict[bytes, bytes]:
    """The first chunk of each kind in a PNG file."""
    found: dict[bytes, bytes] = {}
    place = 8
    while place < len(png):
        length, kind = struct.unpack(">I4s", png[place : place + 8])
        data = png[place + 8 : place + 8 + length]
        (check,) = struct.unpack(">I", png[place + 8 + length : place + 12 + length])
        assert zlib.crc32(kind + data) == check
        if kind != b"tEXt" or data.startswith(b"Description\0"):
            found.setdefault(kind, data)
        place += 12 + length
    return found


def test_the_readme_shows_the_picture_of_the_demo_as_it_is_drawn_now() -> None:
    script = drawing()
    assert f"({script.PICTURE.relative_to(ROOT).as_posix()})" in (ROOT / "README.md").read_text(encoding="utf-8")
    png = script.PICTURE.read_bytes()
    assert len(png) < LARGEST
    found = chunks(png)
    figure, metadata = script.draw()
    # Pixels depend on fonts and the last digits; the study, the verdict and the size do not.
    _, _, written = found[b"tEXt"].partition(b"\0")
    assert written.decode("latin-1") == metadata["Description"]
    size = struct.unpack(">II", found[b"IHDR"][:8])
    expected = tuple(round(side * script.DPI) for side in figure.get_size_inches())
    assert all(abs(a - b) <= 2 for a, b in zip(size, expected, strict=True))
