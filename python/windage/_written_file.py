"""Files written whole or not at all, in the way that users expect of a file that is replaced.

The content goes into a file beside the wanted one and takes its place when it is complete and on the disk, so
that a failure, an interruption or a loss of power leaves the old file or the new one. Symbolic links stay links,
the permissions of an old file are kept, and what is no regular file (a terminal, a pipe, `/dev/null`) is written
to as it stands.
"""

from __future__ import annotations

import errno
import io
import os
import secrets
import stat
import sys
import time
import zlib
from collections.abc import Iterator
from contextlib import contextmanager, suppress
from pathlib import Path
from typing import BinaryIO

from ._errors import OutputError
from ._shown_text import shorten

_READ_ONLY = "Choose a file and a folder that can be written to."
_MENDS = {
    errno.ENOENT: "Make its folder first.",
    errno.ENOTDIR: "Part of the path is a file.",
    errno.EISDIR: "It is a folder; give the name of a file.",
    errno.EACCES: _READ_ONLY,
    errno.EPERM: _READ_ONLY,
    errno.EROFS: _READ_ONLY,
    errno.ENOSPC: "Free some space, or choose another place.",
    errno.EDQUOT: "Free some space, or choose another place.",
    errno.ENAMETOOLONG: "Choose a shorter name.",
}
_LINKS_AT_MOST = 40
#: A file beside the wanted one that was not written to for so long, s, belongs to nobody.
_ABANDONED = 86_400.0


@contextmanager
def written(path: str | os.PathLike[str]) -> Iterator[BinaryIO]:
    """Give a binary file whose content becomes that of `path` when the block ends without an exception.

    Raises
    ------
    OutputError
        If the file cannot be written; the old one is left as it was.
    """
    try:
        wanted = Path(path)
        os.fsencode(wanted)
    except (TypeError, UnicodeError) as error:
        raise OutputError(shorten(path), "no name of a file", "Give a text or a path.") from error
    try:
        if is_written_in_place(wanted):
            # Writers may go back and forth in what they write, pipes cannot.
            whole = io.BytesIO()
            yield whole
            _send(whole, wanted)
        else:
            with _replacement(wanted) as file:
                yield file
    except BrokenPipeError:
        raise  # nobody reads any more: no fault of the file
    except OSError as error:
        raise OutputError(str(path), error.strerror or str(error), _MENDS.get(error.errno or 0, "")) from error
    except ValueError as error:
        # The writer of the content may have reasons of its own.
        if "\0" not in str(path) and not isinstance(error, UnicodeEncodeError):
            raise
        raise OutputError(str(path), "no name of a file", "No file can have such characters in its name.") from error


def is_written_in_place(path: Path) -> bool:
    """Tell whether a path leads to no regular file, so that it is written to instead of being replaced."""
    if _descriptor(path) is not None:
        return True
    try:
        mode = path.stat().st_mode
    except FileNotFoundError:
        return False
    if stat.S_ISDIR(mode):
        raise IsADirectoryError(errno.EISDIR, os.strerror(errno.EISDIR), str(path))
    return not stat.S_ISREG(mode)


def _descriptor(path: Path) -> int | None:
    """Return the open descriptor that a path such as /dev/stdout stands for, whatever file is behind it."""
    for _ in range(_LINKS_AT_MOST):
        folder = os.path.realpath(path.absolute().parent)
        if folder in (f"/proc/{os.getpid()}/fd", "/dev/fd") and path.name.isdecimal():
            return int(path.name)
        if not path.is_symlink():
            break
        path = path.parent / path.readlink()
    return {"/dev/stdout": 1, "/dev/stderr": 2}.get(str(path.absolute()))


def _send(whole: io.BytesIO, path: Path) -> None:
    descriptor = _descriptor(path)
    if descriptor is None:
        with path.open("wb") as file:
            file.write(whole.getbuffer())
        return
    # What was printed before comes before; the position in the file is shared with whoever opened it.
    for stream in (sys.stdout, sys.stderr):
        if stream is not None:
            stream.flush()
    with os.fdopen(os.dup(descriptor), "wb") as file:
        file.write(whole.getbuffer())


@contextmanager
def _replacement(path: Path) -> Iterator[BinaryIO]:
    target = Path(os.path.realpath(path))
    old = _status(target)
    # Not the name of the target, which may be as long as a name can be.
    beginning = f".windage-{zlib.crc32(target.name.encode(errors='replace')):08x}"
    _sweep(target.parent, beginning)
    part = target.parent / f"{beginning}-{secrets.token_hex(8)}.part"
    file = _opened(part)
    try:
        yield file
        if old is not None:
            _take_over(file.fileno(), old)
        file.flush()
        os.fsync(file.fileno())
        file.close()
        part.replace(target)
    except BaseException:
        with suppress(OSError):  # what could not be written before cannot be written now
            file.close()
        with suppress(OSError):
            part.unlink()
        raise
    _flush_folder(target.parent)


def _sweep(folder: Path, beginning: str) -> None:
    """Remove what writers of the same file left behind that were killed."""
    for part in folder.glob(f"{beginning}-*.part"):
        with suppress(OSError):
            if time.time() - part.stat().st_mtime > _ABANDONED:
                part.unlink()


def _status(target: Path) -> os.stat_result | None:
    """Return what is known of the file that is to be replaced; refuse one that its owner made read-only."""
    try:
        old = target.stat()
    except FileNotFoundError:
        return None
    if not os.access(target, os.W_OK):
        raise PermissionError(errno.EACCES, "the file is read-only", str(target))
    return old


def _opened(part: Path) -> BinaryIO:
    flags = os.O_RDWR | os.O_CREAT | os.O_EXCL | getattr(os, "O_BINARY", 0)
    return os.fdopen(os.open(part, flags, 0o666), "w+b")


def _take_over(descriptor: int, old: os.stat_result) -> None:
    """Give a new file the owner, where that is allowed, and the permissions of the old one."""
    if not hasattr(os, "fchmod"):
        return
    new = os.fstat(descriptor)
    if (new.st_uid, new.st_gid) != (old.st_uid, old.st_gid):
        with suppress(OSError):
            os.fchown(descriptor, old.st_uid, old.st_gid)
    os.fchmod(descriptor, stat.S_IMODE(old.st_mode))


def _flush_folder(folder: Path) -> None:
    """Put the new name on the disk, where the system can do that."""
    with suppress(OSError):
        descriptor = os.open(folder, os.O_RDONLY)
        try:
            os.fsync(descriptor)
        finally:
            os.close(descriptor)
