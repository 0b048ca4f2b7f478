"""How much memory a process may still take, and the refusal of what would not fit."""

from __future__ import annotations

import os
import sys
from collections.abc import Iterator
from pathlib import Path

from ._errors import DescriptionError

#: What is free is not all for the taking: other processes and our own temporary arrays need some.
USABLE = 0.9
#: What needs less than this, bytes, is not worth a look.
NEGLIGIBLE = 16e6


def check_memory(field: str, found: object, needed: float, mend: str) -> None:
    """Refuse what needs more memory than there is, before any of it is taken.

    Raises
    ------
    DescriptionError
        With what is needed and what is available.
    """
    available = available_memory() if needed > NEGLIGIBLE else None
    if available is not None and needed > USABLE * available:
        expected = f"what fits into the memory: {in_words(needed)} needed, {in_words(available)} available"
        raise DescriptionError(field, found, expected, mend)


def in_words(size: float) -> str:
    """Return a number of bytes in decimal units."""
    for unit, name in ((1e12, "TB"), (1e9, "GB"), (1e6, "MB")):
        if size >= unit:
            return f"{size / unit:.3g} {name}"
    return f"{size / 1e3:.3g} kB"


def available_memory() -> int | None:
    """Return the bytes that this process may still take, or None where nobody tells.

    That is the least of what the machine has free, what the control groups of this process leave, and what its
    own limit of address space leaves.
    """
    known = [size for size in (_of_machine(), *_of_groups(), _of_process()) if size is not None]
    return max(0, min(known)) if known else None


def _of_machine() -> int | None:
    free = _fields(Path("/proc/meminfo")).get("MemAvailable:")
    if free is not None:
        return 1024 * free
    if sys.platform == "win32":
        return _of_windows()
    try:
        # Not what is free, but more than this can never be.
        return os.sysconf("SC_PHYS_PAGES") * os.sysconf("SC_PAGE_SIZE")
    except (AttributeError, OSError, ValueError):
        return None


def _of_groups(root: Path = Path("/sys/fs/cgroup"), groups: Path = Path("/proc/self/cgroup")) -> Iterator[int]:
    """Yield what each control group leaves that this process is in, from its own up to the root (versions 2 and 1)."""
    for line in _text(groups).splitlines():
        _, controllers, path = [*line.split(":", 2), "", ""][:3]
        if controllers == "":
            mount, limit, used, cache = root, "memory.max", "memory.current", "inactive_file"
        elif "memory" in controllers.split(","):
            mount, cache = root / "memory", "total_inactive_file"
            limit, used = "memory.limit_in_bytes", "memory.usage_in_bytes"
        else:
            continue
        # Inside a container the path may be that of the host, of which only the root is seen.
        own = mount / path.strip("/")
        for folder in (own, *own.parents):
            if folder == mount.parent:
                break
            most, now = _number(folder / limit), _number(folder / used)
            if most is not None and now is not None:
                # The kernel gives up what it only keeps of files that nobody reads.
                yield most - now + _fields(folder / "memory.stat").get(cache, 0)


def _of_process() -> int | None:
    try:
        import resource
    except ImportError:  # not on Windows
        return None
    most = resource.getrlimit(resource.RLIMIT_AS)[0]
    if most == resource.RLIM_INFINITY:
        return None
    return most - 1024 * _fields(Path("/proc/self/status")).get("VmSize:", 0)


def _of_windows() -> int | None:
    import ctypes

    class Status(ctypes.Structure):
        _fields_ = (
            ("length", ctypes.c_uint32),
            ("load", ctypes.c_uint32),
            *((name, ctypes.c_uint64) for name in ("total", "free", "all", "page", "virtual", "left", "extended")),
        )

    status = Status(length=ctypes.sizeof(Status))
    asked = getattr(ctypes, "windll").kernel32.GlobalMemoryStatusEx(ctypes.byref(status))  # noqa: B009
    return int(status.free) if asked else None


def _text(path: Path) -> str:
    try:
        return path.read_text(encoding="ascii", errors="replace")
    except OSError:
        return ""


def _number(path: Path) -> int | None:
    """Return the number in a file; None where there is none, or the word "max"."""
    text = _text(path).strip()
    return int(text) if text.isdecimal() else None


def _fields(path: Path) -> dict[str, int]:
    """Return the numbers of a file that has a name and a number in each line."""
    pairs = (line.split() for line in _text(path).splitlines())
    return {words[0]: int(words[1]) for words in pairs if len(words) > 1 and words[1].isdecimal()}
