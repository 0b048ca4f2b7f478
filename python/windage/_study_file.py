"""Study files: TOML that mirrors the Python arguments one to one."""

from __future__ import annotations

import os
from pathlib import Path
from typing import Any

from ._arguments import explained
from ._errors import DescriptionError, StudyFileError
from ._study import Study
from ._study_text import from_data, to_data
from ._toml_depth import check_depth
from ._toml_text import toml_text
from ._written_file import written

LARGEST_FILE = 5_000_000


@explained
def save(study: Study, path: str | os.PathLike[str]) -> None:
    """Write a study to a TOML file, which `load` turns into an equal study with the same digest.

    An interruption leaves the old file; see `windage._written_file`.

    Raises
    ------
    DescriptionError
        If it is no study, or too large for a study file.
    OutputError
        If the file cannot be written.
    """
    if not isinstance(study, Study):
        raise DescriptionError("study", study, "a Study")
    text = to_toml(study)
    if len(text.encode()) > LARGEST_FILE:
        mend = "Keep long tables in a file of their own and give them to Study(table=...)."
        raise DescriptionError("study", f"{len(text.encode())} bytes", f"at most {LARGEST_FILE} bytes", mend)
    with written(path) as file:
        file.write(text.encode())


@explained
def load(path: str | os.PathLike[str]) -> Study:
    """Read a study from a TOML file. Nothing in the file is ever executed.

    Raises
    ------
    StudyFileError
        If the file is too large, is not UTF-8 or not TOML, has unknown or missing keys, or describes what is
        not allowed; the message names the dotted path.
    """
    try:
        with Path(path).open("rb") as stream:
            content = stream.read(LARGEST_FILE + 1)
    except OSError as error:
        raise StudyFileError("study file", str(path), "a file that can be read", f"{error.strerror}.") from error
    except (TypeError, ValueError) as error:  # no path at all, or one that no system can have
        raise StudyFileError("study file", path, "the path of a file", f"{error}.") from None
    if len(content) > LARGEST_FILE:
        raise StudyFileError("study file", f"more than {LARGEST_FILE} bytes", f"at most {LARGEST_FILE} bytes")
    try:
        text = content.decode("utf-8")
    except UnicodeDecodeError as error:
        place = f"byte {content[error.start]:#04x} at position {error.start}"
        raise StudyFileError("study file", place, "text in UTF-8", "Save it as UTF-8.") from None
    return from_toml(text)


def to_toml(study: Study) -> str:
    """Return a study as the text of a study file."""
    return toml_text(to_data(study))


def from_toml(text: str) -> Study:
    """Return the study that the text of a study file describes; errors as for `load`."""
    import tomllib  # costs import time and is seldom needed

    if not isinstance(text, str) or len(text) > LARGEST_FILE:
        raise StudyFileError("study file", text, f"a text of at most {LARGEST_FILE} characters")
    check_depth(text)
    try:
        data: dict[str, Any] = tomllib.loads(text)
    except (ValueError, RecursionError) as error:  # a number of too many digits is a ValueError, too
        reason = str(error) or type(error).__name__
        raise StudyFileError("study file", reason, "a file in TOML", "See toml.io for its rules.") from None
    return from_data(data)
