"""Results that can be copied and sent to other processes at any time."""

from __future__ import annotations

from collections.abc import Mapping
from functools import cached_property
from typing import Any

import numpy as np


class Portable:
    """Root of results: a copy holds what cannot be worked out again, and its arrays are read-only too.

    What was worked out and kept (`cached_property`) stays behind: views would arrive as copies of their columns.
    """

    def __getstate__(self) -> dict[str, Any]:
        kind = type(self)
        return {k: v for k, v in vars(self).items() if not isinstance(getattr(kind, k, None), cached_property)}

    def __setstate__(self, state: dict[str, Any]) -> None:
        vars(self).update(state)
        for value in state.values():
            freeze(*(value.values() if isinstance(value, Mapping) else [value]))


def freeze(*values: object) -> None:
    """Make those of the values that are arrays read-only."""
    for value in values:
        if isinstance(value, np.ndarray):
            value.flags.writeable = False
